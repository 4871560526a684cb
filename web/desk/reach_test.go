package desk

import (
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
	"holdfast/internal/spc/watch"
	"holdfast/web/ui"
	"holdfast/web/words"
)

var noon = time.Date(2026, 3, 12, 12, 0, 0, 0, time.UTC)

// series is a history of single readings in the last of two decimals, a minute apart,
// judged by centre 10.00 and sigma 0.10 since before its first point.
func series(units ...int64) plant.History {
	rev := uuid.New()
	h := plant.History{
		Revisions: map[uuid.UUID]plant.Revision{rev: {ID: rev, Number: 1, Chart: limits.Individuals, Center: 10, Sigma: 0.1, Multiple: 3}},
		Course:    plant.Course{Before: plant.Segment{From: noon.Add(-time.Hour), Revision: rev}},
	}
	h.State.Setup = plant.Setup{Version: 1, Unit: "g", Decimals: 2, Chart: limits.Individuals, Size: 1}
	for i, u := range units {
		h.Points = append(h.Points, plant.Point{Subgroup: uuid.New(), TakenAt: noon.Add(time.Duration(i) * time.Minute), Setup: 1,
			Readings: []int64{u}, Stats: plant.Summarise([]int64{u}, 2)})
	}
	return h
}

// open opens a matter at point i by one firing.
func open(h *plant.History, i int, panel plant.Panel) {
	key := plant.OutsideSpecification
	if panel != plant.Reading {
		key = plant.RuleKey(watch.Rule{Kind: watch.Beyond, Z: 3})
	}
	at := h.Points[i].TakenAt
	h.State.Matter = &plant.Matter{ID: uuid.New(), OpenedTaken: at, OpenedAt: at, OpenedSubgroup: h.Points[i].Subgroup,
		Lines: []plant.MatterLine{{Firing: plant.Firing{Panel: panel, Rule: key, Side: plant.High}, First: at, Last: at, Count: 1}}}
}

func TestTheReachOfAHoldGoesBackToTheLastRoundWithin(t *testing.T) {
	t.Parallel()
	h := series(1000, 1001, 1002, 1090, 1000)
	h.Points[3].Outside = 1
	open(&h, 3, plant.Reading)
	r, ok := reachOf(h, h.Points)
	if !ok || r.From != 2 || r.Cut || !r.Since.Equal(h.Points[2].TakenAt) {
		t.Errorf("%+v, %v; want it from the third point on", r, ok)
	}
	h.Points[0].Outside, h.Points[1].Outside, h.Points[2].Outside = 1, 1, 1
	if r, _ = reachOf(h, h.Points); r.From != 0 || !r.Cut {
		t.Errorf("%+v; want it to begin before the stretch", r)
	}
}

// A step of four sigma at the sixth point: by hand, C of a change before the sixth
// point is 2·(4)² = 32 with two points after it, that before the fifth
// (0+4+4)²/3 = 21.3, so only the former is within 7.35 of the maximum. The firing
// itself alone has 16.
func TestTheReachOfALookGoesBackToTheLastPointBeforeTheChange(t *testing.T) {
	t.Parallel()
	h := series(1000, 1000, 1000, 1000, 1000, 1040, 1040)
	open(&h, 6, plant.Location)
	r, ok := reachOf(h, h.Points)
	if !ok || r.From != 4 || r.Cut || r.At != 6 {
		t.Fatalf("%+v, %v; want it from the fifth point on", r, ok)
	}
	if r.Size < 0.3999 || r.Size > 0.4001 {
		t.Errorf("the change is %v, want 0.4", r.Size)
	}
	f := ui.NewFormat(words.For("en"), time.UTC, noon.Add(10*time.Minute))
	if got := r.change(f, h.State.Setup); got != "about +0.400\u00a0g since 12:05" {
		t.Errorf("said as %q", got)
	}
	m := plant.MachineNow{Machine: plant.Machine{PartsPerHour: 600}}
	if got := r.words(f, m); got != "Reach: since 12:04, about 60 parts" {
		t.Errorf("said as %q", got)
	}
}

func TestTheReachStopsAtTheBoundary(t *testing.T) {
	t.Parallel()
	h := series(1000, 1000, 1040, 1040, 1040)
	restart := h.Points[2].TakenAt.Add(-10 * time.Second)
	h.Course.Boundaries = []plant.Boundary{{At: restart, Kind: plant.ByRestart}}
	open(&h, 4, plant.Location)
	r, ok := reachOf(h, h.Points)
	if !ok || r.From != 2 || r.Cut || !r.Since.Equal(restart) {
		t.Errorf("%+v, %v; want it from the restart on", r, ok)
	}
}

func TestAReachOutsideOfTheStretchSaysSo(t *testing.T) {
	t.Parallel()
	h := series(1000, 1000, 1000)
	open(&h, 1, plant.Location)
	h.State.Matter.OpenedTaken = noon.Add(-time.Hour)
	h.State.Matter.Lines[0].First = noon.Add(-time.Hour)
	if r, ok := reachOf(h, h.Points); !ok || r.From != 0 || !r.Cut {
		t.Errorf("%+v, %v; want it to begin before the stretch", r, ok)
	}
	h.State.Matter.OpenedTaken = noon.Add(time.Hour)
	if _, ok := reachOf(h, h.Points); ok {
		t.Error("a matter that is newer than the stretch has a reach in it")
	}
	h.State.Matter = nil
	if _, ok := reachOf(h, h.Points); ok {
		t.Error("there is a reach without a matter")
	}
}

func TestPartsAreSaidOnlyWhereTheyAreKnown(t *testing.T) {
	t.Parallel()
	m := plant.MachineNow{Machine: plant.Machine{PartsPerHour: 120}, Log: plant.MachineLog{
		{At: noon, Running: true}, {At: noon.Add(time.Hour), Running: false}}}
	if n, ok := partsSince(m, noon, noon.Add(5*time.Hour)); !ok || n != 120 {
		t.Errorf("%d parts, %v; want 120: it stood still afterwards", n, ok)
	}
	if _, ok := partsSince(m, noon.Add(-time.Minute), noon.Add(time.Hour)); ok {
		t.Error("parts are said from before the log")
	}
	m.PartsPerHour = 0
	if _, ok := partsSince(m, noon, noon.Add(time.Hour)); ok {
		t.Error("parts are said without a rate")
	}
}

func TestRulesAreReadAsTheyAreWritten(t *testing.T) {
	t.Parallel()
	for _, r := range append(watch.Nelson(), watch.Rule{Kind: watch.KOfM, K: 3, M: 6, Z: 1.25}) {
		if got, ok := readRule(ruleCode(r)); !ok || got != r {
			t.Errorf("%s is read as %+v, %v", ruleCode(r), got, ok)
		}
	}
	for _, bad := range []string{"", "beyond", "beyond:x", "beyond:NaN", "beyond:3:4", "k-of-m:3:2:2", "one-side:1", "one-side:64", "nothing:3", "within:15:+Inf"} {
		if r, ok := readRule(bad); ok {
			t.Errorf("%q is read as %+v", bad, r)
		}
	}
}

func TestLettersGoOnAfterZ(t *testing.T) {
	t.Parallel()
	for n, want := range map[int]string{0: "A", 25: "Z", 26: "AA", 51: "AZ", 52: "BA", 701: "ZZ", 702: "AAA"} {
		if got := letter(n); got != want {
			t.Errorf("%d is %s, want %s", n, got, want)
		}
	}
}
