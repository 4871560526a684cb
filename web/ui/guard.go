package ui

import (
	"net/http"

	"holdfast/internal/plant"
)

// Require lets only those through who may do one of these actions. Nobody is led to
// the sign-in page and back (a script is told 401); whoever is signed in and may
// not gets 403.
func Require(any ...plant.Action) func(http.Handler) http.Handler {
	return func(next http.Handler) http.Handler {
		return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
			switch f := FrameOf(r); {
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

func signInFirst(w http.ResponseWriter, r *http.Request) {
	switch {
	case wantsJSON(r) || fetched(r):
		Deny(w, r, http.StatusUnauthorized)
	case r.Method == http.MethodGet || r.Method == http.MethodHead:
		Redirect(w, r, SignInPath(r.URL.RequestURI()))
	default:
		Redirect(w, r, SignInPath(refererPath(r)))
	}
}
