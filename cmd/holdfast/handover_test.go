package main

import (
	"context"
	"regexp"
	"strings"
	"testing"
	"time"

	"github.com/chromedp/chromedp"

	"holdfast/internal/browsertest"
)

// One shift opens a matter and writes a note; the next reads both, clears the note and
// confirms; the sheet is printed on A4 with the root of the day.
func TestHandoverFromShiftToShift(t *testing.T) {
	t.Parallel()
	r := serve(t)
	r.calm(t, 20)
	r.MustFreeze(t, r.Diameter)
	r.Clock.Advance(30 * time.Minute)
	r.MustRecord(t, r.Diameter, 14998, 14998, 14999, 14998, 14999)
	m := r.openMatter(t)
	ctx := context.Background()
	if err := r.KeepRoot(ctx); err != nil {
		t.Fatal(err)
	}
	r.Clock.Advance(5 * time.Minute)
	b := browsertest.Start(t)
	before := r.signIn(t, b, "operator1")
	before.Open("/board/handover")
	before.WaitFor(`document.querySelector("[data-handover]")`)
	before.Want("what is still open", `document.querySelectorAll(".ho-matters a[href*='`+m.ID.String()+`']").length`, "1")
	before.Accessible("handover")
	before.FitsWidth("handover", 1280, 320)
	before.Size(1280, 800)
	before.Want("nothing to confirm while the shift runs", `document.querySelectorAll("form[action$='/read']").length`, "0")
	before.Click(".ho-write button[type=submit]")
	before.WaitFor(`document.querySelector(".problem")`) // an empty note is none
	before.Accessible("an empty note")
	before.Fill(".ho-write textarea", "Coolant low, barrel ordered")
	before.Click(".ho-write button[type=submit]")
	before.WaitFor(`document.querySelector("[data-testid=notes]").textContent.includes("barrel ordered")`)

	// A running shift follows by itself, and leaves alone what somebody types.
	const typed = `document.querySelector(".ho-write textarea").value`
	before.Value(typed + ` = "half a sent"`)
	promised := `Array.from(document.querySelectorAll(".ho-block tbody tr")).map((row) => row.textContent).join()`
	now := before.Value(promised)
	r.Clock.Advance(time.Minute)
	r.MustRecord(t, r.Length, 500, 500, 500)
	r.Clock.Advance(time.Minute)
	r.MustRecord(t, r.Length, 500, 500, 500)
	before.Value(`await new Promise((done) => setTimeout(done, 5000))`)
	before.Want("what somebody types", typed, "half a sent")
	before.Value(typed + ` = ""`)
	before.WaitFor(promised + ` !== ` + quoted(now))

	r.Clock.Advance(24 * time.Hour)
	next := r.signIn(t, b, "supervisor1")
	next.Open("/board/handover")
	next.WaitFor(`document.querySelector("[data-testid=notes]").textContent.includes("barrel ordered")`)
	next.Want("an age in days", `document.querySelector(".ho-matters").textContent.includes("1 d")`, "true")
	next.Click("[data-testid=notes] button")
	next.WaitFor(`document.querySelector("[data-testid=notes] .cleared")`)
	next.Click(".ho-nav a")
	next.WaitFor(`document.querySelector("form[action$='/read'] button")`)
	next.Click("form[action$='/read'] button")
	next.WaitFor(`document.querySelector("[data-testid=readers]")?.textContent.includes("Supervisor 1")`)
	next.Want("the root of the day", `document.querySelector("[data-testid=root]").textContent.trim().length`, "64")

	var pdf []byte
	next.Do(func(ctx context.Context, window *chromedp.Target) (none chromedp.Void, err error) {
		pdf, err = chromedp.PrintToPDF(chromedp.PDFPreferCSSPageSize())(ctx, window)
		return none, err
	})
	sheets := regexp.MustCompile(`/Type\s*/Page\b`).FindAllIndex(pdf, -1)
	if len(sheets) < 1 || len(sheets) > 2 {
		t.Errorf("a calm shift of one line fills %d sheets", len(sheets))
	}
	if boxes := regexp.MustCompile(`/MediaBox\s*\[0 0 59[45](\.\d+)? 84[12](\.\d+)?\]`).FindAll(pdf, -1); len(boxes) != len(sheets) {
		t.Errorf("%d of %d sheets are A4", len(boxes), len(sheets))
	}
	for _, d := range check(t, r) {
		t.Errorf("tables and ledger differ: %s", d)
	}
}

func quoted(s string) string { return "`" + strings.ReplaceAll(s, "`", "") + "`" }

func check(t *testing.T, r *running) (out []string) {
	t.Helper()
	differ, err := r.CheckRecord(context.Background())
	if err != nil {
		t.Fatal(err)
	}
	for _, d := range differ {
		out = append(out, d.What)
	}
	return out
}
