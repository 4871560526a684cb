package door

import (
	"context"
	"errors"
	"log/slog"
	"net/http"
	"net/netip"
	"net/url"
	"time"

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
	// Stay puts the end of the session off and returns when it is now.
	Stay(ctx context.Context) time.Time
}

// Handler serves the door.
type Handler struct {
	Log      *slog.Logger
	Checker  Checker
	Sessions Sessions
	// Demo lists who may be let in without a secret. It is nil unless the program
	// was started as a demonstration.
	Demo func(ctx context.Context) ([]plant.Person, error)
	// Tablet is what devices need; nil where there are none.
	Tablet *Tablet
	// First makes the first person; nil when there is somebody.
	First *First
}

// Routes adds the door's addresses to a router that loads sessions.
func (h *Handler) Routes(r chi.Router) {
	r.Get("/", ui.Handle(h.Log, h.home))
	r.Get(ui.SignInAddress, ui.Handle(h.Log, h.show))
	r.Post(ui.SignInAddress, ui.Handle(h.Log, h.signIn))
	r.Post(demoAddress, ui.Handle(h.Log, h.signInDemo))
	r.Post(ui.SignOutAddress, ui.Handle(h.Log, h.signOut))
	if h.Tablet != nil {
		r.Get(enrolAddress, ui.Handle(h.Log, h.showEnrol))
		r.Post(enrolAddress, ui.Handle(h.Log, h.enrol))
		r.Post(badgeAddress, ui.Handle(h.Log, h.signInByBadge))
		r.With(ui.RequirePerson).Post(ui.StillHereAddress, ui.Handle(h.Log, h.stillHere))
	}
	if h.First != nil {
		r.Get(firstAddress+"/{token}", ui.Handle(h.Log, h.showFirst))
		r.Post(firstAddress+"/{token}", ui.Handle(h.Log, h.makeFirst))
	}
}

const demoAddress = ui.SignInAddress + "/demo"

// longest login that is looked at; no person has one near it.
const maxLogin = 100

// home leads everybody to where their work begins.
func (h *Handler) home(w http.ResponseWriter, r *http.Request) error {
	f := ui.FrameOf(r)
	if !f.SignedIn {
		ui.Redirect(w, r, ui.DeviceHome(f.Device))
		return nil
	}
	ui.Redirect(w, r, landing(r, f.Person, "/"))
	return nil
}

func (h *Handler) show(w http.ResponseWriter, r *http.Request) error {
	if h.Tablet != nil && ui.FrameOf(r).OnTablet() && !r.URL.Query().Has("password") {
		return h.renderTablet(w, r, http.StatusOK, tabletSignIn{
			To: ui.LocalPath(r.URL.Query().Get("to")), Locked: auth.TimedOut(r.Context()) || r.URL.Query().Has("locked"),
		})
	}
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
	if f := ui.FrameOf(r); f.OnTablet() && p.May(plant.TakeRounds) {
		return "/station/" + f.Device.Station.String()
	}
	if last, ok := ui.LastStation(r); ok && home == "/station" {
		return home + "/" + last.String()
	}
	return home
}

// signOut ends the session. On a tablet the next person goes on where this one was.
func (h *Handler) signOut(w http.ResponseWriter, r *http.Request) error {
	if err := ui.ParseForm(w, r); err != nil {
		return err
	}
	if err := h.Sessions.SignOut(r.Context()); err != nil {
		return err
	}
	to := ui.SignInAddress
	if ui.FrameOf(r).OnTablet() {
		q := url.Values{"to": {ui.LocalPath(r.PostForm.Get("to"))}}
		if r.PostForm.Get("why") == "idle" {
			q.Set("locked", "yes")
		}
		to += "?" + q.Encode()
	}
	ui.Redirect(w, r, to)
	return nil
}

func (h *Handler) render(w http.ResponseWriter, r *http.Request, status int, v signIn) error {
	shell := ui.ShellFor(r, ui.Door, ui.FrameOf(r).Words.T("door.title"))
	shell.Path = ui.SignInPath(v.To)
	shell.BarEnd = ui.LanguageSwitch(shell)
	var err error
	if v.Demo, err = h.demoButtons(r); err != nil {
		return err
	}
	v.Revoked = shell.Revoked
	if h.First != nil {
		if v.Nobody, err = h.First.waits(r.Context()); err != nil {
			return err
		}
	}
	return ui.Render(w, r, status, page(shell, v))
}

// demoButtons are the people to step in as.
func (h *Handler) demoButtons(r *http.Request) ([]demoPerson, error) {
	people, err := h.demoPeople(r)
	var out []demoPerson
	for _, p := range people {
		out = append(out, demoPerson{ID: p.ID.String(), Name: p.Name, Does: does(ui.FrameOf(r).Words, p)})
	}
	return out, err
}
