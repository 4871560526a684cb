package admin

import (
	"bytes"
	"context"
	"fmt"
	"regexp"
	"strings"
	"testing"

	"github.com/chromedp/chromedp"

	"holdfast/internal/browsertest"
	"holdfast/internal/qualify"
)

// long is the sample with a group that fills several sheets of paper.
func long(cases int) qualify.Record {
	r := sample()
	g := qualify.GroupTotal{Name: "run rules", Passed: cases, Seconds: 1.25}
	for i := range cases {
		r.Results = append(r.Results, qualify.Result{Group: g.Name, Name: fmt.Sprintf("series %d, first signal", i+1), Source: "closed form", Status: qualify.Computed, Expected: float64(i), Obtained: float64(i), Basis: "a whole number", Passed: true})
	}
	r.Groups, r.Passed = append(r.Groups, g), r.Passed+cases
	return r
}

func TestQualificationInTheBrowser(t *testing.T) {
	t.Parallel()
	r := newRunner(long(400))
	s := newSite(t, r.run)
	b := browsertest.Start(t).Person(s.URL)
	b.Open("/sign-in")
	b.Fill("#login", "administrator")
	b.Fill("#password", "right")
	b.Keys("\r")
	b.WaitFor(`location.pathname === "/admin"`)
	b.Accessible("start page")
	b.Click(`.setup-cards a[href="/admin/qualification"]`)
	b.WaitFor(`document.querySelector("[data-testid=never]")`)
	b.Accessible("not run yet")
	b.Click(`[data-testid=never] button`)

	// The page follows by itself, and shows the record when there is one.
	b.WaitFor(`document.querySelector("[data-running]")`)
	const far = `document.querySelector("[data-progress=far]").textContent.trim()`
	r.group <- struct{}{}
	r.group <- struct{}{}
	b.WaitFor(far + `.startsWith("1 group is done") || ` + far + `.startsWith("2 groups are done")`)
	b.Accessible("running")
	r.end <- nil
	b.WaitFor(`document.querySelector("[data-testid=outcome]")`)

	b.Size(1440, 900)
	b.Open("/admin/qualification?values=open")
	b.Accessible("record")
	b.FitsWidth("record", 1440, 800, 320)
	b.Open("/admin")
	b.FitsWidth("start page", 320)

	// On paper every group is open, though all are closed on the screen, and the heads
	// of the tables stand on each sheet.
	b.Open("/admin/qualification")
	b.Want("open on the screen", `String(document.querySelectorAll("details[open]").length)`, "0")
	var pdf []byte
	b.Do(func(ctx context.Context, window *chromedp.Target) (none chromedp.Void, err error) {
		pdf, err = chromedp.PrintToPDF(chromedp.PDFPreferCSSPageSize())(ctx, window)
		return none, err
	})
	sheets := regexp.MustCompile(`/Type\s*/Page\b`).FindAllIndex(pdf, -1)
	if len(sheets) < 6 || len(sheets) > 14 {
		t.Errorf("405 values stand on %d sheets", len(sheets))
	}
	if boxes := regexp.MustCompile(`/MediaBox\s*\[0 0 59[45](\.\d+)? 84[12](\.\d+)?\]`).FindAll(pdf, -1); len(boxes) != len(sheets) {
		t.Errorf("%d of %d sheets are A4: %s", len(boxes), len(sheets), bytes.Join(regexp.MustCompile(`/MediaBox[^\]]*\]`).FindAll(pdf, 1), nil))
	}
	b.Want("closed again", `String(document.querySelectorAll("details[open]").length)`, "0")
	b.Value(`document.documentElement.dataset.theme = "night"`)
	b.Accessible("record by night")
	if strings.Contains(s.log.String(), "ERROR") {
		t.Error(s.log)
	}
}
