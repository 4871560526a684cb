package board

import (
	"context"
	"encoding/json"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"github.com/chromedp/chromedp"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// These tests look at the board in Chromium, behind the real router with its content
// policy, the real hub and the real scripts.

const patience = 30 * time.Second

type browser struct {
	t   *testing.T
	ctx context.Context
}

func newBrowser(t *testing.T) *browser {
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
	return &browser{t, ctx}
}

func (b *browser) do(steps ...chromedp.Action[chromedp.Void]) {
	b.t.Helper()
	ctx, cancel := context.WithTimeout(b.ctx, patience)
	defer cancel()
	if err := chromedp.Do(ctx, steps...); err != nil {
		b.t.Fatal(err)
	}
}

func (b *browser) value(expression string) string {
	b.t.Helper()
	ctx, cancel := context.WithTimeout(b.ctx, patience)
	defer cancel()
	v, err := chromedp.Run(ctx, chromedp.Evaluate[string]("(async () => String("+expression+"))()", chromedp.EvalAwaitPromise))
	if err != nil {
		b.t.Fatalf("%s: %v", expression, err)
	}
	return v
}

func (b *browser) run(script string) {
	b.t.Helper()
	ctx, cancel := context.WithTimeout(b.ctx, patience)
	defer cancel()
	if _, err := chromedp.Run(ctx, chromedp.Evaluate[string](script+"; String(0)")); err != nil {
		b.t.Fatal(err)
	}
}

// until waits for an expression to be true.
func (b *browser) until(expression string) {
	b.t.Helper()
	for end := time.Now().Add(patience); time.Now().Before(end); time.Sleep(20 * time.Millisecond) {
		if b.value(expression) == "true" {
			return
		}
	}
	b.t.Fatalf("never true: %s\n%s", expression, b.value("document.body.innerText"))
}

func (b *browser) signIn(s *site, login string) {
	b.t.Helper()
	b.do(chromedp.Navigate(s.URL+"/sign-in"), chromedp.SendKeys("#login", login), chromedp.SendKeys("#password", "right"), chromedp.Submit("#password"))
	b.until(`!location.pathname.startsWith("/sign-in")`)
}

const isLive = `document.querySelector("[data-live-state]").dataset.state === "on"`

func (b *browser) open(s *site, path string) {
	b.t.Helper()
	b.do(chromedp.Navigate(s.URL + path))
	b.until(isLive)
}

func TestBoardFitsItsScreens(t *testing.T) {
	t.Parallel()
	axe, err := os.ReadFile(filepath.Join("..", "..", "internal", "browsertest", "testdata", "axe.min.js"))
	if err != nil {
		t.Fatal(err)
	}
	record := &floorNow{}
	s := newSite(t, record, kestrelRow, func() time.Time { return noon })
	b := newBrowser(t)
	b.signIn(s, "supervisor")

	// cut lists the cards, and the words in their slabs, that do not show whole
	const cut = `[...document.querySelectorAll(".card .frame, .card .slab, .card .word, .card .age")].map((e) => [e, e.className + " " + e.closest(".card").querySelector("h3").textContent + " " + e.scrollWidth + ">" + e.clientWidth + " " + e.scrollHeight + ">" + e.clientHeight]).filter(([e]) => e.scrollHeight > e.clientHeight + 1 && e.tagName === "DIV" || e.scrollWidth > e.clientWidth + 1 && e.clientWidth).map(([, s]) => s).join("; ")`
	for _, tc := range []struct {
		name          string
		states        []plant.StationState
		path          string
		width, height int64
		fits          bool // without scrolling, and every card whole
	}{
		{"wall", twelve(), "/board", 1920, 1080, true},
		{"desktop", twelve(), "/board", 1280, 800, true},
		{"large works", sixty(), "/board", 1920, 1080, true},
		{"large works, one page of lanes", sixty(), "/board?lanes=1", 1920, 1080, true},
		{"large works, on a desktop", sixty(), "/board?lanes=2", 1280, 800, true},
		{"little", floor([]string{"Press"}), "/board", 1920, 1080, true},
		{"nothing", nil, "/board", 1920, 1080, true},
		{"tablet", twelve(), "/board", 800, 1280, false},
		{"400 % zoom of 1280 px", twelve(), "/board", 320, 256, false},
		{"400 % zoom, much", sixty(), "/board", 320, 256, false},
	} {
		record.set(tc.states)
		b.do(chromedp.EmulateViewport(tc.width, tc.height))
		b.open(s, tc.path)
		if got := b.value("document.documentElement.scrollWidth"); got != fmt.Sprint(tc.width) {
			t.Errorf("%s: %s px wide on a screen of %d", tc.name, got, tc.width)
		}
		if !tc.fits {
			continue
		}
		if got := b.value("document.documentElement.scrollHeight"); got != fmt.Sprint(tc.height) {
			t.Errorf("%s: %s px high on a screen of %d", tc.name, got, tc.height)
		}
		if got := b.value(`(() => { const l = document.querySelector(".lanes"); return l ? l.scrollHeight - l.clientHeight : 0; })()`); got != "0" {
			t.Errorf("%s: the lanes scroll by %s px", tc.name, got)
		}
		if got := b.value(cut); got != "" {
			t.Errorf("%s: parts of cards are cut off: %s", tc.name, got)
		}
	}

	b.do(chromedp.EmulateViewport(1920, 1080))
	for _, states := range [][]plant.StationState{twelve(), nil} {
		record.set(states)
		for _, theme := range []string{"day", "night"} {
			b.open(s, "/board")
			b.value(`document.documentElement.dataset.theme = "` + theme + `"`)
			b.run(string(axe))
			var report struct {
				Passes int
				Found  []string
			}
			text := b.value(`JSON.stringify(await axe.run().then((r) => ({ passes: r.passes.length, found: r.violations.map((v) => v.id + ": " + v.nodes.length + " " + v.nodes[0].html.slice(0, 200) + " " + (v.nodes[0].failureSummary || "")) })))`)
			if err := json.Unmarshal([]byte(text), &report); err != nil {
				t.Fatal(err)
			}
			for _, f := range report.Found {
				t.Errorf("%d stations, %s: axe-core: %s", len(states), theme, f)
			}
			if report.Passes < 10 {
				t.Errorf("axe-core passed only %d rules", report.Passes)
			}
		}
	}
}

func TestBoardFollowsWhatIsPushed(t *testing.T) {
	t.Parallel()
	record := &floorNow{states: twelve()}
	s := newSite(t, record, kestrelRow, func() time.Time { return noon })
	b := newBrowser(t)
	b.do(chromedp.EmulateViewport(1920, 1080))
	b.signIn(s, "supervisor")
	push := func(change func([]plant.StationState)) {
		states := twelve()
		change(states)
		record.set(states)
		s.hub.Dirty(ui.TopicBoard)
	}
	card := func(states []plant.StationState, i int) string {
		return `document.getElementById("` + cardID(states[i].ID) + `")`
	}
	second := card(record.states, 1)
	const said = `document.querySelector("[data-board-say]").textContent`

	b.open(s, "/board")
	if got := b.value(`document.querySelectorAll(".is-new").length + ` + said); got != "0" {
		t.Errorf("on opening the page something is new: %s", got)
	}
	b.value(`window.fresh = [], window.ran = 0, window.now = new Set(), new MutationObserver(() => {
		const now = new Set(Array.from(document.querySelectorAll(".is-new"), (e) => e.id));
		window.fresh.push(...now.difference(window.now));
		window.now = now;
	}).observe(document.body, { subtree: true, attributes: true, attributeFilter: ["class"] }),
	document.addEventListener("animationstart", (e) => { if (e.animationName === "arrive") window.ran += 1; })`)
	signal := func(states []plant.StationState) { open(&states[1].Characteristics[0], 0, beyond) }
	push(signal)
	b.until(second + `.classList.contains("look")`)
	b.until(said + ` === "New at Turning 2. Look, Axle seat: beyond 3 sigma, high side."`)
	b.until(`window.fresh.length === 1 && window.ran > 0`)
	b.until(`document.querySelectorAll(".is-new").length === 0`)

	// The same matter pushed again is not new, though its card changes.
	b.value(`document.querySelector("[data-board-say]").textContent = ""`)
	push(func(states []plant.StationState) {
		signal(states)
		m := states[1].Characteristics[0].Matter
		m.TakenByName, m.TakenAt = "Operator 1", noon
	})
	b.until(`document.getElementById("needs").innerText.includes("Operator 1 took it 12:24")`)
	if got := b.value(`window.fresh.length + ` + said); got != "1" {
		t.Errorf("the same matter is new again: %s", got)
	}

	// Pushes keep to what the viewer has chosen.
	record.set(twelve())
	b.open(s, "/board?line="+record.states[8].LineID.String()+"&owner=station")
	hidden := `[...document.querySelectorAll(".card:not([hidden]), #needs li:not([hidden])")].length`
	if got := b.value(hidden); got != "7" { // 4 cards, 3 in need
		t.Errorf("%s parts of one line are shown", got)
	}
	push(func(states []plant.StationState) {
		signal(states) // on another line
		late(&states[10].Characteristics[0], 9*time.Minute, plant.Late)
	})
	b.until(`document.getElementById("needs").innerText.includes("Drag torque")`)
	if got := b.value(hidden); got != "8" {
		t.Errorf("after the push %s parts are shown, want one more", got)
	}
	if got := b.value(said); strings.Contains(got, "Turning 2") {
		t.Errorf("what was not chosen is read out: %s", got)
	}
	if got := b.value(`document.querySelector("[data-elsewhere]").hidden`); got != "false" {
		t.Error("that more needs a person elsewhere is not said")
	}

	// A new station brings a new page.
	record.set(twelve()[:11])
	s.hub.Dirty(ui.TopicBoard)
	b.open(s, "/board")
	b.value(`window.old = true`)
	record.set(twelve())
	s.hub.Dirty(ui.TopicBoard)
	b.until(`window.old === undefined && document.querySelectorAll(".card").length === 12`)
}
