package factor_test

import (
	"errors"
	"math"
	"math/rand/v2"
	"slices"
	"sync"
	"testing"

	"holdfast/internal/spc/factor"
)

func TestClosedForms(t *testing.T) {
	t.Parallel()
	v := must(t)
	root3 := math.Sqrt(3)
	for _, c := range []struct {
		name      string
		got, want float64
	}{
		{"d2(2)", v(factor.D2(2)), 2 / math.Sqrt(math.Pi)},
		{"d2(3)", v(factor.D2(3)), 3 / math.Sqrt(math.Pi)},
		{"d2(4)", v(factor.D2(4)), 6 / math.Pow(math.Pi, 1.5) * math.Acos(-1.0/3)},
		{"d3(2)", v(factor.D3(2)), math.Sqrt(2 - 4/math.Pi)},
		{"d3(3)", v(factor.D3(3)), math.Sqrt(2 + 3*root3/math.Pi - 9/math.Pi)},
		{"c4(2)", v(factor.C4(2)), math.Sqrt(2 / math.Pi)},
		{"c4(3)", v(factor.C4(3)), math.Sqrt(math.Pi) / 2},
		{"c4(4)", v(factor.C4(4)), 2 * math.Sqrt(2/(3*math.Pi))},
		{"c5(2)", v(factor.C5(2)), math.Sqrt(1 - 2/math.Pi)},
		{"median of two", v(factor.MedianSE(2)), math.Sqrt(0.5)},
		{"median of one", v(factor.MedianSE(1)), 1},
		// The classical closed form for three readings, variance 1 - √3/π.
		{"median of three", v(factor.MedianSE(3)), math.Sqrt(1 - root3/math.Pi)},
		{"median range of two", v(factor.MedianRange(2)), math.Sqrt2 * 0.6744897501960817},
		// Twice a half-normal: P(W ≤ w) = 2Φ(w/√2) - 1.
		{"range of two", v(factor.RangeCDF(2, 1.3)), math.Erf(1.3 / 2)},
		{"range of two, far", v(factor.RangeSurvival(2, 14)), math.Erfc(7)},
		{"range of two, farther", v(factor.RangeSurvival(2, 40)), math.Erfc(20)},
		{"range of two, near", v(factor.RangeCDF(2, 1e-9)), math.Erf(0.5e-9)},
		{"s of two", v(factor.SDSurvival(2, 5)), math.Erfc(5 / math.Sqrt2)},
		{"s of three", v(factor.SDSurvival(3, 2)), math.Exp(-4)},
	} {
		if math.Abs(c.got-c.want) > 2e-13*math.Abs(c.want) {
			t.Errorf("%s = %.16g, want %.16g", c.name, c.got, c.want)
		}
	}
}

// The variance of the median of normal samples as tabulated for every order
// statistic: Sarhan and Greenberg, Contributions to Order Statistics (1962), from
// memory to the digits given; large samples approach √(π/2n).
func TestMedianStandardError(t *testing.T) {
	t.Parallel()
	v := must(t)
	for n, variance := range map[int]float64{5: 0.28683, 7: 0.21045, 9: 0.16610} {
		if got := v(factor.MedianSE(n)); math.Abs(got*got-variance) > 1e-5 {
			t.Errorf("n %d: variance %.7f, want %.5f", n, got*got, variance)
		}
	}
	for _, n := range []int{100, 101, 999, 1000} {
		// The leading term, David and Nagaraja (2003), chapter 10; the next is of
		// order 1/n², larger for even n, where two readings are averaged.
		want := math.Pi / 2 / float64(n)
		if got := math.Pow(v(factor.MedianSE(n)), 2); math.Abs(got/want-1) > 1.5/float64(n) {
			t.Errorf("n %d: variance %.8f, asymptotically %.8f", n, got, want)
		}
	}
	rng := rand.New(rand.NewPCG(4, 4))
	for _, n := range []int{4, 6, 10} {
		const runs = 100_000
		square := 0.0
		x := make([]float64, n)
		for range runs {
			for i := range x {
				x[i] = rng.NormFloat64()
			}
			slices.Sort(x)
			m := (x[n/2-1] + x[n/2]) / 2
			square += m * m
		}
		if got := v(factor.MedianSE(n)); math.Abs(square/runs/(got*got)-1) > 4*math.Sqrt(2.0/runs) {
			t.Errorf("n %d: %.5f, simulated %.5f", n, got, math.Sqrt(square/runs))
		}
	}
}

func TestRangeDistribution(t *testing.T) {
	t.Parallel()
	v := must(t)
	for _, n := range []int{2, 3, 7, 40, 300, 1000} {
		last := 0.0
		for _, w := range []float64{1e-4, 0.3, 0.99, 1.01, 2.5, 4, 5.5, 7, 9} {
			p, q := v(factor.RangeCDF(n, w)), v(factor.RangeSurvival(n, w))
			if math.Abs(p+q-1) > 1e-13 || p < last {
				t.Errorf("n %d, w %g: %g and %g", n, w, p, q)
			}
			last = p
		}
		for _, p := range []float64{1e-12, 0.00135, 0.3, 0.5, 0.8, 0.99865} {
			if back := v(factor.RangeCDF(n, v(factor.RangeQuantile(n, p)))); math.Abs(back-p) > 1e-11*p {
				t.Errorf("n %d: cdf(quantile(%g)) = %.15g", n, p, back)
			}
			if back := v(factor.RangeSurvival(n, v(factor.RangeUpperQuantile(n, p)))); math.Abs(back-p) > 1e-11*p {
				t.Errorf("n %d: survival(upper quantile(%g)) = %.15g", n, p, back)
			}
			if back := v(factor.SDCDF(n, v(factor.SDQuantile(n, p)))); math.Abs(back-p) > 1e-11*p {
				t.Errorf("n %d: s cdf(quantile(%g)) = %.15g", n, p, back)
			}
		}
		// The mean is the integral of the survival function.
		sum, h := 0.0, 0.01
		for w := h / 2; w < 16; w += h {
			sum += h * v(factor.RangeSurvival(n, w))
		}
		if d2 := v(factor.D2(n)); math.Abs(sum-d2) > 1e-4 {
			t.Errorf("n %d: d2 %.6f, by its distribution %.6f", n, d2, sum)
		}
	}
	if got := v(factor.RangeCDF(5, -1)); got != 0 {
		t.Errorf("a negative range has probability %g", got)
	}
}

func TestEffectiveDegreesOfFreedom(t *testing.T) {
	t.Parallel()
	v := must(t)
	for _, n := range []int{2, 5, 26, 1001, 1_000_001} {
		nu := float64(n - 1)
		cv := v(factor.C5(n)) / v(factor.C4(n))
		if got := v(factor.EffectiveDF(cv)); math.Abs(got/nu-1) > 1e-9 {
			t.Errorf("%g degrees of freedom come back as %.12g", nu, got)
		}
	}
	for _, c := range []struct {
		name      string
		got, want float64
		tol       float64
		source    string
	}{
		// The range of two is |difference|, so one subgroup has one degree of freedom.
		{"one range of two", v(factor.EffectiveDFRange(2, 1)), 1, 1e-9, "exact"},
		{"one s of five", v(factor.EffectiveDFSD(5, 1)), 4, 1e-9, "exact"},
		{"one moving range", v(factor.EffectiveDFMovingRange(1, 0)), 1, 1e-9, "exact"},
		{"20 ranges of 5", v(factor.EffectiveDFRange(5, 20)), 72.7, 0.1, "Duncan, Quality Control and Industrial Statistics, table D3, from memory"},
		// Efficiency of the mean moving range: variance 0.8264 σ²/m against σ²/2m.
		{"999 moving ranges", v(factor.EffectiveDFMovingRange(999, 998)) / 1000, 0.5 / 0.8264, 2e-3, "Cryer and Ryan (1990)"},
	} {
		if math.Abs(c.got-c.want) > c.tol {
			t.Errorf("%s: %.6f, want %g (%s)", c.name, c.got, c.want, c.source)
		}
	}
	if c4, want := v(factor.C4Nu(4)), v(factor.C4(5)); c4 != want {
		t.Errorf("c4 at 4 degrees of freedom %.17g, of 5 readings %.17g", c4, want)
	}
}

func TestConstantsFromManyGoroutines(t *testing.T) {
	t.Parallel()
	want := must(t)(factor.D3(77))
	var group sync.WaitGroup
	for range 8 {
		group.Go(func() {
			for n := 60; n < 90; n++ {
				d2, err1 := factor.D2(n)
				m, err2 := factor.MedianRange(n)
				se, err3 := factor.MedianSE(n)
				if err := errors.Join(err1, err2, err3); err != nil || m >= d2 || se <= 0 {
					t.Errorf("n %d: %g, %g, %g, %v", n, d2, m, se, err)
				}
			}
			if got, err := factor.D3(77); got != want || err != nil {
				t.Errorf("d3(77) = %g, %v", got, err)
			}
		})
	}
	group.Wait()
}

func TestDomainsAreKept(t *testing.T) {
	t.Parallel()
	nan, inf := math.NaN(), math.Inf(1)
	for name, tc := range map[string]struct {
		want error
		call func() (float64, error)
	}{
		"d2 of one":         {factor.ErrSubgroupSize, func() (float64, error) { return factor.D2(1) }},
		"d3 of none":        {factor.ErrSubgroupSize, func() (float64, error) { return factor.D3(0) }},
		"d2 of too many":    {factor.ErrSubgroupSize, func() (float64, error) { return factor.D2(factor.MaxSize + 1) }},
		"median of 1001":    {factor.ErrSubgroupSize, func() (float64, error) { return factor.MedianSE(1001) }},
		"median range of 1": {factor.ErrSubgroupSize, func() (float64, error) { return factor.MedianRange(1) }},
		"c4 of one":         {factor.ErrSubgroupSize, func() (float64, error) { return factor.C4(1) }},
		"c5 of one":         {factor.ErrSubgroupSize, func() (float64, error) { return factor.C5(1) }},
		"s of one":          {factor.ErrSubgroupSize, func() (float64, error) { return factor.SDCDF(1, 1) }},
		"range NaN":         {factor.ErrArgument, func() (float64, error) { return factor.RangeCDF(3, nan) }},
		"range infinite":    {factor.ErrArgument, func() (float64, error) { return factor.RangeSurvival(3, inf) }},
		"s NaN":             {factor.ErrArgument, func() (float64, error) { return factor.SDSurvival(3, nan) }},
		"probability 0":     {factor.ErrArgument, func() (float64, error) { return factor.RangeQuantile(3, 0) }},
		"probability 1":     {factor.ErrArgument, func() (float64, error) { return factor.RangeUpperQuantile(3, 1) }},
		"probability NaN":   {factor.ErrArgument, func() (float64, error) { return factor.SDQuantile(3, nan) }},
		"no error":          {factor.ErrArgument, func() (float64, error) { return factor.EffectiveDF(0) }},
		"endless error":     {factor.ErrArgument, func() (float64, error) { return factor.EffectiveDF(inf) }},
		"no subgroups":      {factor.ErrArgument, func() (float64, error) { return factor.EffectiveDFRange(3, 0) }},
		"no moving range":   {factor.ErrArgument, func() (float64, error) { return factor.EffectiveDFMovingRange(0, 0) }},
		"all neighbours":    {factor.ErrArgument, func() (float64, error) { return factor.EffectiveDFMedianMovingRange(3, 3) }},
		"c4 of NaN":         {factor.ErrArgument, func() (float64, error) { return factor.C4Nu(nan) }},
	} {
		if x, err := tc.call(); !errors.Is(err, tc.want) || !math.IsNaN(x) {
			t.Errorf("%s: %g, %v; want NaN and %v", name, x, err, tc.want)
		}
	}
}

// Any size and number gives a finite answer or an error, and probabilities are
// probabilities.
func FuzzFactors(f *testing.F) {
	f.Add(5, 2.3, 0.5)
	f.Add(1000, 1e-300, 1e-300)
	f.Add(-1, 1e300, 0.9999999999999999)
	f.Fuzz(func(t *testing.T, n int, w, p float64) {
		for name, g := range map[string]func(int, float64) (float64, error){
			"range": factor.RangeCDF, "range above": factor.RangeSurvival, "s": factor.SDCDF, "s above": factor.SDSurvival,
		} {
			if got, err := g(n, w); err == nil && !(got >= 0 && got <= 1) {
				t.Errorf("%s(%d, %g) = %g", name, n, w, got)
			}
		}
		for name, g := range map[string]func(int, float64) (float64, error){
			"range": factor.RangeQuantile, "range above": factor.RangeUpperQuantile, "s": factor.SDQuantile, "s above": factor.SDUpperQuantile,
		} {
			if got, err := g(n, p); err == nil && (!(got >= 0) || math.IsInf(got, 0)) {
				t.Errorf("%s quantile(%d, %g) = %g", name, n, p, got)
			}
		}
	})
}

func BenchmarkD2Cached(b *testing.B) {
	for b.Loop() {
		if _, err := factor.D2(5); err != nil {
			b.Fatal(err)
		}
	}
}

func BenchmarkRangeQuantile(b *testing.B) {
	for b.Loop() {
		if _, err := factor.RangeUpperQuantile(5, 0.00135); err != nil {
			b.Fatal(err)
		}
	}
}
