package board

import (
	"context"
	"log/slog"
	"net/http"
	"net/http/httptest"
	"sync"
	"testing"
	"time"

	"github.com/go-chi/chi/v5"
	"github.com/google/uuid"

	"holdfast/internal/live"
	"holdfast/internal/plant"
	"holdfast/web"
	"holdfast/web/ui"
	"holdfast/web/webtest"
	"holdfast/web/words"
)

// floorNow is a record whose states a test sets.
type floorNow struct {
	mu     sync.Mutex
	states []plant.StationState
}

func (r *floorNow) set(s []plant.StationState) {
	r.mu.Lock()
	defer r.mu.Unlock()
	r.states = s
}

func (r *floorNow) StationStates(context.Context, int, ...uuid.UUID) ([]plant.StationState, error) {
	r.mu.Lock()
	defer r.mu.Unlock()
	return r.states, nil
}

// site is the board behind the real router, with real sessions and a real hub.
type site struct {
	*httptest.Server
	hub *live.Hub
}

func newSite(t testing.TB, record Store, p plant.Plant, now func() time.Time) *site {
	t.Helper()
	log := slog.New(slog.DiscardHandler)
	all := webtest.OneOfEach()
	server, hub := webtest.Serve(t, &web.Config{Log: log, Now: now, Checker: all, Plant: func() plant.Plant { return p }, Board: New(Deps{Store: record, Log: log})}, all,
		func(ctx context.Context, topics []string) (map[string][]live.Fragment, error) {
			states, err := record.StationStates(ctx, 25)
			if err != nil {
				return nil, err
			}
			f, err := Fragments(ui.NewFormat(words.For("en"), p.Location, now()), p, states)
			return map[string][]live.Fragment{ui.TopicBoard: f}, err
		})
	return &site{server, hub}
}

// alone serves the surface for a person without sessions around it.
func alone(b *Board, p plant.Plant, role plant.Role) http.Handler {
	r := chi.NewRouter()
	r.Route("/board", b.Routes)
	return http.HandlerFunc(func(w http.ResponseWriter, req *http.Request) {
		f := ui.Frame{Plant: p, Now: noon}
		if role != "" {
			f.SignedIn, f.Person = true, plant.Person{ID: named(string(role)), Name: string(role), Roles: plant.Roles{role}, Active: true}
		}
		r.ServeHTTP(w, ui.WithFrame(req, f))
	})
}
