// Package webtest serves surfaces to tests as the program does, behind the real router
// with real sessions and a real hub, and visits them as a browser without scripts does.
package webtest

import (
	"bytes"
	"cmp"
	"context"
	"log/slog"
	"net/http/httptest"
	"net/netip"
	"testing"

	"github.com/alexedwards/scs/v2/memstore"
	"github.com/google/uuid"

	"holdfast/internal/auth"
	"holdfast/internal/live"
	"holdfast/internal/plant"
	"holdfast/web"
)

// Password is everybody's.
const Password = "right"

var errSecret = plant.Invalidf("password", "Name or password is wrong. Type them again.")

// People are kept in memory.
type People []plant.Person

// OneOfEach is a person of each role, who signs in with its name.
func OneOfEach() People {
	all := make(People, len(plant.AllRoles))
	for i, r := range plant.AllRoles {
		all[i] = plant.Person{ID: uuid.NewSHA1(uuid.Nil, []byte(r)), Login: string(r), Name: string(bytes.ToUpper([]byte(r[:1]))) + string(r[1:]) + " 1",
			Roles: plant.Roles{r}, Active: true}
	}
	return all
}

// Person is one of them, as sessions ask for.
func (p People) Person(_ context.Context, id uuid.UUID) (plant.Person, error) {
	for _, one := range p {
		if one.ID == id {
			return one, nil
		}
	}
	return plant.Person{}, &plant.Error{Kind: plant.NotFound, Message: "There is no such person."}
}

// Check lets those in who know Password.
func (p People) Check(_ context.Context, login string, s auth.Secret, _ netip.Addr) (plant.Person, error) {
	for _, one := range p {
		if one.Login == plant.CleanLogin(login) && string(s) == Password {
			return one, nil
		}
	}
	return plant.Person{}, errSecret
}

// Recorded are the people of a store; here too everybody's password is Password.
type Recorded struct{ Store credentials }

type credentials interface {
	Credential(ctx context.Context, login string) (plant.Person, string, error)
}

// Check lets those in who know Password.
func (r Recorded) Check(ctx context.Context, login string, s auth.Secret, _ netip.Addr) (plant.Person, error) {
	p, _, err := r.Store.Credential(ctx, login)
	if err != nil || string(s) != Password {
		return plant.Person{}, errSecret
	}
	return p, nil
}

// Log is a log whose warnings and errors stand in the test's.
func Log(t testing.TB) *slog.Logger {
	return slog.New(slog.NewTextHandler(logWriter{t}, &slog.HandlerOptions{Level: slog.LevelWarn}))
}

type logWriter struct{ t testing.TB }

func (w logWriter) Write(p []byte) (int, error) {
	w.t.Logf("%s", bytes.TrimSpace(p))
	return len(p), nil
}

// Serve serves what a configuration names until the test ends. It adds sessions, which are
// kept in memory, and a hub; without a renderer nothing is pushed.
func Serve(t testing.TB, c *web.Config, people auth.People, render live.Renderer) (*httptest.Server, *live.Hub) {
	t.Helper()
	c.Log = cmp.Or(c.Log, slog.New(slog.DiscardHandler))
	if render == nil {
		render = func(context.Context, []string) (map[string][]live.Fragment, error) { return nil, nil }
	}
	hub := live.New(render, live.Options{Log: c.Log})
	sessions := auth.NewSessions(auth.SessionOptions{Store: memstore.NewWithCleanupInterval(0), People: people, PlainHTTP: true, Log: c.Log,
		Fail: web.SessionFault(c.Log), OnEnd: func(session string) { hub.Drop(session, live.SessionEnded) }})
	c.Hub, c.Sessions = hub, sessions
	server := httptest.NewServer(web.New(*c))
	t.Cleanup(func() {
		if err := hub.Close(context.Background()); err != nil { // first: it ends what the server would wait for
			t.Error(err)
		}
		server.Close()
		sessions.Close()
	})
	return server, hub
}
