package door

import (
	"context"
	"errors"
	"log/slog"
	"net/http"
	"net/netip"

	"github.com/go-chi/chi/v5"

	"holdfast/internal/auth"
	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// Checker tells who a login and a secret belong to. What is wrong with them comes
// back as *plant.Error: Invalid for a wrong login or secret, Forbidden while too
// many tries ask for a pause.
type Checker interface {
	Check(ctx context.Context, login string, s auth.Secret, from netip.Addr) (plant.Person, error)
}

// Sessions begins and ends the session of a browser.
type Sessions interface {
	SignIn(ctx context.Context, p plant.Person) error
	SignOut(ctx context.Context) error
}

// Handler serves the door.
type Handler struct {
	Log      *slog.Logger
	Checker  Checker
	Sessions Sessions
	// Demo lists who may be let in without a secret. It is nil unless the program
	// was started as a demonstration.
	Demo func(ctx context.Context) ([]plant.Person, error)
}

// Routes adds the door's addresses to a router that loads sessions.
func (h *Handler) Routes(r chi.Router) {
	r.Get("/", ui.Handle(h.Log, h.home))
	r.Get(ui.SignInAddress, ui.Handle(h.Log, h.show))
	r.Post(ui.SignInAddress, ui.Handle(h.Log, h.signIn))
	r.Post(demoAddress, ui.Handle(h.Log, h.signInDemo))
	r.Post(ui.SignOutAddress, ui.Handle(h.Log, h.signOut))
}

const demoAddress = ui.SignInAddress + "/demo"

// longest login that is looked at; no person has one near it.
const maxLogin = 100

// home leads everybody to where their work begins.
func (h *Handler) home(w http.ResponseWriter, r *http.Request) error {
	f := ui.FrameOf(r)
	if !f.SignedIn {
		ui.Redirect(w, r, ui.SignInAddress)
		return nil
	}
	ui.Redirect(w, r, ui.Home(f.Person))
	return nil
}

func (h *Handler) show(w http.ResponseWriter, r *http.Request) error {
	return h.render(w, r, http.StatusOK, signIn{
		To:       ui.LocalPath(r.URL.Query().Get("to")),
		TimedOut: auth.TimedOut(r.Context()),
	})
}

func (h *Handler) signIn(w http.ResponseWriter, r *http.Request) error {
	if err := ui.ParseForm(w, r); err != nil {
		return err
	}
	typed := signIn{Login: plant.CleanText(r.PostForm.Get("login")), To: ui.LocalPath(r.PostForm.Get("to"))}
	secret := auth.Secret(r.PostForm.Get("password"))
	words := ui.FrameOf(r).Words
	switch {
	case typed.Login == "":
		typed.LoginProblem = words.T("door.no-login")
	case len(typed.Login) > maxLogin:
		typed.Login, typed.LoginProblem = "", words.T("door.long-login")
	case secret == "":
		typed.PasswordProblem = words.T("door.no-password")
	}
	if typed.LoginProblem != "" || typed.PasswordProblem != "" {
		return h.render(w, r, http.StatusUnprocessableEntity, typed)
	}
	person, err := h.Checker.Check(r.Context(), typed.Login, secret, ui.FrameOf(r).Addr)
	if pe, ok := errors.AsType[*plant.Error](err); ok {
		typed.PasswordProblem = words.Problem(pe)
		status := http.StatusUnprocessableEntity
		if pe.Kind == plant.Forbidden {
			status = http.StatusTooManyRequests
		}
		return h.render(w, r, status, typed)
	}
	if err != nil {
		return err
	}
	return h.enter(w, r, person, typed.To)
}

func (h *Handler) signInDemo(w http.ResponseWriter, r *http.Request) error {
	if err := ui.ParseForm(w, r); err != nil {
		return err
	}
	people, err := h.demoPeople(r)
	if err != nil {
		return err
	}
	for _, p := range people {
		if p.ID.String() == r.PostForm.Get("person") {
			return h.enter(w, r, p, ui.LocalPath(r.PostForm.Get("to")))
		}
	}
	return &plant.Error{Kind: plant.NotFound, Message: ui.FrameOf(r).Words.T("door.no-such-demo")}
}

// demoPeople lists who may come in by one click in this request: nobody, mostly.
func (h *Handler) demoPeople(r *http.Request) ([]plant.Person, error) {
	f := ui.FrameOf(r)
	if h.Demo == nil || !f.Plant.Demo || !f.Addr.Unmap().IsLoopback() {
		return nil, nil
	}
	people, err := h.Demo(r.Context())
	if err != nil {
		return nil, err
	}
	active := people[:0:0]
	for _, p := range people {
		if p.Active {
			active = append(active, p)
		}
	}
	return active, nil
}

// enter begins the session and leads on: to the page that was asked for if this
// person may see it at all, else to where their work begins.
func (h *Handler) enter(w http.ResponseWriter, r *http.Request, p plant.Person, to string) error {
	if err := h.Sessions.SignIn(r.Context(), p); err != nil {
		return err
	}
	h.Log.InfoContext(r.Context(), "signed in", "request", ui.FrameOf(r).RequestID, "person", p.ID)
	ui.Redirect(w, r, landing(r, p, to))
	return nil
}

// landing is the page after signing in. A page of a surface that is closed to this
// person is not gone back to: it was somebody else's.
func landing(r *http.Request, p plant.Person, to string) string {
	if to != "/" && ui.MayOpen(p, to) {
		return to
	}
	home := ui.Home(p)
	if last, ok := ui.LastStation(r); ok && home == "/station" {
		return home + "/" + last.String()
	}
	return home
}

func (h *Handler) signOut(w http.ResponseWriter, r *http.Request) error {
	if err := h.Sessions.SignOut(r.Context()); err != nil {
		return err
	}
	ui.Redirect(w, r, ui.SignInAddress)
	return nil
}

func (h *Handler) render(w http.ResponseWriter, r *http.Request, status int, v signIn) error {
	people, err := h.demoPeople(r)
	if err != nil {
		return err
	}
	shell := ui.ShellFor(r, ui.Door, ui.FrameOf(r).Words.T("door.title"))
	shell.Path = ui.SignInPath(v.To)
	for _, p := range people {
		v.Demo = append(v.Demo, demoPerson{ID: p.ID.String(), Name: p.Name, Does: does(shell.Words, p)})
	}
	return ui.Render(w, r, status, page(shell, v))
}
