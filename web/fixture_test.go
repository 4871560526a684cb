package web_test

import (
	"bytes"
	"context"
	"log/slog"
	"net/http"
	"net/http/cookiejar"
	"net/http/httptest"
	"net/netip"
	"net/url"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/alexedwards/scs/v2/memstore"
	"github.com/go-chi/chi/v5"
	"github.com/google/uuid"

	"holdfast/internal/auth"
	"holdfast/internal/live"
	"holdfast/internal/plant"
	"holdfast/web"
	"holdfast/web/ui"
)

// plainSurface stands in for a surface: one page, one form, one address that fails.
type plainSurface struct{ name ui.Surface }

func (s plainSurface) Routes(r chi.Router) {
	log := slog.New(slog.DiscardHandler)
	r.Get("/", ui.Handle(log, func(w http.ResponseWriter, r *http.Request) error {
		return ui.Render(w, r, http.StatusOK, ui.Page(ui.ShellFor(r, s.name, "A page")))
	}))
	r.With(ui.Require(plant.VoidRecords)).Post("/void", ui.Handle(log, func(w http.ResponseWriter, r *http.Request) error {
		if err := ui.ParseForm(w, r); err != nil {
			return err
		}
		ui.Redirect(w, r, "/"+string(s.name))
		return nil
	}))
	r.Get("/panic", func(w http.ResponseWriter, r *http.Request) { panic("a secret of ours") })
}

// halfSurface fails when half of its answer is written.
type halfSurface struct{}

func (halfSurface) Routes(r chi.Router) {
	r.Get("/", func(w http.ResponseWriter, r *http.Request) {
		_, _ = w.Write([]byte("half"))
		panic("half-way")
	})
}

// people are kept in memory and all have the password "right".
type people struct{ all []plant.Person }

func (p people) Person(_ context.Context, id uuid.UUID) (plant.Person, error) {
	for _, one := range p.all {
		if one.ID == id {
			return one, nil
		}
	}
	return plant.Person{}, &plant.Error{Kind: plant.NotFound, Message: "There is no such person."}
}

func (p people) Check(_ context.Context, login string, s auth.Secret, _ netip.Addr) (plant.Person, error) {
	for _, one := range p.all {
		if one.Login == plant.CleanLogin(login) && string(s) == "right" {
			return one, nil
		}
	}
	return plant.Person{}, plant.Invalidf("password", "Name or password is wrong.")
}

// lockedBuffer is a log that requests may write to side by side.
type lockedBuffer struct {
	mu sync.Mutex
	b  bytes.Buffer
}

func (l *lockedBuffer) Write(p []byte) (int, error) {
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.b.Write(p)
}

func (l *lockedBuffer) String() string {
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.b.String()
}

// fixture is the real router over real sessions and a real hub, with everything
// that keeps data in memory.
type fixture struct {
	server  *httptest.Server
	handler http.Handler
	hub     *live.Hub
	people  people
	log     *lockedBuffer
}

func newFixture(t *testing.T, change func(*web.Config)) *fixture {
	t.Helper()
	f := &fixture{log: &lockedBuffer{}}
	for _, r := range plant.AllRoles {
		f.people.all = append(f.people.all, plant.Person{ID: uuid.New(), Login: string(r), Name: string(r) + " 1", Roles: plant.Roles{r}, Active: true})
	}
	log := slog.New(slog.NewTextHandler(f.log, nil))
	f.hub = live.New(func(_ context.Context, topics []string) (map[string][]live.Fragment, error) {
		out := make(map[string][]live.Fragment)
		for _, topic := range topics {
			out[topic] = []live.Fragment{{ID: "part", HTML: []byte(`<p id="part">` + topic + `</p>`)}}
		}
		return out, nil
	}, live.Options{Log: log})
	sessions := auth.NewSessions(auth.SessionOptions{
		Store: memstore.NewWithCleanupInterval(0), People: f.people, PlainHTTP: true, Log: log,
		Fail: web.SessionFault(log), OnEnd: func(session string) { f.hub.Drop(session, live.SessionEnded) },
	})
	c := web.Config{
		Log: log, Sessions: sessions, Checker: f.people, Hub: f.hub,
		Plant:   func() plant.Plant { return plant.Plant{Name: "Kestrel Row", Location: time.UTC, Demo: true} },
		Station: plainSurface{ui.Station}, Board: plainSurface{ui.Board}, Desk: plainSurface{ui.Desk}, Admin: plainSurface{ui.Admin},
		DemoPeople: func(context.Context) ([]plant.Person, error) { return f.people.all, nil },
	}
	if change != nil {
		change(&c)
	}
	f.handler = web.New(c)
	f.server = httptest.NewServer(f.handler)
	t.Cleanup(func() {
		if err := f.hub.Close(context.Background()); err != nil {
			t.Error(err)
		}
		f.server.Close()
		sessions.Close()
	})
	return f
}

// visitor is a browser that keeps cookies and follows nothing.
type visitor struct {
	t    *testing.T
	http *http.Client
	base string
}

// visitor returns a browser in which a person of this role has signed in; the empty
// role is nobody.
func (f *fixture) visitor(t *testing.T, role plant.Role) *visitor {
	t.Helper()
	jar, err := cookiejar.New(nil)
	if err != nil {
		t.Fatal(err)
	}
	v := &visitor{t: t, base: f.server.URL, http: &http.Client{Jar: jar,
		CheckRedirect: func(*http.Request, []*http.Request) error { return http.ErrUseLastResponse }}}
	if role != "" {
		res := v.post("/sign-in", url.Values{"login": {string(role)}, "password": {"right"}})
		if res.StatusCode != http.StatusSeeOther {
			t.Fatalf("signing in as %s: %d", role, res.StatusCode)
		}
	}
	return v
}

type answer struct {
	*http.Response
	text string
}

func (v *visitor) do(r *http.Request) answer {
	v.t.Helper()
	res, err := v.http.Do(r)
	if err != nil {
		v.t.Fatal(err)
	}
	defer res.Body.Close()
	var b bytes.Buffer
	_, _ = b.ReadFrom(res.Body) // an answer cut off half-way is for the test to judge
	return answer{res, b.String()}
}

func (v *visitor) request(method, path string, form url.Values, headers ...string) *http.Request {
	v.t.Helper()
	r, err := http.NewRequestWithContext(v.t.Context(), method, v.base+path, strings.NewReader(form.Encode()))
	if err != nil {
		v.t.Fatal(err)
	}
	if method == http.MethodPost {
		r.Header.Set("Content-Type", "application/x-www-form-urlencoded")
	}
	for i := 0; i+1 < len(headers); i += 2 {
		r.Header.Set(headers[i], headers[i+1])
	}
	return r
}

func (v *visitor) get(path string, headers ...string) answer {
	return v.do(v.request(http.MethodGet, path, nil, headers...))
}

func (v *visitor) post(path string, form url.Values, headers ...string) answer {
	return v.do(v.request(http.MethodPost, path, form, headers...))
}
