package browsertest

import (
	"context"
	_ "embed"
	"encoding/json"
	"slices"
	"strconv"
	"strings"

	"github.com/chromedp/chromedp"
)

//go:embed forced.js
var forced string

//go:embed focus.js
var focus string

//go:embed motion.js
var motion string

// Media makes the browser say that its reader has asked for something, as the media
// features of style sheets name it; without any it asks for nothing any more.
func (p *Page) Media(features ...Flag) {
	p.t.Helper()
	asked := struct {
		Features []feature `json:"features"`
	}{[]feature{}}
	for _, f := range features {
		asked.Features = append(asked.Features, feature(f))
	}
	p.Do(func(ctx context.Context, window *chromedp.Target) (none chromedp.Void, err error) {
		return none, window.Call(ctx, "Emulation.setEmulatedMedia", asked, nil)
	})
}

// Print makes the browser draw the page as it is on paper.
func (p *Page) Print() {
	p.t.Helper()
	p.Do(func(ctx context.Context, window *chromedp.Target) (none chromedp.Void, err error) {
		return none, window.Call(ctx, "Emulation.setEmulatedMedia", map[string]string{"media": "print"}, nil)
	})
}

type feature struct {
	Name  string `json:"name"`
	Value string `json:"value"`
}

// ForcedColours is what a reader asks for who sees with colours of their own.
var ForcedColours = Flag{"forced-colors", "active"}

// ReducedMotion is what a reader asks for whom movement makes ill.
var ReducedMotion = Flag{"prefers-reduced-motion", "reduce"}

// LostInForcedColours says what can no longer be told on a page in ForcedColours.
func (p *Page) LostInForcedColours() []string { p.t.Helper(); return p.list(forced) }

// FocusUnseen says what can be reached by keyboard and does not show it.
func (p *Page) FocusUnseen() []string { p.t.Helper(); return p.list(focus) }

// Moves says what moves on a page in ReducedMotion.
func (p *Page) Moves() []string { p.t.Helper(); return p.list(motion) }

func (p *Page) list(script string) []string {
	p.t.Helper()
	var found []string
	report := p.Value(script)
	if err := json.Unmarshal([]byte(report), &found); err != nil {
		p.t.Fatalf("%v: %s", err, report)
	}
	return found
}

// sizes are those at which nothing of a page may be cut off: 1280 px at 400 %, a tablet
// upright and lying, a desk, a wall.
var sizes = [][2]int64{{320, 640}, {800, 1280}, {1024, 768}, {1280, 800}, {1920, 1080}}

// ForEverybody demands of the page as it stands that axe-core finds nothing by day and by
// night, that nothing is cut off from 320 to 1920 px, that everything can still be told in
// the reader's own colours, that the focus can be seen, and that nothing moves for those
// who ask for it.
func (p *Page) ForEverybody(what string) {
	p.t.Helper()
	say := func(how string, found []string) {
		p.t.Helper()
		for _, f := range found {
			p.t.Errorf("%s, %s: %s", what, how, f)
		}
	}
	for _, s := range sizes {
		p.Size(s[0], s[1])
		found := p.Overflows()
		if s[0] < 400 { // a long value in a field of one line is read by moving in it
			found = slices.DeleteFunc(found, func(f string) bool { return strings.HasPrefix(f, "the value ") })
		}
		say(strconv.FormatInt(s[0], 10)+" px", found)
	}
	p.Size(1280, 800)
	p.Value(`document.documentElement.dataset.theme = "day"`)
	p.Accessible(what + ", by day")
	p.Value(`document.documentElement.dataset.theme = "night"`) // which changes colours and nothing else
	p.AccessibleColours(what + ", by night")
	say("by keyboard", p.FocusUnseen())
	p.Media(ForcedColours)
	say("forced colours", p.LostInForcedColours())
	say("forced colours, by keyboard", p.FocusUnseen())
	p.AccessibleColours(what + ", forced colours")
	p.Media(ReducedMotion)
	say("reduced motion", p.Moves())
	p.Media()
}
