package ui

import (
	"net/http"
	"regexp"
)

// TypedScript keeps what is typed into forms with data-typed until it was taken. Pages of
// the station have it all; another page adds it to its scripts, and so must the page that
// one is led to after sending.
const TypedScript = "js/typed.js"

const typedCookie = "typed-taken"

var typedNumber = regexp.MustCompile(`^[0-9a-f]{24}$`)

// tellTaken names, for the script, the draft that a form was sent from, in the answer that
// leads on because the form was taken. A form that was refused is shown again, and one that
// came without a session is never read, so neither says so.
func tellTaken(w http.ResponseWriter, r *http.Request) {
	if n := r.PostForm.Get("typed"); typedNumber.MatchString(n) {
		http.SetCookie(w, &http.Cookie{Name: typedCookie, Value: n, Path: "/", MaxAge: 24 * 60 * 60,
			Secure: FrameOf(r).Secure, SameSite: http.SameSiteLaxMode}) // read by the script, so not HttpOnly
	}
}
