package plant

import (
	"math"
	"math/rand/v2"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/spc/limits"
)

var noon = time.Date(2026, 3, 12, 12, 0, 0, 0, time.UTC)

// stretch is a history of single readings half an hour apart, in hundredths, with limits
// about 10.00 and sigma 0.10.
func stretch(values ...float64) History {
	rev := Revision{ID: uuid.Must(uuid.NewV7()), Number: 1, Chart: limits.Individuals, Center: 10, Sigma: 0.1, Multiple: 3}
	setup := Setup{Version: 1, Unit: "g", Decimals: 2, Target: &Decimal{1000, 2}, Lower: &Decimal{900, 2}, Upper: &Decimal{1100, 2}, Chart: limits.Individuals, Size: 1}
	h := History{Revisions: map[uuid.UUID]Revision{rev.ID: rev}, Setups: map[int]Setup{1: setup}}
	h.State.ID, h.State.Setup, h.State.Revision = uuid.Must(uuid.NewV7()), setup, &rev
	h.State.Segment = Segment{From: noon.Add(-time.Hour), Revision: rev.ID}
	h.Course.Before = h.State.Segment
	for i, v := range values {
		units := int64(math.Round(v * 100))
		h.Points = append(h.Points, Point{Subgroup: uuid.Must(uuid.NewV7()), TakenAt: at(i), Setup: 1, Readings: []int64{units}, Stats: Summarise([]int64{units}, 2)})
	}
	return h
}

// at is when point i was taken.
func at(i int) time.Time { return noon.Add(time.Duration(i) * 30 * time.Minute) }

// adjusted adds an adjustment one minute after point i.
func (h *History) adjusted(i int, hundredths int64, prompted bool) {
	h.Changes = append(h.Changes, Change{ID: uuid.Must(uuid.NewV7()), Kind: Adjustment, Characteristic: h.State.ID, Size: &Decimal{hundredths, 2}, Prompted: prompted,
		HappenedAt: at(i).Add(time.Minute)})
}

// matter opens at point i with a location line and closes after point j, -1: stays open.
func (h *History) matter(i, j int, how Closing, panel Panel) {
	m := Matter{ID: uuid.Must(uuid.NewV7()), OpenedTaken: at(i), Lines: []MatterLine{{Firing: Firing{Panel: panel, Side: High}, First: at(i), Last: at(i), Count: 1}}}
	if j < 0 {
		h.State.Matter = &m
	} else {
		m.ClosedAt, m.RestartAt, m.Closing = at(j).Add(2*time.Minute), at(j).Add(2*time.Minute), how
		h.Course.Boundaries = append(h.Course.Boundaries, Boundary{At: m.RestartAt, Kind: ByRestart})
		h.State.Segment.From = m.RestartAt
	}
	h.Matters = append(h.Matters, m)
}

func audit(t *testing.T, h History) AdjustmentAudit {
	t.Helper()
	a, err := h.AuditAdjustments()
	if err != nil {
		t.Fatal(err)
	}
	return a
}

// TestAuditThroughAKnobCountsWhatMovesThisCharacteristic and nothing else.
func TestAuditThroughAKnobCountsWhatMovesThisCharacteristic(t *testing.T) {
	t.Parallel()
	h := stretch(10, 10.1, 9.9, 10.3, 10.2, 10.3, 10.1)
	other := uuid.Must(uuid.NewV7())
	turn := Change{Kind: Adjustment, Characteristic: other, Knob: uuid.Must(uuid.NewV7()), HappenedAt: at(2).Add(time.Minute), Size: &Decimal{5, 1}, Turned: &Decimal{1, 0},
		Moves: []Effect{{other, Decimal{5, 1}}, {h.State.ID, Decimal{2, 1}}}}
	elsewhere := Change{Kind: Adjustment, Characteristic: other, Size: &Decimal{7, 1}, HappenedAt: at(3).Add(time.Minute)}
	h.Changes = []Change{turn, elsewhere}
	a := audit(t, h)
	if len(a.Items) != 1 || a.Items[0].Before != 3 || a.Items[0].Governed != 4 || a.Items[0].Effect.String() != "0.2" || a.Unprompted.Count != 1 {
		t.Fatalf("%+v", a.Items)
	}
	// By hand: without 0.2 the deviations .3 .2 .3 .1 had been .1 0 .1 -.1.
	if want := (0.01 + 0 + 0.01 + 0.01 - 0.09 - 0.04 - 0.09 - 0.01) / 4; math.Abs(a.Items[0].Gain-want) > 1e-12 {
		t.Errorf("gain %g, want %g", a.Items[0].Gain, want)
	}
	if further, of := a.Further(); further != 1 || of != 1 {
		t.Errorf("%d of %d went further off", further, of)
	}
}

// TestWhatEndsWhatIsCarried: a new tool does, closing a matter does not, and an
// adjustment that was the fix stays in force behind the restart mark.
func TestWhatEndsWhatIsCarried(t *testing.T) {
	t.Parallel()
	values := []float64{10, 10.1, 10.3, 10.2, 10.3, 10.2, 10.3, 10.1}
	carried := func(h History) []float64 { return audit(t, h).Carried }

	h := stretch(values...)
	h.adjusted(1, 20, false)
	h.matter(3, 4, NothingDone, Location)
	if c := carried(h); c[3] != 0.2 || c[7] != 0.2 {
		t.Errorf("closed with nothing done: carried %v", c)
	}
	h = stretch(values...)
	h.adjusted(1, 20, false)
	h.matter(3, 4, Fixed, Location)
	if c := carried(h); c[4] != 0.2 || c[7] != 0.2 {
		t.Errorf("closed with a fix that turned nothing back: carried %v", c)
	}
	h = stretch(10, 10.1, 10.5, 10.6, 10.5, 10.1, 9.9, 10)
	h.matter(3, 5, Fixed, Location)
	h.adjusted(4, -50, true)
	a := audit(t, h)
	if a.Items[0].Governed != 3 || a.Items[0].Gain <= 0 || a.Conclusion != AllPrompted {
		t.Errorf("the adjustment that was the fix: %+v, %s", a.Items[0], a.Conclusion)
	}
	h = stretch(values...)
	h.adjusted(1, 20, false)
	h.Changes = append(h.Changes, Change{Kind: ToolChanged, HappenedAt: at(4).Add(time.Minute)})
	if c := carried(h); c[4] != 0.2 || c[5] != 0 {
		t.Errorf("new tool: carried %v", c)
	}
}

// TestAuditConclusions over 200 seeded histories each: full compensation of a stable
// process is found to harm, nothing adjusted says so, and a process that is left alone
// but for adjustments of nothing is not accused.
func TestAuditConclusions(t *testing.T) {
	t.Parallel()
	const histories = 200
	harm, claimed := 0, 0
	for seed := range uint64(histories) {
		rng := rand.New(rand.NewPCG(seed, 17))
		h, offset := stretch(), 0.0
		var values []float64
		for range 60 {
			values = append(values, 10+offset+0.1*rng.NormFloat64())
			offset -= math.Round(100*(values[len(values)-1]-10)) / 100
		}
		h = stretch(values...)
		for i, v := range values[:59] {
			if units := -int64(math.Round(100 * (v - 10))); units != 0 {
				h.adjusted(i, units, false)
			}
		}
		a := audit(t, h)
		if a.Conclusion == DidHarm && a.Ppk < a.PpkStayed {
			harm++
		}
		values = values[:0]
		for range 60 {
			values = append(values, 10+0.1*rng.NormFloat64())
		}
		h = stretch(values...)
		if a := audit(t, h); a.Conclusion != NothingAdjusted || a.Ratio != 1 {
			t.Fatalf("nothing was adjusted: %+v", a)
		}
		for i := range values {
			if i%10 == 5 { // to and fro between as far off on the one side and on the other
				h.adjusted(i, []int64{8, -8}[i/10%2], false)
			}
		}
		for i := range h.Points {
			if i > 5 {
				d := []float64{0.04, -0.04}[(i-6)/10%2]
				units := int64(math.Round(100 * (values[i] + d)))
				h.Points[i].Stats = Summarise([]int64{units}, 2)
			} else {
				units := int64(math.Round(100 * (values[i] - 0.04)))
				h.Points[i].Stats = Summarise([]int64{units}, 2)
			}
		}
		if c := audit(t, h).Conclusion; c == DidHarm || c == DidHelp {
			claimed++
		}
	}
	t.Logf("full compensation is found to harm in %d of %d, neutral adjustments are said to do something in %d", harm, histories, claimed)
	if harm < histories*9/10 || claimed > histories/10 {
		t.Errorf("harm found in %d of %d, claimed of neutral ones in %d", harm, histories, claimed)
	}
}

func TestSpellsJoinDaysWithoutALongPause(t *testing.T) {
	t.Parallel()
	day := func(d, prompted, unprompted int) AdjustmentDay {
		from := noon.AddDate(0, 0, d)
		return AdjustmentDay{First: from, Last: from.Add(4 * time.Hour), Prompted: prompted, Unprompted: unprompted}
	}
	got := Spells([]AdjustmentDay{day(0, 1, 2), day(1, 0, 3), day(3, 1, 0), day(20, 1, 0)})
	if len(got) != 2 || got[1].Prompted != 2 || got[1].Unprompted != 5 || !got[1].To.Equal(noon.AddDate(0, 0, 3).Add(4*time.Hour)) || got[0].Prompted != 1 {
		t.Errorf("%+v", got)
	}
}
