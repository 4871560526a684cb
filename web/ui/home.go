package ui

import (
	"net/http"
	"strings"

	"github.com/google/uuid"

	"holdfast/internal/plant"
)

// Home is where a person's work begins.
func Home(p plant.Person) string {
	switch {
	case p.Roles.Has(plant.Supervisor):
		return "/board"
	case p.Roles.Has(plant.Engineer):
		return "/desk"
	case p.Roles.Has(plant.Operator):
		return "/station"
	}
	return "/admin"
}

// DeviceHome is what a device shows when nobody is signed in at it.
func DeviceHome(d plant.Device) string {
	switch {
	case d.Kind == plant.Wall && d.Line != uuid.Nil:
		return "/board?line=" + d.Line.String()
	case d.Kind == plant.Wall:
		return "/board"
	}
	return SignInAddress
}

const stationCookie = "station"

// RememberStation keeps in the browser which station it stands at, so that whoever
// signs in there next lands on its page.
func RememberStation(w http.ResponseWriter, r *http.Request, id uuid.UUID) {
	if last, ok := LastStation(r); ok && last == id {
		return
	}
	http.SetCookie(w, &http.Cookie{Name: stationCookie, Value: id.String(), Path: "/", MaxAge: aYear,
		HttpOnly: true, Secure: FrameOf(r).Secure, SameSite: http.SameSiteLaxMode})
}

// LastStation is the station that this browser stood at. It may be gone since.
func LastStation(r *http.Request) (uuid.UUID, bool) {
	c, err := r.Cookie(stationCookie)
	if err != nil {
		return uuid.Nil, false
	}
	id, err := uuid.Parse(c.Value)
	return id, err == nil && id != uuid.Nil
}

// surfaceActions says what somebody must be allowed to do to open anything of a
// surface at all; single pages may ask for more. The router guards by it.
var surfaceActions = map[Surface]plant.Action{
	Station: plant.TakeRounds,
	Board:   plant.SeeBoard,
	Desk:    plant.SeeDesk,
	Admin:   plant.ArrangePlant, // people and the installation ask for plant.Manage
	Calls:   plant.AnswerCalls,
}

// ActionFor is what somebody must be allowed to do to open a surface.
func ActionFor(s Surface) plant.Action { return surfaceActions[s] }

// MayOpen reports whether a local path leads into a surface that is open to the
// person.
func MayOpen(p plant.Person, path string) bool {
	first, _, _ := strings.Cut(strings.TrimPrefix(path, "/"), "/")
	first, _, _ = strings.Cut(first, "?")
	action, ok := surfaceActions[Surface(first)]
	return ok && p.May(action)
}
