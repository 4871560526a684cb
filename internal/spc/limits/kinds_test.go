package limits_test

import (
	"errors"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"holdfast/internal/spc/limits"
)

func TestShortRunsShareOneChart(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(1, 9))
	var family, standard []limits.Subgroup
	for i := range 60 {
		target := []float64{10, 25, 40}[i%3]
		sigma := []float64{0.5, 1, 2}[i%3]
		s := normalSubgroups(t, rng, limits.XBarR, []int{4}, target, sigma)[0]
		d, err1 := s.Deviation(target)
		z, err2 := s.Standardised(target, sigma)
		if err := errors.Join(err1, err2); err != nil {
			t.Fatal(err)
		}
		if d.Range != s.Range || d.Location != s.Location-target || z.SD != s.SD/sigma {
			t.Errorf("%+v became %+v and %+v", s, d, z)
		}
		family, standard = append(family, d), append(standard, z)
	}
	e, err := limits.Estimate(limits.XBarR, limits.RBar, standard)
	if err != nil || math.Abs(e.Center) > 0.3 || math.Abs(e.Sigma-1) > 0.25 {
		t.Errorf("standardised: %+v, %v", e, err)
	}
	if _, err := limits.Estimate(limits.XBarR, limits.RBar, family); err != nil {
		t.Error(err)
	}
	location, dispersion, err := limits.StandardisedUnit(limits.XBarR).Bands(4)
	if err != nil || location.Upper != 1.5 || !agrees(dispersion.Upper, 4.6981753545, 1e-9) {
		t.Errorf("%+v, %+v, %v", location, dispersion, err)
	}
	for _, sigma := range []float64{0, math.NaN(), math.Inf(1)} {
		if _, err := family[0].Standardised(1, sigma); !errors.Is(err, limits.ErrInput) {
			t.Errorf("sigma %g: %v", sigma, err)
		}
	}
	if _, err := family[0].Deviation(math.NaN()); !errors.Is(err, limits.ErrInput) {
		t.Errorf("target NaN: %v", err)
	}
}

func TestThreeWayChart(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(6, 2))
	var batches []limits.Subgroup
	for range 400 {
		level := 100 + 3*rng.NormFloat64()
		batches = append(batches, normalSubgroups(t, rng, limits.XBarR, []int{5}, level, 1)...)
	}
	s, err := limits.EstimateThreeWay(limits.XBarR, batches)
	if err != nil {
		t.Fatal(err)
	}
	// A mean varies by √(3² + 1/5).
	if math.Abs(s.Means.Sigma/math.Sqrt(9.2)-1) > 0.15 || math.Abs(s.Within.Sigma-1) > 0.1 {
		t.Errorf("%+v", s)
	}
	mean, moving, within, err := s.Bands(5)
	if err != nil || !agrees(mean.Upper, s.Means.Center+3*s.Means.Sigma, 1e-9) || moving.HasLower() ||
		!agrees(moving.Upper, 3.6858865664*s.Means.Sigma, 1e-9) || !agrees(within.Upper, (2.325928947281+3*0.8640819411)*s.Within.Sigma, 1e-9) {
		t.Errorf("%+v, %+v, %+v, %v", mean, moving, within, err)
	}
	test, err := limits.CompareBetween(batches)
	if err != nil || test.P > 1e-12 || math.Abs(test.SigmaBetween-3) > 0.4 || test.DF1 != 399 || test.DF2 != 1600 {
		t.Errorf("%+v, %v", test, err)
	}
}

// NIST/SEMATECH e-Handbook 7.4.3.3: three levels of five, F printed 9.59 (from
// memory), p computed independently.
func TestBetweenBatchesIsAnalysisOfVariance(t *testing.T) {
	t.Parallel()
	batches := reduce(t, limits.XBarS, [][]float64{{6.9, 5.4, 5.8, 4.6, 4.0}, {8.3, 6.8, 7.8, 9.2, 6.5}, {8.0, 10.5, 8.1, 6.9, 9.3}})
	test, err := limits.CompareBetween(batches)
	if err != nil || math.Abs(test.F-9.59110703644) > 1e-10 || math.Abs(test.P-0.00324822260086) > 1e-13 {
		t.Errorf("%+v, %v", test, err)
	}
	// Without any difference between batches the p values are spread evenly.
	rng := rand.New(rand.NewPCG(3, 3))
	low := 0
	for range 2000 {
		test, err := limits.CompareBetween(normalSubgroups(t, rng, limits.XBarS, []int{4, 5, 3, 4, 1, 6}, 9, 2))
		if err != nil {
			t.Fatal(err)
		}
		if test.P < 0.05 {
			low++
		}
	}
	if low < 61 || low > 139 {
		t.Errorf("%d of 2000 below 5%%", low)
	}
	if _, err := limits.CompareBetween([]limits.Subgroup{{N: 1}, {N: 1}}); !errors.Is(err, limits.ErrInput) {
		t.Errorf("single readings: %v", err)
	}
	if _, err := limits.CompareBetween([]limits.Subgroup{{N: 2}, {N: 2}}); !errors.Is(err, limits.ErrZeroSpread) {
		t.Errorf("no spread: %v", err)
	}
	if _, err := limits.EstimateThreeWay(limits.Individuals, batches); !errors.Is(err, limits.ErrInput) {
		t.Errorf("wrong chart within: %v", err)
	}
}

func TestGroupChart(t *testing.T) {
	t.Parallel()
	streams := []limits.Subgroup{{N: 2, Location: 3, Range: 1}, {N: 2, Location: 5, Range: 4}, {N: 2, Location: 1, Range: 2}, {N: 2, Location: 5}}
	e, err := limits.FindExtremes(limits.XBarR, streams, 1e-9)
	if err != nil || e != (limits.Extremes{Highest: 1, Lowest: 2, Widest: 1, HighestTied: true}) {
		t.Errorf("%+v, %v", e, err)
	}
	var run limits.StreamRun
	var lengths []int
	for _, s := range []int{2, 2, 2, 1, 1} {
		lengths = append(lengths, run.Step(s, false))
	}
	lengths = append(lengths, run.Step(1, true), run.Step(1, false))
	if !slices.Equal(lengths, []int{1, 2, 3, 1, 2, 0, 1}) {
		t.Errorf("runs %v", lengths)
	}
	p, err := limits.RunChance(6, 4)
	if err != nil || !agrees(p, 1.0/216, 1e-16) {
		t.Errorf("chance %g, %v", p, err)
	}
	for _, c := range [][2]int{{2, 10}, {4, 6}, {10, 4}, {24, 3}} {
		// The shortest run at most as likely as a point beyond 3 sigma.
		if k, err := limits.RunFor(c[0], 0.0027); err != nil || k != c[1] {
			t.Errorf("%d streams: run of %d, %v; want %d", c[0], k, err, c[1])
		}
	}
	if k, err := limits.RunFor(10, 0.001); err != nil || k != 4 {
		t.Errorf("a chance met exactly: %d, %v", k, err)
	}
	// Simulated: six equal streams, the same one highest three times in a row.
	rng := rand.New(rand.NewPCG(5, 5))
	hits, last, before := 0, -1, -2
	const rounds = 60000
	for range rounds {
		s := rng.IntN(6)
		if s == last && s == before {
			hits++
		}
		before, last = last, s
	}
	want, _ := limits.RunChance(6, 3)
	if got := float64(hits) / rounds; math.Abs(got/want-1) > 0.12 {
		t.Errorf("simulated chance %g, want %g", got, want)
	}
	for name, err := range map[string]error{
		"one stream": func() error { _, err := limits.FindExtremes(limits.XBarR, streams[:1], 0); return err }(),
		"NaN": func() error {
			_, err := limits.FindExtremes(limits.XBarR, []limits.Subgroup{{N: 2, Location: math.NaN()}, {N: 2}}, 0)
			return err
		}(),
		"chance":  func() error { _, err := limits.RunFor(3, 0); return err }(),
		"streams": func() error { _, err := limits.RunChance(1, 3); return err }(),
	} {
		if !errors.Is(err, limits.ErrInput) {
			t.Errorf("%s: %v", name, err)
		}
	}
}

func TestTrendFollowsTheWear(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(7, 7))
	var subgroups []limits.Subgroup
	var wear []float64
	for i := range 300 {
		w := float64(i%50) * 20
		s := normalSubgroups(t, rng, limits.XBarR, []int{5}, 10+0.004*w, 0.2)[0]
		s.Break = i%50 == 0
		subgroups, wear = append(subgroups, s), append(wear, w)
	}
	s, err := limits.EstimateTrend(limits.XBarR, "", subgroups, wear)
	if err != nil {
		t.Fatal(err)
	}
	if math.Abs(s.Slope-0.004) > 4*s.SlopeSE || math.Abs(s.Intercept-10) > 0.03 || math.Abs(s.Sigma/0.2-1) > 0.1 ||
		math.Abs(s.SlopeSE/(0.2/math.Sqrt(5*300)/288.6)-1) > 0.2 {
		t.Errorf("%+v", s)
	}
	location, dispersion, err := s.Bands(500, 5)
	if err != nil || !agrees(location.Center, s.Intercept+500*s.Slope, 1e-9) || !agrees(location.Upper-location.Center, 3*s.Sigma/math.Sqrt(5), 1e-9) || !dispersion.Exists() {
		t.Errorf("%+v, %+v, %v", location, dispersion, err)
	}
	// Single readings: sigma from what the line leaves, not from the climb.
	single := make([]limits.Subgroup, len(subgroups))
	for i := range single {
		single[i] = limits.Subgroup{N: 1, Location: 10 + 0.05*wear[i] + 0.2*rng.NormFloat64(), Break: subgroups[i].Break}
	}
	individual, err := limits.EstimateTrend(limits.Individuals, limits.MRBar, single, wear)
	if err != nil || math.Abs(individual.Sigma/0.2-1) > 0.15 {
		t.Errorf("%+v, %v", individual, err)
	}
}

func TestWhenToChangeTheTool(t *testing.T) {
	t.Parallel()
	s := limits.TrendStandard{Chart: limits.XBarR, Intercept: 10, Slope: 0.01, Sigma: 0.2}
	lower, upper := 8.0, 12.0
	// (12 - 10 - 0.01 w)/0.6 = 4/3 at w = 120.
	wear, ok, err := s.ChangeAt(&lower, &upper, 4.0/3)
	if err != nil || !ok || math.Abs(wear-120) > 1e-9 {
		t.Errorf("%g, %v, %v", wear, ok, err)
	}
	s.Slope = -0.01
	if wear, ok, err = s.ChangeAt(&lower, &upper, 1); err != nil || !ok || math.Abs(wear-140) > 1e-9 {
		t.Errorf("falling: %g, %v, %v", wear, ok, err)
	}
	if _, ok, err = s.ChangeAt(nil, &upper, 1); err != nil || ok {
		t.Errorf("no limit that way: %v, %v", ok, err)
	}
	if wear, ok, err = s.ChangeAt(&lower, nil, 10); err != nil || !ok || wear != 0 {
		t.Errorf("too late from the start: %g, %v, %v", wear, ok, err)
	}
	three := []limits.Subgroup{{N: 1, Location: 1}, {N: 1, Location: 2}, {N: 1, Location: 4}}
	for name, w := range map[string][]float64{"lengths": {1}, "same wear": {2, 2, 2}, "NaN": {1, 2, math.NaN()}, "negative": {-1, 0, 1}} {
		if _, err := limits.EstimateTrend(limits.Individuals, "", three, w); !errors.Is(err, limits.ErrInput) {
			t.Errorf("%s: %v", name, err)
		}
	}
}
