package web_test

import (
	"context"
	"net/http"
	"net/url"
	"strings"
	"sync"
	"testing"

	"github.com/google/uuid"

	"holdfast/internal/auth"
	"holdfast/internal/plant"
	"holdfast/web"
	"holdfast/web/webtest"
)

// speaks is the language that an answer says it is in.
func speaks(a webtest.Answer) string {
	_, rest, _ := strings.Cut(a.Text, `<html lang="`)
	lang, _, _ := strings.Cut(rest, `"`)
	return lang
}

func TestLanguageIsChosenByDeviceAndByPerson(t *testing.T) {
	t.Parallel()
	var f *fixture
	var mu sync.Mutex
	f = newFixture(t, func(c *web.Config) {
		c.SetLanguage = func(_ context.Context, person uuid.UUID, language string) error {
			defer c.Sessions.(*auth.Sessions).Forget(person)
			mu.Lock()
			defer mu.Unlock()
			for i, p := range f.people {
				if p.ID == person {
					f.people[i].Language = language
				}
			}
			return nil
		}
	})
	tablet := f.visitor(t, "")
	german := []string{"Accept-Language", "de-DE,de;q=0.9"}
	at := func(path string, headers ...string) webtest.Answer {
		return tablet.Do(tablet.Request("GET", path, nil, headers...))
	}
	choose := func(lang, want string) {
		t.Helper()
		res := tablet.Post("/language", url.Values{"language": {lang}, "to": {"/sign-in?to=%2Fboard"}})
		if res.StatusCode != http.StatusSeeOther || res.Header.Get("Location") != want {
			t.Fatalf("choosing %s: %d to %q, want to %q", lang, res.StatusCode, res.Header.Get("Location"), want)
		}
	}
	if got := speaks(at("/sign-in")); got != "en" {
		t.Errorf("nothing chosen: %s", got)
	}
	if got := at("/sign-in", german...); speaks(got) != "de" || !strings.Contains(got.Text, "Anmelden") {
		t.Errorf("a German browser: %s", speaks(got))
	}
	choose("es", "/sign-in?to=%2Fboard")
	if got := at("/sign-in", german...); speaks(got) != "es" || !strings.Contains(got.Text, `lang="de"`) {
		t.Errorf("a device set to Spanish: %s", speaks(got))
	}

	// Who signs in and has chosen nothing gets the language of the device; their own
	// choice is theirs and leaves the device as it is.
	if res := tablet.Post("/sign-in", url.Values{"login": {"supervisor"}, "password": {"right"}}); res.StatusCode != http.StatusSeeOther {
		t.Fatalf("signing in: %d", res.StatusCode)
	}
	if got := at("/station"); speaks(got) != "es" || !strings.Contains(got.Text, "Idioma: Español") {
		t.Errorf("a person without a choice: %s", speaks(got))
	}
	choose("de", "/sign-in?to=%2Fboard")
	page := at("/station")
	if speaks(page) != "de" {
		t.Errorf("a person who chose German: %s", speaks(page))
	}
	// Surfaces that are not said in a language are English as a whole.
	if got := at("/board"); speaks(got) != "en" || strings.Contains(got.Text, "Abmelden") || !strings.Contains(got.Text, "Sign out") {
		t.Errorf("the board of a German person: %s", speaks(got))
	}
	if got := at("/nowhere"); got.StatusCode != http.StatusNotFound || speaks(got) != "de" || !strings.Contains(got.Text, "Hier ist nichts") {
		t.Errorf("a page that is not there: %d %s", got.StatusCode, speaks(got))
	}
	if res := tablet.Post("/sign-out", nil); res.StatusCode != http.StatusSeeOther {
		t.Fatalf("signing out: %d", res.StatusCode)
	}
	if got := speaks(at("/sign-in")); got != "es" {
		t.Errorf("the device after a German person: %s", got)
	}
	for _, lang := range []string{"", "xx", "de-AT", "../en"} {
		if res := tablet.Post("/language", url.Values{"language": {lang}}); res.StatusCode != http.StatusUnprocessableEntity || len(res.Cookies()) != 0 {
			t.Errorf("language %q: %d, cookies %v", lang, res.StatusCode, res.Cookies())
		}
	}
}

func TestLanguageWithoutAStoreStaysInTheBrowser(t *testing.T) {
	t.Parallel()
	f := newFixture(t, nil)
	v := f.visitor(t, plant.Operator)
	v.Post("/language", url.Values{"language": {"de"}})
	if got := speaks(v.Get("/station")); got != "de" {
		t.Errorf("got %s", got)
	}
}
