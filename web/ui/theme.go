package ui

import (
	"net/http"
)

// Theme is day (warm paper grey) or night (slate, for dim halls and wall screens).
type Theme string

const (
	Day   Theme = "day"
	Night Theme = "night"
)

const (
	themeCookie = "theme"
	aYear       = 365 * 24 * 60 * 60
)

// ThemeOf reads the theme that this browser has chosen, Day when it has not.
func ThemeOf(r *http.Request) Theme {
	if c, err := r.Cookie(themeCookie); err == nil && Theme(c.Value) == Night {
		return Night
	}
	return Day
}

// Other is the theme that the switch leads to.
func (t Theme) Other() Theme {
	if t == Night {
		return Day
	}
	return Night
}

// SetTheme answers the switch: it keeps the choice in the browser and leads back to
// the page.
func SetTheme(w http.ResponseWriter, r *http.Request) error {
	if err := ParseForm(w, r); err != nil {
		return err
	}
	t := Theme(r.PostForm.Get("theme"))
	if t != Night {
		t = Day
	}
	http.SetCookie(w, &http.Cookie{Name: themeCookie, Value: string(t), Path: "/", MaxAge: aYear,
		HttpOnly: true, Secure: FrameOf(r).Secure, SameSite: http.SameSiteLaxMode})
	Redirect(w, r, LocalPath(r.PostForm.Get("to")))
	return nil
}
