package limits_test

import (
	"errors"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"holdfast/internal/spc/limits"
)

func warning[W limits.Warning](s limits.Study) (w W, ok bool) {
	for _, v := range s.Warnings {
		if w, ok = v.(W); ok {
			return w, true
		}
	}
	return w, false
}

func run(t *testing.T, in limits.StudyInput) limits.Study {
	t.Helper()
	s, err := limits.RunStudy(in)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

func TestStudyOfPistonRings(t *testing.T) {
	t.Parallel()
	data, want := pistonRings(t)
	s := run(t, limits.StudyInput{Chart: limits.XBarR, Subgroups: reduce(t, limits.XBarR, data)})
	// Montgomery: both charts in control.
	if s.BeyondDispersion != nil || s.BeyondLocation != nil || len(s.Warnings) != 0 {
		t.Errorf("beyond %v, %v; warnings %v", s.BeyondDispersion, s.BeyondLocation, s.Warnings)
	}
	if !agrees(s.Standard.Sigma, want["sigma_from_range"].(float64), 0) || s.Standard.Multiple != 3 {
		t.Errorf("%+v", s.Standard)
	}
}

// A wide subgroup and a shifted one are pointed out; leaving them out with a cause
// recomputes, and nothing leaves by itself.
func TestStudyPointsOutAndRecomputes(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(3, 4))
	subgroups := normalSubgroups(t, rng, limits.XBarR, repeat(5, 40), 10, 1)
	subgroups[7].Range = 12
	subgroups[21].Location = 13
	s := run(t, limits.StudyInput{Chart: limits.XBarR, Subgroups: subgroups})
	if !slices.Equal(s.BeyondDispersion, []int{7}) || !slices.Equal(s.BeyondLocation, []int{21}) {
		t.Fatalf("beyond %v, %v", s.BeyondDispersion, s.BeyondLocation)
	}
	again := run(t, limits.StudyInput{Chart: limits.XBarR, Subgroups: subgroups, Excluded: []int{21, 7, 7}})
	if again.BeyondDispersion != nil || again.BeyondLocation != nil || again.Estimated.Subgroups != 38 || again.Standard.Sigma >= s.Standard.Sigma {
		t.Errorf("after leaving out: %+v", again)
	}
	if _, err := limits.RunStudy(limits.StudyInput{Chart: limits.XBarR, Subgroups: subgroups, Excluded: []int{40}}); !errors.Is(err, limits.ErrInput) {
		t.Errorf("an exclusion that does not exist: %v", err)
	}
}

func TestExclusionBreaksTheMovingRange(t *testing.T) {
	t.Parallel()
	x := singles(t, []float64{1, 2, 50, 1, 2, 1})
	s := run(t, limits.StudyInput{Chart: limits.Individuals, Subgroups: x, Excluded: []int{2}})
	// Ranges 1 | 1, 1: the step from 2 to 1 over the gap is not one of them.
	if s.Estimated.Subgroups != 3 || math.Abs(s.Standard.Sigma-1/1.1283791670955126) > 1e-12 {
		t.Errorf("%+v", s.Estimated)
	}
}

func TestWarningsOfAStudy(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(5, 6))

	few := run(t, limits.StudyInput{Chart: limits.XBarS, Subgroups: normalSubgroups(t, rng, limits.XBarS, repeat(4, 12), 0, 1)})
	if w, ok := warning[limits.FewSubgroups](few); !ok || w != (limits.FewSubgroups{Have: 12, Want: 20}) {
		t.Errorf("twelve subgroups: %v", few.Warnings)
	}

	still := run(t, limits.StudyInput{Chart: limits.XBarR, Subgroups: []limits.Subgroup{{N: 3, Location: 1}, {N: 3, Location: 2}}})
	if _, ok := warning[limits.ZeroSpread](still); !ok || still.Standard != (limits.Standard{}) {
		t.Errorf("no spread: %+v", still)
	}

	// Readings rounded to one unit where sigma is a third of it.
	var coarse []limits.Subgroup
	for range 60 {
		readings := make([]float64, 4)
		for i := range readings {
			readings[i] = math.Round(10 + rng.NormFloat64()/3)
		}
		s, err := limits.NewSubgroup(limits.XBarR, readings)
		if err != nil {
			t.Fatal(err)
		}
		coarse = append(coarse, s)
	}
	if w, ok := warning[limits.CoarseGauge](run(t, limits.StudyInput{Chart: limits.XBarR, Subgroups: coarse})); !ok || w.Distinct >= 5 || w.Distinct < 2 {
		t.Errorf("coarse gauge: %+v, %v", w, ok)
	}

	// A slow wander: each mean keeps most of the one before.
	wander := normalSubgroups(t, rng, limits.XBarR, repeat(5, 60), 0, 1)
	level := 0.0
	for i := range wander {
		level = 0.8*level + 0.5*rng.NormFloat64()
		wander[i].Location += level
	}
	if w, ok := warning[limits.Autocorrelated](run(t, limits.StudyInput{Chart: limits.XBarR, Subgroups: wander})); !ok || w.Lag1 < 0.3 || math.Abs(w.Limit-1.96/math.Sqrt(60)) > 1e-15 {
		t.Errorf("wander: %+v, %v", w, ok)
	}

	skewed := make([]float64, 60)
	for i := range skewed {
		skewed[i] = rng.ExpFloat64()
	}
	if w, ok := warning[limits.NotNormal](run(t, limits.StudyInput{Chart: limits.Individuals, Subgroups: singles(t, skewed)})); !ok || w.Test.P >= 0.05 {
		t.Errorf("exponential times: %+v, %v", w, ok)
	}
	if _, err := limits.RunStudy(limits.StudyInput{Chart: limits.XBarR}); !errors.Is(err, limits.ErrInput) {
		t.Errorf("nothing to study: %v", err)
	}
}

// On a stable process the tests against the basis reject at their level: 1% of 4,000
// comparisons each, within four standard errors, with the old limits estimated
// from as few as 25 subgroups.
func TestComparisonHoldsItsLevel(t *testing.T) {
	t.Parallel()
	for _, tc := range []struct {
		chart     limits.Chart
		estimator limits.Estimator
		size      int
	}{
		{limits.XBarR, limits.RBar, 5}, {limits.MedianR, limits.RBar, 5}, {limits.XBarS, limits.Pooled, 3}, {limits.Individuals, limits.MRBar, 1},
	} {
		rng := rand.New(rand.NewPCG(8, 9))
		center, sigma := 0, 0
		const runs = 4000
		for range runs {
			old, err1 := limits.Estimate(tc.chart, tc.estimator, normalSubgroups(t, rng, tc.chart, repeat(tc.size, 25), 7, 0.5))
			newer, err2 := limits.Estimate(tc.chart, tc.estimator, normalSubgroups(t, rng, tc.chart, repeat(tc.size, 40), 7, 0.5))
			c, err3 := limits.Compare(old, newer)
			if err := errors.Join(err1, err2, err3); err != nil {
				t.Fatal(err)
			}
			if c.CenterP < 0.01 {
				center++
			}
			if c.SigmaP < 0.01 {
				sigma++
			}
		}
		if center < 15 || center > 65 || sigma < 15 || sigma > 65 {
			t.Errorf("%s %s: %d and %d of %d beyond 1%%", tc.chart, tc.estimator, center, sigma, runs)
		}
	}
}

func TestComparisonFindsAChange(t *testing.T) {
	t.Parallel()
	old := limits.Estimated{Center: 10, CenterSE: 0, Sigma: 1, DF: math.Inf(1)}
	newer := limits.Estimated{Center: 10.3, CenterSE: 0.1, Sigma: 1.5, DF: 100}
	c, err := limits.Compare(old, newer)
	if err != nil {
		t.Fatal(err)
	}
	// Given standards: t = 3 on 100 degrees of freedom, two-sided p from tables
	// of Student's t; 100 S² is chi-square with 100 degrees of freedom.
	if math.Abs(c.CenterP-0.0034) > 1e-4 || c.SigmaP > 1e-6 || c.SigmaRatio != 1.5 {
		t.Errorf("%+v", c)
	}
	if _, err := limits.Compare(old, old); !errors.Is(err, limits.ErrInput) {
		t.Errorf("two given standards: %v", err)
	}
	for name, bad := range map[string]limits.Estimated{
		"sigma": {Center: 1, CenterSE: 1, Sigma: 0, DF: 1}, "centre": {Center: math.NaN(), CenterSE: 1, Sigma: 1, DF: 1}, "df": {Center: 1, CenterSE: 1, Sigma: 1},
	} {
		if _, err := limits.Compare(old, bad); !errors.Is(err, limits.ErrInput) {
			t.Errorf("%s: %v", name, err)
		}
	}
}

func TestLookingIsRationed(t *testing.T) {
	t.Parallel()
	var looks []int
	for n := range 700 {
		if limits.LookAt(n) {
			looks = append(looks, n)
		}
	}
	if !slices.Equal(looks, []int{20, 40, 80, 160, 320, 640}) {
		t.Errorf("looked at %v", looks)
	}
}

func BenchmarkLimitStudy(b *testing.B) {
	rng := rand.New(rand.NewPCG(1, 1))
	for _, c := range []struct {
		chart limits.Chart
		sizes []int
	}{
		{limits.XBarR, repeat(5, 100_000)}, {limits.XBarS, append(repeat(5, 90_000), repeat(4, 10_000)...)}, {limits.Individuals, repeat(1, 100_000)},
	} {
		subgroups := normalSubgroups(b, rng, c.chart, c.sizes, 12.5, 0.003)
		b.Run(string(c.chart), func(b *testing.B) {
			for b.Loop() {
				if _, err := limits.RunStudy(limits.StudyInput{Chart: c.chart, Subgroups: subgroups, Excluded: []int{5, 99}}); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}

func BenchmarkBands(b *testing.B) {
	s := limits.Standard{Chart: limits.XBarR, Center: 12.5, Sigma: 0.003}
	for b.Loop() {
		if _, _, err := s.Bands(5); err != nil {
			b.Fatal(err)
		}
	}
}
