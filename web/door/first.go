package door

import (
	"context"
	"crypto/rand"
	"crypto/subtle"
	"errors"
	"net/http"
	"sync"

	"github.com/go-chi/chi/v5"
	"github.com/google/uuid"

	"holdfast/internal/auth"
	"holdfast/internal/plant"
	"holdfast/web/ui"
)

const (
	firstAddress = "/set-up"
	afterFirst   = "/admin/start" // the guided first run
)

// First makes the first person of an empty plant, for whoever has the address that was
// printed when the program started. The address works until it was used once, until there
// is somebody by another way, or until the program ends, and only where nobody listens in between: on this machine or over https.
type First struct {
	// Add adds the person and refuses with plant.Conflict when there is anybody.
	Add func(ctx context.Context, p plant.Person, s auth.Secret) error
	// Nobody reports that there is nobody yet: somebody may have been added on the command
	// line or by another server.
	Nobody func(ctx context.Context) (bool, error)

	token string
	mu    sync.Mutex
	used  bool
}

// NewFirst draws the address.
func NewFirst(add func(ctx context.Context, p plant.Person, s auth.Secret) error, nobody func(ctx context.Context) (bool, error)) *First {
	return &First{Add: add, Nobody: nobody, token: rand.Text()}
}

// Path is the address, to be printed once.
func (f *First) Path() string { return firstAddress + "/" + f.token }

// waits reports whether there is still nobody, so that the address works.
func (f *First) waits(ctx context.Context) (bool, error) {
	f.mu.Lock()
	defer f.mu.Unlock()
	return f.open(ctx)
}

// open is waits for whoever holds the lock.
func (f *First) open(ctx context.Context) (bool, error) {
	if !f.used {
		nobody, err := f.Nobody(ctx)
		if err != nil {
			return false, err
		}
		f.used = !nobody // for good: people are kept out, never removed
	}
	return !f.used, nil
}

// admits answers a request that must not be here, and reports whether it may go on. The
// caller holds the lock.
func (f *First) admits(r *http.Request) error {
	frame := ui.FrameOf(r)
	open, err := f.open(r.Context())
	if err != nil {
		return err
	}
	switch {
	case !open || subtle.ConstantTimeCompare([]byte(chi.URLParam(r, "token")), []byte(f.token)) != 1:
		return &plant.Error{Kind: plant.NotFound, Message: frame.Words.T("devices.first-gone")}
	case !frame.Secure && !frame.Addr.Unmap().IsLoopback():
		return &plant.Error{Kind: plant.Forbidden, Message: frame.Words.T("devices.first-where")}
	}
	return nil
}

// firstPerson is what the page shows.
type firstPerson struct {
	Name, Login                              string
	NameProblem, LoginProblem, SecretProblem string
	RolesProblem                             string
	Roles                                    []roleChoice
	Problem                                  string
}

type roleChoice struct {
	Role, Name, Does string
	Chosen           bool
}

func firstRoles(r *http.Request, chosen plant.Roles) []roleChoice {
	w := ui.FrameOf(r).Words
	var out []roleChoice
	for _, role := range plant.AllRoles {
		out = append(out, roleChoice{string(role), w.T("account.role." + string(role)), w.T("devices.role." + string(role)), chosen.Has(role)})
	}
	return out
}

func (h *Handler) showFirst(w http.ResponseWriter, r *http.Request) error {
	h.First.mu.Lock()
	err := h.First.admits(r)
	h.First.mu.Unlock()
	if err != nil {
		return err
	}
	return h.renderFirst(w, r, http.StatusOK, firstPerson{Roles: firstRoles(r, plant.AllRoles)})
}

func (h *Handler) renderFirst(w http.ResponseWriter, r *http.Request, status int, v firstPerson) error {
	shell := ui.ShellFor(r, ui.Door, ui.FrameOf(r).Words.T("devices.first"))
	shell.Path = "/"
	shell.Styles = []string{"css/door-tablet.css"}
	return ui.Render(w, r, status, firstPage(shell, v, r.URL.Path))
}

func (h *Handler) makeFirst(w http.ResponseWriter, r *http.Request) error {
	if err := ui.ParseForm(w, r); err != nil {
		return err
	}
	h.First.mu.Lock()
	defer h.First.mu.Unlock()
	if err := h.First.admits(r); err != nil {
		return err
	}
	t := ui.FrameOf(r).Words
	p := plant.Person{ID: uuid.Must(uuid.NewV7()), Login: plant.CleanLogin(plant.CleanText(r.PostForm.Get("login"))),
		Name: plant.CleanText(r.PostForm.Get("name")), Active: true}
	for _, role := range r.PostForm["role"] {
		p.Roles = append(p.Roles, plant.Role(role))
	}
	v := firstPerson{Name: p.Name, Login: p.Login, Roles: firstRoles(r, p.Roles)}
	secret := auth.Secret(r.PostForm.Get("password"))
	if p.Name == "" || len(p.Name) > maxLogin {
		v.NameProblem = t.T("devices.first-no-name")
	}
	if p.Login == "" || len(p.Login) > maxLogin {
		v.LoginProblem = t.T("devices.first-no-login")
	}
	if !p.Roles.Has(plant.Administrator) {
		v.RolesProblem = t.T("devices.first-administrator")
	}
	if pe, ok := errors.AsType[*plant.Error](auth.Rules{}.Check(secret, p.Login, p.Name)); ok {
		v.SecretProblem = t.Problem(pe)
	} else if r.PostForm.Get("again") != string(secret) {
		v.SecretProblem = t.T("devices.not-the-same")
	}
	if v.NameProblem+v.LoginProblem+v.RolesProblem+v.SecretProblem != "" {
		return h.renderFirst(w, r, http.StatusUnprocessableEntity, v)
	}
	if err := h.First.Add(r.Context(), p, secret); err != nil {
		if pe, ok := errors.AsType[*plant.Error](err); ok {
			v.Problem = t.Problem(pe)
			return h.renderFirst(w, r, ui.StatusOf(pe.Kind), v)
		}
		return err
	}
	h.First.used = true
	if err := h.Sessions.SignIn(r.Context(), p); err != nil {
		return err
	}
	ui.Redirect(w, r, afterFirst)
	return nil
}
