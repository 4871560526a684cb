package limits_test

import (
	"errors"
	"math"
	"slices"
	"testing"

	"holdfast/internal/spc/limits"
)

// NIST/SEMATECH e-Handbook 6.3.2.4.
func TestEWMAOfTheHandbook(t *testing.T) {
	t.Parallel()
	ex := handbook(t, "6.3.2.4")
	p, err := limits.EWMASeries(ex.Data, 50, 2.0539, 0.3, 3)
	if err != nil {
		t.Fatal(err)
	}
	z, printed := series(t, ex.Computed["z_from_0"])[1:], series(t, ex.Published["z_from_0"])[1:]
	half := series(t, ex.Computed["half_width_time_varying"])
	for i := range z {
		if !agrees(p.Z[i], z[i], 0) || math.Abs(p.Z[i]-printed[i]) > 0.00501 || !agrees(p.Upper[i]-50, half[i], 1e-11) || !agrees(50-p.Lower[i], half[i], 1e-11) {
			t.Errorf("%d: %.12g in %.12g to %.12g", i, p.Z[i], p.Lower[i], p.Upper[i])
		}
	}
	// The limits settle at those printed.
	if last := p.Upper[19]; math.Abs(last-ex.Published["ucl"].(float64)) > 1e-4 {
		t.Errorf("upper limit %.6f", last)
	}
	if len(p.Fired) != 0 {
		t.Errorf("fired %v", p.Fired)
	}
}

// NIST/SEMATECH e-Handbook 6.3.2.3: sums in the unit of the data, so sigma is 1.
func TestCUSUMOfTheHandbook(t *testing.T) {
	t.Parallel()
	ex := handbook(t, "6.3.2.3")
	p, err := limits.CUSUMSeries(ex.Data, 325, 1, 0.3175, 4.1959, 0)
	if err != nil {
		t.Fatal(err)
	}
	upper, lower := series(t, ex.Computed["upper"]), series(t, ex.Computed["lower"])
	printed := series(t, ex.Published["upper"])
	for i := range upper {
		if !agrees(p.High[i], upper[i], 1e-10) || !agrees(p.Low[i], lower[i], 1e-10) || math.Abs(p.High[i]-printed[i]) > 0.00501 {
			t.Errorf("%d: %.12g, %.12g", i, p.High[i], p.Low[i])
		}
	}
	if len(p.Fired) == 0 || p.Fired[0]+1 != int(ex.Published["first_upper_signal"].(float64)) {
		t.Errorf("fired %v", p.Fired)
	}
	scaled := make([]float64, len(ex.Data))
	for i, v := range ex.Data {
		scaled[i] = -8 * (v - 325)
	}
	q, err := limits.CUSUMSeries(scaled, 0, 8, 0.3175, 4.1959, 0)
	if err != nil || !slices.Equal(q.Fired, p.Fired) || !slices.Equal(q.High, p.Low) {
		t.Errorf("mirrored and scaled: %v, %v", q.Fired, err)
	}
	fast, err := limits.CUSUMSeries([]float64{0, 0}, 0, 1, 0.5, 4, 0.5)
	if err != nil || !slices.Equal(fast.High, []float64{1.5, 1}) || !slices.Equal(fast.Low, []float64{1.5, 1}) {
		t.Errorf("head start: %+v, %v", fast, err)
	}
}

func TestSeriesThatCannotBeDrawn(t *testing.T) {
	t.Parallel()
	one, nan := []float64{1}, math.NaN()
	for name, f := range map[string]func() error{
		"empty":      func() error { _, err := limits.EWMASeries(nil, 0, 1, 0.2, 3); return err },
		"NaN":        func() error { _, err := limits.EWMASeries([]float64{nan}, 0, 1, 0.2, 3); return err },
		"sigma":      func() error { _, err := limits.EWMASeries(one, 0, 0, 0.2, 3); return err },
		"lambda":     func() error { _, err := limits.EWMASeries(one, 0, 1, 0, 3); return err },
		"L":          func() error { _, err := limits.EWMASeries(one, 0, 1, 0.2, nan); return err },
		"centre":     func() error { _, err := limits.CUSUMSeries(one, nan, 1, 0.5, 4, 0); return err },
		"k":          func() error { _, err := limits.CUSUMSeries(one, 0, 1, -1, 4, 0); return err },
		"h":          func() error { _, err := limits.CUSUMSeries(one, 0, 1, 0.5, 0, 0); return err },
		"head start": func() error { _, err := limits.CUSUMSeries(one, 0, 1, 0.5, 4, 2); return err },
		"overflow":   func() error { _, err := limits.CUSUMSeries([]float64{1e300}, -1e300, 1e-300, 0.5, 4, 0); return err },
	} {
		if err := f(); !errors.Is(err, limits.ErrInput) {
			t.Errorf("%s: %v", name, err)
		}
	}
}

func FuzzSeries(f *testing.F) {
	f.Add(1.0, 2.0, 3.0, 0.5, 1.0, 0.2, 3.0)
	f.Fuzz(func(t *testing.T, a, b, c, center, sigma, p, q float64) {
		x := []float64{a, b, c, a}
		var all []float64
		if e, err := limits.EWMASeries(x, center, sigma, p, q); err == nil {
			all = slices.Concat(all, e.Z, e.Lower, e.Upper)
		}
		if e, err := limits.CUSUMSeries(x, center, sigma, p, q, p); err == nil {
			all = slices.Concat(all, e.High, e.Low)
		}
		for _, v := range all {
			if math.IsNaN(v) || math.IsInf(v, 0) {
				t.Errorf("%v about %g, %g with %g, %g: %v", x, center, sigma, p, q, all)
			}
		}
	})
}
