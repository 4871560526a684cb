package desk_test

import (
	"context"
	"encoding/json"
	"os"
	"testing"
	"time"

	"github.com/chromedp/chromedp"
	"github.com/chromedp/chromedp/kb"
)

// patience ends a step that will never come.
const patience = 30 * time.Second

// screen is a Chromium at the desk.
type screen struct {
	t    *testing.T
	site *site
	ctx  context.Context
}

func (s *site) screen(t *testing.T) *screen {
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
	sc := &screen{t, s, ctx}
	sc.do(chromedp.EmulateViewport(1440, 900), chromedp.Navigate(s.url+"/sign-in"), chromedp.WaitVisible("#login"))
	sc.keys(s.Engineer.Login + "\t" + "right\r")
	sc.waitFor(`location.pathname.startsWith("/desk")`)
	return sc
}

func (sc *screen) do(steps ...chromedp.Action[chromedp.Void]) {
	sc.t.Helper()
	ctx, cancel := context.WithTimeout(sc.ctx, patience)
	defer cancel()
	if err := chromedp.Do(ctx, steps...); err != nil {
		sc.t.Fatal(err)
	}
}

func (sc *screen) value(expression string) string {
	sc.t.Helper()
	ctx, cancel := context.WithTimeout(sc.ctx, patience)
	defer cancel()
	v, err := chromedp.Run(ctx, chromedp.Evaluate[string]("(async () => String("+expression+"))()", chromedp.EvalAwaitPromise))
	if err != nil {
		sc.t.Fatalf("%s: %v", expression, err)
	}
	return v
}

// waitFor waits until something holds on the page, also across a navigation.
func (sc *screen) waitFor(expression string) {
	sc.t.Helper()
	ctx, cancel := context.WithTimeout(sc.ctx, patience)
	defer cancel()
	for {
		v, err := chromedp.Run(ctx, chromedp.Evaluate[bool]("Boolean("+expression+")"))
		if err == nil && v {
			return
		}
		select {
		case <-ctx.Done():
			sc.t.Fatalf("never: %s", expression)
		case <-time.After(20 * time.Millisecond):
		}
	}
}

func (sc *screen) keys(text string) {
	sc.t.Helper()
	sc.do(chromedp.KeyEvent(text))
}

func (sc *screen) open(path string) {
	sc.t.Helper()
	sc.do(chromedp.Navigate(sc.site.url + path))
}

func (sc *screen) want(what, expression, want string) {
	sc.t.Helper()
	if got := sc.value(expression); got != want {
		sc.t.Errorf("%s: %q, want %q", what, got, want)
	}
}

func TestAStudyIsWorkedByKeyboard(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.fill(t, s.Diameter, 30, 5, 14991, 2, 1, map[int]float64{10: 8})
	sc := s.screen(t)
	sc.open(path(s.Diameter, "study"))
	sc.waitFor(`document.readyState === "complete" && document.querySelector("#f-no")`)
	sc.value(`window.same = document.body, document.querySelector("#f-no").focus()`)
	sc.keys("11\t\tBar end\r")
	sc.waitFor(`document.querySelector("[data-testid=left-out] tbody b")?.textContent === "A"`)
	sc.want("the page was not loaded again", `window.same === document.body`, "true")
	sc.want("the address follows", `new URLSearchParams(location.search).getAll("out").length`, "1")
	sc.want("the change is said", `document.querySelector("#study-said").textContent.startsWith("Computed from 29 subgroups")`, "true")

	sc.value(`document.querySelector("#dis-1").focus()`)
	sc.keys(" ")
	sc.waitFor(`new URLSearchParams(location.search).getAll("dis").length === 3`)
	sc.want("the focus stays", `document.activeElement.id`, "dis-1")

	sc.value(`document.querySelector("[name=do][value^='back:']").focus()`)
	sc.keys("\r")
	sc.waitFor(`!document.querySelector("[name=do][value^='back:']")`)
	sc.want("nothing is left out", `new URLSearchParams(location.search).getAll("out").length`, "0")

	sc.value(`document.querySelector("[data-testid=to-freeze]").focus()`)
	sc.keys("\r")
	sc.waitFor(`document.querySelector("#f-known-yes")`)
	sc.value(`document.querySelector("#f-known-yes").focus()`)
	sc.keys(" \t \t \tFirst limits")
	sc.value(`document.querySelector("#f-secret").focus()`)
	sc.keys("right\r")
	sc.waitFor(`document.querySelector("[data-testid=frozen]")`)
	sc.want("it is frozen", `document.querySelector("[data-testid=frozen]").textContent.startsWith("Revision 1 is frozen.")`, "true")
	sc.want("with the rule that was ticked", `[...document.querySelectorAll("dd")].some((d) => d.textContent === "Beyond 3 sigma; 2 of 3 beyond 2 sigma, same side; 8 on one side")`, "true")
}

func TestReadingsAreShownForThePointInFocus(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.fill(t, s.Diameter, 12, 5, 14991, 2, 1, nil)
	sc := s.screen(t)
	sc.open(path(s.Diameter))
	sc.waitFor(`document.readyState === "complete" && document.querySelector("svg.control .pt[data-newest]")`)
	const line = `document.querySelector("[data-testid=point-line] [data-fill=readings]").textContent`
	newest := sc.value(line)
	sc.value(`document.querySelector("svg.control .pt[data-newest]").focus()`)
	sc.keys(kb.ArrowLeft)
	sc.want("the line shows the point before", line+` === document.querySelector('svg.control .pt[data-i="10"]').dataset.readings`, "true")
	if sc.value(line) == newest {
		t.Error("the line still shows the newest readings")
	}
}

func TestPagesHaveNoFindingsOfAxe(t *testing.T) {
	t.Parallel()
	axe, err := os.ReadFile("../../internal/browsertest/testdata/axe.min.js")
	if err != nil {
		t.Fatal(err)
	}
	s := newSite(t)
	openMatter(t, s)
	sc := s.screen(t)
	c := s.Diameter
	for _, theme := range []string{"day", "night"} {
		sc.value(`document.cookie = "theme=` + theme + `; path=/"`)
		for _, at := range []string{"/desk", "/desk/plans", "/desk/plan?kind=location+up&family=turning", "/desk/causes", path(c), path(c) + "?as=table", path(c) + "?last=x", path(s.Length), path(c, "study"), path(c, "study") + "?do=leave",
			path(s.Length, "study"), path(c, "study", "freeze"), path(c, "revisions"), path(c, "revisions") + "?at=x"} {
			sc.open(at)
			sc.waitFor(`document.querySelector("main h1")`)
			sc.want(at, `document.documentElement.dataset.theme`, theme)
			sc.do(chromedp.Evaluate[chromedp.Void](string(axe)))
			found := sc.value(`JSON.stringify((await axe.run()).violations.map((v) => [v.id, v.nodes[0].html]))`)
			var list []any
			if err := json.Unmarshal([]byte(found), &list); err != nil || len(list) > 0 {
				t.Errorf("%s by %s: %s %v", at, theme, found, err)
			}
			sc.want(at+" fits", `document.documentElement.scrollWidth <= innerWidth`, "true")
		}
	}
	// 1280 px at 400 %.
	sc.do(chromedp.EmulateViewport(320, 900))
	for _, at := range []string{"/desk", "/desk/plans", "/desk/plan?kind=location+up&family=turning", "/desk/causes", path(c), path(c) + "?as=table", path(c, "study"), path(c, "study", "freeze"), path(c, "revisions")} {
		sc.open(at)
		sc.waitFor(`document.querySelector("main h1")`)
		sc.want(at+" reflows", `document.documentElement.scrollWidth <= innerWidth`, "true")
	}
}
