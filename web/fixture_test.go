package web_test

import (
	"bytes"
	"context"
	"log/slog"
	"net/http"
	"net/http/httptest"
	"sync"
	"testing"
	"time"

	"github.com/go-chi/chi/v5"

	"holdfast/internal/live"
	"holdfast/internal/plant"
	"holdfast/web"
	"holdfast/web/ui"
	"holdfast/web/webtest"
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
	people  webtest.People
	log     *lockedBuffer
}

func newFixture(t *testing.T, change func(*web.Config)) *fixture {
	t.Helper()
	f := &fixture{people: webtest.OneOfEach(), log: &lockedBuffer{}}
	c := web.Config{
		Log: slog.New(slog.NewTextHandler(f.log, nil)), Checker: f.people,
		Plant:   func() plant.Plant { return plant.Plant{Name: "Kestrel Row", Location: time.UTC, Demo: true} },
		Station: plainSurface{ui.Station}, Board: plainSurface{ui.Board}, Desk: plainSurface{ui.Desk}, Admin: plainSurface{ui.Admin},
		DemoPeople: func(context.Context) ([]plant.Person, error) { return f.people, nil },
	}
	if change != nil {
		change(&c)
	}
	f.server, f.hub = webtest.Serve(t, &c, f.people, func(_ context.Context, topics []string) (map[string][]live.Fragment, error) {
		out := make(map[string][]live.Fragment)
		for _, topic := range topics {
			out[topic] = []live.Fragment{{ID: "part", HTML: []byte(`<p id="part">` + topic + `</p>`)}}
		}
		return out, nil
	})
	f.handler = f.server.Config.Handler
	return f
}

// visitor is a browser without scripts.
type visitor struct{ *webtest.Browser }

// visitor returns a browser in which a person of this role has signed in; the empty
// role is nobody.
func (f *fixture) visitor(t *testing.T, role plant.Role) *visitor {
	t.Helper()
	return &visitor{webtest.Visit(t, f.server.URL, string(role))}
}
