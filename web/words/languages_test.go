package words_test

import (
	"fmt"
	"net/http/httptest"
	"regexp"
	"slices"
	"strings"
	"testing"

	"golang.org/x/text/feature/plural"
	"golang.org/x/text/language"

	"holdfast/web/words"
)

// shared are the packages whose words stand on every page.
var shared = []string{"ui", "words", "chart"}

// translated are the surfaces that every language speaks. Another surface follows as a
// whole: as soon as a language has one of its keys, all that its pages say is asked for.
var translated = []string{"door", "station", "account"}

// surfaces are the packages that have pages of their own.
var surfaces = []string{"door", "station", "account", "board", "desk", "admin"}

// What a page can say is what its package asks of the catalogue, in whatever file it
// stands; so a new file of words needs no entry here.
func TestEveryLanguageSaysAllThatTheStationSays(t *testing.T) {
	t.Parallel()
	uses, _ := usesIn(t, "..")
	english := words.English()
	said := map[string]map[string]string{} // by package: key, and a place that asks for it
	for _, u := range uses {
		pkg := "words"
		if u.at != "" {
			pkg, _, _ = strings.Cut(strings.TrimPrefix(u.at, "../"), "/")
		}
		for key := range english {
			if key == u.key || u.prefix && strings.HasPrefix(key, u.key) {
				if said[pkg] == nil {
					said[pkg] = map[string]string{}
				}
				said[pkg][key] = u.at
			}
		}
	}
	if len(said["station"]) < 200 || len(said["door"]) < 10 {
		t.Fatalf("only %d words of the station were found; the sources were not read", len(said["station"]))
	}
	for _, lang := range others {
		d := dictionary(t, lang)
		needed := map[string]string{}
		for _, pkg := range append(slices.Clone(shared), spokenBy(d)...) {
			for key, at := range said[pkg] {
				needed[key] = at
			}
		}
		for key, at := range needed {
			m, ok := d[key]
			if !ok {
				file, _, _ := strings.Cut(key, ".")
				t.Errorf("%s: add %q to web/words/%s/%s.json, in %s for %q", at, key, lang, file, lang, english[key].Formats()[0])
				continue
			}
			for _, fault := range append(differences(english[key], m), forms(lang, english[key], m)...) {
				t.Errorf("web/words/%s: %q: %s", lang, key, fault)
			}
		}
		for key := range d {
			if _, ok := english[key]; !ok && !strings.HasPrefix(key, "problem: ") {
				t.Errorf("web/words/%s: %q is no word of the English catalogue: remove it", lang, key)
			}
		}
	}
}

// spokenBy are the surfaces that a language speaks: those that it must, and those of
// which it has words.
func spokenBy(d words.Dictionary) []string {
	out := slices.Clone(translated)
	for _, s := range surfaces {
		for key := range d {
			if strings.HasPrefix(key, s+".") && !slices.Contains(out, s) {
				out = append(out, s)
			}
		}
	}
	return out
}

// forms says which plural forms a message lacks: those that the language has for whole
// numbers of everyday size, and the exact numbers that the English singles out.
func forms(lang string, english, other words.Message) (faults []string) {
	if english.Forms == nil {
		return nil
	}
	if other.Forms == nil {
		return []string{"it must have plural forms as the English has"}
	}
	if other.Plural != english.Plural {
		faults = append(faults, fmt.Sprintf("argument %d decides the form, in English %d", other.Plural, english.Plural))
	}
	names := map[plural.Form]string{plural.Zero: "zero", plural.One: "one", plural.Two: "two", plural.Few: "few", plural.Many: "many", plural.Other: "other"}
	for n := range 200 {
		name := names[plural.Cardinal.MatchPlural(language.MustParse(lang), n, 0, 0, 0, 0)]
		if _, ok := other.Forms[name]; !ok {
			faults = append(faults, fmt.Sprintf("the form %q is missing", name))
		}
	}
	for form := range english.Forms {
		if _, ok := other.Forms[form]; !ok && strings.HasPrefix(form, "=") {
			faults = append(faults, fmt.Sprintf("the form %q is missing", form))
		}
	}
	slices.Sort(faults)
	return slices.Compact(faults)
}

func TestTheFormsOfALanguageAreAskedFor(t *testing.T) {
	t.Parallel()
	english := words.Message{Plural: 1, Forms: map[string]string{"=0": "none", "one": "%d", "other": "%d"}}
	for _, tc := range []struct {
		lang  string
		other words.Message
		want  int
	}{
		{"de", english, 0},
		{"de", words.Message{Text: "%d"}, 1},
		{"de", words.Message{Plural: 2, Forms: map[string]string{"=0": "", "one": "", "other": ""}}, 1},
		{"es", words.Message{Plural: 1, Forms: map[string]string{"=0": "", "other": ""}}, 1},
		{"pl", english, 2}, // few and many, by Unicode CLDR
		{"de", words.Message{Plural: 1, Forms: map[string]string{"one": "", "other": ""}}, 1},
	} {
		if got := forms(tc.lang, english, tc.other); len(got) != tc.want {
			t.Errorf("%s %v: %q, want %d faults", tc.lang, tc.other, got, tc.want)
		}
	}
}

// Short words of one language that do not stand in another: two of them give away a
// sentence that was left in English, or a German one in the Spanish file. One alone may
// be quoted, such as the word that a file of characteristics must hold.
var foreign = map[string]*regexp.Regexp{
	"de": regexp.MustCompile(`(?i)\b(the|and|of|is|with|this|las|una|para)\b`),
	"es": regexp.MustCompile(`(?i)\b(the|and|of|is|was|with|this|und|der|die|das|nicht)\b`),
}

func TestNoLanguageBorrowsSentences(t *testing.T) {
	t.Parallel()
	for _, lang := range others {
		for key, m := range dictionary(t, lang) {
			for _, format := range m.Formats() {
				found := foreign[lang].FindAllString(strings.ToLower(format), -1)
				slices.Sort(found)
				if found = slices.Compact(found); len(found) > 1 {
					t.Errorf("web/words/%s: %q: %q holds %q", lang, key, format, found)
				}
			}
		}
	}
}

func TestTheLanguageOfARequest(t *testing.T) {
	t.Parallel()
	for _, tc := range []struct{ cookie, accepts, want string }{
		{"", "", "en"},
		{"", "de-AT,de;q=0.9,en;q=0.5", "de"},
		{"", "es-MX", "es"},
		{"", "ja, zh;q=0.5", "en"},
		{"", "en,de;q=0.9", "en"},
		{"es", "de", "es"}, // what was chosen here counts before what the browser asks for
		{"nonsense ;,", "de", "de"},
	} {
		r := httptest.NewRequest("GET", "/", nil)
		if tc.cookie != "" {
			r.Header.Set("Cookie", words.Cookie+"="+tc.cookie)
		}
		if tc.accepts != "" {
			r.Header.Set("Accept-Language", tc.accepts)
		}
		if got := words.From(r).Lang(); got != tc.want {
			t.Errorf("cookie %q, browser %q: %s, want %s", tc.cookie, tc.accepts, got, tc.want)
		}
	}
}

func TestASurfaceWithoutWordsOfALanguageIsEnglish(t *testing.T) {
	t.Parallel()
	for _, lang := range others {
		p, ok := words.Known(lang)
		if !ok {
			t.Fatalf("%s is not there", lang)
		}
		for _, s := range translated {
			if p.On(s) != p {
				t.Errorf("%s does not speak the %s", lang, s)
			}
		}
		if got := p.On("no-such-surface"); got != words.For("en") {
			t.Errorf("a surface without words is %s, want English", got.Lang())
		}
	}
	if _, ok := words.Known("de-AT"); ok {
		t.Error("only a language that there is exactly is known")
	}
}
