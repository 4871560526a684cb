package gauge_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"holdfast/internal/spc/gauge"
)

// simulate draws a crossed study with these s.d.
func simulate(rng *rand.Rand, parts, appraisers, trials int, part, appraiser, inter, repeat float64) [][][]float64 {
	a := make([]float64, appraisers)
	for j := range a {
		a[j] = appraiser * rng.NormFloat64()
	}
	m := make([][][]float64, parts)
	for i := range m {
		p := part * rng.NormFloat64()
		m[i] = make([][]float64, appraisers)
		for j := range m[i] {
			c := p + a[j] + inter*rng.NormFloat64()
			for range trials {
				m[i][j] = append(m[i][j], c+repeat*rng.NormFloat64())
			}
		}
	}
	return m
}

// The table by the textbook sums of totals over corrected squares, a second way.
func TestCrossedTableByTotals(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(5, 1))
	for range 20 {
		p, a, n := 2+rng.IntN(8), 2+rng.IntN(3), 2+rng.IntN(3)
		m := simulate(rng, p, a, n, 2, 1, 0.5, 1)
		got, err := gauge.Cross(m, gauge.Options{PoolAbove: at(1)})
		if err != nil {
			t.Fatal(err)
		}
		var sum, all, parts, cells float64
		appraiser := make([]float64, a)
		for _, part := range m {
			pt := 0.0
			for j, trials := range part {
				ct := 0.0
				for _, x := range trials {
					ct += x
					all += x * x
				}
				cells += ct * ct
				appraiser[j] += ct
				pt += ct
			}
			parts += pt * pt
			sum += pt
		}
		correction := sum * sum / float64(p*a*n)
		appraisers := 0.0
		for _, v := range appraiser {
			appraisers += v * v
		}
		ssp, ssa := parts/float64(a*n)-correction, appraisers/float64(p*n)-correction
		cell := cells/float64(n) - correction
		want := []float64{ssp, ssa, cell - ssp - ssa, all - correction - cell, all - correction}
		for i, w := range want {
			if math.Abs(got.Table[i].SS-w) > 1e-10*want[4] {
				t.Errorf("%s: %g, by totals %g", got.Table[i].Source, got.Table[i].SS, w)
			}
		}
	}
}

// Components must be unbiased where none is cut at zero: their mean over many seeded
// studies lies within four standard errors of the truth.
func TestComponentsAreUnbiased(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(5, 2))
	const studies = 3000
	want := []float64{1, 4, 1, 100}
	sum, square := make([]float64, 4), make([]float64, 4)
	for range studies {
		c, err := gauge.Cross(simulate(rng, 10, 4, 3, 10, 2, 1, 1), gauge.Options{PoolAbove: at(1)})
		if err != nil {
			t.Fatal(err)
		}
		v := c.Variance
		for i, x := range []float64{v.Repeatability, v.Appraiser, v.Interaction, v.Part} {
			sum[i] += x
			square[i] += x * x
		}
		if math.Abs(v.Gauge+v.Part-v.Total) > 1e-9 || math.Abs(v.Appraiser+v.Interaction-v.Reproducibility) > 1e-9 {
			t.Fatalf("components do not add up: %+v", v)
		}
	}
	for i, w := range want {
		mean := sum[i] / studies
		se := math.Sqrt((square[i]/studies - mean*mean) / studies)
		if math.Abs(mean-w) > 4*se+0.02*w {
			t.Errorf("component %d: %g ± %g, want %g", i, mean, se, w)
		}
	}
}

// The order of parts, appraisers and trials does not matter; shift changes nothing,
// the unit only the variances.
func TestCrossedStudyIsOfTheGaugeNotOfTheSheet(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(5, 3))
	m := simulate(rng, 8, 3, 3, 3, 1, 0.3, 1)
	base, err := gauge.Cross(m, gauge.Options{})
	if err != nil {
		t.Fatal(err)
	}
	turned := make([][][]float64, len(m))
	for i, part := range m {
		k := len(m) - 1 - i
		turned[k] = make([][]float64, 3)
		for j, trials := range part {
			for _, x := range []float64{trials[2], trials[0], trials[1]} {
				turned[k][2-j] = append(turned[k][2-j], 1e5-25.4*x)
			}
		}
	}
	got, err := gauge.Cross(turned, gauge.Options{})
	if err != nil {
		t.Fatal(err)
	}
	if got.Pooled != base.Pooled || got.Categories != base.Categories || !within(got.OfTotal.Gauge, base.OfTotal.Gauge, 1e-9) ||
		!within(got.Variance.Total, 25.4*25.4*base.Variance.Total, 1e-9) {
		t.Errorf("%+v\nwant %+v", got, base)
	}
}

// One appraiser: the study is a one-way analysis over the parts.
func TestOneAppraiserIsAOneWayAnalysis(t *testing.T) {
	t.Parallel()
	m := simulate(rand.New(rand.NewPCG(5, 4)), 12, 1, 3, 2, 0, 0, 1)
	c, err := gauge.Cross(m, gauge.Options{})
	if err != nil {
		t.Fatal(err)
	}
	var levels [][]float64
	for _, part := range m {
		levels = append(levels, part[0])
	}
	o, err := gauge.Levels(levels)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "F", value(t, "F", c.Table[0].F), *o.Between.F)
	near(t, "part", c.Variance.Part, o.BetweenVariance)
	near(t, "gauge", c.Variance.Gauge, o.WithinSD*o.WithinSD)
	if c.Pooled || c.Table[1].MS != nil || c.Table[2].P != nil || c.Variance.Reproducibility != 0 {
		t.Errorf("one appraiser: %+v", c)
	}
}

// Ranges and analysis of variance estimate the same repeatability.
func TestRangesAgreeWithVariance(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(5, 5))
	m := simulate(rng, 400, 3, 3, 5, 1, 0, 1)
	r, err := gauge.CrossByRange(m, at(60))
	if err != nil {
		t.Fatal(err)
	}
	if math.Abs(r.Equipment-1) > 0.03 || math.Abs(r.OfTolerance.Repeatability-10*r.Equipment) > 1e-9 {
		t.Errorf("equipment %g", r.Equipment)
	}
}

// The 95 % interval of the bias and the exact interval of a miss rate, over seeded
// histories.
func TestIntervalCoverage(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(5, 6))
	const histories = 2000
	bias, miss := 0, 0
	for range histories {
		x := make([]float64, 10)
		for i := range x {
			x[i] = 20.5 + rng.NormFloat64()
		}
		b, err := gauge.MeasureBias(x, 20, at(30))
		if err != nil {
			t.Fatal(err)
		}
		if b.Low <= 0.5 && 0.5 <= b.High {
			bias++
		}
		if (b.P < 0.05) != (b.Low > 0 || b.High < 0) {
			t.Fatalf("p %g and interval %g to %g disagree", b.P, b.Low, b.High)
		}
		if !within(*b.Cg, 1/b.SD, 1e-12) || !within(*b.Cgk, (3-math.Abs(b.Bias))/(3*b.SD), 1e-12) {
			t.Fatalf("Cg %g, Cgk %g", *b.Cg, *b.Cgk)
		}
		rejected, truth := make([]bool, 60), make([]bool, 60)
		for i := range rejected {
			truth[i] = i < 40
			rejected[i] = truth[i] && rng.Float64() >= 0.1
		}
		e, err := gauge.InspectionErrors(rejected, truth)
		if err != nil {
			t.Fatal(err)
		}
		if e.Miss.Low <= 0.1 && 0.1 <= e.Miss.High {
			miss++
		}
		if e.FalseReject.Value != 0 || e.FalseReject.Low != 0 || e.FalseReject.Of != 20 {
			t.Fatalf("false rejects %+v", e.FalseReject)
		}
	}
	if s := float64(bias) / histories; s < 0.935 || s > 0.965 {
		t.Errorf("bias: %.3f", s)
	}
	// The exact interval of a proportion holds at least its confidence.
	if s := float64(miss) / histories; s < 0.945 {
		t.Errorf("miss rate: %.3f", s)
	}
}

// Zero misses in 30: the upper bound is 1 - 0.025^(1/30), a closed form.
func TestRateWithoutMisses(t *testing.T) {
	t.Parallel()
	rejected, truth := make([]bool, 30), make([]bool, 30)
	for i := range truth {
		rejected[i], truth[i] = true, true
	}
	e, err := gauge.InspectionErrors(rejected, truth)
	if err != nil || e.FalseReject != nil || e.Miss.Value != 0 {
		t.Fatalf("%+v, %v", e, err)
	}
	near(t, "upper bound", e.Miss.High, 1-math.Pow(0.025, 1.0/30))
}

// Fleiss' kappa by counting pairs of raters, for two raters with equal shares of labels
// equal to the pooled form of chance. Source of the second case: a worked example of
// ten items, fourteen raters and five labels often reprinted, kappa 0.210 (from memory).
func TestFleissByCountingPairs(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(5, 7))
	labels := []string{"good", "scratch", "dent"}
	for range 20 {
		items, raters := 2+rng.IntN(20), 2+rng.IntN(4)
		ratings := make([][]string, items)
		share := map[string]float64{}
		agree, pairs := 0.0, 0.0
		for i := range ratings {
			for range raters {
				l := labels[rng.IntN(3)]
				ratings[i] = append(ratings[i], l)
				share[l] += 1 / float64(items*raters)
			}
			for a := range raters {
				for b := range a {
					pairs++
					if ratings[i][a] == ratings[i][b] {
						agree++
					}
				}
			}
		}
		chance := 0.0
		for _, s := range share {
			chance += s * s
		}
		if len(share) < 2 {
			continue
		}
		a, err := gauge.Agree(ratings)
		if err != nil {
			t.Fatal(err)
		}
		near(t, "Fleiss", a.Fleiss, (agree/pairs-chance)/(1-chance))
	}
	counts := [][]int{
		{0, 0, 0, 0, 14}, {0, 2, 6, 4, 2}, {0, 0, 3, 5, 6}, {0, 3, 9, 2, 0}, {2, 2, 8, 1, 1},
		{7, 7, 0, 0, 0}, {3, 2, 6, 3, 0}, {2, 5, 3, 2, 2}, {6, 5, 2, 1, 0}, {0, 2, 2, 3, 7},
	}
	var ratings [][]string
	for _, row := range counts {
		var item []string
		for label, n := range row {
			for range n {
				item = append(item, string(rune('a'+label)))
			}
		}
		ratings = append(ratings, item)
	}
	a, err := gauge.Agree(ratings)
	if err != nil || math.Abs(a.Fleiss-0.210) > 5e-4 {
		t.Errorf("Fleiss %g, %v; want 0.210", a.Fleiss, err)
	}
}

// A line without scatter: the tests say so instead of dividing by nothing.
func TestLinearityWithoutScatter(t *testing.T) {
	t.Parallel()
	l, err := gauge.MeasureLinearity([]float64{0, 1, 2}, [][]float64{{0, 0}, {1.5, 1.5}, {3, 3}})
	if err != nil || l.Slope != 0.5 || l.RSquared != 1 || l.TSlope != nil || l.PSlope != 0 || l.TIntercept != nil || l.PIntercept != 1 {
		t.Errorf("%+v, %v", l, err)
	}
}
