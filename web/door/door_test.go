package door_test

import (
	"bytes"
	"context"
	"errors"
	"log/slog"
	"net/http"
	"net/http/httptest"
	"net/netip"
	"net/url"
	"regexp"
	"slices"
	"strings"
	"testing"
	"time"

	"github.com/go-chi/chi/v5"
	"github.com/google/uuid"

	"holdfast/internal/auth"
	"holdfast/internal/plant"
	"holdfast/web/door"
	"holdfast/web/ui"
	"holdfast/web/words/wordstest"
)

// checker knows one person and one secret.
type checker struct {
	person plant.Person
	fails  error
	asked  int
	from   netip.Addr
}

func (c *checker) Check(_ context.Context, login string, s auth.Secret, from netip.Addr) (plant.Person, error) {
	c.asked++
	c.from = from
	switch {
	case c.fails != nil:
		return plant.Person{}, c.fails
	case plant.CleanLogin(login) != c.person.Login || string(s) != "right":
		return plant.Person{}, plant.Invalidf("password", "Name or password is wrong.")
	}
	return c.person, nil
}

// sessions remembers who came in and who left.
type sessions struct {
	in    []plant.Person
	out   int
	fails error
}

func (s *sessions) SignIn(_ context.Context, p plant.Person) error {
	s.in = append(s.in, p)
	return s.fails
}
func (s *sessions) SignOut(context.Context) error  { s.out++; return nil }
func (s *sessions) Stay(context.Context) time.Time { return time.Time{} }

func person(name string, role plant.Role) plant.Person {
	return plant.Person{ID: uuid.New(), Login: strings.ToLower(name), Name: name, Roles: plant.Roles{role}, Active: true}
}

// fixture is a door with its stand-ins.
type fixture struct {
	checker  *checker
	sessions *sessions
	demo     func(context.Context) ([]plant.Person, error)
	frame    ui.Frame
	log      bytes.Buffer
}

func newFixture(role plant.Role) *fixture {
	return &fixture{
		checker: &checker{person: person("Ines", role)}, sessions: &sessions{},
		frame: ui.Frame{Plant: plant.Plant{Name: "Kestrel Row"}, Addr: netip.MustParseAddr("192.0.2.7")},
	}
}

func (f *fixture) do(r *http.Request) *httptest.ResponseRecorder {
	h := &door.Handler{Log: slog.New(slog.NewTextHandler(&f.log, nil)), Checker: f.checker, Sessions: f.sessions, Demo: f.demo}
	router := chi.NewRouter()
	h.Routes(router)
	w := httptest.NewRecorder()
	router.ServeHTTP(w, ui.WithFrame(r, f.frame))
	return w
}

func (f *fixture) get(path string) *httptest.ResponseRecorder {
	return f.do(httptest.NewRequest("GET", path, nil))
}

func (f *fixture) post(path string, form url.Values, cookies ...*http.Cookie) *httptest.ResponseRecorder {
	r := httptest.NewRequest("POST", path, strings.NewReader(form.Encode()))
	r.Header.Set("Content-Type", "application/x-www-form-urlencoded")
	for _, c := range cookies {
		r.AddCookie(c)
	}
	return f.do(r)
}

func TestEachRoleLandsWhereItsWorkBegins(t *testing.T) {
	t.Parallel()
	const station = "01900000-0000-7000-8000-000000000001"
	stood := &http.Cookie{Name: "station", Value: station}
	for _, tc := range []struct {
		role   plant.Role
		to     string
		cookie *http.Cookie
		want   string
	}{
		{plant.Operator, "", nil, "/station"},
		{plant.Operator, "", stood, "/station/" + station},
		{plant.Supervisor, "", stood, "/board"},
		{plant.Engineer, "", nil, "/desk"},
		{plant.Administrator, "", nil, "/admin"},
		{plant.Engineer, "/desk/x?last=50", nil, "/desk/x?last=50"},
		{plant.Operator, "/desk/x", nil, "/station"}, // it was somebody else's page
		{plant.Engineer, "//evil.example/desk", nil, "/desk"},
		{plant.Engineer, "https://evil.example/", nil, "/desk"},
		{plant.Engineer, "/sign-out", nil, "/desk"},
	} {
		f := newFixture(tc.role)
		var cookies []*http.Cookie
		if tc.cookie != nil {
			cookies = append(cookies, tc.cookie)
		}
		w := f.post("/sign-in", url.Values{"login": {" INES "}, "password": {"right"}, "to": {tc.to}}, cookies...)
		if w.Code != http.StatusSeeOther || w.Header().Get("Location") != tc.want {
			t.Errorf("%s to %q: %d to %q, want %q", tc.role, tc.to, w.Code, w.Header().Get("Location"), tc.want)
		}
		if len(f.sessions.in) != 1 || f.sessions.in[0].ID != f.checker.person.ID {
			t.Errorf("%s: signed in %v", tc.role, f.sessions.in)
		}
		if f.checker.from != f.frame.Addr {
			t.Errorf("the checker was told %v", f.checker.from)
		}
	}
}

func TestAWrongSecretKeepsTheNameAndNothingElse(t *testing.T) {
	t.Parallel()
	f := newFixture(plant.Operator)
	w := f.post("/sign-in", url.Values{"login": {`Ines "<1>`}, "password": {"wrong-hunter2"}, "to": {"/station/x"}})
	body := w.Body.String()
	if w.Code != http.StatusUnprocessableEntity || len(f.sessions.in) != 0 {
		t.Errorf("status %d, signed in %v", w.Code, f.sessions.in)
	}
	for _, want := range []string{`value="Ines &#34;&lt;1&gt;"`, "Name or password is wrong.", `aria-invalid="true"`, `aria-describedby="password-problem"`, `name="to" value="/station/x"`} {
		if !strings.Contains(body, want) {
			t.Errorf("%q is not on the page", want)
		}
	}
	if strings.Contains(body, "hunter2") || strings.Contains(f.log.String(), "hunter2") || strings.Contains(f.log.String(), "Ines") {
		t.Error("what was typed went further than it should")
	}
}

func TestWhatIsMissingIsAskedForWithoutChecking(t *testing.T) {
	t.Parallel()
	for _, form := range []url.Values{{}, {"login": {"ines"}}, {"password": {"right"}}, {"login": {"  \x00 "}, "password": {"right"}}, {"login": {strings.Repeat("x", 5000)}, "password": {"right"}}} {
		f := newFixture(plant.Operator)
		if w := f.post("/sign-in", form); w.Code != http.StatusUnprocessableEntity || f.checker.asked != 0 {
			t.Errorf("%.60v: status %d, checked %d times", form, w.Code, f.checker.asked)
		}
	}
}

func TestAPauseSaysHowLong(t *testing.T) {
	t.Parallel()
	f := newFixture(plant.Operator)
	f.checker.fails = &plant.Error{Kind: plant.Forbidden, Field: "password", Message: "Too many wrong tries. Try again in 32 seconds."}
	w := f.post("/sign-in", url.Values{"login": {"ines"}, "password": {"right"}})
	if w.Code != http.StatusTooManyRequests || !strings.Contains(w.Body.String(), "Try again in 32 seconds.") || !strings.Contains(w.Body.String(), `value="ines"`) {
		t.Errorf("%d: %s", w.Code, w.Body)
	}
}

func TestFaultsAtTheDoorAreReferences(t *testing.T) {
	t.Parallel()
	f := newFixture(plant.Operator)
	f.checker.fails = errors.New("find who signs in: no route to host 10.0.0.4")
	w := f.post("/sign-in", url.Values{"login": {"ines"}, "password": {"right"}})
	if w.Code != 500 || strings.Contains(w.Body.String(), "10.0.0.4") || !strings.Contains(f.log.String(), "10.0.0.4") {
		t.Errorf("%d, logged %s", w.Code, f.log.String())
	}
	f = newFixture(plant.Operator)
	f.sessions.fails = errors.New("commit")
	if w := f.post("/sign-in", url.Values{"login": {"ines"}, "password": {"right"}}); w.Code != 500 {
		t.Errorf("a session that was not begun is answered with %d", w.Code)
	}
}

func TestDemoPeopleStepInByOneClickOnlyOnThisMachine(t *testing.T) {
	t.Parallel()
	engineer, left := person("Engineer 1", plant.Engineer), person("Engineer 9", plant.Engineer)
	left.Active = false
	list := func(context.Context) ([]plant.Person, error) { return []plant.Person{engineer, left}, nil }
	for _, tc := range []struct {
		name   string
		listed func(context.Context) ([]plant.Person, error)
		demo   bool
		addr   string
		offers bool
	}{
		{"the demonstration", list, true, "127.0.0.1", true},
		{"the demonstration over IPv6", list, true, "::1", true},
		{"mapped", list, true, "::ffff:127.0.0.1", true},
		{"another machine", list, true, "192.0.2.7", false},
		{"a real plant", list, false, "127.0.0.1", false},
		{"not started as a demonstration", nil, true, "127.0.0.1", false},
	} {
		f := newFixture(plant.Operator)
		f.demo, f.frame.Plant.Demo, f.frame.Addr = tc.listed, tc.demo, netip.MustParseAddr(tc.addr)
		page := f.get("/sign-in?to=/desk/x").Body.String()
		if got := strings.Contains(page, "Engineer 1"); got != tc.offers {
			t.Errorf("%s: offers %v", tc.name, got)
		}
		if strings.Contains(page, "Engineer 9") {
			t.Errorf("%s: somebody who is no longer active is offered", tc.name)
		}
		w := f.post("/sign-in/demo", url.Values{"person": {engineer.ID.String()}, "to": {"/desk/x"}})
		if in := len(f.sessions.in) == 1 && w.Code == 303 && w.Header().Get("Location") == "/desk/x"; in != tc.offers {
			t.Errorf("%s: %d to %s, signed in %v", tc.name, w.Code, w.Header().Get("Location"), f.sessions.in)
		}
		if w := f.post("/sign-in/demo", url.Values{"person": {left.ID.String()}}); w.Code != 404 {
			t.Errorf("%s: somebody who is no longer active gets %d", tc.name, w.Code)
		}
	}
}

func TestHomeAndTheWayOut(t *testing.T) {
	t.Parallel()
	f := newFixture(plant.Operator)
	if w := f.get("/"); w.Code != 303 || w.Header().Get("Location") != "/sign-in" {
		t.Errorf("nobody is led to %s", w.Header().Get("Location"))
	}
	f.frame.Person, f.frame.SignedIn = person("Supervisor 1", plant.Supervisor), true
	if w := f.get("/"); w.Header().Get("Location") != "/board" {
		t.Errorf("a supervisor is led to %s", w.Header().Get("Location"))
	}
	if body := f.get("/sign-in").Body.String(); !strings.Contains(body, "Supervisor 1 is signed in here.") {
		t.Error("the page does not say who is signed in")
	}
	if w := f.post("/sign-out", nil); w.Code != 303 || w.Header().Get("Location") != "/sign-in" || f.sessions.out != 1 {
		t.Errorf("%d to %s, left %d times", w.Code, w.Header().Get("Location"), f.sessions.out)
	}
}

func TestTheDoorSpeaksFromTheCatalogueAlone(t *testing.T) {
	t.Parallel()
	f := newFixture(plant.Operator)
	f.frame.Words = wordstest.Register(t)
	f.frame.Plant.Demo, f.frame.Addr = true, netip.MustParseAddr("127.0.0.1")
	f.demo = func(context.Context) ([]plant.Person, error) {
		return []plant.Person{person("Operator 1", plant.Operator)}, nil
	}
	body := f.get("/sign-in").Body.String()
	if !strings.Contains(body, "Šîgñ îñ") {
		t.Fatal("the page is not in the pseudo-locale")
	}
	for _, m := range regexp.MustCompile(`>([^<]+)<`).FindAllStringSubmatch(body, -1) {
		text := strings.TrimSpace(m[1])
		if text == "" || strings.Contains(text, "Kestrel Row") || text == "Operator 1" || slices.Contains(wordstest.LanguageNames(), text) {
			continue
		}
		if !strings.HasPrefix(text, "⟦") || !strings.HasSuffix(text, "⟧") {
			t.Errorf("%q bypasses the catalogue", text)
		}
	}
}

func TestCautionStandsAtTheFoot(t *testing.T) {
	t.Parallel()
	body := newFixture(plant.Operator).get("/sign-in").Body.String()
	for _, want := range []string{"A steady chart is not a release.", "Lockout and guarding", "authorised people decide, not this program."} {
		if !strings.Contains(body, want) {
			t.Errorf("the caution lacks %q", want)
		}
	}
}
