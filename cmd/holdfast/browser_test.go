package main

import (
	"context"
	"testing"
	"time"

	"github.com/chromedp/chromedp/kb"

	"holdfast/internal/browsertest"
	"holdfast/internal/plant"
)

// signIn opens a window of this person's own.
func (r *running) signIn(t testing.TB, b *browsertest.Browser, login string) *browsertest.Page {
	t.Helper()
	p := b.Person(r.url)
	p.Open("/sign-in")
	p.WaitFor(`document.querySelector("#login")`)
	p.Value(`document.querySelector("#login").focus()`)
	p.Keys(login + "\t" + secret + "\r")
	p.WaitFor(`location.pathname !== "/sign-in"`)
	return p
}

// calm records so many calm subgroups, the last one now.
func (r *running) calm(t testing.TB, n int) {
	t.Helper()
	for i := range n {
		d := int64(i%5) - 2
		r.Clock.Advance(30 * time.Minute)
		r.MustRecord(t, r.Diameter, 14990+d, 14991, 14992-d, 14989+d, 14993-d)
	}
}

// type5 types five readings as a gauge does: digits and Enter; the last Enter arms
// saving, and one more saves.
func type5(t testing.TB, p *browsertest.Page, path string, readings ...string) {
	t.Helper()
	p.Open(path)
	p.WaitFor(`document.querySelector("[data-scripted]")`)
	for _, v := range readings {
		p.Keys(v + "\r")
	}
	p.WaitFor(`document.activeElement.matches("[data-main]")`)
	p.Value(`await new Promise((done) => setTimeout(done, 700))`) // a gauge that ends with two Enters saves nothing
	p.Keys("\r")
	p.WaitFor(`document.querySelector("[data-testid=verdict]")`)
}

const (
	theVerdict = `document.querySelector("[data-testid=verdict] h1").textContent.trim()`
	needs      = `document.querySelector("#needs").textContent`
)

// hands work a page.
type hands interface {
	press(p *browsertest.Page, selector string)
	fill(p *browsertest.Page, selector, text string)
	pick(p *browsertest.Page, selector string) // a radio button
}

// pointer works with a mouse or a finger.
type pointer struct{}

func (pointer) press(p *browsertest.Page, selector string)      { p.Click(selector) }
func (pointer) fill(p *browsertest.Page, selector, text string) { p.Fill(selector, text) }
func (pointer) pick(p *browsertest.Page, selector string) {
	p.WaitFor(find(selector))
	p.Value(find(selector) + `.labels[0].click()`)
}

// keyboard has nothing but keys.
type keyboard struct{ t testing.TB }

func (k keyboard) reach(p *browsertest.Page, condition string) {
	k.t.Helper()
	for range 150 {
		if p.Value("Boolean("+condition+")") == "true" {
			return
		}
		p.Keys("\t")
	}
	k.t.Fatalf("no number of tabs leads to %s", condition)
}

func (k keyboard) press(p *browsertest.Page, selector string) {
	k.t.Helper()
	p.WaitFor(find(selector))
	k.reach(p, find(selector)+" === document.activeElement")
	p.Keys("\r")
}

func (k keyboard) fill(p *browsertest.Page, selector, text string) {
	k.t.Helper()
	p.WaitFor(find(selector))
	k.reach(p, find(selector)+" === document.activeElement")
	p.Keys(text)
}

// pick goes to the group and then by arrows to the one that is meant.
func (k keyboard) pick(p *browsertest.Page, selector string) {
	k.t.Helper()
	p.WaitFor(find(selector))
	k.reach(p, `document.activeElement.name === `+find(selector)+`.name`)
	for range 30 {
		if p.Value(find(selector)+".checked") == "true" {
			return
		}
		if p.Value("document.activeElement === "+find(selector)) == "true" {
			p.Keys(" ")
			continue
		}
		p.Keys(kb.ArrowDown)
	}
	k.t.Fatalf("no number of arrows leads to %s", selector)
}

func find(selector string) string { return `document.querySelector('` + selector + `')` }

func TestTheMainJob(t *testing.T) {
	t.Parallel()
	t.Run("by touch", func(t *testing.T) { t.Parallel(); mainJob(t, pointer{}) })
	t.Run("by keyboard", func(t *testing.T) { t.Parallel(); mainJob(t, keyboard{t}) })
}

// mainJob plays it once through: an operator's round beyond the limit opens a
// matter, a board that is open shows it without a reload, the operator gives cause and
// action, an engineer freezes revision 2, and the next round is judged by it.
func mainJob(t *testing.T, h hands) {
	r := serve(t)
	r.calm(t, 22)
	r.MustFreeze(t, r.Diameter)
	r.Clock.Advance(30 * time.Minute)
	b := browsertest.Start(t)

	door := b.Person(r.url)
	door.Open("/sign-in")
	door.Accessible("sign-in")
	door.FitsWidth("sign-in", 320, 1280) // 1280 px at 400 %, and at 100 %

	board := r.signIn(t, b, "supervisor1")
	board.Open("/board")
	board.WaitFor(`document.querySelector("[data-live-state]").textContent.trim() === "live"`)
	board.Value(`window.same = true`) // a reload would forget it
	board.Accessible("board")

	operator := r.signIn(t, b, "operator1")
	at := "/station/" + r.Station.ID.String()
	measure := at + "?measure=" + r.Diameter.ID.String()
	type5(t, operator, measure, "14.990", "14,991", "14.992", "14.990", "14.991")
	operator.Want("verdict on a calm round", theVerdict, "Leave it alone")

	r.Clock.Advance(30 * time.Minute)
	type5(t, operator, measure, "14.998", "14.999", "14.998", "14.999", "14.998")
	operator.Want("verdict beyond the limit", theVerdict, "Look for a cause")
	operator.Accessible("verdict")
	board.WaitFor(needs + `.includes("Look, Axle seat diameter")`)
	board.Want("the board was not reloaded", "window.same", "true")

	// The matter is taken, given cause and action, and closed.
	m := r.openMatter(t)
	operator.Open(at + "/matter/" + m.ID.String())
	operator.Accessible("matter")
	h.press(operator, "[data-testid=take]")
	operator.WaitFor(`document.querySelector("[data-testid=taken-by]")`)
	board.WaitFor(needs + `.includes("Operator 1")`)
	r.Clock.Advance(time.Minute)
	h.pick(operator, "input[name=cause]")
	h.fill(operator, "input[name=action]", "Insert changed")
	h.pick(operator, "input[name=rest]")
	h.press(operator, "[data-testid=close-form] button[type=submit]")
	board.WaitFor("!" + needs + `.includes("Look, Axle seat diameter")`)

	// The engineer studies, freezes revision 2 and signs.
	r.Clock.Advance(time.Minute)
	engineer := r.signIn(t, b, "engineer1")
	chart := "/desk/characteristic/" + r.Diameter.ID.String()
	engineer.Open(chart)
	engineer.Accessible("chart")
	freezeByHand(h, engineer, chart)
	revisions, err := r.Revisions(context.Background(), r.Diameter.ID)
	if err != nil || len(revisions) != 2 || revisions[0].Number != 2 || revisions[0].Author != r.Engineer.ID {
		t.Fatalf("revisions = %+v, %v; want a second one by the engineer", revisions, err)
	}
	engineer.Open(chart + "/revisions")
	engineer.Accessible("limits on record")

	r.Clock.Advance(30 * time.Minute)
	type5(t, operator, measure, "14.990", "14.991", "14.992", "14.990", "14.991")
	operator.Want("verdict after the fix", theVerdict, "Leave it alone")
	now, err := r.History(context.Background(), r.Diameter.ID, plant.Stretch{Last: 1})
	if err != nil || now.State.Revision == nil || now.State.Revision.Number != 2 {
		t.Errorf("in force: %+v, %v; want revision 2", now.State.Revision, err)
	}
}

func (r *running) openMatter(t testing.TB) plant.Matter {
	t.Helper()
	st, err := r.StationState(context.Background(), r.Station.ID, 1)
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range st.Characteristics {
		if c.Matter != nil {
			return *c.Matter
		}
	}
	t.Fatal("no matter is open")
	return plant.Matter{}
}

// freezeByHand goes from the study to the signature.
func freezeByHand(h hands, p *browsertest.Page, chart string) {
	p.Open(chart + "/study")
	p.Accessible("limit study")
	h.press(p, "[data-testid=to-freeze]")
	p.WaitFor(`location.pathname.endsWith("/study/freeze") && document.querySelector("[data-testid=freeze]")`)
	p.Accessible("freezing")
	for _, question := range []string{"known", "wanted", "lasting"} {
		h.pick(p, "input[name="+question+"][value=yes]")
	}
	h.fill(p, "textarea[name=reason]", "New insert grade since Thursday")
	h.fill(p, "input[name=secret]", secret)
	h.press(p, "[data-testid=freeze]")
	p.WaitFor(`document.querySelector("[data-testid=frozen], [data-testid=revision]")`)
}
