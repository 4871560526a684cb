package station_test

import (
	"testing"
	"time"

	"github.com/chromedp/chromedp"
	"github.com/chromedp/chromedp/kb"

	"holdfast/internal/browsertest"
	"holdfast/web/words"
)

// tablet is a Chromium at the station, with the operator signed in.
func (s *site) tablet(t *testing.T) *browsertest.Page {
	t.Helper()
	tb := browsertest.Start(t).Person(s.url)
	tb.Open("/sign-in")
	tb.WaitFor(`document.activeElement.id === "login"`)
	tb.Keys(s.Operator.Login + "\t" + "right\r")
	tb.WaitFor(`location.pathname.startsWith("/station")`)
	return tb
}

const (
	theHeading = `[...document.querySelectorAll("[data-heading]")].find((h) => h.offsetParent).textContent`
	theFocus   = `document.activeElement.labels?.[0]?.textContent ?? document.activeElement.textContent`
	theAverage = `[...document.querySelectorAll("[data-falls-average]")].find((h) => h.offsetParent).textContent`
	theProblem = `[...document.querySelectorAll(".problem")].map((p) => p.textContent.trim()).join("")`
	theValue   = `document.activeElement.value`

	theReadings = `[...document.querySelectorAll("[data-reading]")].map((i) => i.value).join(" ")`
)

func TestRoundByGaugeThatTypes(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.steady(t)
	s.Clock.Advance(time.Minute)
	tb := s.tablet(t)
	tb.Open(s.at() + "?measure=" + s.Diameter.ID.String())
	tb.WaitFor(`document.querySelector("[data-scripted]")`)
	tb.Want("first question", theHeading, "Measure part 1 of 5")
	tb.Keys("14.994\r14,989\r")
	tb.Want("third question", theHeading, "Measure part 3 of 5")
	tb.Want("average so far", theAverage, "14.9915")

	tb.Keys("149.96\r")
	tb.Want("still the third question", theHeading, "Measure part 3 of 5")
	tb.Want("a slip is asked for", theProblem, "Part 3: This is far from what is usual here. Look at the gauge and type the reading again.")
	tb.Want("what was typed is gone from the field", theValue, "")
	tb.Keys("x\r")
	tb.Want("letters", theProblem, "Part 3: This is not a number. Type it again.")
	tb.Keys(kb.Backspace + "14.9961\r")
	tb.Want("too many decimals", theProblem, "Part 3: This has more decimals than are measured.")
	tb.Keys("14.996\r14.99\r14.992\r") // what was wrong is selected, so typing replaces it
	tb.Want("with all their decimals and the sign of the page", theReadings, "14.994 14.989 14.996 14.990 14.992")
	tb.Want("all in: saving is armed", theFocus, "Save the round")
	tb.Want("the heading", theHeading, "All parts are in")
	tb.Keys("\r") // a gauge that ends with two
	tb.Value(`await new Promise((done) => setTimeout(done, 500))`)
	tb.Want("nothing is sent yet", theFocus, "Save the round")
	tb.Keys("14.993\r") // a sixth, after five are in
	tb.Want("a number too many", theHeading, "All in: that number does not count")
	tb.Value(`await new Promise((done) => setTimeout(done, 500))`)
	tb.Want("nor is it sent by that", theFocus, "Save the round")
	tb.Keys("\r")
	tb.WaitFor(`document.querySelector("[data-testid=verdict]")`)
	tb.Want("verdict", `document.querySelector("h1").textContent`, "Leave it alone")
	var retyped int
	if err := s.Pool().QueryRow(t.Context(), `select jsonb_array_length(retyped) from subgroup where retyped is not null`).Scan(&retyped); err != nil || retyped != 1 {
		t.Errorf("%d earlier typings are kept, %v", retyped, err)
	}
}

// TestReadingsAreWrittenAsTheLanguageWritesThem: in German with a comma, also when a
// reading is left without Enter; what cannot be right stays as it was typed.
func TestReadingsAreWrittenAsTheLanguageWritesThem(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.steady(t)
	s.Clock.Advance(time.Minute)
	tb := s.tablet(t)
	tb.Value(`document.cookie = "` + words.Cookie + `=de; path=/"`)
	tb.Open(s.at() + "?measure=" + s.Diameter.ID.String())
	tb.WaitFor(`document.querySelector("[data-scripted]")`)
	tb.Keys("14.99\r14.994")
	tb.Do(chromedp.Focus(`[data-reading][id$="-2"]`))
	tb.Keys("14.9961")
	tb.Do(chromedp.Focus(`[data-reading][id$="-3"]`))
	tb.Want("the readings", theReadings, "14,990 14,994 14.9961  ")
}

func TestRoundByKeypadAsDeviation(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.steady(t)
	s.Clock.Advance(time.Minute)
	tb := s.tablet(t)
	tb.Open(s.at() + "?measure=" + s.Diameter.ID.String())
	tb.WaitFor(`document.querySelector("[data-scripted]")`)
	tap := func(keys ...string) {
		t.Helper()
		for _, k := range keys {
			tb.Click(`[data-key="` + k + `"]`)
		}
	}
	main := func() { t.Helper(); tb.Click("[data-main]") }
	tap("1", "4", ".", "9", "9", "9", "back", "5")
	tb.Want("typed", theValue, "14.995")
	tb.Want("the button", `document.querySelector("[data-main]").textContent`, "Next part")
	main()
	tb.Want("second question", theHeading, "Measure part 2 of 5")
	tb.Click(`[name="entry"][value="deviation"]`)
	tb.Want("converted", `document.querySelector("[data-reading]").value`, "4")
	tb.Want("the point gives way to the sign", `getComputedStyle(document.querySelector("[data-key='.']")).display+getComputedStyle(document.querySelector("[data-key=sign]")).display`, "noneflex")
	tb.Do(chromedp.Focus(`[data-reading][id$="-1"]`))
	for _, keys := range [][]string{{"3", "sign"}, {"0"}, {"2"}} {
		tap(keys...)
		main()
	}
	tap("1")
	tb.Want("average", theAverage, "14.9918")
	tb.Want("the button when all are in", `document.querySelector("[data-main]").textContent`, "Save the round")
	main()
	tb.WaitFor(`document.querySelector("[data-testid=verdict]")`)
	tb.Want("verdict", `document.querySelector(".fact b").textContent`, "14.9918\u00a0mm")
	tb.Open(s.at() + "?measure=" + s.Diameter.ID.String())
	tb.WaitFor(`document.querySelector("[data-scripted]")`)
	tb.Want("the way of typing is remembered", `document.querySelector('[name="entry"]:checked').value`, "deviation")
}
