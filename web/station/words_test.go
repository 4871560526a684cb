package station_test

import (
	"html"
	"net/http"
	"net/url"
	"regexp"
	"strings"
	"testing"

	"holdfast/web/words"
	"holdfast/web/words/wordstest"
)

// spoken finds what a reader or a screen reader is told: text, and labels in attributes.
var spoken = regexp.MustCompile(`>([^<]+)<| (?:aria-label|title|placeholder|data-say-[a-z-]+|data-done-[a-z-]+|data-heading-says|data-label)="([^"]*)"`)

// TestTheStationSpeaksFromTheCatalogueAlone shows every page in the pseudo-locale. What
// is not in its brackets must be a name of the plant's own, a unit or a number.
func TestTheStationSpeaksFromTheCatalogueAlone(t *testing.T) {
	t.Parallel()
	wordstest.Register(t)
	s := newSite(t)
	matter := s.open(t)
	hold := s.MustRecord(t, s.Force, 610, 612, 691, 611, 609, 613)
	b := s.signIn(t, s.Operator)
	at, err := url.Parse(s.url)
	if err != nil {
		t.Fatal(err)
	}
	b.HTTP.Jar.SetCookies(at, []*http.Cookie{{Name: words.Cookie, Value: wordstest.Lang, Path: "/"}})
	names := []string{"Holdfast", "Kestrel Row", s.Line.Name, s.Station.Name, s.Other.Name, s.Machine.Name, s.Second.Name, "Lathe 3", s.PartA.Name, s.PartB.Name,
		s.Diameter.Name, s.Force.Name, s.Mass.Name, s.Length.Name, s.Operator.Name, "Insert chipped", "Swarf in collet", "Not found", "mm", "kN", "g"}
	names = append(wordstest.LanguageNames(), names...)
	own := func(text string) bool {
		for _, n := range names {
			text = strings.ReplaceAll(text, n, "")
		}
		return !regexp.MustCompile(`[A-Za-z]{2}`).MatchString(text)
	}
	bad := url.Values{"round": {hold.Round.String()}, "characteristic": {s.Diameter.ID.String()}, "setup-" + s.Diameter.ID.String(): {"1"}, "reading-" + s.Diameter.ID.String(): {"x", "14.9"}}
	pages := map[string]page{"a refused round": b.post(s.at("round"), bad)}
	for _, path := range []string{
		"/station?all", s.at(), s.at() + "?measure=" + s.Diameter.ID.String(), s.at("round", hold.Round.String()), matter,
		s.at("change"), s.at("change", s.Mass.ID.String()), s.at("machine", s.Machine.ID.String()), s.at("correct"),
	} {
		pages[path] = b.get(path).is(http.StatusOK)
	}
	for name, p := range pages {
		body := p.body[strings.Index(p.body, "<body"):]
		if !strings.Contains(body, "⟦") {
			t.Errorf("%s is not in the pseudo-locale", name)
		}
		for _, m := range spoken.FindAllStringSubmatch(body, -1) {
			text := strings.TrimSpace(html.UnescapeString(m[1] + m[2]))
			if !strings.HasPrefix(text, "⟦") && !own(text) {
				t.Errorf("%s: %q bypasses the catalogue", name, text)
			}
		}
	}
}
