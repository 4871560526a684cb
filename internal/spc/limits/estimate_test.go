package limits_test

import (
	"errors"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"holdfast/internal/spc/limits"
)

// normalSubgroups draws subgroups with the given sizes from a normal law.
func normalSubgroups(t testing.TB, rng *rand.Rand, chart limits.Chart, sizes []int, center, sigma float64) []limits.Subgroup {
	t.Helper()
	var out []limits.Subgroup
	for _, n := range sizes {
		readings := make([]float64, n)
		for i := range readings {
			readings[i] = center + sigma*rng.NormFloat64()
		}
		s, err := limits.NewSubgroup(chart, readings)
		if err != nil {
			t.Fatal(err)
		}
		out = append(out, s)
	}
	return out
}

func repeat(n, times int) []int { return slices.Repeat([]int{n}, times) }

// Every estimator is unbiased, has the relative error that its degrees of freedom
// promise, and a centre with the standard error it states: by simulation with a
// fixed seed, within four standard errors.
func TestEstimatorsKeepTheirPromises(t *testing.T) {
	t.Parallel()
	mixed := append(append(repeat(5, 8), repeat(3, 7)...), repeat(9, 3)...)
	for _, tc := range []struct {
		chart     limits.Chart
		estimator limits.Estimator
		sizes     []int
		// slack in the variance and bias in the mean, for the asymptotic median
		slack, bias float64
	}{
		{limits.XBarR, limits.RBar, mixed, 0, 0},
		{limits.XBarS, limits.SBar, mixed, 0, 0},
		{limits.XBarR, limits.Pooled, append(repeat(1, 4), mixed...), 0, 0},
		{limits.MedianR, limits.RBar, mixed, 0, 0},
		{limits.Individuals, limits.MRBar, repeat(1, 40), 0, 0},
		{limits.Individuals, limits.MedianMR, repeat(1, 200), 0.03, 0.01},
	} {
		rng := rand.New(rand.NewPCG(11, 5))
		const runs = 3000
		var sum, square, centers float64
		var e limits.Estimated
		for range runs {
			var err error
			e, err = limits.Estimate(tc.chart, tc.estimator, normalSubgroups(t, rng, tc.chart, tc.sizes, 50, 2))
			if err != nil {
				t.Fatal(err)
			}
			sum += e.Sigma / 2
			square += e.Sigma * e.Sigma / 4
			centers += (e.Center - 50) * (e.Center - 50)
		}
		mean := sum / runs
		cv := math.Sqrt(square/runs-mean*mean) / mean
		want := 1 / math.Sqrt(2*e.DF) // leading term; the exact one is within 1/(8 df)
		if math.Abs(mean-1) > 4*cv/math.Sqrt(runs)+tc.bias {
			t.Errorf("%s %s: mean of sigma %.4f of the true one", tc.chart, tc.estimator, mean)
		}
		if math.Abs(cv/want-1) > 4/math.Sqrt(2*runs)+0.25/e.DF+tc.slack {
			t.Errorf("%s %s: relative error %.4f, degrees of freedom %.1f promise %.4f", tc.chart, tc.estimator, cv, e.DF, want)
		}
		// CenterSE scales with the sigma of the last run.
		se := e.CenterSE / e.Sigma * 2
		if got := math.Sqrt(centers / runs); math.Abs(got/se-1) > 4/math.Sqrt(2*runs) {
			t.Errorf("%s %s: centre scatters by %.5f, stated %.5f", tc.chart, tc.estimator, got, se)
		}
	}
}

func TestEqualSizesGiveTheTextbookForm(t *testing.T) {
	t.Parallel()
	data, want := pistonRings(t)
	subgroups := reduce(t, limits.XBarR, data)
	a, err := limits.Estimate(limits.XBarR, limits.RBar, subgroups)
	if err != nil {
		t.Fatal(err)
	}
	// The order of subgroups does not matter, nor do single readings for sigma.
	slices.Reverse(subgroups)
	b, err := limits.Estimate(limits.XBarR, "", append(subgroups, limits.Subgroup{N: 1, Location: 74}))
	if err != nil {
		t.Fatal(err)
	}
	if !agrees(a.Sigma, b.Sigma, 0) || !agrees(a.Sigma, want["sigma_from_range"].(float64), 0) || b.Subgroups != 25 || b.Readings != 126 {
		t.Errorf("%+v and %+v", a, b)
	}
}

func TestMovingRangesDoNotCrossAGap(t *testing.T) {
	t.Parallel()
	subgroups := singles(t, []float64{1, 2, 1, 101, 103, 101})
	subgroups[3].Break = true
	e, err := limits.Estimate(limits.Individuals, limits.MRBar, subgroups)
	if err != nil {
		t.Fatal(err)
	}
	// Ranges 1, 1, 2, 2; two pairs of neighbours.
	if math.Abs(e.Sigma-1.5/1.1283791670955126) > 1e-12 || e.Subgroups != 4 {
		t.Errorf("%+v", e)
	}
	for i := range subgroups {
		subgroups[i].Break = true
	}
	if _, err := limits.Estimate(limits.Individuals, limits.MRBar, subgroups); !errors.Is(err, limits.ErrInput) {
		t.Errorf("only gaps: %v", err)
	}
}

func TestEstimatesThatDoNotExist(t *testing.T) {
	t.Parallel()
	two := []limits.Subgroup{{N: 2, Location: 1}, {N: 2, Location: 1}}
	for name, tc := range map[string]struct {
		chart     limits.Chart
		estimator limits.Estimator
		subgroups []limits.Subgroup
		want      error
	}{
		"none":              {limits.XBarR, limits.RBar, nil, limits.ErrInput},
		"zero spread":       {limits.XBarR, limits.RBar, two, limits.ErrZeroSpread},
		"zero pooled":       {limits.XBarS, limits.Pooled, two, limits.ErrZeroSpread},
		"only ones":         {limits.XBarR, limits.RBar, []limits.Subgroup{{N: 1}}, limits.ErrInput},
		"wrong estimator":   {limits.XBarR, limits.MRBar, two, limits.ErrInput},
		"unknown estimator": {limits.XBarR, "guess", two, limits.ErrInput},
		"counts":            {limits.P, "", two, limits.ErrInput},
		"NaN":               {limits.XBarR, "", []limits.Subgroup{{N: 2, Location: math.NaN(), Range: 1}}, limits.ErrInput},
		"negative range":    {limits.XBarR, "", []limits.Subgroup{{N: 2, Range: -1}}, limits.ErrInput},
		"size":              {limits.XBarR, "", []limits.Subgroup{{N: 0, Range: 1}}, limits.ErrInput},
		"pairs":             {limits.Individuals, "", two, limits.ErrInput},
		"one individual":    {limits.Individuals, "", []limits.Subgroup{{N: 1}}, limits.ErrInput},
	} {
		if e, err := limits.Estimate(tc.chart, tc.estimator, tc.subgroups); !errors.Is(err, tc.want) || e != (limits.Estimated{}) {
			t.Errorf("%s: %+v, %v", name, e, err)
		}
	}
}

// Whatever the readings, an estimate is finite or an error, and its limits enclose
// the centre.
func FuzzEstimate(f *testing.F) {
	f.Add(1.0, 2.0, 3.0, 4.0, uint8(2), false)
	f.Add(1e300, -1e300, 1e-300, math.NaN(), uint8(1), true)
	f.Fuzz(func(t *testing.T, a, b, c, d float64, kind uint8, gap bool) {
		chart := []limits.Chart{limits.XBarR, limits.XBarS, limits.MedianR, limits.Individuals}[kind%4]
		data := [][]float64{{a, b}, {c, d, a}, {d}}
		if chart == limits.Individuals {
			data = [][]float64{{a}, {b}, {c}, {d}}
		}
		var subgroups []limits.Subgroup
		for _, r := range data {
			s, err := limits.NewSubgroup(chart, r)
			if err != nil {
				return
			}
			s.Break = gap
			subgroups = append(subgroups, s)
		}
		for _, e := range []limits.Estimator{limits.RBar, limits.SBar, limits.Pooled, limits.MRBar, limits.MedianMR} {
			got, err := limits.Estimate(chart, e, subgroups)
			if err != nil {
				continue
			}
			for _, v := range []float64{got.Center, got.CenterSE, got.Sigma, got.DF} {
				if math.IsNaN(v) || math.IsInf(v, 0) {
					t.Errorf("%s %s of %v: %+v", chart, e, data, got)
				}
			}
			study, err := limits.RunStudy(limits.StudyInput{Chart: chart, Estimator: e, Subgroups: subgroups})
			if err == nil && study.Standard.Sigma != got.Sigma {
				t.Errorf("study %+v, estimate %+v", study, got)
			}
		}
	})
}
