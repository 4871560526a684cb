package web_test

import (
	"context"
	"errors"
	"net/http"
	"net/http/httptest"
	"net/url"
	"strings"
	"testing"
	"time"

	"github.com/gorilla/websocket"

	"holdfast/internal/live"
	"holdfast/internal/plant"
	"holdfast/web"
)

func TestEveryAnswerCarriesTheSecurityHeaders(t *testing.T) {
	t.Parallel()
	f := newFixture(t, nil)
	v := f.visitor(t, plant.Operator)
	for _, path := range []string{"/", "/sign-in", "/station", "/desk", "/nothing", "/static/css/tokens.css", "/healthz", "/station/panic", "/live?topic=board"} {
		res := v.Get(path)
		for name, want := range map[string]string{
			"Content-Security-Policy": "default-src 'none'; script-src 'self'; style-src 'self'; img-src 'self' data:; font-src 'self'; " +
				"connect-src 'self'; form-action 'self'; base-uri 'none'; frame-ancestors 'none'",
			"X-Content-Type-Options": "nosniff", "Referrer-Policy": "same-origin", "Cross-Origin-Opener-Policy": "same-origin",
		} {
			if got := res.Header.Get(name); got != want {
				t.Errorf("%s: %s is %q", path, name, got)
			}
		}
		if res.Header.Get("Permissions-Policy") == "" || res.Header.Get("X-Request-Id") == "" || res.Header.Get("Strict-Transport-Security") != "" {
			t.Errorf("%s: %v", path, res.Header)
		}
	}
	secure := newFixture(t, func(c *web.Config) { c.Secure, c.Strict = true, time.Hour })
	if got := secure.visitor(t, "").Get("/healthz").Header.Get("Strict-Transport-Security"); got == "" {
		t.Error("https is not asked for again")
	}
}

func TestPostsFromOtherSitesAreRefused(t *testing.T) {
	t.Parallel()
	f := newFixture(t, nil)
	v := f.visitor(t, plant.Supervisor)
	for _, headers := range [][]string{{"Sec-Fetch-Site", "cross-site"}, {"Sec-Fetch-Site", "same-site"}, {"Origin", "http://evil.example"}} {
		if res := v.Post("/station/void", nil, headers...); res.StatusCode != http.StatusForbidden {
			t.Errorf("%v: %d", headers, res.StatusCode)
		}
	}
	for _, headers := range [][]string{{"Sec-Fetch-Site", "same-origin"}, {"Origin", f.server.URL}, nil} {
		if res := v.Post("/station/void", nil, headers...); res.StatusCode != http.StatusSeeOther {
			t.Errorf("%v: %d", headers, res.StatusCode)
		}
	}
}

func TestOnlyNamedHostsAreAnswered(t *testing.T) {
	t.Parallel()
	f := newFixture(t, func(c *web.Config) { c.Hosts = []string{"localhost:8080", "127.0.0.1:8080", "[::1]:8080"} })
	for host, want := range map[string]int{"localhost:8080": 200, "LOCALHOST:8080": 200, "[::1]:8080": 200, "localhost": 421, "evil.example:8080": 421, "localhost:8081": 421, "": 421} {
		r := httptest.NewRequest("GET", "/sign-in", nil)
		r.Host = host
		w := httptest.NewRecorder()
		f.handler.ServeHTTP(w, r)
		if w.Code != want {
			t.Errorf("%q: %d, want %d", host, w.Code, want)
		}
	}
}

func TestLogsHoldNoSecretsAndNoQueries(t *testing.T) {
	t.Parallel()
	f := newFixture(t, nil)
	v := f.visitor(t, "")
	v.Post("/sign-in?token=hunter1", url.Values{"login": {"who-typed-this"}, "password": {"hunter2"}})
	v.Post("/sign-in", url.Values{"login": {"operator"}, "password": {"right"}})
	v.Get("/station?search=hunter3")
	log := f.log.String()
	for _, secret := range []string{"hunter", "who-typed-this", "right"} {
		if strings.Contains(log, secret) {
			t.Errorf("%q is in the log:\n%s", secret, log)
		}
	}
	jar := v.HTTP.Jar.Cookies(&url.URL{Scheme: "http", Host: strings.TrimPrefix(f.server.URL, "http://")})
	if len(jar) == 0 || strings.Contains(log, jar[0].Value) {
		t.Errorf("the session's token is in the log, or there is none: %v", jar)
	}
	for _, want := range []string{"method=POST", "path=/sign-in", "status=422", "status=303", "path=/station", "took=", "request="} {
		if !strings.Contains(log, want) {
			t.Errorf("%q is not in the log:\n%s", want, log)
		}
	}
}

func TestPanicsBecomeReferences(t *testing.T) {
	t.Parallel()
	f := newFixture(t, nil)
	v := f.visitor(t, plant.Operator)
	res := v.Get("/station/panic")
	if res.StatusCode != 500 || strings.Contains(res.Text, "a secret of ours") || !strings.Contains(res.Text, "(ref ") {
		t.Errorf("%d: %s", res.StatusCode, res.Text)
	}
	if log := f.log.String(); !strings.Contains(log, "a secret of ours") || !strings.Contains(log, "fixture_test.go") || !strings.Contains(log, "status=500") {
		t.Errorf("logged: %s", log)
	}
}

func TestHalfAnAnswerIsNotTakenForWhole(t *testing.T) {
	t.Parallel()
	f := newFixture(t, func(c *web.Config) { c.Station = halfSurface{} })
	v := f.visitor(t, plant.Operator)
	res, err := v.HTTP.Do(v.Request(http.MethodGet, "/station", nil))
	if err == nil {
		_ = res.Body.Close()
		t.Errorf("half an webtest.Answer came as %d", res.StatusCode)
	}
	if log := f.log.String(); !strings.Contains(log, "failed half-way") {
		t.Errorf("logged: %s", log)
	}
}

func TestWhatIsNotThere(t *testing.T) {
	t.Parallel()
	f := newFixture(t, nil)
	v := f.visitor(t, plant.Operator)
	for _, path := range []string{"/nothing", "/station/nothing", "/static/nothing.css"} {
		if res := v.Get(path); res.StatusCode != 404 {
			t.Errorf("%s: %d", path, res.StatusCode)
		}
	}
	if res := v.Get("/nothing"); !strings.Contains(res.Text, "Operator 1") {
		t.Error("the page of what is not there does not know who is signed in")
	}
	if res := v.Post("/sign-in/nothing", nil); res.StatusCode != 404 {
		t.Errorf("got %d", res.StatusCode)
	}
	if res := v.Get("/theme"); res.StatusCode != http.StatusMethodNotAllowed {
		t.Errorf("getting what is posted: %d", res.StatusCode)
	}
	for _, path := range []string{"/sign-in", "/station/"} { // at the root and below a mounted router
		if head := v.Do(v.Request(http.MethodHead, path, nil)); head.StatusCode != 200 || head.Text != "" {
			t.Errorf("asking for the head of %s: %d %q", path, head.StatusCode, head.Text)
		}
	}
}

func TestLargeBodiesAreRefusedEverywhere(t *testing.T) {
	t.Parallel()
	f := newFixture(t, nil)
	v := f.visitor(t, plant.Supervisor)
	big := url.Values{"to": {strings.Repeat("x", 10<<20)}}
	for _, path := range []string{"/station/void", "/sign-in", "/theme"} {
		r := httptest.NewRequest("POST", path, strings.NewReader(big.Encode()))
		r.Header.Set("Content-Type", "application/x-www-form-urlencoded")
		at, _ := url.Parse(v.Base)
		for _, c := range v.HTTP.Jar.Cookies(at) {
			r.AddCookie(c)
		}
		w := httptest.NewRecorder()
		f.handler.ServeHTTP(w, r)
		if w.Code != http.StatusRequestEntityTooLarge {
			t.Errorf("%s: %d", path, w.Code)
		}
	}
}

func TestReadinessIsAskedFor(t *testing.T) {
	t.Parallel()
	f := newFixture(t, func(c *web.Config) {
		c.Ready = func(context.Context) error { return errors.New("database at 10.0.0.4 is away") }
	})
	v := f.visitor(t, "")
	if res := v.Get("/readyz"); res.StatusCode != 503 || strings.Contains(res.Text, "10.0.0.4") {
		t.Errorf("%d %s", res.StatusCode, res.Text)
	}
	if res := v.Get("/healthz"); res.StatusCode != 200 {
		t.Errorf("a server whose database is away is alive all the same: %d", res.StatusCode)
	}
	if !strings.Contains(f.log.String(), "10.0.0.4") {
		t.Error("why it is not ready is not in the log")
	}
}

// dial opens the live socket as a browser would.
func (v *visitor) dial(query string) (*websocket.Conn, error) {
	at, _ := url.Parse(v.Base)
	header := http.Header{"Origin": {v.Base}}
	for _, c := range v.HTTP.Jar.Cookies(at) {
		header.Add("Cookie", c.String())
	}
	conn, res, err := websocket.DefaultDialer.DialContext(v.T.Context(), "ws://"+at.Host+"/live?"+query, header)
	if res != nil && res.Body != nil {
		_ = res.Body.Close()
	}
	if err == nil {
		v.T.Cleanup(func() { _ = conn.Close() })
		_ = conn.SetReadDeadline(time.Now().Add(5 * time.Second))
	}
	return conn, err
}

func TestLiveIsOpenToWhoMaySeeThePage(t *testing.T) {
	t.Parallel()
	f := newFixture(t, nil)
	const id = "01900000-0000-7000-8000-000000000001"
	for _, tc := range []struct {
		role  plant.Role
		query string
		code  int // of the close, 0 for served
	}{
		{"", "topic=board", live.SessionEnded.Code},
		{plant.Operator, "topic=board", 0},
		{plant.Operator, "topic=station/" + id, 0},
		{plant.Operator, "topic=chart/" + id, live.NotAllowed.Code},
		{plant.Engineer, "topic=chart/" + id, 0},
		{plant.Engineer, "topic=station/" + id, live.NotAllowed.Code},
		{plant.Supervisor, "topic=board&topic=station/" + id, 0},
		{plant.Operator, "topic=board&topic=chart/" + id, live.NotAllowed.Code}, // one that is not allowed spoils all
		{plant.Administrator, "topic=board", live.NotAllowed.Code},
		{plant.Operator, "topic=people", live.NotAllowed.Code},
	} {
		conn, err := f.visitor(t, tc.role).dial(tc.query)
		if err != nil {
			t.Errorf("%s %s: %v", tc.role, tc.query, err)
			continue
		}
		_, message, err := conn.ReadMessage()
		if closed, ok := errors.AsType[*websocket.CloseError](err); tc.code != 0 {
			if !ok || closed.Code != tc.code {
				t.Errorf("%s %s: %v, want close %d", tc.role, tc.query, err, tc.code)
			}
		} else if err != nil || !strings.Contains(string(message), `"hello"`) {
			t.Errorf("%s %s: %s, %v", tc.role, tc.query, message, err)
		}
	}
}

func TestLiveEndsWithItsSession(t *testing.T) {
	t.Parallel()
	f := newFixture(t, nil)
	v := f.visitor(t, plant.Supervisor)
	conn, err := v.dial("topic=board")
	if err != nil {
		t.Fatal(err)
	}
	if _, _, err := conn.ReadMessage(); err != nil {
		t.Fatal(err)
	}
	v.Post("/sign-out", nil)
	for {
		_, _, err := conn.ReadMessage()
		if err == nil {
			continue
		}
		if closed, ok := errors.AsType[*websocket.CloseError](err); !ok || closed.Code != live.SessionEnded.Code {
			t.Errorf("the socket ended with %v", err)
		}
		return
	}
}

func TestLiveOfAnotherSiteIsRefused(t *testing.T) {
	t.Parallel()
	f := newFixture(t, nil)
	v := f.visitor(t, plant.Supervisor)
	at, _ := url.Parse(v.Base)
	header := http.Header{"Origin": {"http://evil.example"}}
	for _, c := range v.HTTP.Jar.Cookies(at) {
		header.Add("Cookie", c.String())
	}
	_, res, err := websocket.DefaultDialer.DialContext(t.Context(), "ws://"+at.Host+"/live?topic=board", header)
	if err == nil || res == nil || res.StatusCode != http.StatusForbidden {
		t.Errorf("got %v, %v", res, err)
	}
}

func TestStepInByOneClick(t *testing.T) {
	t.Parallel()
	f := newFixture(t, nil)
	v := f.visitor(t, "")
	if page := v.Get("/sign-in"); !strings.Contains(page.Text, "Engineer 1") || !strings.Contains(page.Text, `data-testid="demo"`) {
		t.Error("the demonstration does not offer its people, or does not say what it is")
	}
	res := v.Post("/sign-in/demo", url.Values{"person": {f.people[2].ID.String()}})
	if res.StatusCode != 303 || res.Header.Get("Location") != "/desk" {
		t.Fatalf("%d to %s", res.StatusCode, res.Header.Get("Location"))
	}
	if res := v.Get("/desk"); res.StatusCode != 200 || !strings.Contains(res.Text, "Engineer 1") {
		t.Errorf("%d", res.StatusCode)
	}
}
