package account

import (
	"context"
	"log/slog"
	"net/http"
	"net/netip"
	"net/url"

	"github.com/go-chi/chi/v5"
	"github.com/google/uuid"

	"holdfast/internal/auth"
	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// Store is what the page needs of the plant's record.
type Store interface {
	Person(ctx context.Context, id uuid.UUID) (plant.Person, error)
	Devices(ctx context.Context) ([]plant.Device, error)
	SetSecret(ctx context.Context, id uuid.UUID, secretHash string, by uuid.UUID) error
	SetPIN(ctx context.Context, id uuid.UUID, pinHash string, by uuid.UUID) error
}

// Checker tells whose a login and a secret, or a badge and a PIN, are; both slow guessing
// down as at the sign-in page.
type Checker interface {
	Check(ctx context.Context, login string, s auth.Secret, from netip.Addr) (plant.Person, error)
	CheckPIN(ctx context.Context, badge string, pin auth.Secret) (plant.Person, error)
}

// Sessions knows where somebody is signed in, ends one of these sessions, and lets the
// session of a request go on under a new token.
type Sessions interface {
	ui.Stays
	Renew(ctx context.Context) error
}

// Deps is what the page works with.
type Deps struct {
	Store    Store
	Checker  Checker
	Sessions Sessions
	Hash     func(ctx context.Context, s auth.Secret) (string, error)
	// Changed is told of a person whose secrets were changed here.
	Changed func(person uuid.UUID)
	Log     *slog.Logger
}

// Surface serves /account, for whoever is signed in.
type Surface struct{ Deps }

// New makes the surface.
func New(d Deps) *Surface { return &Surface{d} }

// Routes adds the addresses under /account.
func (s *Surface) Routes(r chi.Router) {
	r.Get("/", ui.Handle(s.Log, s.show))
	r.Post("/password", ui.Handle(s.Log, s.changePassword))
	r.Post("/pin", ui.Handle(s.Log, s.changePIN))
	r.Post("/end", ui.Handle(s.Log, s.end))
}

func (s *Surface) show(w http.ResponseWriter, r *http.Request) error {
	v := view{Back: ui.LocalPath(r.URL.Query().Get("to"))}
	t := ui.FrameOf(r).Words
	switch r.URL.Query().Get("done") {
	case "password":
		v.Done = t.T("account.done-password")
	case "pin":
		v.Done = t.T("account.done-pin")
	case "end":
		v.Done = t.T("account.done-end")
	}
	p, err := s.Store.Person(r.Context(), ui.FrameOf(r).Person.ID)
	if err != nil {
		return err
	}
	return s.render(w, r, http.StatusOK, p, v)
}

// done lets the session go on after a change and leads back to the page.
func (s *Surface) done(w http.ResponseWriter, r *http.Request, person uuid.UUID, what, back string) error {
	s.Changed(person)
	// Only now: a session that began before the change is over.
	if err := s.Sessions.Renew(r.Context()); err != nil {
		return err
	}
	ui.Redirect(w, r, ui.AccountAddress+"?"+url.Values{"done": {what}, "to": {back}}.Encode())
	return nil
}

// end ends one session of whoever asks.
func (s *Surface) end(w http.ResponseWriter, r *http.Request) error {
	if err := ui.ParseForm(w, r); err != nil {
		return err
	}
	if err := s.Sessions.End(r.Context(), ui.FrameOf(r).Person.ID, r.PostForm.Get("session")); err != nil {
		return err
	}
	ui.Redirect(w, r, ui.AccountAddress+"?"+url.Values{"done": {"end"}, "to": {ui.LocalPath(r.PostForm.Get("to"))}}.Encode())
	return nil
}
