// Package browsertest drives a real Chromium in tests: one browser a test, and in it as
// many people side by side, each with cookies of their own, as the test asks for.
package browsertest

import (
	"context"
	_ "embed"
	"encoding/json"
	"os"
	"strings"
	"testing"
	"time"

	"github.com/chromedp/chromedp"
)

// patience ends a step that will never come.
const patience = 45 * time.Second

// axe is axe-core (licence beside it), the accessibility rules that pages are held to.
//
//go:embed testdata/axe.min.js
var axe string

// Flag is one of Chromium's command line.
type Flag struct{ Name, Value string }

// Browser is a running Chromium.
type Browser struct {
	t   testing.TB
	ctx context.Context
}

// Start starts a Chromium that ends with the test. Where there is none the test fails
// and says what to install. Flags of Chromium's own may be added, without their dashes.
func Start(t testing.TB, flags ...Flag) *Browser {
	t.Helper()
	opts := append(chromedp.DefaultExecAllocatorOptions[:], chromedp.UserDataDir(t.TempDir()))
	for _, f := range flags {
		opts = append(opts, chromedp.Flag(f.Name, f.Value))
	}
	if os.Getuid() == 0 {
		opts = append(opts, chromedp.NoSandbox)
	}
	alloc, stop := chromedp.NewExecAllocator(context.Background(), opts...)
	t.Cleanup(stop)
	ctx, cancel := chromedp.NewContext(alloc)
	t.Cleanup(cancel)
	if err := chromedp.Do(ctx); err != nil { // no time limit here: it would be the browser's
		t.Fatalf("start Chromium (on Debian: apt-get install chromium): %v", err)
	}
	return &Browser{t: t, ctx: ctx}
}

// Person is a window of somebody's own: other cookies than everybody else's.
func (b *Browser) Person(base string) *Page {
	b.t.Helper()
	ctx, cancel := chromedp.NewContext(b.ctx, chromedp.WithNewBrowserContext())
	b.t.Cleanup(cancel)
	if err := chromedp.Do(ctx); err != nil {
		b.t.Fatal(err)
	}
	p := &Page{t: b.t, ctx: ctx, base: base}
	p.Size(1280, 800)
	return p
}

// Page is one window.
type Page struct {
	t    testing.TB
	ctx  context.Context
	base string
}

// For is the same window in a test of its own.
func (p *Page) For(t testing.TB) *Page { return &Page{t: t, ctx: p.ctx, base: p.base} }

// Do runs steps, within the patience of a test.
func (p *Page) Do(steps ...chromedp.Action[chromedp.Void]) {
	p.t.Helper()
	ctx, cancel := context.WithTimeout(p.ctx, patience)
	defer cancel()
	if err := chromedp.Do(ctx, steps...); err != nil {
		p.t.Fatal(err)
	}
}

// Size sets the window's size in CSS pixels.
func (p *Page) Size(width, height int64) {
	p.t.Helper()
	p.Do(chromedp.EmulateViewport(width, height))
}

// Open goes to a path of the server and waits until it is loaded.
func (p *Page) Open(path string) {
	p.t.Helper()
	p.Do(chromedp.Navigate(p.base + path))
}

// Value evaluates an expression, which may await, as text.
func (p *Page) Value(expression string) string {
	p.t.Helper()
	ctx, cancel := context.WithTimeout(p.ctx, patience)
	defer cancel()
	v, err := chromedp.Run(ctx, chromedp.Evaluate[string]("(async () => String("+expression+"))()", chromedp.EvalAwaitPromise))
	if err != nil {
		p.t.Fatalf("%s: %v", expression, err)
	}
	return v
}

// WaitFor waits until an expression is true, also across a navigation.
func (p *Page) WaitFor(expression string) {
	p.t.Helper()
	ctx, cancel := context.WithTimeout(p.ctx, patience)
	defer cancel()
	for {
		v, err := chromedp.Run(ctx, chromedp.Evaluate[bool]("Boolean("+expression+")"))
		if err == nil && v {
			return
		}
		select {
		case <-ctx.Done():
			p.t.Fatalf("never came true: %s\nat %s:\n%.1500s", expression, p.location(), p.text())
		case <-time.After(20 * time.Millisecond):
		}
	}
}

func (p *Page) location() string {
	v, _ := chromedp.Run(p.ctx, chromedp.Location())
	return v
}

func (p *Page) text() string {
	v, _ := chromedp.Run(p.ctx, chromedp.Evaluate[string]("document.body.innerText"))
	return v
}

// Keys types: \r is Enter, \t the tabulator.
func (p *Page) Keys(text string) {
	p.t.Helper()
	p.Do(chromedp.KeyEvent(text))
}

// Click clicks what a CSS selector finds first, once it can be seen and has come to rest:
// on a page that is still loading it would move away from under the pointer.
func (p *Page) Click(selector string) {
	p.t.Helper()
	p.Do(chromedp.WaitVisible(chromedp.CSS(selector)))
	p.rest(selector)
	p.Do(chromedp.Click(chromedp.CSS(selector)))
}

// rest waits until the page is loaded, its fonts too, and an element stands where it
// stood two frames ago.
func (p *Page) rest(selector string) {
	p.t.Helper()
	name, err := json.Marshal(selector)
	if err != nil {
		p.t.Fatal(err)
	}
	still := `(async () => {
		const at = () => JSON.stringify(document.querySelector(` + string(name) + `)?.getBoundingClientRect());
		const frames = () => new Promise((done) => { requestAnimationFrame(() => requestAnimationFrame(done)); setTimeout(done, 250); });
		if (document.readyState !== "complete") return false;
		await document.fonts.ready;
		const before = at();
		await frames();
		return before !== undefined && before === at();
	})()`
	ctx, cancel := context.WithTimeout(p.ctx, patience)
	defer cancel()
	for {
		// A page that is being left has no answer: the next one is asked.
		v, err := chromedp.Run(ctx, chromedp.Evaluate[bool](still, chromedp.EvalAwaitPromise))
		if err == nil && v {
			return
		}
		select {
		case <-ctx.Done():
			p.t.Fatalf("%s never came to rest at %s:\n%.1500s", selector, p.location(), p.text())
		case <-time.After(20 * time.Millisecond):
		}
	}
}

// Fill replaces what stands in a field.
func (p *Page) Fill(selector, text string) {
	p.t.Helper()
	p.Do(chromedp.WaitVisible(chromedp.CSS(selector)), chromedp.SetValue(chromedp.CSS(selector), text))
}

// Want compares the value of an expression.
func (p *Page) Want(what, expression, want string) {
	p.t.Helper()
	if got := p.Value(expression); got != want {
		p.t.Errorf("%s: %q, want %q", what, got, want)
	}
}

// Accessible demands that axe-core finds nothing on the page as it stands.
func (p *Page) Accessible(what string) {
	p.t.Helper()
	if passes := p.axe(what, "{}"); passes < 10 {
		p.t.Errorf("%s: axe-core passed only %d rules", what, passes)
	}
}

// AccessibleColours asks only the rules that look at colours. It is for a page that has
// passed all of them and has since changed nothing else.
func (p *Page) AccessibleColours(what string) {
	p.t.Helper()
	if passes := p.axe(what, `{ runOnly: ["color-contrast", "link-in-text-block"] }`); passes < 1 {
		p.t.Errorf("%s: axe-core looked at no colour", what)
	}
}

// axe runs axe-core and returns how many of its rules passed.
func (p *Page) axe(what, options string) int {
	p.t.Helper()
	ctx, cancel := context.WithTimeout(p.ctx, patience)
	defer cancel()
	if p.Value("window.axe === undefined") == "true" {
		if _, err := chromedp.Run(ctx, chromedp.Evaluate[chromedp.Void](axe+"; undefined")); err != nil {
			p.t.Fatal(err)
		}
	}
	report := p.Value(`JSON.stringify(await axe.run(document, ` + options + `).then((r) => ({ passes: r.passes.length, found: r.violations.map((v) => v.id + ": " + v.nodes.length + " " + v.nodes[0].html.slice(0, 300) + " " + (v.nodes[0].failureSummary || "")) })))`)
	var found struct {
		Passes int
		Found  []string
	}
	if err := json.Unmarshal([]byte(report), &found); err != nil {
		p.t.Fatal(err)
	}
	for _, f := range found.Found {
		p.t.Errorf("%s: axe-core: %s", what, f)
	}
	return found.Passes
}

// FitsWidth demands that the page needs no sideways scrolling at so many CSS pixels.
func (p *Page) FitsWidth(what string, widths ...int64) {
	p.t.Helper()
	for _, w := range widths {
		p.Size(w, 800)
		if wide := p.Value("document.documentElement.scrollWidth > innerWidth"); strings.TrimSpace(wide) != "false" {
			p.t.Errorf("%s: at %d px the page scrolls sideways", what, w)
		}
	}
}
