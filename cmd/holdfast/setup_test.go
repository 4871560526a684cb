package main

import (
	"bytes"
	"context"
	"fmt"
	"mime/multipart"
	"net/http"
	"net/url"
	"regexp"
	"strings"
	"testing"
	"time"

	"github.com/chromedp/cdproto/cdp"
	"github.com/chromedp/cdproto/emulation"
	"github.com/chromedp/chromedp"
	"github.com/google/uuid"

	"holdfast/internal/auth"
	"holdfast/internal/browsertest"
	"holdfast/internal/localpg/pgtest"
	"holdfast/internal/plant"
	"holdfast/internal/store"
	"holdfast/internal/store/storetest"
)

// serveEmpty serves a database in which nothing is set up but one administrator, as
// after an installation.
func serveEmpty(t testing.TB, alsoIs ...plant.Role) *running {
	t.Helper()
	ctx := context.Background()
	clock := storetest.NewClock()
	url := pgtest.Database(t)
	st, err := store.Open(ctx, store.Options{URL: url, Clock: clock.Now})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(st.Close)
	if err := firstPlant(ctx, st, "Plant", "UTC"); err != nil {
		t.Fatal(err)
	}
	hasher, err := auth.NewHasher(cheap, 1)
	if err != nil {
		t.Fatal(err)
	}
	p := plant.Person{ID: uuid.Must(uuid.NewV7()), Login: "administrator1", Name: "Administrator 1", Roles: append(plant.Roles{plant.Administrator}, alsoIs...), Active: true}
	hash, err := hasher.Hash(ctx, secret)
	if err == nil {
		err = st.AddPerson(ctx, p, hash, uuid.Nil)
	}
	if err != nil {
		t.Fatal(err)
	}
	return serveOn(t, &storetest.Plant{Store: st, Clock: clock, URL: url}, clock.Now)
}

// journey counts what a newcomer has to do.
type journey struct {
	p              *browsertest.Page
	pages, entries int
}

func (j *journey) fill(name, text string) {
	j.p.Fill(`[name="`+name+`"]`, text)
	j.entries++
}

// on sends the step and waits for the next one.
func (j *journey) on(selector, next string) {
	j.p.WaitFor(find(selector))
	j.p.Value(find(selector) + `.click()`)
	j.p.WaitFor(find(next))
	j.pages++
}

// TestFromNothingToAJudgedRound is the first run as a newcomer walks it: an empty
// database, one administrator with all roles, as the page for the first person presets it,
// and at the end a round that was judged by limits.
func TestFromNothingToAJudgedRound(t *testing.T) {
	t.Parallel()
	r := serveEmpty(t, plant.Operator, plant.Supervisor, plant.Engineer)
	b := browsertest.Start(t)
	began := time.Now()
	j := &journey{p: r.signIn(t, b, "administrator1")}
	p := j.p
	p.WaitFor(`location.pathname === "/board"`) // the first person lands on the first step
	p.Open("/admin")
	p.Accessible("overview of an empty plant")
	p.Do(func(ctx context.Context, window *chromedp.Target) (none chromedp.Void, err error) {
		_, err = cdp.Call(ctx, window, emulation.SetTimezoneOverride, emulation.SetTimezoneOverrideParams{TimezoneID: "Europe/London"})
		return none, err
	})
	j.on(`[data-testid=begin] a`, `[data-testid=step-plant]`)
	p.Accessible("first step")
	p.FitsWidth("first step", 320, 1280)
	j.fill("plant", "Kestrel Row")
	// The browser's own zone is there already, with the time there; a zone that is none has none.
	const zone, there = `document.querySelector("[name=zone]").value`, `document.querySelector("[data-testid=zone-now]").textContent`
	p.WaitFor(zone + ` === "Europe/London" && /^There it is \d\d:\d\d now, \w+day\.$/.test(` + there + `)`)
	p.Fill(`[name="zone"]`, "Europe/Londn")
	p.WaitFor(there + ` === ""`)
	p.Fill(`[name="zone"]`, "Europe/London")
	p.WaitFor(there + ` !== ""`)
	const next = `[data-testid=step] button[type=submit]`
	j.on(next, `[data-testid=step-floor]`) // who sets up measuring is known
	j.fill("line_name", "Axles")
	j.fill("station_name", "Turning 1")
	j.fill("machine_name", "Lathe 11")

	// Left here, it goes on here.
	p.Open("/admin/floor")
	p.Open("/admin")
	p.Click(`[data-testid=begin] a`)
	p.WaitFor(find(`[data-testid=step-floor]`))
	for name, text := range map[string]string{"line_name": "Axles", "station_name": "Turning 1", "machine_name": "Lathe 11"} {
		p.Fill(`[name="`+name+`"]`, text)
	}
	j.on(next, `[data-testid=step-measure]`)
	p.Accessible("what is measured")
	for _, f := range [][2]string{{"name", "Axle seat diameter"}, {"unit", "mm"}, {"decimals", "3"}, {"lower", "14.982"}, {"target", "14.991"}, {"upper", "15.000"}} {
		j.fill(f[0], f[1])
	}
	j.on(next, `[data-testid=step-limits]`)
	p.Accessible("limits")
	p.FitsWidth("limits", 320)
	p.Want("the finished steps lead back", `[...document.querySelectorAll("[data-testid=steps] .done a")].map(a => a.pathname.replace(/\/[0-9a-f-]{36}$/, "")).join(" ")`,
		"/admin/plant /admin/people /admin/floor /admin/characteristic /admin/people")
	for _, f := range [][2]string{{"center", "14.991"}, {"sigma", "0.0018"}, {"reason", "Study of this lathe last spring"}, {"secret", secret}} {
		j.fill(f[0], f[1])
	}
	j.on(`[data-testid=known] button[type=submit]`, `[data-testid=step-round]`)
	p.Accessible("the first round")
	p.Click(`[data-testid=tablet-code] button`)
	p.WaitFor(`location.pathname === "/admin/start" && ` + find(`[data-testid=digits]`))
	p.Want("said where only this machine reaches the server", `document.querySelectorAll("[data-testid=only-here]").length`, "1")
	p.Accessible("a code for the first tablet")
	p.FitsWidth("a code for the first tablet", 320, 1280)
	p.Click(`[data-testid=code] button`) // withdrawn
	p.WaitFor(`location.pathname === "/admin/start" && ` + find(`[data-testid=tablet-code]`))

	p.Value(find(`[data-testid=to-station]`) + `.click()`)
	p.WaitFor(`location.pathname.startsWith("/station/")`)
	j.pages++
	o, err := r.Outline(context.Background())
	if err != nil || len(o.Characteristics) != 1 {
		t.Fatalf("%+v, %v", o.Characteristics, err)
	}
	c := o.Characteristics[0]
	type5(t, p, "/station/"+c.StationID.String()+"?measure="+c.ID.String(), "14.998", "14.999", "14.998", "14.999", "14.998")
	j.pages, j.entries = j.pages+1, j.entries+5
	p.Want("the first round is judged", theVerdict, "Look for a cause")
	if j.pages != 7 || j.entries != 19 {
		t.Errorf("%d steps and %d entries; the README says 7 and 19", j.pages, j.entries)
	}
	t.Logf("from an empty database to a judged round: %d steps, %d entries, %.1f s by a program (pages looked at by axe included)",
		j.pages, j.entries, time.Since(began).Seconds())

	a := r.signIn(t, b, "administrator1")
	a.Open("/admin/start")
	a.WaitFor(find(`[data-testid=step-finished]`))
	a.Accessible("finished")
	a.Want("said of the round", `document.querySelector("[data-testid=first-round]").textContent.includes("judged by the limits in force")`, "true")
	if o.Plant.Name != "Kestrel Row" || o.Plant.Location.String() != "Europe/London" || !c.Given || c.Revision != 1 {
		t.Errorf("set up: %+v, %+v", o.Plant, c)
	}
	whole(t, r)
}

// TestTheFirstRunOfWhoOnlyManages: the engineer and who takes rounds are others, and Learning
// is chosen, which goes with the steps until the first round.
func TestTheFirstRunOfWhoOnlyManages(t *testing.T) {
	t.Parallel()
	r := serveEmpty(t)
	v := r.visit(t, "administrator1")
	stands := func(what, path, step string) string {
		t.Helper()
		res, body := v.get(path)
		if res.StatusCode != http.StatusOK || !strings.Contains(body, `data-testid="step-`+step+`"`) {
			t.Fatalf("%s: %d, does not stand at %s", what, res.StatusCode, step)
		}
		return body
	}
	answer := func(step string, form url.Values) string {
		t.Helper()
		res, body := v.post("/admin/start/"+step, form)
		if res.StatusCode != http.StatusSeeOther {
			t.Fatalf("%s: %d %.1500s", step, res.StatusCode, body)
		}
		return res.Header.Get("Location")
	}
	if res, body := v.post("/admin/start/plant", url.Values{"plant": {"Kestrel Row"}, "zone": {"Londn"}}); res.StatusCode != http.StatusUnprocessableEntity ||
		!strings.Contains(body, "Names like it: Europe/London, Arctic/Longyearbyen") || !strings.Contains(body, `<a href="/admin" class="here" aria-current="page">`) {
		t.Errorf("a zone that is none: %d, without one like it or without its tab", res.StatusCode)
	}
	at := answer("plant", url.Values{"plant": {"Kestrel Row"}, "zone": {"london"}})
	stands("the plant is named", at, "engineer")
	at = answer("engineer", url.Values{"who": {"other"}, "person_name": {"Engineer 1"}, "login": {"engineer1"}, "password": {secret}})
	stands("an engineer is there", at, "floor")
	at = answer("floor", url.Values{"line_name": {"Axles"}, "station_name": {"Turning 1"}, "machine_name": {"Lathe 11"}})
	if body := stands("the floor is there", at, "measure"); !strings.Contains(body, `data-testid="wait"`) {
		t.Error("what is measured is asked of somebody who may not say it")
	}
	manager := v
	v = r.visit(t, "engineer1")
	at = answer("measure", url.Values{"name": {"Axle seat diameter"}, "unit": {"mm"}, "decimals": {"3"}, "size": {"5"}, "minutes": {"60"}})
	stands("a characteristic is there", at, "limits")
	v = manager
	body := stands("limits are the engineer's", "/admin/start", "limits")
	if !strings.Contains(body, `href="/admin/start?learn=yes"`) {
		t.Error("who only manages cannot go on with Learning")
	}
	stands("Learning is chosen", "/admin/start?learn=yes", "operator")
	at = answer("operator", url.Values{"who": {"other"}, "person_name": {"Operator 1"}, "login": {"operator1"}, "password": {secret}})
	body = stands("somebody takes rounds", at, "round")
	if !strings.Contains(body, `data-testid="sign-out"`) || !strings.Contains(body, `name="to" value="/admin/start?learn=yes"`) || !strings.Contains(body, `<a href="/admin/start">Limits</a>`) {
		t.Errorf("before the first round: %s", body[strings.Index(body, "<main"):])
	}
	stands("nobody has chosen on this page", "/admin/start", "limits")
	if o, err := r.Outline(context.Background()); err != nil || o.Plant.Location.String() != "Europe/London" {
		t.Errorf("the zone: %v, %v", o.Plant.Location, err)
	}
	if _, body := v.get("/admin"); !strings.Contains(body, "manages-only") || !strings.Contains(body, `<a href="/admin/messages">Messages</a></h2>`) {
		t.Error("the overview of who only manages")
	}
	if _, body := r.visit(t, "engineer1").get("/admin"); strings.Contains(body, "manages-only") {
		t.Error("an engineer is told that they only manage")
	}
}

// whole demands that the record is as it was sealed.
func whole(t testing.TB, r *running) {
	t.Helper()
	ctx := context.Background()
	if _, err := r.VerifyLedger(ctx); err != nil {
		t.Error(err)
	}
	if differ, err := r.CheckRecord(ctx); err != nil || len(differ) > 0 {
		t.Errorf("the record differs from what was sealed: %v, %v", differ, err)
	}
}

// upload sends a file as a form does.
func (v *visitor) upload(name, content string) (*http.Response, string) {
	v.t.Helper()
	var b bytes.Buffer
	m := multipart.NewWriter(&b)
	w, err := m.CreateFormFile("file", name)
	if err == nil {
		_, err = w.Write([]byte(content))
	}
	if err == nil {
		err = m.Close()
	}
	if err != nil {
		v.t.Fatal(err)
	}
	return v.do(http.MethodPost, "/admin/description", m.FormDataContentType(), &b)
}

var digest = regexp.MustCompile(`name="digest" value="([0-9a-f]+)"`)

func TestAPlantFromAFile(t *testing.T) {
	t.Parallel()
	r := serve(t)
	v := r.visit(t, "engineer1")
	before, err := r.Outline(context.Background())
	if err != nil {
		t.Fatal(err)
	}
	var file strings.Builder
	file.WriteString("Line;Station;Machine;Characteristic;Unit;Decimals;Lower specification limit;Upper specification limit;Parts per subgroup;Sample every minutes\r\n")
	const machines, each = 100, 10
	for m := range machines {
		for c := range each {
			fmt.Fprintf(&file, "Line %d;Station %d;Machine %d;Characteristic %d;mm;3;9,990;10,010;5;60\r\n", m/20, m/2, m, c)
		}
	}
	res, body := v.upload("plant.csv", file.String())
	at := res.Header.Get("Location")
	if res.StatusCode != http.StatusSeeOther || !strings.HasPrefix(at, "/admin/description/") {
		t.Fatalf("sending: %d to %s: %.300s", res.StatusCode, at, body)
	}
	_, body = v.get(at)
	found := digest.FindStringSubmatch(body)
	if found == nil || !strings.Contains(body, "1,155 things would be added") {
		t.Fatalf("the preview does not say what would be added: %.2000s", body)
	}
	// Nothing is set up before it is confirmed, and it is the sender's to confirm.
	if o, err := r.Outline(context.Background()); err != nil || len(o.Characteristics) != len(before.Characteristics) {
		t.Fatalf("%d characteristics before confirming, %v", len(o.Characteristics), err)
	}
	if res, _ := v.post(at, url.Values{"digest": {"another"}}); res.StatusCode != http.StatusConflict {
		t.Errorf("confirming what was not seen: %d", res.StatusCode)
	}
	began := time.Now()
	if res, body := v.post(at, url.Values{"digest": {found[1]}}); res.StatusCode != http.StatusSeeOther {
		t.Fatalf("confirming: %d %.500s", res.StatusCode, body)
	}
	t.Logf("%d characteristics set up in %.1f s", machines*each, time.Since(began).Seconds())
	o, err := r.Outline(context.Background())
	if err != nil || len(o.Characteristics) != len(before.Characteristics)+machines*each || len(o.Machines) != len(before.Machines)+machines {
		t.Fatalf("%d characteristics on %d machines, %v", len(o.Characteristics), len(o.Machines), err)
	}
	if res, _ := v.post(at, url.Values{"digest": {found[1]}}); res.StatusCode != http.StatusConflict {
		t.Errorf("confirming again: %d, want a conflict and nothing twice", res.StatusCode)
	}
	res, _ = v.upload("plant.csv", file.String())
	if _, body = v.get(res.Header.Get("Location")); !strings.Contains(body, "Everything in this file is there already") {
		t.Error("the same file again would do something")
	}
	// What is taken out is what is there.
	_, csv := v.get("/admin/description/files/set-up.csv")
	res, _ = v.upload("set-up.csv", csv)
	if _, body = v.get(res.Header.Get("Location")); !strings.Contains(body, "Everything in this file is there already") || strings.Contains(body, `data-testid="differs"`) {
		t.Errorf("the present set-up, read again: %.1500s", body)
	}
	whole(t, r)

	// What a machine makes how, and what is aimed at, is in the preview too.
	res, _ = v.upload("one.csv", "Line;Station;Machine;Parts per hour;Streams;Characteristic;Unit;Decimals;Target;Parts per subgroup;Sample every minutes\nAxles;Moulding;Press 4;1200;cavity 1, cavity 2, cavity 3;Wall;mm;2;2,35;5;60\n")
	if _, body = v.get(res.Header.Get("Location")); !strings.Contains(body, "<td>1200</td><td>cavity 1, cavity 2, cavity 3</td>") || !strings.Contains(body, "<td>2.35\u00a0mm</td>") {
		t.Errorf("the preview of rate, streams and target: %s", body[strings.Index(body, "<main"):])
	}

	for name, content := range map[string]string{"a picture": "\x89PNG\r\n\x1a\n\x00", "nothing": "", "too much": strings.Repeat("Line\n", 190_000)} {
		if res, _ := v.upload("x", content); res.StatusCode != http.StatusUnprocessableEntity {
			t.Errorf("%s: %d, want 422", name, res.StatusCode)
		}
	}
	res, _ = v.upload("<script>.csv", "Line,Machine,Characteristic\n<img src=x>,=cmd|' /C calc'!A0,<b>\n")
	if _, body = v.get(res.Header.Get("Location")); strings.Contains(body, "<img src=x>") || strings.Contains(body, "<script>.csv") || !strings.Contains(body, `data-testid="problems"`) {
		t.Errorf("hostile words stand in the page as they came: %.1500s", body)
	}
	other := r.visit(t, "engineer1") // the same person may, another may not
	if res, _ := other.get(at); res.StatusCode != http.StatusOK {
		t.Errorf("the sender elsewhere: %d", res.StatusCode)
	}
}

// TestAChangeOfSetUpSaysWhatItDoes before it is saved.
func TestAChangeOfSetUpSaysWhatItDoes(t *testing.T) {
	t.Parallel()
	r := serve(t)
	r.calm(t, 22)
	r.MustFreeze(t, r.Diameter)
	v := r.visit(t, "engineer1")
	at := "/admin/characteristic/" + r.Diameter.ID.String()
	form := func(change url.Values) url.Values {
		f := url.Values{"version": {"1"}, "machine": {r.Machine.ID.String()}, "name": {"Axle seat diameter"}, "of": {""}, "unit": {"mm"}, "decimals": {"3"}, "lower": {"14.982"},
			"target": {"14.991"}, "upper": {"15.000"}, "size": {"5"}, "chart": {"xbar-r"}, "minutes": {"30"}}
		for k, v := range change {
			f[k] = v
		}
		return f
	}
	for name, tc := range map[string]struct {
		change url.Values
		says   string
	}{
		"decimals":      {url.Values{"decimals": {"4"}}, "This changes decimals: Learning begins again until new limits are frozen; 22 subgroups stay on record."},
		"specification": {url.Values{"upper": {"15.010"}}, "Limits stay: revision 1 goes on judging."},
		"sampling":      {url.Values{"minutes": {"45"}}, "The next sample falls due by the new plan."},
	} {
		if res, body := v.post(at, form(tc.change)); res.StatusCode != http.StatusOK || !strings.Contains(body, tc.says) {
			t.Errorf("%s: %d, does not say %q", name, res.StatusCode, tc.says)
		}
	}
	if setups, err := r.CharacteristicSetups(context.Background(), r.Diameter.ID); err != nil || len(setups) != 1 {
		t.Fatalf("looking has saved: %d versions, %v", len(setups), err)
	}
	if res, _ := v.post(at, form(nil)); res.StatusCode != http.StatusUnprocessableEntity {
		t.Errorf("nothing changed: %d", res.StatusCode)
	}
	seen := form(url.Values{"decimals": {"4"}, "seen": {"yes"}})
	if res, body := v.post(at, seen); res.StatusCode != http.StatusSeeOther {
		t.Fatalf("saving: %d %.500s", res.StatusCode, body)
	}
	if res, _ := v.post(at, seen); res.StatusCode != http.StatusUnprocessableEntity {
		t.Errorf("saving what was seen of an older version: %d", res.StatusCode)
	}
	h, err := r.History(context.Background(), r.Diameter.ID, plant.Stretch{Last: 1})
	if err != nil || h.State.Setup.Version != 2 || h.State.Revision != nil {
		t.Errorf("after it: version %d, %+v, %v; want Learning", h.State.Setup.Version, h.State.Revision, err)
	}
	// Gauges and characteristics are the engineer's, the floor is the administrator's too.
	admin := r.visit(t, "administrator1")
	if res, _ := admin.get("/admin/thing/gauge/new"); res.StatusCode != http.StatusForbidden {
		t.Errorf("a gauge by the administrator: %d", res.StatusCode)
	}
	if res, _ := admin.post("/admin/thing/station/new", url.Values{"line": {r.Line.ID.String()}, "name": {"Turning 3"}}); res.StatusCode != http.StatusSeeOther {
		t.Errorf("a station by the administrator: %d", res.StatusCode)
	}
	if res, body := admin.post("/admin/thing/line/"+r.Line.ID.String()+"/retire", url.Values{"retired": {"yes"}}); res.StatusCode != http.StatusConflict || !strings.Contains(body, "Retire them first") {
		t.Errorf("a line with stations: %d", res.StatusCode)
	}
}
