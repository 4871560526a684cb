package limits_test

import (
	"errors"
	"math"
	"math/rand/v2"
	"testing"

	"holdfast/internal/spc/limits"
)

func TestGoodUnitsBetweenEvents(t *testing.T) {
	t.Parallel()
	s, err := limits.EstimateRare(limits.G, []float64{10, 30, 20, 40})
	if err != nil || s.Center != 25 {
		t.Fatal(s, err)
	}
	b, err := s.Band()
	if err != nil || b.HasLower() || !agrees(b.Upper, 25+3*math.Sqrt(25*26), 0) {
		t.Errorf("%+v, %v", b, err)
	}
	for _, mean := range []float64{0.2, 1, 25, 99, 999, 12345} {
		b, err := limits.RareStandard{Chart: limits.G, Center: mean, Probability: true}.Band()
		if err != nil {
			t.Fatal(err)
		}
		// By the definition, with powers of 1-p = m/(m+1) multiplied out.
		above, below := func(k float64) float64 { return math.Pow(mean/(mean+1), k+1) }, func(k float64) float64 { return 1 - math.Pow(mean/(mean+1), k) }
		if above(b.Upper) > 0.00135 || b.Upper > 0 && above(b.Upper-1) <= 0.00135 {
			t.Errorf("mean %g: upper %g leaves %g", mean, b.Upper, above(b.Upper))
		}
		low := math.Max(0, b.Lower)
		if b.HasLower() && below(low) > 0.00135 || below(low+1) <= 0.00135 {
			t.Errorf("mean %g: lower %g leaves %g", mean, b.Lower, below(low))
		}
		// Only beyond a mean of about 740 units can coming too soon be told.
		if b.HasLower() != (mean > 740) {
			t.Errorf("mean %g: lower %g", mean, b.Lower)
		}
	}
}

func TestTimeBetweenEvents(t *testing.T) {
	t.Parallel()
	// Chosen so that the transformed times are 1, 2, 3, 2.
	var times []float64
	for _, y := range []float64{1, 2, 3, 2} {
		times = append(times, math.Pow(y, 3.6))
	}
	s, err := limits.EstimateRare(limits.T, times)
	if err != nil {
		t.Fatal(err)
	}
	sigma := 1 / 1.1283791670955126
	if !agrees(s.Center, 2, 1e-12) || !agrees(s.Sigma, sigma, 1e-12) {
		t.Errorf("%+v", s)
	}
	b, err := s.Band()
	if err != nil || b.HasLower() || !agrees(b.Upper, math.Pow(2+3*sigma, 3.6), 1e-9) || !agrees(b.Center, math.Pow(2, 3.6), 1e-9) {
		t.Errorf("%+v, %v", b, err)
	}
	if z, err := s.Z(b.Upper); err != nil || math.Abs(z-3) > 1e-12 {
		t.Errorf("z of the upper limit: %g, %v", z, err)
	}
	narrow := limits.RareStandard{Chart: limits.T, Center: 2, Sigma: 0.3}
	b, err = narrow.Band()
	if err != nil || !agrees(b.Lower, math.Pow(1.1, 3.6), 1e-12) {
		t.Errorf("%+v, %v", b, err)
	}
	if z, err := narrow.Z(b.Lower); err != nil || math.Abs(z+3) > 1e-12 {
		t.Errorf("z of the lower limit: %g, %v", z, err)
	}
}

// On exponential times the transformed chart alarms rarely; on the times themselves
// an individuals chart alarms once in about 50 points.
func TestTimesAreNearlyNormalAfterTransformation(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(2, 3))
	times := make([]float64, 20000)
	for i := range times {
		times[i] = 40 * rng.ExpFloat64()
	}
	s, err := limits.EstimateRare(limits.T, times)
	if err != nil {
		t.Fatal(err)
	}
	b, err := s.Band()
	if err != nil {
		t.Fatal(err)
	}
	alarms := 0
	for _, x := range times {
		if b.Outside(x) != 0 {
			alarms++
		}
	}
	if rate := float64(alarms) / float64(len(times)); rate > 0.003 {
		t.Errorf("alarm rate %.4f", rate)
	}
}

func TestRareEventsThatGiveNoLimits(t *testing.T) {
	t.Parallel()
	for name, f := range map[string]func() error{
		"chart":    func() error { _, err := limits.EstimateRare(limits.C, []float64{1, 2}); return err },
		"one":      func() error { _, err := limits.EstimateRare(limits.G, []float64{1}); return err },
		"negative": func() error { _, err := limits.EstimateRare(limits.T, []float64{1, -1}); return err },
		"NaN":      func() error { _, err := limits.EstimateRare(limits.T, []float64{1, math.NaN()}); return err },
		"part":     func() error { _, err := limits.EstimateRare(limits.G, []float64{1, 1.5}); return err },
		"equal":    func() error { _, err := limits.EstimateRare(limits.T, []float64{2, 2}); return err },
		"all 0":    func() error { _, err := limits.EstimateRare(limits.G, []float64{0, 0}); return err },
		"exact t": func() error {
			_, err := limits.RareStandard{Chart: limits.T, Center: 1, Sigma: 1, Probability: true}.Band()
			return err
		},
		"value": func() error { _, err := limits.RareStandard{Chart: limits.G, Center: 1}.Z(-1); return err },
	} {
		if err := f(); !errors.Is(err, limits.ErrInput) {
			t.Errorf("%s: %v", name, err)
		}
	}
}
