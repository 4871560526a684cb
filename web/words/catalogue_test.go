package words_test

import (
	"strings"
	"sync"
	"testing"
	"testing/fstest"

	"holdfast/internal/plant"
	"holdfast/internal/spc/watch"
	"holdfast/web/words"
	"holdfast/web/words/wordstest"
)

func TestFilesWithMistakesAreRefused(t *testing.T) {
	t.Parallel()
	for name, tc := range map[string]struct{ text, says string }{
		"a key twice":              {`{"x.a": "one", "x.a": "two"}`, "twice"},
		"a key of another file":    {`{"y.a": "one"}`, "begin"},
		"no form other":            {`{"x.a": {"one": "%d part"}}`, "other"},
		"no such form":             {`{"x.a": {"1": "%d part", "other": "%d parts"}}`, "plural form"},
		"plural is no argument":    {`{"x.a": {"plural": 0, "other": "%d parts"}}`, "argument"},
		"a form that is no text":   {`{"x.a": {"other": ["a"]}}`, "neither"},
		"a message that is a list": {`{"x.a": []}`, "x.json"},
		"no object":                {`[]`, "object"},
	} {
		files := fstest.MapFS{"en/x.json": {Data: []byte(tc.text)}}
		if _, err := words.Read(files, "en"); err == nil || !strings.Contains(err.Error(), tc.says) {
			t.Errorf("%s: got %v, want an error that says %q", name, err, tc.says)
		}
	}
}

func TestPluralsFollowTheLanguage(t *testing.T) {
	files := fstest.MapFS{"pl/x.json": {Data: []byte(`{
		"x.rounds": {"=0": "nothing waits", "one": "%d runda", "few": "%d rundy", "many": "%d rund", "other": "%d rundy"},
		"x.at": {"plural": 2, "one": "%[1]s: %[2]d part", "other": "%[1]s: %[2]d parts"}}`)}}
	d, err := words.Read(files, "pl")
	if err != nil {
		t.Fatal(err)
	}
	if err := words.Register("pl", d); err != nil {
		t.Fatal(err)
	}
	p := words.For("pl")
	// The plural classes are those of Unicode CLDR for Polish: one 1, few 2-4 and
	// 22-24, many 5-21 and 25.
	for n, want := range map[int]string{0: "nothing waits", 1: "1 runda", 3: "3 rundy", 5: "5 rund", 12: "12 rund", 22: "22 rundy"} {
		if got := p.T("x.rounds", n); got != want {
			t.Errorf("%d: %q, want %q", n, got, want)
		}
	}
	if got := p.T("x.at", "Turning 1", 1); got != "Turning 1: 1 part" {
		t.Errorf("the second argument decides: %q", got)
	}
	if got, want := p.T("ui.sign-out"), words.For("en").T("ui.sign-out"); got != want {
		t.Errorf("a word that the language lacks is %q, want the English %q", got, want)
	}
	if got := p.T("x.none"); got != "[x.none]" {
		t.Errorf("a key without words is %q", got)
	}
}

func TestCountsAreGrouped(t *testing.T) {
	t.Parallel()
	if got := words.For("en").Count(1340); got != "1,340" {
		t.Errorf("got %q", got)
	}
}

func TestPrinterIsSafeForConcurrentUse(t *testing.T) {
	t.Parallel()
	p := words.For("en")
	var all sync.WaitGroup
	for range 8 {
		all.Go(func() {
			for n := range 200 {
				if got := p.T("ui.age-minutes", n%60); !strings.HasSuffix(got, " min") {
					t.Errorf("got %q", got)
				}
			}
		})
	}
	all.Wait()
}

// The statistics describe rules in English for logs and exports; the catalogue says
// the same, so that one rule never has two names.
func TestRulesAreSaidAsTheStatisticsSayThem(t *testing.T) {
	t.Parallel()
	p := words.For("en")
	rules := append(watch.Nelson(), watch.WesternElectric()...)
	rules = append(rules, watch.Rule{Kind: watch.Beyond, Z: 3.5}, watch.Rule{Kind: watch.KOfM, K: 3, M: 7, Z: 1.25})
	kinds := map[watch.Kind]bool{}
	sides := map[plant.Side]watch.Side{plant.Neither: watch.None, plant.High: watch.High, plant.Low: watch.Low}
	for _, r := range rules {
		kinds[r.Kind] = true
		for side, same := range sides {
			for _, panel := range []plant.Panel{plant.Location, plant.Dispersion} {
				f := plant.Firing{Panel: panel, Rule: plant.RuleKey(r), Side: side}
				got := strings.TrimSuffix(p.Firing(f, plant.Setup{}), ", a change for the better")
				if want := watch.Describe(r, same, panel == plant.Dispersion); got != want {
					t.Errorf("%v on the %s panel, side %q: %q, want %q", r, panel, side, got, want)
				}
			}
		}
	}
	if len(kinds) != 7 {
		t.Errorf("%d kinds of rule were tried, want all 7", len(kinds))
	}
}

func TestFiringsInWords(t *testing.T) {
	t.Parallel()
	p := words.For("en")
	beyond := plant.RuleKey(watch.Rule{Kind: watch.Beyond, Z: 3})
	for _, tc := range []struct {
		firing plant.Firing
		setup  plant.Setup
		want   string
	}{
		{plant.Firing{Panel: plant.Reading, Rule: plant.OutsideSpecification, Side: plant.High}, plant.Setup{}, "outside specification, above the upper limit"},
		{plant.Firing{Panel: plant.Location, Rule: beyond, Side: plant.Low}, plant.Setup{Worse: plant.High}, "beyond 3 sigma, low side, a change for the better"},
		{plant.Firing{Panel: plant.Location, Rule: beyond, Side: plant.Low}, plant.Setup{}, "beyond 3 sigma, low side"},
		{plant.Firing{Panel: plant.Location, Rule: `{"kind":"of-another-age"}`}, plant.Setup{}, "a rule that this version does not know"},
		{plant.Firing{Panel: plant.Location, Rule: `{`}, plant.Setup{}, "a rule that this version does not know"},
	} {
		if got := p.Firing(tc.firing, tc.setup); got != tc.want {
			t.Errorf("%+v: %q, want %q", tc.firing, got, tc.want)
		}
	}
}

func TestPseudoLocaleIsLongerAndKeepsVerbs(t *testing.T) {
	t.Parallel()
	for format, want := range map[string]string{
		"Next part":           "⟦Ñëxt párt~~~⟧",
		"part %[2]d of %s":    "⟦párt %[2]d öf %s~~⟧",
		"not live {time}":     "⟦ñöt lîvë {time}~~~⟧",
		"%s %s":               "%s %s",
		"100 %% of the parts": "⟦100 %% öf thë pártš~~~~⟧",
	} {
		if got := wordstest.Disguise(format); got != want {
			t.Errorf("%q: %q, want %q", format, got, want)
		}
	}
	p := wordstest.Register(t)
	if got := p.T("ui.age-minutes", 12); !strings.Contains(got, "12") || !strings.HasPrefix(got, "⟦") {
		t.Errorf("got %q", got)
	}
}
