package board

import (
	"fmt"
	"strings"
	"testing"
	"time"

	"github.com/chromedp/chromedp"

	"holdfast/internal/browsertest"
	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// These tests look at the board in Chromium, behind the real router with its content
// policy, the real hub and the real scripts.

// wall is a Chromium before the board.
type wall struct{ *browsertest.Page }

func newWall(t *testing.T, s *site) wall {
	t.Helper()
	return wall{browsertest.Start(t).Person(s.URL)}
}

func (b wall) signIn(login string) {
	b.Open("/sign-in")
	b.Do(chromedp.SendKeys("#login", login), chromedp.SendKeys("#password", "right"), chromedp.Submit("#password"))
	b.WaitFor(`!location.pathname.startsWith("/sign-in")`)
}

const isLive = `document.querySelector("[data-live-state]").dataset.state === "on"`

func (b wall) live(path string) {
	b.Open(path)
	b.WaitFor(isLive)
}

func TestBoardFitsItsScreens(t *testing.T) {
	t.Parallel()
	record := &floorNow{}
	s := newSite(t, record, kestrelRow, func() time.Time { return noon })
	b := newWall(t, s)
	b.signIn("supervisor")

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
		b.Size(tc.width, tc.height)
		b.live(tc.path)
		if got := b.Value("document.documentElement.scrollWidth"); got != fmt.Sprint(tc.width) {
			t.Errorf("%s: %s px wide on a screen of %d", tc.name, got, tc.width)
		}
		if !tc.fits {
			continue
		}
		if got := b.Value("document.documentElement.scrollHeight"); got != fmt.Sprint(tc.height) {
			t.Errorf("%s: %s px high on a screen of %d", tc.name, got, tc.height)
		}
		if got := b.Value(`(() => { const l = document.querySelector(".lanes"); return l ? l.scrollHeight - l.clientHeight : 0; })()`); got != "0" {
			t.Errorf("%s: the lanes scroll by %s px", tc.name, got)
		}
		if got := b.Value(cut); got != "" {
			t.Errorf("%s: parts of cards are cut off: %s", tc.name, got)
		}
	}

	// A list that does not fit shows whole rows, says how many follow, and turns to them.
	const rows = `[...document.querySelectorAll(".needs-list > li")]`
	const seen = rows + `.filter((e) => getComputedStyle(e).visibility === "visible")`
	const whole = `(() => { const l = document.querySelector(".needs-list").getBoundingClientRect(); return ` + seen + `.every((e) => { const r = e.getBoundingClientRect(); return r.bottom < l.top || r.top > l.bottom || r.top >= l.top - 1 && r.bottom <= l.bottom + 1; }); })()`
	for _, size := range [][2]int64{{1920, 1080}, {1280, 800}} {
		for name, states := range map[string][]plant.StationState{"all run": troubled(14), "some stand still": troubled(14, 0, 3, 5, 11)} {
			record.set(states)
			b.Size(size[0], size[1])
			b.live("/board")
			at := fmt.Sprintf("%s, %d wide", name, size[0])
			b.Want(at+": needs", rows+`.length`, "14")
			b.WaitFor(`!document.querySelector("[data-beyond]").hidden`)
			b.Want(at+": whole rows", whole, "true")
			b.Want(at+": the count adds up", `(() => { const l = document.querySelector(".needs-list").getBoundingClientRect(); return `+seen+`.filter((e) => e.getBoundingClientRect().bottom <= l.bottom + 1).length + Number(document.querySelector("[data-beyond]").textContent.match(/^and (\d+) more/)[1]); })()`, "14")
		}
	}
	b.Value(`(() => { const l = document.querySelector(".needs-list"); l.scrollTop = l.scrollHeight; })()`)
	b.WaitFor(`document.querySelector("[data-beyond]").textContent.endsWith(" to 14 of 14")`)
	b.Want("whole rows at the end", whole, "true")
	b.Accessible("more needs than fit")

	b.Size(1920, 1080)
	for _, states := range [][]plant.StationState{twelve(), nil} {
		record.set(states)
		for _, theme := range []string{"day", "night"} {
			b.live("/board")
			b.Value(`document.documentElement.dataset.theme = "` + theme + `"`)
			b.Accessible(fmt.Sprintf("%d stations, %s", len(states), theme))
		}
	}
}

func TestBoardFollowsWhatIsPushed(t *testing.T) {
	t.Parallel()
	record := &floorNow{states: twelve()}
	s := newSite(t, record, kestrelRow, func() time.Time { return noon })
	b := newWall(t, s)
	b.Size(1920, 1080)
	b.signIn("supervisor")
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

	b.live("/board")
	if got := b.Value(`document.querySelectorAll(".is-new").length + ` + said); got != "0" {
		t.Errorf("on opening the page something is new: %s", got)
	}
	b.Value(`window.fresh = [], window.ran = 0, window.now = new Set(), new MutationObserver(() => {
		const now = new Set(Array.from(document.querySelectorAll(".is-new"), (e) => e.id));
		window.fresh.push(...now.difference(window.now));
		window.now = now;
	}).observe(document.body, { subtree: true, attributes: true, attributeFilter: ["class"] }),
	document.addEventListener("animationstart", (e) => { if (e.animationName === "arrive") window.ran += 1; })`)
	signal := func(states []plant.StationState) { open(&states[1].Characteristics[0], 0, beyond) }
	push(signal)
	b.WaitFor(second + `.classList.contains("look")`)
	b.WaitFor(said + ` === "New at Turning 2. Look, Axle seat: beyond 3 sigma, high side."`)
	b.WaitFor(`window.fresh.length === 1 && window.ran > 0`)
	b.WaitFor(`document.querySelectorAll(".is-new").length === 0`)

	// The same matter pushed again is not new, though its card changes.
	b.Value(`document.querySelector("[data-board-say]").textContent = ""`)
	push(func(states []plant.StationState) {
		signal(states)
		m := states[1].Characteristics[0].Matter
		m.TakenByName, m.TakenAt = "Operator 1", noon
	})
	b.WaitFor(`document.getElementById("needs").innerText.includes("Operator 1 took it 12:24")`)
	if got := b.Value(`window.fresh.length + ` + said); got != "1" {
		t.Errorf("the same matter is new again: %s", got)
	}

	// Pushes keep to what the viewer has chosen.
	record.set(twelve())
	b.live("/board?line=" + record.states[8].LineID.String() + "&owner=station")
	hidden := `[...document.querySelectorAll(".card:not([hidden]), #needs li:not([hidden])")].length`
	if got := b.Value(hidden); got != "7" { // 4 cards, 3 in need
		t.Errorf("%s parts of one line are shown", got)
	}
	push(func(states []plant.StationState) {
		signal(states) // on another line
		late(&states[10].Characteristics[0], 9*time.Minute, plant.Late)
	})
	b.WaitFor(`document.getElementById("needs").innerText.includes("Drag torque")`)
	if got := b.Value(hidden); got != "8" {
		t.Errorf("after the push %s parts are shown, want one more", got)
	}
	if got := b.Value(said); strings.Contains(got, "Turning 2") {
		t.Errorf("what was not chosen is read out: %s", got)
	}
	if got := b.Value(`document.querySelector("[data-elsewhere]").hidden`); got != "false" {
		t.Error("that more needs a person elsewhere is not said")
	}

	// A station that goes or comes brings a new page.
	b.live("/board")
	for _, n := range []int{11, 12} {
		b.Value(`window.old = true`)
		record.set(twelve()[:n])
		s.hub.Dirty(ui.TopicBoard)
		b.WaitFor(fmt.Sprintf(`window.old === undefined && document.querySelectorAll(".card").length === %d`, n))
		b.WaitFor(isLive)
	}
}
