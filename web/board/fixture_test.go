package board

import (
	"context"
	"log/slog"
	"net/http"
	"net/http/httptest"
	"net/netip"
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
	"holdfast/web/words"
)

// people all have the password "right".
type people []plant.Person

func newPeople() people {
	var all people
	for _, r := range plant.AllRoles {
		all = append(all, plant.Person{ID: named(string(r)), Login: string(r), Name: map[plant.Role]string{
			plant.Operator: "Operator 1", plant.Supervisor: "Supervisor 1", plant.Engineer: "Engineer 1", plant.Administrator: "Administrator 1",
		}[r], Roles: plant.Roles{r}, Active: true})
	}
	return all
}

func (p people) Person(_ context.Context, id uuid.UUID) (plant.Person, error) {
	for _, one := range p {
		if one.ID == id {
			return one, nil
		}
	}
	return plant.Person{}, &plant.Error{Kind: plant.NotFound, Message: "There is no such person."}
}

func (p people) Check(_ context.Context, login string, s auth.Secret, _ netip.Addr) (plant.Person, error) {
	for _, one := range p {
		if one.Login == plant.CleanLogin(login) && string(s) == "right" {
			return one, nil
		}
	}
	return plant.Person{}, plant.Invalidf("password", "Name or password is wrong.")
}

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
	hub := live.New(func(ctx context.Context, topics []string) (map[string][]live.Fragment, error) {
		states, err := record.StationStates(ctx, 25)
		if err != nil {
			return nil, err
		}
		f, err := Fragments(ui.NewFormat(words.For("en"), p.Location, now()), p, states)
		return map[string][]live.Fragment{ui.TopicBoard: f}, err
	}, live.Options{Log: log})
	all := newPeople()
	sessions := auth.NewSessions(auth.SessionOptions{Store: memstore.NewWithCleanupInterval(0), People: all, PlainHTTP: true, Log: log, Fail: web.SessionFault(log)})
	handler := web.New(web.Config{Log: log, Now: now, Sessions: sessions, Checker: all, Hub: hub,
		Plant: func() plant.Plant { return p }, Board: New(Deps{Store: record, Log: log})})
	s := &site{httptest.NewServer(handler), hub}
	t.Cleanup(func() {
		if err := hub.Close(context.Background()); err != nil {
			t.Error(err)
		}
		s.Server.Close()
		sessions.Close()
	})
	return s
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
