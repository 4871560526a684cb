package main

import (
	"net/http"
	"net/url"
	"slices"
	"strings"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/store"
)

const (
	newSecret = "eleven slow herons"
	newPIN    = "830462"
)

// change sends one of the two forms of the account page.
func (v *visitor) change(what, old, fresh, again string) (*http.Response, string) {
	v.t.Helper()
	return v.post("/account/"+what, url.Values{"old": {old}, "new": {fresh}, "again": {again}, "to": {"/board"}})
}

// in reports whether a visitor is still let in.
func (v *visitor) in() bool {
	v.t.Helper()
	res, _ := v.get("/account")
	return res.StatusCode == http.StatusOK
}

func TestChangingOnesOwnPassword(t *testing.T) {
	t.Parallel()
	r := serve(t)
	here, elsewhere, other := r.visit(t, "supervisor1"), r.visit(t, "supervisor1"), r.visit(t, "operator1")
	r.Clock.Advance(time.Minute)
	for _, tc := range []struct{ name, old, fresh, again, says string }{
		{"nothing typed", "", newSecret, newSecret, "Type your present password"},
		{"too short", secret, "short", "short", "A password needs at least 15 characters"},
		{"a sequence", secret, "abcdefghijklmnopq", "abcdefghijklmnopq", "simple repetition or sequence"},
		{"the name", secret, "supervisor1 supervisor1", "supervisor1 supervisor1", "little more than a name"},
		{"typed in two ways", secret, newSecret, newSecret + "!", "The two passwords are not the same"},
		{"the wrong one", "seven quiet kestrel", newSecret, newSecret, "This is not your password"},
		{"the present one", secret, secret, secret, "This is the password that you have"},
	} {
		res, body := here.change("password", tc.old, tc.fresh, tc.again)
		if res.StatusCode != http.StatusUnprocessableEntity || !strings.Contains(body, tc.says) {
			t.Errorf("%s: %s, does not say %q", tc.name, res.Status, tc.says)
		}
		if strings.Contains(body, newSecret) || strings.Contains(body, secret) {
			t.Errorf("%s: a password is sent back", tc.name)
		}
	}
	if !elsewhere.in() {
		t.Fatal("tries ended another session")
	}
	res, body := here.change("password", secret, newSecret, newSecret)
	if to := res.Header.Get("Location"); res.StatusCode != http.StatusSeeOther || to != "/account?done=password&to=%2Fboard" {
		t.Fatalf("changing: %s to %q\n%.500s", res.Status, to, body)
	}
	if !here.in() || !other.in() {
		t.Error("who changed it, or somebody else, is out")
	}
	if elsewhere.in() {
		t.Error("another session of the person goes on")
	}
	for typed, want := range map[string]int{secret: http.StatusUnprocessableEntity, newSecret: http.StatusSeeOther} {
		if res, _ := r.visit(t, "").post("/sign-in", url.Values{"login": {"supervisor1"}, "password": {typed}}); res.StatusCode != want {
			t.Errorf("signing in with %q: %s, want %d", typed, res.Status, want)
		}
	}
	var by uuid.UUID
	if err := r.Pool().QueryRow(t.Context(), `select (convert_from(body, 'UTF8')::jsonb->>'person')::uuid from ledger
		where kind = 'arrangement' and convert_from(body, 'UTF8')::jsonb->>'what' = 'secret changed'
		and convert_from(body, 'UTF8')::jsonb->>'subject' = $1`, r.Supervisor.ID.String()).Scan(&by); err != nil || by != r.Supervisor.ID {
		t.Errorf("on record as changed by %v, %v; want themselves", by, err)
	}
	whole(t, r)
}

// TestChangingOnesOwnPIN at a tablet by the PIN, and anywhere by the password.
func TestChangingOnesOwnPIN(t *testing.T) {
	t.Parallel()
	r := serve(t)
	r.badge(t, r.Operator.ID, "1001")
	r.Clock.Advance(time.Minute)
	tablet, _ := r.visitOn(t, plant.Device{Kind: plant.Tablet, Name: "Tablet 1", Station: r.Station.ID})
	beside, _ := r.visitOn(t, plant.Device{Kind: plant.Tablet, Name: "Tablet 2", Station: r.Station.ID})
	tablet.signInByBadge("1001", pin)
	beside.signInByBadge("1001", pin)
	desk := r.visit(t, "operator1")
	r.Clock.Advance(time.Minute)
	for _, tc := range []struct {
		name             string
		v                *visitor
		old, fresh, says string
	}{
		{"nothing typed", tablet, "", newPIN, "Type your present PIN"},
		{"the wrong PIN", tablet, "111222", newPIN, "This is not your PIN"},
		{"the password in place of the PIN", tablet, secret, newPIN, "This is not your PIN"},
		{"a sequence", tablet, pin, "123456", "simple repetition or sequence"},
		{"the badge", tablet, pin, "291001", "number of the badge"},
		{"the present PIN", tablet, pin, pin, "This is the PIN that you have"},
		// Away from a tablet a PIN is worth nothing, so it must not even be told apart.
		{"the right PIN in a browser", desk, pin, newPIN, "This is not your password"},
		{"a wrong PIN in a browser", desk, "555666", newPIN, "This is not your password"},
	} {
		res, body := tc.v.change("pin", tc.old, tc.fresh, tc.fresh)
		if res.StatusCode != http.StatusUnprocessableEntity || !strings.Contains(body, tc.says) {
			t.Errorf("%s: %s, does not say %q", tc.name, res.Status, tc.says)
		}
	}
	if res, body := tablet.change("pin", pin, newPIN, newPIN); res.StatusCode != http.StatusSeeOther {
		t.Fatalf("by the PIN: %s\n%.500s", res.Status, body)
	}
	if !tablet.in() || beside.in() || desk.in() {
		t.Error("want in here and out everywhere else")
	}
	// Still a session by PIN: it opens no more than before.
	if res, body := tablet.get("/account"); res.StatusCode != http.StatusOK || !strings.Contains(body, "Your present PIN") {
		t.Errorf("after the change: %s", res.Status)
	}
	if res, _ := beside.post("/sign-in/badge", url.Values{"badge": {"1001"}, "pin": {pin}}); res.StatusCode != http.StatusUnprocessableEntity {
		t.Errorf("the old PIN: %s", res.Status)
	}
	beside.signInByBadge("1001", newPIN)
	desk = r.visit(t, "operator1")
	r.Clock.Advance(time.Minute)
	if res, body := desk.change("pin", secret, "604918", "604918"); res.StatusCode != http.StatusSeeOther {
		t.Fatalf("by the password: %s\n%.500s", res.Status, body)
	}
	tablet.signInByBadge("1001", "604918")
	if res, body := r.visit(t, "supervisor1").change("pin", secret, newPIN, newPIN); res.StatusCode != http.StatusUnprocessableEntity || !strings.Contains(body, "You have no badge") {
		t.Errorf("without a badge: %s", res.Status)
	}
	whole(t, r)
}

// TestTheAccountIsNoSecondPlaceToGuess: tries here and at the sign-in are counted together,
// and pause together.
func TestTheAccountIsNoSecondPlaceToGuess(t *testing.T) {
	t.Parallel()
	r := serve(t)
	r.badge(t, r.Operator.ID, "1001")
	r.Clock.Advance(time.Minute)
	tablet, _ := r.visitOn(t, plant.Device{Kind: plant.Tablet, Name: "Tablet 1", Station: r.Station.ID})
	calm, _ := r.visitOn(t, plant.Device{Kind: plant.Tablet, Name: "Tablet 2", Station: r.Station.ID})
	tablet.signInByBadge("1001", pin)
	r.badge(t, r.Engineer.ID, "1004")
	browser, engineer := r.visit(t, "supervisor1"), r.visit(t, "engineer1")
	for _, tc := range []struct {
		name  string
		guess func(right bool) *http.Response // through the page
		door  func() *http.Response           // at the sign-in, with what is right
	}{
		{"a PIN", func(right bool) *http.Response {
			res, _ := tablet.change("pin", map[bool]string{true: pin, false: "555666"}[right], newPIN, newPIN)
			return res
		}, func() *http.Response {
			res, _ := tablet.post("/sign-in/badge", url.Values{"badge": {"1001"}, "pin": {pin}})
			return res
		}},
		{"a password", func(right bool) *http.Response {
			res, _ := browser.change("password", map[bool]string{true: secret, false: "not that at all"}[right], newSecret, newSecret)
			return res
		}, func() *http.Response {
			res, _ := r.visit(t, "").post("/sign-in", url.Values{"login": {"supervisor1"}, "password": {secret}})
			return res
		}},
		{"a password for a PIN", func(right bool) *http.Response {
			res, _ := engineer.change("pin", map[bool]string{true: secret, false: "not that at all"}[right], newPIN, newPIN)
			return res
		}, func() *http.Response {
			res, _ := r.visit(t, "").post("/sign-in", url.Values{"login": {"engineer1"}, "password": {secret}})
			return res
		}},
	} {
		refused := 0
		for range 8 {
			if res := tc.guess(false); res.StatusCode == http.StatusTooManyRequests {
				refused++
			}
		}
		if refused < 3 {
			t.Errorf("%s: %d of 8 tries were held up, want at least 3", tc.name, refused)
		}
		if res := tc.guess(true); res.StatusCode != http.StatusTooManyRequests {
			t.Errorf("%s: the right one during the pause: %s, want 429", tc.name, res.Status)
		}
		if res := tc.door(); res.StatusCode != http.StatusTooManyRequests {
			t.Errorf("%s: at the sign-in during the pause: %s, want 429", tc.name, res.Status)
		}
	}
	calm.signInByBadge("1001", pin) // at another tablet the owner is not held up
}

// TestWhatOneSeesOfOneself: roles as they are, and where one is signed in.
func TestWhatOneSeesOfOneself(t *testing.T) {
	t.Parallel()
	r := serve(t)
	v := r.visitAs(t, manager) // operator, administrator and engineer, by PIN at a tablet
	p, err := r.PersonByLogin(t.Context(), "both")
	if err != nil {
		t.Fatal(err)
	}
	r.Clock.Advance(time.Second)
	if err := r.SetSecret(t.Context(), p.ID, r.hash(t, secret), uuid.Nil); err != nil {
		t.Fatal(err)
	}
	v.signInByBadge("1002", pin)
	browser := r.visit(t, "both")
	gone, _ := r.visitOn(t, plant.Device{Kind: plant.Tablet, Name: "A tablet signed out of", Station: r.Station.ID})
	gone.signInByBadge("1002", pin)
	if res, _ := gone.post("/sign-out", nil); res.StatusCode != http.StatusSeeOther {
		t.Fatal(res.Status)
	}
	_, body := v.get("/account")
	for text, times := range map[string]int{">not by PIN<": 2, ">Operator<": 1, ">Administrator<": 1, ">Engineer<": 1, ">Tablet of an administrator<": 1,
		">An ordinary browser<": 1, `class="stay-here"`: 1, "A tablet signed out of": 0} {
		if n := strings.Count(body, text); n != times {
			t.Errorf("%q stands there %d times, want %d", text, n, times)
		}
	}
	if _, body := browser.get("/account"); strings.Contains(body, "not by PIN") {
		t.Error("by password some role is said to be shut")
	}
	r.Clock.Advance(plant.DefaultLock + 5*time.Minute)
	if _, body := browser.get("/account"); strings.Contains(body, "Tablet of an administrator") {
		t.Error("a tablet that has locked itself is listed")
	}
}

// TestWhoWasKeptOutComesBackWithoutTheirSessions, and what nobody sealed is found.
func TestWhoWasKeptOutComesBackWithoutTheirSessions(t *testing.T) {
	t.Parallel()
	r := serve(t)
	ctx := t.Context()
	stolen := r.visit(t, "operator1")
	r.Clock.Advance(time.Minute)
	for _, active := range []bool{false, true} {
		if err := r.SetActive(ctx, r.Operator.ID, active, r.Administrator.ID); err != nil {
			t.Fatal(err)
		}
		r.Clock.Advance(2 * time.Second)
	}
	if stolen.in() {
		t.Error("a session from before goes on after letting in again")
	}
	r.badge(t, r.Operator.ID, "1001")
	whole(t, r)
	for _, tampered := range []struct {
		sql string
		who uuid.UUID
	}{
		{`update person set badge = '4711', pin = 'x' where id = $1`, r.Supervisor.ID},
		{`update person set sessions_since = sessions_since - interval '1 day' where id = $1`, r.Operator.ID},
		{`update person set sessions_since = now() where id = $1`, r.Engineer.ID},
	} {
		if _, err := r.Pool().Exec(ctx, tampered.sql, tampered.who); err != nil {
			t.Fatal(err)
		}
		differ, err := r.CheckRecord(ctx)
		if err != nil || !slices.ContainsFunc(differ, func(d store.Difference) bool {
			return strings.Contains(d.What, "sessions of person "+tampered.who.String())
		}) {
			t.Errorf("after %s: %v, %v", tampered.sql, differ, err)
		}
	}
}
