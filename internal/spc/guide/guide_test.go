package guide_test

import (
	"errors"
	"math"
	"strings"
	"testing"

	"holdfast/internal/spc/guide"
	"holdfast/internal/spc/limits"
)

func at(x float64) *float64 { return &x }

// The expected answers are common practice as taught in Montgomery, Introduction to
// Statistical Quality Control; the thresholds are the package's own.
func TestExpectedAnswers(t *testing.T) {
	t.Parallel()
	for _, c := range []struct {
		name string
		in   guide.Case
		want limits.Chart
		form guide.Form
	}{
		{"five bores an hour", guide.Case{Measured: guide.Readings, SubgroupSize: 5}, limits.XBarR, ""},
		{"two readings", guide.Case{Measured: guide.Readings, SubgroupSize: 2}, limits.XBarR, ""},
		{"eight readings", guide.Case{Measured: guide.Readings, SubgroupSize: 8}, limits.XBarR, ""},
		{"nine readings", guide.Case{Measured: guide.Readings, SubgroupSize: 9}, limits.XBarS, ""},
		{"sizes that change", guide.Case{Measured: guide.Readings, SubgroupSize: 4, SizeVaries: true}, limits.XBarS, ""},
		{"one reading", guide.Case{Measured: guide.Readings, SubgroupSize: 1}, limits.Individuals, ""},
		{"on paper, five", guide.Case{Measured: guide.Readings, SubgroupSize: 5, ByHand: true}, limits.MedianR, ""},
		{"on paper, four", guide.Case{Measured: guide.Readings, SubgroupSize: 4, ByHand: true}, limits.XBarR, ""},
		{"on paper, one", guide.Case{Measured: guide.Readings, SubgroupSize: 1, ByHand: true}, limits.Individuals, ""},
		{"a tank", guide.Case{Measured: guide.Readings, SubgroupSize: 3, Batches: guide.Uniform}, limits.Individuals, ""},
		{"heats that differ", guide.Case{Measured: guide.Readings, SubgroupSize: 4, Batches: guide.Nested, BetweenP: at(0.001)}, limits.ThreeWay, ""},
		{"heats that do not", guide.Case{Measured: guide.Readings, SubgroupSize: 4, Batches: guide.Nested, BetweenP: at(0.2)}, limits.XBarR, ""},
		{"heats, nobody looked", guide.Case{Measured: guide.Readings, SubgroupSize: 4, Batches: guide.Nested}, limits.XBarR, ""},
		{"pieces with batch evidence", guide.Case{Measured: guide.Readings, SubgroupSize: 4, Batches: guide.Pieces, BetweenP: at(0.001)}, limits.XBarR, ""},
		{"six spindles", guide.Case{Measured: guide.Readings, SubgroupSize: 5, Streams: 6}, limits.Group, ""},
		{"one stream", guide.Case{Measured: guide.Readings, SubgroupSize: 5, Streams: 1}, limits.XBarR, ""},
		{"a tool that wears", guide.Case{Measured: guide.Readings, SubgroupSize: 3, Wear: true}, limits.Trend, ""},
		{"length and width together", guide.Case{Measured: guide.Readings, SubgroupSize: 1, Characteristics: 2}, limits.TSquared, ""},
		{"a small shift", guide.Case{Measured: guide.Readings, SubgroupSize: 1, SmallShift: 1}, limits.EWMA, ""},
		{"a small shift of known size", guide.Case{Measured: guide.Readings, SubgroupSize: 5, SmallShift: 1, ShiftKnown: true}, limits.CUSUM, ""},
		{"a large shift", guide.Case{Measured: guide.Readings, SubgroupSize: 5, SmallShift: 2}, limits.XBarR, ""},
		{"short runs", guide.Case{Measured: guide.Readings, SubgroupSize: 3, Parts: 8}, limits.XBarR, guide.Deviation},
		{"short runs of single pieces", guide.Case{Measured: guide.Readings, SubgroupSize: 1, Parts: 8}, limits.Individuals, guide.Deviation},
		{"short runs, spread differs", guide.Case{Measured: guide.Readings, SubgroupSize: 3, Parts: 8, SpreadDiffers: true}, limits.XBarR, guide.Standardised},

		{"fifty tested, always", guide.Case{Measured: guide.Nonconforming, SubgroupSize: 50, EventRate: at(3)}, limits.NP, ""},
		{"a day's output tested", guide.Case{Measured: guide.Nonconforming, SubgroupSize: 900, SizeVaries: true, EventRate: at(12)}, limits.P, ""},
		{"rate not known", guide.Case{Measured: guide.Nonconforming, SubgroupSize: 50, SizeVaries: true}, limits.P, ""},
		{"very many tested, days differ", guide.Case{Measured: guide.Nonconforming, SubgroupSize: 20000, SizeVaries: true, EventRate: at(200), BetweenSigma: at(3)}, limits.LaneyP, ""},
		{"very many tested, chance alone", guide.Case{Measured: guide.Nonconforming, SubgroupSize: 20000, SizeVaries: true, EventRate: at(200), BetweenSigma: at(1.1)}, limits.P, ""},
		{"hardly ever a bad one", guide.Case{Measured: guide.Nonconforming, SubgroupSize: 50, EventRate: at(0.05)}, limits.G, ""},
		{"flaws on one panel", guide.Case{Measured: guide.Nonconformities, SubgroupSize: 1, EventRate: at(6)}, limits.C, ""},
		{"flaws on a changing area", guide.Case{Measured: guide.Nonconformities, SubgroupSize: 4, SizeVaries: true, EventRate: at(6)}, limits.U, ""},
		{"flaws, days differ", guide.Case{Measured: guide.Nonconformities, SubgroupSize: 4, EventRate: at(60), BetweenSigma: at(2)}, limits.LaneyU, ""},
		{"hardly ever a flaw", guide.Case{Measured: guide.Nonconformities, SubgroupSize: 4, EventRate: at(0.2)}, limits.T, ""},
		{"good units between failures", guide.Case{Measured: guide.UnitsBetween}, limits.G, ""},
		{"days between stoppages", guide.Case{Measured: guide.TimeBetween}, limits.T, ""},
		{"counts of several parts", guide.Case{Measured: guide.Nonconforming, SubgroupSize: 50, Parts: 4}, limits.NP, ""},
	} {
		got, err := guide.Choose(c.in)
		if err != nil || got.Chart != c.want || got.Form != c.form {
			t.Errorf("%s: %s %s, %v; want %s %s", c.name, got.Chart, got.Form, err, c.want, c.form)
		}
		twoSentences(t, c.name, got.Why)
	}
}

func twoSentences(t *testing.T, name, why string) {
	t.Helper()
	sentences := strings.SplitAfter(why, ". ")
	if len(sentences) != 2 || !strings.HasSuffix(why, ".") || strings.Count(why, ".") != 2 {
		t.Errorf("%s: not two sentences: %q", name, why)
	}
	for _, s := range sentences {
		if len(s) < 20 || len(s) > 140 {
			t.Errorf("%s: a sentence of %d letters: %q", name, len(s), s)
		}
	}
}

// cases runs through every combination of the answers that the table looks at.
func cases(visit func(guide.Case)) {
	yes := []bool{false, true}
	figures := []*float64{nil, at(0), at(0.5), at(5)}
	for _, m := range []guide.Measured{guide.Readings, guide.Nonconforming, guide.Nonconformities, guide.UnitsBetween, guide.TimeBetween} {
		for _, size := range []int{1, 2, 5, 8, 9, 200} {
			for _, b := range []guide.Batches{"", guide.Pieces, guide.Uniform, guide.Nested} {
				for _, p := range []*float64{nil, at(0), at(1)} {
					for _, rate := range figures {
						for _, sigma := range figures {
							for _, n := range []int{0, 1, 2} {
								for _, shift := range []float64{0, 1, 3} {
									for _, v := range yes {
										c := guide.Case{Measured: m, SubgroupSize: size, Batches: b, BetweenP: p, EventRate: rate, BetweenSigma: sigma, SmallShift: shift, SizeVaries: v}
										visit(c)
										c.Streams, c.ByHand, c.ShiftKnown = n, n == 1, true
										visit(c)
										c.Streams, c.Parts, c.SpreadDiffers = 0, n, v
										visit(c)
										c.Characteristics, c.Wear = n, v
										visit(c)
									}
								}
							}
						}
					}
				}
			}
		}
	}
}

// Every case has an answer; it is a chart for what is measured, with two sentences, and
// every kind of chart is the answer to some case.
func TestEveryCaseHasAnAnswer(t *testing.T) {
	t.Parallel()
	seen := map[limits.Chart]bool{}
	reasons := map[string]bool{}
	cases(func(c guide.Case) {
		a, err := guide.Choose(c)
		if err != nil {
			t.Fatalf("%+v: %v", c, err)
		}
		seen[a.Chart] = true
		if !reasons[a.Why] {
			reasons[a.Why] = true
			twoSentences(t, string(a.Chart), a.Why)
		}
		counts := a.Chart == limits.P || a.Chart == limits.NP || a.Chart == limits.C || a.Chart == limits.U ||
			a.Chart == limits.LaneyP || a.Chart == limits.LaneyU || a.Chart == limits.G || a.Chart == limits.T
		if (c.Measured == guide.Readings) == counts {
			t.Fatalf("%+v: %s does not plot that", c, a.Chart)
		}
		if a.Chart == limits.NP && c.SizeVaries || a.Chart == limits.C && c.SizeVaries {
			t.Fatalf("%+v: %s needs a constant size", c, a.Chart)
		}
		if a.Form != guide.Plain && c.Parts < 2 {
			t.Fatalf("%+v: %s for one part", c, a.Form)
		}
	})
	for _, chart := range []limits.Chart{
		limits.XBarR, limits.XBarS, limits.MedianR, limits.Individuals, limits.P, limits.NP, limits.C, limits.U,
		limits.LaneyP, limits.LaneyU, limits.G, limits.T, limits.EWMA, limits.CUSUM, limits.ThreeWay, limits.Group,
		limits.Trend, limits.TSquared,
	} {
		if !seen[chart] {
			t.Errorf("no case leads to %s", chart)
		}
	}
}

func TestWrongInputIsNamed(t *testing.T) {
	t.Parallel()
	for _, c := range []struct {
		in    guide.Case
		words string
	}{
		{guide.Case{}, "what is measured"},
		{guide.Case{Measured: guide.Readings}, "subgroup size must be 1 to 1000000, got 0"},
		{guide.Case{Measured: guide.Readings, SubgroupSize: 1, Batches: "some"}, "nature of batches"},
		{guide.Case{Measured: guide.Readings, SubgroupSize: 1, Streams: -1}, "number of streams"},
		{guide.Case{Measured: guide.Readings, SubgroupSize: 1, Parts: 20000}, "number of parts"},
		{guide.Case{Measured: guide.Readings, SubgroupSize: 1, BetweenP: at(1.5)}, "p value between batches"},
		{guide.Case{Measured: guide.Nonconforming, SubgroupSize: 1, EventRate: at(math.NaN())}, "event rate"},
		{guide.Case{Measured: guide.Nonconforming, SubgroupSize: 1, BetweenSigma: at(-1)}, "sigma between subgroups"},
		{guide.Case{Measured: guide.Readings, SubgroupSize: 1, SmallShift: math.Inf(1)}, "shift to catch"},
	} {
		_, err := guide.Choose(c.in)
		if !errors.Is(err, guide.ErrInput) || !strings.Contains(err.Error(), c.words) {
			t.Errorf("%+v: %v, want words %q", c.in, err, c.words)
		}
	}
}

func FuzzChoose(f *testing.F) {
	f.Add("readings", "nested", 5, 1, 1, 1, 0.001, 1.0, 1.0, 0.5, uint8(0))
	f.Add("nonconforming", "", 50, 0, 0, 0, 0.5, 0.2, 3.0, 0.0, uint8(255))
	f.Fuzz(func(t *testing.T, measured, batches string, size, streams, parts, characteristics int, p, rate, sigma, shift float64, bits uint8) {
		c := guide.Case{
			Measured: guide.Measured(measured), Batches: guide.Batches(batches), SubgroupSize: size, Streams: streams,
			Parts: parts, Characteristics: characteristics, SmallShift: shift,
			SizeVaries: bits&1 > 0, SpreadDiffers: bits&2 > 0, Wear: bits&4 > 0, ShiftKnown: bits&8 > 0, ByHand: bits&16 > 0,
		}
		if bits&32 > 0 {
			c.BetweenP, c.EventRate, c.BetweenSigma = &p, &rate, &sigma
		}
		a, err := guide.Choose(c)
		if (err == nil) != (a.Chart != "" && a.Why != "") {
			t.Fatalf("%+v: %+v, %v", c, a, err)
		}
	})
}
