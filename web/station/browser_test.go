package station_test

import (
	"context"
	"encoding/json"
	"fmt"
	"os"
	"testing"
	"time"

	"github.com/chromedp/chromedp"
	"github.com/chromedp/chromedp/kb"
)

// patience ends a step that will never come.
const patience = 30 * time.Second

// tablet is a Chromium at the station.
type tablet struct {
	t    *testing.T
	site *site
	ctx  context.Context
	axe  string
}

func (s *site) tablet(t *testing.T) *tablet {
	t.Helper()
	opts := append(chromedp.DefaultExecAllocatorOptions[:], chromedp.UserDataDir(t.TempDir()))
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
	axe, err := os.ReadFile("../../internal/browsertest/testdata/axe.min.js")
	if err != nil {
		t.Fatal(err)
	}
	tb := &tablet{t, s, ctx, string(axe)}
	tb.do(chromedp.EmulateViewport(1280, 800), chromedp.Navigate(s.url+"/sign-in"), chromedp.WaitVisible("#login"))
	tb.keys(s.Operator.Login + "\t" + "right\r")
	tb.waitFor(`location.pathname.startsWith("/station")`)
	return tb
}

func (tb *tablet) do(steps ...chromedp.Action[chromedp.Void]) {
	tb.t.Helper()
	ctx, cancel := context.WithTimeout(tb.ctx, patience)
	defer cancel()
	if err := chromedp.Do(ctx, steps...); err != nil {
		tb.t.Fatal(err)
	}
}

func (tb *tablet) value(expression string) string {
	tb.t.Helper()
	ctx, cancel := context.WithTimeout(tb.ctx, patience)
	defer cancel()
	v, err := chromedp.Run(ctx, chromedp.Evaluate[string]("(async () => String("+expression+"))()", chromedp.EvalAwaitPromise))
	if err != nil {
		tb.t.Fatalf("%s: %v", expression, err)
	}
	return v
}

// waitFor waits until something holds on the page, also across a navigation.
func (tb *tablet) waitFor(expression string) {
	tb.t.Helper()
	ctx, cancel := context.WithTimeout(tb.ctx, patience)
	defer cancel()
	for {
		v, err := chromedp.Run(ctx, chromedp.Evaluate[bool]("Boolean("+expression+")"))
		if err == nil && v {
			return
		}
		select {
		case <-ctx.Done():
			tb.t.Fatalf("never: %s", expression)
		case <-time.After(20 * time.Millisecond):
		}
	}
}

func (tb *tablet) keys(text string) {
	tb.t.Helper()
	tb.do(chromedp.KeyEvent(text))
}

func (tb *tablet) open(path string) {
	tb.t.Helper()
	tb.do(chromedp.Navigate(tb.site.url + path))
}

func (tb *tablet) want(what, expression, want string) {
	tb.t.Helper()
	if got := tb.value(expression); got != want {
		tb.t.Errorf("%s: %q, want %q", what, got, want)
	}
}

const (
	theHeading = `[...document.querySelectorAll("[data-heading]")].find((h) => h.offsetParent).textContent`
	theFocus   = `document.activeElement.labels?.[0]?.textContent ?? document.activeElement.textContent`
	theAverage = `[...document.querySelectorAll("[data-falls-average]")].find((h) => h.offsetParent).textContent`
	theProblem = `[...document.querySelectorAll(".problem")].map((p) => p.textContent.trim()).join("")`
	theValue   = `document.activeElement.value`
)

func TestRoundByGaugeThatTypes(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.steady(t)
	s.Clock.Advance(time.Minute)
	tb := s.tablet(t)
	tb.open(s.at() + "?measure=" + s.Diameter.ID.String())
	tb.waitFor(`document.querySelector("[data-scripted]")`)
	tb.want("first question", theHeading, "Measure part 1 of 5")
	tb.keys("14.994\r14,989\r")
	tb.want("third question", theHeading, "Measure part 3 of 5")
	tb.want("average so far", theAverage, "14.9915")

	tb.keys("149.96\r")
	tb.want("still the third question", theHeading, "Measure part 3 of 5")
	tb.want("a slip is asked for", theProblem, "Part 3: This is far from what is usual here. Look at the gauge and type the reading again.")
	tb.want("what was typed is gone from the field", theValue, "")
	tb.keys("x\r")
	tb.want("letters", theProblem, "Part 3: This is not a number. Type it again.")
	tb.keys(kb.Backspace + "14.9961\r")
	tb.want("too many decimals", theProblem, "Part 3: This has more decimals than are measured.")
	tb.keys("14.996\r14.991\r14.992\r") // what was wrong is selected, so typing replaces it
	tb.want("all in: saving is armed", theFocus, "Save the round")
	tb.want("the heading", theHeading, "All parts are in. Save the round.")
	tb.keys("\r") // a gauge that ends with two
	tb.value(`await new Promise((done) => setTimeout(done, 500))`)
	tb.want("nothing is sent yet", theFocus, "Save the round")
	tb.keys("\r")
	tb.waitFor(`document.querySelector("[data-testid=verdict]")`)
	tb.want("verdict", `document.querySelector("h1").textContent`, "Leave it alone")
	var retyped int
	if err := s.Pool().QueryRow(t.Context(), `select jsonb_array_length(retyped) from subgroup where retyped is not null`).Scan(&retyped); err != nil || retyped != 1 {
		t.Errorf("%d earlier typings are kept, %v", retyped, err)
	}
}

func TestRoundByKeypadAsDeviation(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.steady(t)
	s.Clock.Advance(time.Minute)
	tb := s.tablet(t)
	tb.open(s.at() + "?measure=" + s.Diameter.ID.String())
	tb.waitFor(`document.querySelector("[data-scripted]")`)
	tap := func(keys ...string) {
		t.Helper()
		for _, k := range keys {
			tb.do(chromedp.Click(`[data-key="` + k + `"]`))
		}
	}
	main := func() { t.Helper(); tb.do(chromedp.Click("[data-main]")) }
	tap("1", "4", ".", "9", "9", "9", "back", "5")
	tb.want("typed", theValue, "14.995")
	tb.want("the button", `document.querySelector("[data-main]").textContent`, "Next part")
	main()
	tb.want("second question", theHeading, "Measure part 2 of 5")
	tb.do(chromedp.Click(`[name="entry"][value="deviation"]`))
	tb.want("converted", `document.querySelector("[data-reading]").value`, "4")
	tb.want("the point gives way to the sign", `getComputedStyle(document.querySelector("[data-key='.']")).display+getComputedStyle(document.querySelector("[data-key=sign]")).display`, "noneflex")
	tb.do(chromedp.Focus(`[data-reading][id$="-1"]`))
	for _, keys := range [][]string{{"3", "sign"}, {"0"}, {"2"}} {
		tap(keys...)
		main()
	}
	tap("1")
	tb.want("average", theAverage, "14.9918")
	tb.want("the button when all are in", `document.querySelector("[data-main]").textContent`, "Save the round")
	main()
	tb.waitFor(`document.querySelector("[data-testid=verdict]")`)
	tb.want("verdict", `document.querySelector(".fact b").textContent`, "14.9918\u00a0mm")
	tb.open(s.at() + "?measure=" + s.Diameter.ID.String())
	tb.waitFor(`document.querySelector("[data-scripted]")`)
	tb.want("the way of typing is remembered", `document.querySelector('[name="entry"]:checked').value`, "deviation")
}

func TestPagesAreAccessibleAndReflow(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	matter := s.open(t)
	hold := s.MustRecord(t, s.Force, 610, 612, 691, 611, 609, 613)
	s.Clock.Advance(time.Minute)
	tb := s.tablet(t)
	for _, path := range []string{
		"/station?all", s.at() + "?measure=" + s.Diameter.ID.String(), s.at("round", hold.Round.String()), matter,
		s.at("change"), s.at("change", s.Mass.ID.String()), s.at("machine", s.Machine.ID.String()),
	} {
		tb.do(chromedp.EmulateViewport(320, 800))
		tb.open(path)
		tb.want(path+": width at 400 %", "document.documentElement.scrollWidth", "320")
		tb.do(chromedp.EmulateViewport(1280, 800))
		tb.accessible(path)
	}
	tb.value(`(document.documentElement.dataset.theme = "night")`)
	tb.accessible("night")
}

func (tb *tablet) accessible(name string) {
	tb.t.Helper()
	ctx, cancel := context.WithTimeout(tb.ctx, patience)
	defer cancel()
	if _, err := chromedp.Run(ctx, chromedp.Evaluate[any](tb.axe+";0")); err != nil {
		tb.t.Fatal(err)
	}
	report := tb.value(`JSON.stringify(await axe.run().then((r) => ({ passes: r.passes.length, found: r.violations.map((v) => v.id + ": " + v.nodes[0].html.slice(0, 200) + " " + (v.nodes[0].failureSummary || "")) })))`)
	var axe struct {
		Passes int
		Found  []string
	}
	if err := json.Unmarshal([]byte(report), &axe); err != nil {
		tb.t.Fatal(err)
	}
	if axe.Passes == 0 {
		tb.t.Error(name + ": axe-core looked at nothing")
	}
	for _, f := range axe.Found {
		tb.t.Error(fmt.Sprintf("%s: axe-core: %s", name, f))
	}
}
