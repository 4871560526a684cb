package runlength_test

import (
	"math"
	"testing"

	"holdfast/internal/spc/limits"
	"holdfast/internal/spc/runlength"
	"holdfast/internal/spc/watch"
)

func pair(chart limits.Chart, location, dispersion []watch.Rule) watch.Standard {
	return watch.Standard{
		Standard:      limits.Standard{Chart: chart, Center: 40, Sigma: 0.3},
		LocationRules: location, DispersionRules: dispersion,
	}
}

var beyond3 = []watch.Rule{{Kind: watch.Beyond, Z: 3}}

// False alarm probabilities of 3 sigma range and standard deviation charts with
// known sigma were integrated outside this code.
func TestPairCombinesIndependentCharts(t *testing.T) {
	t.Parallel()
	p := math.Erfc(3 / math.Sqrt2)
	for _, tc := range []struct {
		chart limits.Chart
		n     int
		q     float64
	}{{limits.XBarR, 5, 0.004603048432}, {limits.XBarS, 5, 0.003899114478}, {limits.XBarR, 2, 0.00915221465}} {
		got, err := runlength.Standard(pair(tc.chart, beyond3, beyond3), tc.n, runlength.Change{}, runlength.Options{})
		want := 1 / (1 - (1-p)*(1-tc.q))
		if err != nil || !near(got.Mean, want, 1e-6) || got.StandardError != 0 {
			t.Errorf("%s of %d: %v, %v; want %.6f", tc.chart, tc.n, got.Mean, err, want)
		}
	}
}

// A standard whose charts are computed must agree with the same standard
// simulated through the fold. An alternation of 63 points never fires but forces
// the simulation.
func TestComputedPairEqualsSimulatedFold(t *testing.T) {
	t.Parallel()
	never := watch.Rule{Kind: watch.Alternating, M: 63}
	oneSide := append([]watch.Rule{{Kind: watch.OneSide, M: 8}}, beyond3...)
	for i, tc := range []struct {
		chart  limits.Chart
		n      int
		change runlength.Change
	}{
		{limits.XBarR, 5, runlength.Change{}},
		{limits.XBarR, 4, runlength.Change{Shift: 0.5}},
		{limits.XBarS, 5, runlength.Change{Shift: -0.3, Spread: 1.3}},
		{limits.XBarS, 7, runlength.Change{Spread: 0.5}},
	} {
		exact, err := runlength.Standard(pair(tc.chart, watch.WesternElectric(), oneSide), tc.n, tc.change, runlength.Options{})
		if err != nil {
			t.Fatal(err)
		}
		forced := pair(tc.chart, append(watch.WesternElectric(), never), oneSide)
		simulated, err := runlength.Standard(forced, tc.n, tc.change, runlength.Options{Seed: uint64(i)})
		if err != nil || math.Abs(exact.Mean-simulated.Mean) > 4*simulated.StandardError {
			t.Errorf("%s of %d, %+v: computed %.3f, simulated %.3f ± %.3f, %v", tc.chart, tc.n, tc.change,
				exact.Mean, simulated.Mean, simulated.StandardError, err)
		}
		if exact.Method != runlength.MarkovChain || simulated.Method != runlength.Simulated {
			t.Errorf("methods %s and %s", exact.Method, simulated.Method)
		}
		m1, err1 := exact.Median()
		m2, err2 := simulated.Median()
		if err1 != nil || err2 != nil || math.Abs(m1-m2) > 6*simulated.StandardError+1 {
			t.Errorf("medians %g and %g, %v, %v", m1, m2, err1, err2)
		}
	}
}

// Individuals and moving ranges are not independent. One moving range is the
// absolute difference of two readings, so the probability that neither chart has
// signalled at the second point is a double integral; it is summed here on a grid.
func TestIndividualsWithMovingRange(t *testing.T) {
	t.Parallel()
	s := pair(limits.Individuals, beyond3, beyond3)
	r, err := runlength.Standard(s, 1, runlength.Change{Shift: 1.5}, runlength.Options{Seed: 9})
	if err != nil || r.Method != runlength.Simulated {
		t.Fatalf("%+v, %v", r, err)
	}
	const step = 0.01
	upper := 3.685926 // D2 of a range of two: d2 + 3 d3 = 1.128379 + 3·0.852502
	var both float64
	phi := func(z float64) float64 { return math.Exp(-z*z/2) / math.Sqrt(2*math.Pi) }
	for x := -3 + step/2; x < 3; x += step {
		for y := math.Max(-3, x-upper); y < math.Min(3, x+upper); y += step {
			both += phi(x-1.5) * phi(y+step/2-1.5) * step * step
		}
	}
	if got := r.Survival(2); math.Abs(got-both) > 4*math.Sqrt(both*(1-both)/1000)+0.002 {
		t.Errorf("P(run > 2) = %.4f, want %.4f", got, both)
	}
	alone, err := runlength.Standard(pair(limits.Individuals, beyond3, nil), 1, runlength.Change{Shift: 1.5}, runlength.Options{Seed: 9})
	if err != nil || math.Abs(alone.Mean-14.9677) > 4*alone.StandardError || r.Mean >= alone.Mean {
		t.Errorf("individuals alone %.3f ± %.3f, %v; want 14.97; with moving range %.3f", alone.Mean, alone.StandardError, err, r.Mean)
	}
}

func TestMedianAndMemoryChartsAreSimulated(t *testing.T) {
	t.Parallel()
	s := pair(limits.MedianR, beyond3, beyond3)
	r, err := runlength.Standard(s, 5, runlength.Change{}, runlength.Options{Seed: 2, Points: 200_000})
	// The median of five is nearly normal and uncorrelated with the range, so the
	// pair signals nearly as often as means with ranges.
	if err != nil || r.Mean < 110 || r.Mean > 175 {
		t.Errorf("medians with ranges: %.1f ± %.1f, %v", r.Mean, r.StandardError, err)
	}
	s = pair(limits.XBarR, nil, nil)
	s.EWMA = &watch.EWMA{Lambda: 0.2, L: 2.5}
	got, err := runlength.Standard(s, 4, runlength.Change{Shift: 0.25}, runlength.Options{Seed: 2})
	if err != nil {
		t.Fatal(err)
	}
	want, err := runlength.EWMA(*s.EWMA, "", []float64{0.5})
	if err != nil || math.Abs(got.Mean-want[0].Mean) > 4*got.StandardError {
		t.Errorf("EWMA of means: %.2f ± %.2f, computed %.2f, %v", got.Mean, got.StandardError, want[0].Mean, err)
	}
}

func TestPriceInHoursAndParts(t *testing.T) {
	t.Parallel()
	s := pair(limits.XBarR, beyond3, nil)
	p, err := runlength.PriceOf(s, 4, runlength.Sampling{IntervalHours: 0.5, HoursPerWeek: 120, PartsPerHour: 60},
		[]runlength.Change{{Shift: 0.5}, {Shift: 1}}, runlength.Options{})
	if err != nil || len(p.Caught) != 2 {
		t.Fatalf("%+v, %v", p, err)
	}
	// 240 subgroups a week, one false alarm in 370.4; a shift of one sigma of the
	// readings is two of the means: ARL 1/P(Z > 1) = 6.303 (Champ and Woodall 1987),
	// caught with probability 0.1587 a point, so the median is ln 2/-ln 0.8413 = 4.01,
	// that is 5 points.
	if !near(p.FalseAlarmsPerWeek, 240/370.3983473, 1e-8) {
		t.Errorf("false alarms per week %g", p.FalseAlarmsPerWeek)
	}
	c := p.Caught[1]
	if !near(c.MeanHours, (6.302962987-0.5)*0.5, 1e-8) || c.MedianHours != 2.25 || !near(c.MeanParts, 60*c.MeanHours, 1e-12) ||
		c.MedianParts != 135 {
		t.Errorf("a shift of one sigma: %+v", c)
	}
	if !near(p.Caught[0].MeanHours, (43.89468172-0.5)*0.5, 1e-8) {
		t.Errorf("a shift of half a sigma: %+v", p.Caught[0])
	}
}
