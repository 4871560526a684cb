package main

import (
	"net/http"
	"net/url"
	"regexp"
	"slices"
	"strings"
	"testing"
	"time"

	"holdfast/internal/plant"
	"holdfast/internal/store"
	"holdfast/web/ui"
)

var sessionField = regexp.MustCompile(`name="session" value="([^"]+)"`)

// TestASingleSessionIsEnded by its owner and by an administrator, on the server that it is
// used at and from another one. The clock stands still, so nothing that a server remembers
// runs out: what counts is that it is told.
func TestASingleSessionIsEnded(t *testing.T) {
	t.Parallel()
	first := serve(t)
	second := serveOn(t, first.Plant, first.Clock.Now)
	station := "/station/" + first.Station.ID.String()
	owner, administrator := first.visit(t, "operator1"), first.visit(t, "administrator1")
	person := "/admin/people/" + first.Operator.ID.String()
	for name, end := range map[string]func() *http.Response{
		"by its owner": func() *http.Response {
			_, page := owner.get("/account/")
			found := sessionField.FindAllStringSubmatch(page, -1)
			if len(found) != 1 {
				t.Fatalf("%d sessions can be ended, want the other one", len(found))
			}
			res, _ := owner.post("/account/end", url.Values{"session": {found[0][1]}, "to": {"/station"}})
			return res
		},
		"by an administrator": func() *http.Response {
			_, page := administrator.get(person)
			found := sessionField.FindAllStringSubmatch(page, -1)
			if len(found) != 2 {
				t.Fatalf("%d sessions can be ended, want both", len(found))
			}
			// The latest is the first.
			res, _ := administrator.post(person+"/end", url.Values{"session": {found[0][1]}})
			return res
		},
	} {
		first.Clock.Advance(time.Second)
		stolen := second.visit(t, "operator1")
		if res, _ := stolen.get(station); res.StatusCode != http.StatusOK {
			t.Fatal(res.Status)
		}
		conn := stolen.dial(ui.TopicStation(first.Station.ID))
		hears(t, conn, 30*time.Second, `"type":"state"`)
		closed := closing(conn)
		if res := end(); res.StatusCode != http.StatusSeeOther {
			t.Fatalf("%s: %s", name, res.Status)
		}
		answered := time.Now()
		select {
		case at := <-closed:
			if took := at.Sub(answered); took > outWithin {
				t.Errorf("%s: the socket on another server is closed after %v, want at most %v", name, took, outWithin)
			}
		case <-time.After(20 * time.Second):
			t.Fatalf("%s: the socket on another server goes on", name)
		}
		if res, _ := stolen.get(station); res.StatusCode != http.StatusSeeOther {
			t.Errorf("%s: the session goes on: %s", name, res.Status)
		}
		if !owner.in() {
			t.Errorf("%s: another session ended too", name)
		}
	}
	// Nobody ends what is somebody else's.
	_, page := administrator.get(person)
	other := sessionField.FindStringSubmatch(page)
	if res, _ := first.visit(t, "supervisor1").post("/account/end", url.Values{"session": {other[1]}}); res.StatusCode != http.StatusSeeOther || !owner.in() {
		t.Errorf("a supervisor ends an operator's session: %s", res.Status)
	}
}

// TestAPrintedNameIsMended: pages show the new one, the record binds both.
func TestAPrintedNameIsMended(t *testing.T) {
	t.Parallel()
	r := serve(t)
	r.MustRecord(t, r.Diameter, 14990, 14991, 14992, 14990, 14993)
	administrator := r.visit(t, "administrator1")
	person := "/admin/people/" + r.Operator.ID.String()
	for name, want := range map[string]int{"": 422, " \t": 422, strings.Repeat("x", 101): 422} {
		if res, body := administrator.post(person+"/name", url.Values{"name": {name}}); res.StatusCode != want || !strings.Contains(body, `id="name-problem"`) {
			t.Errorf("%q: %s", name, res.Status)
		}
	}
	before := r.Operator.Name
	for _, name := range []string{"Imre Halász", "Imre Halász", "Imre Halasz"} {
		r.Clock.Advance(time.Minute)
		if res, _ := administrator.post(person+"/name", url.Values{"name": {name}}); res.StatusCode != http.StatusSeeOther {
			t.Fatalf("%q: %s", name, res.Status)
		}
	}
	_, page := administrator.get(person)
	if !strings.Contains(page, "<h1>Imre Halasz</h1>") || !strings.Contains(page, before+" until ") || strings.Count(page, "Imre Halász until ") != 1 {
		t.Error(page)
	}
	if _, record := r.visit(t, "operator1").get("/station/" + r.Station.ID.String() + "/correct"); !strings.Contains(record, "Imre Halasz") || strings.Contains(record, before) {
		t.Error("a round from before is not shown under the new name")
	}
	whole(t, r)
	for sql, undo := range map[string]string{
		`update person set name = 'Somebody else' where id = $1`:                                      `update person set name = 'Imre Halasz' where id = $1`,
		`update person_name set name = 'Somebody else' where person_id = $1 and name = 'Imre Halász'`: `update person_name set name = 'Imre Halász' where person_id = $1 and name = 'Somebody else'`,
	} {
		if _, err := r.Pool().Exec(t.Context(), sql, r.Operator.ID); err != nil {
			t.Fatal(err)
		}
		differ, err := r.CheckRecord(t.Context())
		if err != nil || !slices.ContainsFunc(differ, func(d store.Difference) bool { return strings.Contains(d.What, "is not named as was sealed") }) {
			t.Errorf("after %s: %v, %v", sql, differ, err)
		}
		if _, err := r.Pool().Exec(t.Context(), undo, r.Operator.ID); err != nil {
			t.Fatal(err)
		}
	}
	whole(t, r)
}

// TestATabletsLanguageIsSetFromAfar, on the devices' page and at its sign-in page; the
// choice of whoever is signed in wins.
func TestATabletsLanguageIsSetFromAfar(t *testing.T) {
	t.Parallel()
	r := serve(t)
	r.badge(t, r.Operator.ID, "1001")
	administrator := r.visit(t, "administrator1")
	tablet, d := r.visitOn(t, plant.Device{Kind: plant.Tablet, Name: "Tablet 1", Station: r.Station.ID})
	speaks := func(want string) {
		t.Helper()
		for _, path := range []string{"/sign-in", "/station/" + r.Station.ID.String()} {
			if res, body := tablet.get(path); res.StatusCode == http.StatusOK && !strings.Contains(body, `<html lang="`+want+`"`) {
				t.Errorf("%s does not speak %s", path, want)
			}
		}
	}
	set := func(lang string, want int) {
		t.Helper()
		res, _ := administrator.post("/admin/devices/"+d.ID.String(), url.Values{"name": {d.Name}, "station": {d.Station.String()}, "lock": {"10"}, "language": {lang}})
		if res.StatusCode != want {
			t.Fatalf("setting %q: %s", lang, res.Status)
		}
	}
	speaks("en")
	set("de", http.StatusSeeOther)
	speaks("de")
	set("xx", http.StatusUnprocessableEntity)
	if res, _ := tablet.post("/language", url.Values{"language": {"es"}}); res.StatusCode != http.StatusSeeOther {
		t.Fatal(res.Status)
	}
	speaks("es")
	if _, page := administrator.get("/admin/devices"); !strings.Contains(page, `<option value="es" lang="es" selected>`) {
		t.Error("what was chosen at the tablet is not on the devices' page")
	}
	tablet.signInByBadge("1001", pin)
	speaks("es")
	if res, _ := tablet.post("/language", url.Values{"language": {"de"}}); res.StatusCode != http.StatusSeeOther {
		t.Fatal(res.Status)
	}
	speaks("de") // the person's own choice
	set("en", http.StatusSeeOther)
	speaks("de")
	if res, _ := tablet.post("/sign-out", nil); res.StatusCode != http.StatusSeeOther {
		t.Fatal(res.Status)
	}
	speaks("en")
	set("", http.StatusSeeOther)
	speaks("en")
	whole(t, r)
}
