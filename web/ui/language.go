package ui

import (
	"context"
	"net/http"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/words"
)

// Speak makes the pages of a surface speak the language of the request where that
// language has the surface's words, else English: whole pages, never mixed ones.
func Speak(s Surface) func(http.Handler) http.Handler {
	return func(next http.Handler) http.Handler {
		return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
			f := FrameOf(r)
			f.Words = f.Words.On(string(s))
			next.ServeHTTP(w, WithFrame(r, f))
		})
	}
}

// SetLanguage answers the switch. Whoever is signed in chooses for themselves, and keep
// stores it; nobody chooses for the device: an enrolled tablet's choice is stored by
// keepDevice, where the administrator sets it too, any other's in its browser. What is nil
// leaves its choice to the browser.
func SetLanguage(keep, keepDevice func(ctx context.Context, of uuid.UUID, language string) error) func(w http.ResponseWriter, r *http.Request) error {
	return func(w http.ResponseWriter, r *http.Request) error {
		if err := ParseForm(w, r); err != nil {
			return err
		}
		f := FrameOf(r)
		lang := r.PostForm.Get("language")
		if _, known := words.Known(lang); !known {
			return plant.Invalidf("language", "There is no such language here. Pick one from the list.")
		}
		switch {
		case f.SignedIn && keep != nil:
			if err := keep(r.Context(), f.Person.ID, lang); err != nil {
				return err
			}
		case !f.SignedIn && f.OnTablet() && keepDevice != nil:
			if err := keepDevice(r.Context(), f.Device.ID, lang); err != nil {
				return err
			}
		default:
			http.SetCookie(w, &http.Cookie{Name: words.Cookie, Value: lang, Path: "/", MaxAge: aYear,
				HttpOnly: true, Secure: f.Secure, SameSite: http.SameSiteLaxMode})
		}
		Redirect(w, r, LocalPath(r.PostForm.Get("to")))
		return nil
	}
}

// Language is one language, named in itself.
type Language struct{ Lang, Name string }

// Languages are those that there are.
func Languages() []Language {
	var all []Language
	for _, lang := range words.Languages() {
		all = append(all, Language{lang, words.For(lang).T("ui.language")})
	}
	return all
}
