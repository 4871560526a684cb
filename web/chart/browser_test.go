package chart

import (
	"context"
	"encoding/json"
	"fmt"
	"net/http"
	"net/http/httptest"
	"os"
	"strings"
	"testing"
	"time"

	"github.com/chromedp/chromedp"

	"holdfast/static"
)

// These tests look at the charts in Chromium, under a content policy without
// inline styles or scripts, with the style sheets and scripts of the product.

// patience ends a step that will never come.
const patience = 30 * time.Second

func sheetLinks() string {
	var b strings.Builder
	for _, name := range []string{"vendor/modern-normalize/modern-normalize.css", "css/tokens.css", "css/base.css", "css/chart.css", "css/station.css", "css/board.css", "css/desk.css"} {
		fmt.Fprintf(&b, `<link rel="stylesheet" href="%s">`, static.URL(name))
	}
	return b.String()
}

// page puts every chart on one page.
func page(theme string) string {
	return `<!doctype html><html lang="en" data-theme="` + theme + `"><head><meta charset="utf-8"><meta name="viewport" content="width=device-width, initial-scale=1"><title>Charts</title>` +
		sheetLinks() + `<script type="module" src="` + static.URL("js/falls.js") + `"></script><script type="module" src="` + static.URL("js/points.js") + `"></script>
<script src="/axe.js"></script></head><body class="desk">` + Sprite + `<header class="topbar"><span class="mark">` + MarkSVG + `Holdfast</span></header><main>
<h1>Charts</h1><section class="panel chart-panel"><div><div class="chart-scroll" tabindex="0" role="region" aria-label="Control chart">` + axleDay("cc").SVG() + `</div></div>` + railSample("rl", true).SVG() + `</section>
<section class="panel foot" aria-label="Point"><div class="point" data-point-of="cc"><b data-fill="when"></b><span>average <b data-fill="location"></b></span><span data-part>Note: <span data-fill="note"></span></span></div></section>
<div class="chart-scroll" tabindex="0" role="region" aria-label="Three years">` + longRun("long", 600).SVG() + `</div>
<div>` + sparkSample("sp", SignalMark, 3, 1).SVG() + verdictSample("ve").SVG() + `</div>
<section data-falls data-decimals="4" data-say-none="Nothing typed yet." data-say-inside="Inside the band so far." data-say-above="Above the band so far." data-say-below="Below the band so far." aria-label="So far">
<p>Average of <span data-falls-count></span>: <b data-falls-average></b></p>` +
		fallsSample("fa", 352, 388, nan()).SVG() + stripSample("st", 140, 388).SVG() + `<p data-falls-says></p></section></main></body></html>`
}

func TestChartsInABrowser(t *testing.T) {
	t.Parallel()
	mux := http.NewServeMux()
	mux.Handle(static.Prefix, static.Handler())
	mux.HandleFunc("/axe.js", func(w http.ResponseWriter, r *http.Request) {
		http.ServeFile(w, r, "../../internal/browsertest/testdata/axe.min.js")
	})
	for _, theme := range []string{"day", "night"} {
		mux.HandleFunc("/"+theme, func(w http.ResponseWriter, _ *http.Request) {
			w.Header().Set("Content-Security-Policy", "default-src 'none'; script-src 'self'; style-src 'self'; font-src 'self'; img-src 'self'")
			fmt.Fprint(w, page(theme))
		})
	}
	srv := httptest.NewServer(mux)
	t.Cleanup(srv.Close)

	opts := append(chromedp.DefaultExecAllocatorOptions[:], chromedp.UserDataDir(t.TempDir()))
	if os.Getuid() == 0 {
		opts = append(opts, chromedp.NoSandbox)
	}
	alloc, stop := chromedp.NewExecAllocator(context.Background(), opts...)
	t.Cleanup(stop)
	browser, cancel := chromedp.NewContext(alloc)
	t.Cleanup(cancel)
	if err := chromedp.Do(browser); err != nil { // no time limit here: it would be the browser's
		t.Fatalf("start Chromium (on Debian: apt-get install chromium): %v", err)
	}
	do := func(steps ...chromedp.Action[chromedp.Void]) {
		t.Helper()
		ctx, cancel := context.WithTimeout(browser, patience)
		defer cancel()
		if err := chromedp.Do(ctx, steps...); err != nil {
			t.Fatal(err)
		}
	}
	value := func(expression string) string {
		t.Helper()
		ctx, cancel := context.WithTimeout(browser, patience)
		defer cancel()
		v, err := chromedp.Run(ctx, chromedp.Evaluate[string]("(async () => String("+expression+"))()", chromedp.EvalAwaitPromise))
		if err != nil {
			t.Fatalf("%s: %v", expression, err)
		}
		return v
	}

	for _, theme := range []string{"day", "night"} {
		do(chromedp.EmulateViewport(1440, 900), chromedp.Navigate(srv.URL+"/"+theme))
		checkAccessible(t, theme, value)
	}
	checkPoints(t, value)
	checkFalls(t, value)

	// 320 CSS px is a 1280 px window at 400 % (WCAG 2.2, success criterion 1.4.10)
	for _, width := range []int64{320, 800, 1280, 1920} {
		do(chromedp.EmulateViewport(width, 800))
		if got := value("document.documentElement.scrollWidth"); got != fmt.Sprint(width) {
			t.Errorf("at %d px the page is %s px wide", width, got)
		}
	}
}

func checkAccessible(t *testing.T, theme string, value func(string) string) {
	t.Helper()
	report := value(`JSON.stringify(await axe.run().then((r) => ({ passes: r.passes.length, found: r.violations.map((v) => v.id + ": " + v.nodes.length + " " + v.nodes[0].html.slice(0, 200) + " " + (v.nodes[0].failureSummary || "")) })))`)
	var axe struct {
		Passes int
		Found  []string
	}
	if err := json.Unmarshal([]byte(report), &axe); err != nil {
		t.Fatal(err)
	}
	for _, f := range axe.Found {
		t.Errorf("%s: axe-core: %s", theme, f)
	}
	if axe.Passes < 10 {
		t.Errorf("%s: axe-core passed only %d rules", theme, axe.Passes)
	}
}

func checkPoints(t *testing.T, value func(string) string) {
	t.Helper()
	// a tab in the background gets no focus events of its own
	const focused = `document.activeElement.dispatchEvent(new FocusEvent("focusin", { bubbles: true }))`
	const press = `((key) => { document.activeElement.dispatchEvent(new KeyboardEvent("keydown", { key, bubbles: true })); ` + focused + `; return document.activeElement.dataset.i; })`
	const line = `document.querySelector("[data-point-of] [data-fill=location]").textContent`
	const chart = `document.getElementById("cc")`
	value(chart + `.querySelector('.pt[tabindex="0"]').focus()`)
	value(focused)
	if got := value(line); got != "14.9932 mm" {
		t.Errorf("focus on the newest point says %q", got)
	}
	for _, step := range []struct{ key, i string }{{"ArrowLeft", "51"}, {"ArrowLeft", "50"}, {"Home", "0"}, {"ArrowLeft", "0"}, {"PageDown", "10"}, {"End", "52"}} {
		if got := value(press + `("` + step.key + `")`); got != step.i {
			t.Errorf("%s goes to point %s, want %s", step.key, got, step.i)
		}
	}
	value(press + `("ArrowLeft")`)
	if got := value(line); got != "14.9928 mm" {
		t.Errorf("the line says %q for the point before the newest", got)
	}
	if got := value(`document.querySelector("[data-point-of] [data-part]").hidden`); got != "true" {
		t.Error("a point without a note leaves its caption standing")
	}
	if got := value(chart + `.querySelectorAll('.pt[tabindex="0"]').length`); got != "1" {
		t.Errorf("%s tab stops in the chart", got)
	}
}

func checkFalls(t *testing.T, value func(string) string) {
	t.Helper()
	const root = `document.querySelector("[data-falls]")`
	keyed := func(readings string) {
		value(root + `.dispatchEvent(new CustomEvent("falls:readings", { bubbles: true, detail: { readings: [` + readings + `] } }))`)
	}
	text := func(part string) string {
		return value(root + `.querySelector("[data-falls-` + part + `]").textContent`)
	}
	seen := func(selector string) string {
		return value(`[...` + root + `.querySelectorAll("` + selector + `")].filter((n) => n.getBBox && n.getAttribute("display") !== "none").length`)
	}
	keyed("14.994, 14.989, 14.996, null, NaN")
	if got := text("average") + "/" + text("count") + "/" + text("says"); got != "14.9930/3/Inside the band so far." {
		t.Errorf("after three readings: %s", got)
	}
	if got := seen("[data-falls-tick]"); got != "3" {
		t.Errorf("%s ticks for three readings", got)
	}
	want := fallsSample("fa", 352, 388, 14.9930).SVG() // drawn by the server with the same average
	cy := value(root + `.querySelector("[data-falls-now] circle").getAttribute("cy")`)
	if !strings.Contains(want, `class="dot provisional" cx="254" cy="`+cy+`"`) {
		t.Errorf("the script puts the dot at %s, the server elsewhere", cy)
	}
	keyed("14.9, 16")
	if got := text("says") + "/" + seen("[data-falls-now] [data-falls-beyond]") + seen("[data-falls-strip] [data-falls-beyond]"); got != "Above the band so far./12" {
		t.Errorf("far away: %s", got)
	}
	keyed("")
	if got := text("average") + "/" + text("says") + "/" + seen("[data-falls-now]"); got != "/Nothing typed yet./0" {
		t.Errorf("nothing typed: %s", got)
	}
}
