package main

import (
	"fmt"
	"net/http"
	"net/http/cookiejar"
	"net/url"
	"strings"
	"sync"
	"testing"
	"time"

	"holdfast/internal/live"
	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// cookies are those that a browser would send to the server.
func (v *visitor) cookies() map[string]string {
	v.t.Helper()
	at, err := url.Parse(v.base)
	if err != nil {
		v.t.Fatal(err)
	}
	out := map[string]string{}
	for _, c := range v.http.Jar.Cookies(at) {
		out[c.Name] = c.Value
	}
	return out
}

// thief is another browser with copies of these cookies of v.
func (v *visitor) thief(names ...string) *visitor {
	v.t.Helper()
	jar, err := cookiejar.New(nil)
	if err != nil {
		v.t.Fatal(err)
	}
	at, err := url.Parse(v.base)
	if err != nil {
		v.t.Fatal(err)
	}
	have := v.cookies()
	for _, name := range names {
		if have[name] == "" {
			v.t.Fatalf("there is no cookie %q to copy: %v", name, have)
		}
		jar.SetCookies(at, []*http.Cookie{{Name: name, Value: have[name], Path: "/"}})
	}
	own := *v.http
	own.Jar = jar
	return &visitor{t: v.t, http: &own, base: v.base}
}

// TestOneCodeLetsOneDeviceIn however many type it at the same moment, and never again.
func TestOneCodeLetsOneDeviceIn(t *testing.T) {
	t.Parallel()
	r := serve(t)
	second := serveOn(t, r.Plant, r.Clock.Now)
	for round := range 5 {
		d := plant.Device{Kind: plant.Tablet, Name: fmt.Sprint("Tablet ", round), Station: r.Station.ID}
		code, err := r.MakeDeviceCode(t.Context(), d, r.Administrator.ID)
		if err != nil {
			t.Fatal(err)
		}
		racers := make([]*visitor, 6)
		in := make([]bool, len(racers))
		for i := range racers {
			racers[i] = []*running{r, second}[i%2].visit(t, "")
		}
		var wg sync.WaitGroup
		for i, v := range racers {
			wg.Go(func() {
				res, err := v.http.PostForm(v.base+"/enrol", url.Values{"code": {code.Code}})
				if err != nil {
					t.Error(err)
					return
				}
				_ = res.Body.Close()
				in[i] = res.StatusCode == http.StatusSeeOther
			})
		}
		wg.Wait()
		n := 0
		for i, v := range racers {
			if in[i] {
				n++
			}
			if (v.cookies()["device"] != "") != in[i] {
				t.Errorf("racer %d: let in is %v and has the secret %v", i, in[i], v.cookies())
			}
		}
		if n != 1 {
			t.Errorf("round %d: one code let %d devices in", round, n)
		}
		if res, _ := r.visit(t, "").post("/enrol", url.Values{"code": {code.Code}}); res.StatusCode == http.StatusSeeOther {
			t.Error("a code works once more")
		}
	}
	devices, err := r.Devices(t.Context())
	if err != nil || len(devices) != 5 {
		t.Errorf("%d devices, %v; want 5", len(devices), err)
	}
	whole(t, r)
}

// TestStolenCookies: what each of a tablet's two cookies is worth without the other, and
// after the device was revoked, the person signed out, or somebody else enrolled.
func TestStolenCookies(t *testing.T) {
	t.Parallel()
	r := serve(t)
	r.badge(t, r.Operator.ID, "1001")
	station := "/station/" + r.Station.ID.String()
	tablet, d := r.visitOn(t, plant.Device{Kind: plant.Tablet, Name: "Tablet 1", Station: r.Station.ID})
	other, _ := r.visitOn(t, plant.Device{Kind: plant.Tablet, Name: "Tablet 2", Station: r.Station.ID})
	sees := func(v *visitor) bool { res, _ := v.get(station); return res.StatusCode == http.StatusOK }
	byBadge := func(v *visitor, pin string) int {
		res, _ := v.post("/sign-in/badge", url.Values{"badge": {"1001"}, "pin": {pin}})
		return res.StatusCode
	}

	tablet.signInByBadge("1001", pin)
	if v := tablet.thief("session"); sees(v) {
		t.Error("the session of a tablet works in a browser that is none")
	}
	// It was found out, so it is over for everybody.
	if sees(tablet) {
		t.Error("a session that was seen elsewhere goes on")
	}
	tablet.signInByBadge("1001", pin)
	mixed := tablet.thief("session")
	at, _ := url.Parse(r.url)
	mixed.http.Jar.SetCookies(at, []*http.Cookie{{Name: "device", Value: other.cookies()["device"], Path: "/"}})
	if sees(mixed) {
		t.Error("the session of one tablet works on another")
	}

	// A PIN is worth nothing without the device, right or wrong, and the answer is the same.
	outside := r.visit(t, "")
	if right, wrong := byBadge(outside, pin), byBadge(outside, "555666"); right != http.StatusForbidden || wrong != right {
		t.Errorf("a PIN without a device: %d when right, %d when wrong", right, wrong)
	}
	for name, value := range map[string]string{"a made-up secret": strings.Repeat("A", 26), "a device's number": d.ID.String(), "a very long one": strings.Repeat("A", 3000)} {
		v := r.visit(t, "")
		v.http.Jar.SetCookies(at, []*http.Cookie{{Name: "device", Value: value, Path: "/"}})
		if got := byBadge(v, pin); got != http.StatusForbidden {
			t.Errorf("a PIN with %s: %d", name, got)
		}
	}

	tablet.signInByBadge("1001", pin)
	both := tablet.thief("session", "device")
	if !sees(both) {
		t.Error("with both cookies it is that tablet; the test proves nothing otherwise")
	}
	r.revoke(t, r.visit(t, "administrator1"), d)
	for name, v := range map[string]*visitor{"the tablet": tablet, "a copy of its cookies": both, "a copy of the device's cookie": tablet.thief("device")} {
		if sees(v) || byBadge(v, pin) != http.StatusForbidden {
			t.Errorf("%s is let in after the device was revoked", name)
		}
		if code := ends(t, v.dial(ui.TopicStation(r.Station.ID)), 30*time.Second); code != live.SessionEnded.Code {
			t.Errorf("%s gets a socket after the device was revoked, ended with %d", name, code)
		}
	}

	// Signed out is signed out, for copies too.
	v := r.visit(t, "supervisor1")
	replay := v.thief("session")
	if res, _ := v.post("/sign-out", nil); res.StatusCode != http.StatusSeeOther {
		t.Fatal(res.Status)
	}
	if sees(replay) {
		t.Error("a copy of a session's cookie works after signing out")
	}
}

// TestAPlantedTokenIsNotTheSession: a token that stood in the browser before somebody signed in,
// made up or somebody's real one, is not the token of their session.
func TestAPlantedTokenIsNotTheSession(t *testing.T) {
	t.Parallel()
	r := serve(t)
	r.badge(t, r.Operator.ID, "1001")
	at, _ := url.Parse(r.url)
	attacker := r.visit(t, "operator1")
	for name, planted := range map[string]string{"made up": strings.Repeat("A", 43), "of a session that is open": attacker.cookies()["session"]} {
		for way, victim := range map[string]*visitor{"by password": r.visit(t, ""), "by badge": r.tabletVisitor(t, name)} {
			victim.http.Jar.SetCookies(at, []*http.Cookie{{Name: "session", Value: planted, Path: "/"}})
			if way == "by badge" {
				victim.signInByBadge("1001", pin)
			} else if res, _ := victim.post("/sign-in", url.Values{"login": {"supervisor1"}, "password": {secret}}); res.StatusCode != http.StatusSeeOther {
				t.Fatal(res.Status)
			}
			if victim.cookies()["session"] == planted {
				t.Errorf("%s, %s: the token that was planted became the session", name, way)
			}
			thief := r.visit(t, "")
			thief.http.Jar.SetCookies(at, []*http.Cookie{{Name: "session", Value: planted, Path: "/"}})
			if _, body := thief.get("/account"); strings.Contains(body, "Supervisor 1") {
				t.Errorf("%s, %s: the planted token shows the account of the victim", name, way)
			}
		}
	}
	// The same when one's own secret is changed: copies of the old token are worth nothing.
	r.Clock.Advance(time.Minute)
	v := r.visit(t, "engineer1")
	before := v.thief("session")
	if res, _ := v.change("password", secret, newSecret, newSecret); res.StatusCode != http.StatusSeeOther {
		t.Fatal(res.Status)
	}
	if !v.in() || before.in() {
		t.Error("after the change of a password a copy of the old token works, or the new one does not")
	}
}

func (r *running) tabletVisitor(t *testing.T, name string) *visitor {
	t.Helper()
	v, _ := r.visitOn(t, plant.Device{Kind: plant.Tablet, Name: "Tablet " + name, Station: r.Station.ID})
	return v
}

// TestAnotherSiteCanSendNothing tries every post of the program as a page of another site
// would make a browser send it.
func TestAnotherSiteCanSendNothing(t *testing.T) {
	t.Parallel()
	r := serve(t)
	v := r.visit(t, "administrator1")
	for _, row := range routeTable {
		method, pattern, _ := strings.Cut(row.route, " ")
		if method != http.MethodPost {
			continue
		}
		for _, header := range [][2]string{{"Origin", "http://evil.example"}, {"Sec-Fetch-Site", "cross-site"}, {"Origin", "null"}} {
			req, err := http.NewRequest(method, v.base+strings.NewReplacer("{", "", "}", "").Replace(pattern), strings.NewReader("a=b"))
			if err != nil {
				t.Fatal(err)
			}
			req.Header.Set("Content-Type", "application/x-www-form-urlencoded")
			req.Header.Set(header[0], header[1])
			res, err := v.http.Do(req)
			if err != nil {
				t.Fatal(err)
			}
			_ = res.Body.Close()
			if res.StatusCode != http.StatusForbidden {
				t.Errorf("%s with %s %s: %s, want 403", row.route, header[0], header[1], res.Status)
			}
		}
	}
	if !v.in() {
		t.Error("another site signed somebody out")
	}
}
