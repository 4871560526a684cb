package ui

import (
	"net/http"

	"holdfast/internal/plant"
)

// Require lets only those through who may do one of these actions. Nobody is led to
// the sign-in page and back (a script is told 401); whoever is signed in and may
// not gets 403. A wall screen sees without a person what a device may see, and is led
// back to it from everywhere else, since nobody stands there to do so.
func Require(any ...plant.Action) func(http.Handler) http.Handler {
	return func(next http.Handler) http.Handler {
		return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
			switch f := FrameOf(r); {
			case f.OnWall() && reads(r) && deviceMayAny(f.Device, any):
				next.ServeHTTP(w, r)
			case !f.SignedIn:
				signInFirst(w, r)
			case !mayAny(f.Person, any):
				Deny(w, r, http.StatusForbidden)
			default:
				next.ServeHTTP(w, r)
			}
		})
	}
}

// RequirePerson lets everybody through who is signed in.
func RequirePerson(next http.Handler) http.Handler {
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		if !FrameOf(r).SignedIn {
			signInFirst(w, r)
			return
		}
		next.ServeHTTP(w, r)
	})
}

func mayAny(p plant.Person, actions []plant.Action) bool {
	for _, a := range actions {
		if p.May(a) {
			return true
		}
	}
	return false
}

func deviceMayAny(d plant.Device, actions []plant.Action) bool {
	for _, a := range actions {
		if d.May(a) {
			return true
		}
	}
	return false
}

// reads reports whether the request asks for a page and changes nothing.
func reads(r *http.Request) bool { return r.Method == http.MethodGet || r.Method == http.MethodHead }

func signInFirst(w http.ResponseWriter, r *http.Request) {
	switch f := FrameOf(r); {
	case f.OnWall() && reads(r) && !WantsJSON(r) && !fetched(r):
		Redirect(w, r, DeviceHome(f.Device))
	case f.OnWall():
		Deny(w, r, http.StatusForbidden)
	case WantsJSON(r) || fetched(r):
		Deny(w, r, http.StatusUnauthorized)
	case reads(r):
		Redirect(w, r, SignInPath(r.URL.RequestURI()))
	default:
		Redirect(w, r, SignInPath(refererPath(r)))
	}
}
