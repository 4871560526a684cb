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
)

// speaks is the language that an answer says it is in.
func (a answer) speaks() string {
	_, rest, _ := strings.Cut(a.text, `<html lang="`)
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
			for i, p := range f.people.all {
				if p.ID == person {
					f.people.all[i].Language = language
				}
			}
			return nil
		}
	})
	tablet := f.visitor(t, "")
	german := []string{"Accept-Language", "de-DE,de;q=0.9"}
	at := func(path string, headers ...string) answer {
		return tablet.do(tablet.request("GET", path, nil, headers...))
	}
	choose := func(lang, want string) {
		t.Helper()
		res := tablet.post("/language", url.Values{"language": {lang}, "to": {"/sign-in?to=%2Fboard"}})
		if res.StatusCode != http.StatusSeeOther || res.Header.Get("Location") != want {
			t.Fatalf("choosing %s: %d to %q, want to %q", lang, res.StatusCode, res.Header.Get("Location"), want)
		}
	}
	if got := at("/sign-in").speaks(); got != "en" {
		t.Errorf("nothing chosen: %s", got)
	}
	if got := at("/sign-in", german...); got.speaks() != "de" || !strings.Contains(got.text, "Anmelden") {
		t.Errorf("a German browser: %s", got.speaks())
	}
	choose("es", "/sign-in?to=%2Fboard")
	if got := at("/sign-in", german...); got.speaks() != "es" || !strings.Contains(got.text, `lang="de"`) {
		t.Errorf("a device set to Spanish: %s", got.speaks())
	}

	// Who signs in and has chosen nothing gets the language of the device; their own
	// choice is theirs and leaves the device as it is.
	if res := tablet.post("/sign-in", url.Values{"login": {"supervisor"}, "password": {"right"}}); res.StatusCode != http.StatusSeeOther {
		t.Fatalf("signing in: %d", res.StatusCode)
	}
	if got := at("/station"); got.speaks() != "es" || !strings.Contains(got.text, "Idioma: Español") {
		t.Errorf("a person without a choice: %s", got.speaks())
	}
	choose("de", "/sign-in?to=%2Fboard")
	page := at("/station")
	if page.speaks() != "de" {
		t.Errorf("a person who chose German: %s", page.speaks())
	}
	// Surfaces that are not said in a language are English as a whole.
	if got := at("/board"); got.speaks() != "en" || strings.Contains(got.text, "Abmelden") || !strings.Contains(got.text, "Sign out") {
		t.Errorf("the board of a German person: %s", got.speaks())
	}
	if got := at("/nowhere"); got.StatusCode != http.StatusNotFound || got.speaks() != "de" || !strings.Contains(got.text, "Hier ist nichts") {
		t.Errorf("a page that is not there: %d %s", got.StatusCode, got.speaks())
	}
	if res := tablet.post("/sign-out", nil); res.StatusCode != http.StatusSeeOther {
		t.Fatalf("signing out: %d", res.StatusCode)
	}
	if got := at("/sign-in").speaks(); got != "es" {
		t.Errorf("the device after a German person: %s", got)
	}
	for _, lang := range []string{"", "xx", "de-AT", "../en"} {
		if res := tablet.post("/language", url.Values{"language": {lang}}); res.StatusCode != http.StatusUnprocessableEntity || len(res.Cookies()) != 0 {
			t.Errorf("language %q: %d, cookies %v", lang, res.StatusCode, res.Cookies())
		}
	}
}

func TestLanguageWithoutAStoreStaysInTheBrowser(t *testing.T) {
	t.Parallel()
	f := newFixture(t, nil)
	v := f.visitor(t, plant.Operator)
	v.post("/language", url.Values{"language": {"de"}})
	if got := v.get("/station").speaks(); got != "de" {
		t.Errorf("got %s", got)
	}
}
