package door

import (
	"context"
	"errors"
	"net/http"
	"net/netip"
	"net/url"

	"holdfast/internal/auth"
	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// Tablet is what enrolling a device and signing in at a tablet need.
type Tablet struct {
	Pins     PINChecker
	Sessions PINSessions
	Devices  Devices
	// Badges are those of the demonstration, shown so that they can be typed; nil
	// otherwise.
	Badges []DemoBadge
}

// PINChecker tells whose badge and PIN these are; problems come back as from Checker.
type PINChecker interface {
	CheckPIN(ctx context.Context, badge string, pin auth.Secret) (plant.Person, error)
}

// PINSessions begins a session that a PIN opened.
type PINSessions interface {
	SignInByPIN(ctx context.Context, p plant.Person) error
}

// Devices lets devices in by a code that was shown to an administrator.
type Devices interface {
	Enrol(ctx context.Context, code string, from netip.Addr) (plant.Device, string, error)
	Seat(w http.ResponseWriter, token string)
}

// DemoBadge is a badge and PIN of somebody in the demonstration.
type DemoBadge struct{ Name, Badge, PIN string }

const (
	badgeAddress = ui.SignInAddress + "/badge"
	enrolAddress = "/enrol"
)

// tabletSignIn is what the sign-in page of a tablet shows.
type tabletSignIn struct {
	Badge        string // as scanned or typed
	BadgeProblem string
	PINProblem   string
	To           string
	Locked       bool // nobody touched the tablet for a while
	Badges       []DemoBadge
}

func (h *Handler) signInByBadge(w http.ResponseWriter, r *http.Request) error {
	if err := ui.ParseForm(w, r); err != nil {
		return err
	}
	f := ui.FrameOf(r)
	if !f.OnTablet() {
		ui.Deny(w, r, http.StatusForbidden)
		return nil
	}
	typed := tabletSignIn{Badge: plant.CleanText(r.PostForm.Get("badge")), To: ui.LocalPath(r.PostForm.Get("to"))}
	pin := auth.Secret(r.PostForm.Get("pin"))
	switch {
	case typed.Badge == "":
		typed.BadgeProblem = f.Words.T("devices.no-badge")
	case len(typed.Badge) > plant.MaxBadge:
		typed.Badge, typed.BadgeProblem = "", f.Words.T("devices.long-badge")
	case pin == "":
		typed.PINProblem = f.Words.T("devices.no-pin")
	}
	if typed.BadgeProblem != "" || typed.PINProblem != "" {
		return h.renderTablet(w, r, http.StatusUnprocessableEntity, typed)
	}
	person, err := h.Tablet.Pins.CheckPIN(r.Context(), typed.Badge, pin)
	if pe, ok := errors.AsType[*plant.Error](err); ok {
		typed.PINProblem = f.Words.Problem(pe)
		status := http.StatusUnprocessableEntity
		if pe.Kind == plant.Forbidden {
			status = http.StatusTooManyRequests
		}
		return h.renderTablet(w, r, status, typed)
	}
	if err != nil {
		return err
	}
	if err := h.Tablet.Sessions.SignInByPIN(r.Context(), person); err != nil {
		return err
	}
	h.Log.InfoContext(r.Context(), "signed in", "request", f.RequestID, "person", person.ID, "device", f.Device.ID)
	ui.Redirect(w, r, landing(r, person.AtTablet(), typed.To))
	return nil
}

func (h *Handler) renderTablet(w http.ResponseWriter, r *http.Request, status int, v tabletSignIn) error {
	shell := ui.ShellFor(r, ui.Door, ui.FrameOf(r).Words.T("door.title"))
	shell.Path = ui.SignInPath(v.To)
	shell.BarEnd = ui.LanguageSwitch(shell)
	shell.Styles, shell.Scripts = []string{"css/door-tablet.css"}, []string{"js/door-pad.js"}
	// Who would step in by one click at a tablet finds that beside the password.
	people, err := h.demoPeople(r)
	if err != nil {
		return err
	}
	if len(people) > 0 {
		v.Badges = h.Tablet.Badges
	}
	return ui.Render(w, r, status, tabletPage(shell, v))
}

// stillHere keeps the session of somebody who types and sends nothing; the session
// middleware around it has noted the use. Who asks to stay is told how long the session
// goes on now, in milliseconds.
func (h *Handler) stillHere(w http.ResponseWriter, r *http.Request) error {
	w.Header().Set("Cache-Control", "no-store")
	if r.URL.Query().Has("stay") {
		return ui.RenderJSON(w, http.StatusOK, staying{h.Sessions.Stay(r.Context()).Sub(ui.FrameOf(r).Now).Milliseconds()})
	}
	w.WriteHeader(http.StatusNoContent)
	return nil
}

type staying struct {
	Left int64 `json:"left"`
}

// enrolling is what the page shows on which a device is let in.
type enrolling struct {
	Code    string // as typed
	Problem string
	Device  plant.Device // just enrolled: a sender, with its token
	Token   string
}

func (h *Handler) showEnrol(w http.ResponseWriter, r *http.Request) error {
	code := plant.CleanText(r.URL.Query().Get("code")) // from the QR code beside the digits
	if len(code) > 2*plant.CodeDigits {
		code = ""
	}
	return h.renderEnrol(w, r, http.StatusOK, enrolling{Code: code})
}

func (h *Handler) renderEnrol(w http.ResponseWriter, r *http.Request, status int, v enrolling) error {
	shell := ui.ShellFor(r, ui.Door, ui.FrameOf(r).Words.T("devices.enrol"))
	shell.Path = enrolAddress
	shell.Styles, shell.Scripts = []string{"css/door-tablet.css"}, []string{"js/door-pad.js"}
	return ui.Render(w, r, status, enrolPage(shell, v))
}

// enrolled is the answer for a program that sends a code and asks for JSON.
type enrolled struct {
	Device string `json:"device"`
	Kind   string `json:"kind"`
	Name   string `json:"name"`
	Token  string `json:"token"`
}

func (h *Handler) enrol(w http.ResponseWriter, r *http.Request) error {
	if err := ui.ParseForm(w, r); err != nil {
		return err
	}
	f := ui.FrameOf(r)
	v := enrolling{Code: plant.CleanText(r.PostForm.Get("code"))}
	status := http.StatusUnprocessableEntity
	var err error
	if v.Code == "" {
		err = plant.Invalidf("code", "%s", f.Words.T("devices.no-code"))
	} else {
		v.Device, v.Token, err = h.Tablet.Devices.Enrol(r.Context(), v.Code, f.Addr)
	}
	if pe, ok := errors.AsType[*plant.Error](err); ok {
		if ui.WantsJSON(r) {
			return err
		}
		v.Code, v.Problem = "", f.Words.Problem(pe)
		if pe.Kind == plant.Forbidden {
			status = http.StatusTooManyRequests
		}
		return h.renderEnrol(w, r, status, v)
	}
	if err != nil {
		return err
	}
	h.Log.InfoContext(r.Context(), "enrolled a device", "request", f.RequestID, "device", v.Device.ID, "kind", string(v.Device.Kind))
	switch {
	case ui.WantsJSON(r):
		return ui.RenderJSON(w, http.StatusOK, enrolled{v.Device.ID.String(), string(v.Device.Kind), v.Device.Name, v.Token})
	case v.Device.Kind == plant.Sender:
		return h.renderEnrol(w, r, http.StatusOK, v)
	}
	// Who was signed in here, perhaps to enrol it, does not stay signed in at a device.
	if err := h.Sessions.SignOut(r.Context()); err != nil {
		return err
	}
	h.Tablet.Devices.Seat(w, v.Token)
	ui.Redirect(w, r, ui.DeviceHome(v.Device))
	return nil
}

// withPassword is the sign-in by name and password at a tablet.
func withPassword(to string) string {
	return ui.SignInAddress + "?" + url.Values{"password": {"yes"}, "to": {to}}.Encode()
}
