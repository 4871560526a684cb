package watch_test

import (
	"math"
	"slices"
	"strings"
	"testing"

	"holdfast/internal/spc/watch"
)

// NIST/SEMATECH e-Handbook 6.3.2.4 and 6.3.2.3, as whole series.
func TestSeriesOfTheHandbook(t *testing.T) {
	t.Parallel()
	ref := loadAccumulated(t)
	he := ref.HandbookEWMA
	p, err := watch.EWMA{Lambda: he.Parameters.Lambda, L: he.Parameters.K}.Series(he.Data, he.Parameters.Target, he.Parameters.S)
	if err != nil {
		t.Fatal(err)
	}
	for i := range he.Data {
		near(t, "average", i+1, p.Z[i], he.Computed.Z[i+1], 1e-9)
		near(t, "upper limit", i+1, p.Upper[i]-he.Parameters.Target, he.Computed.HalfWidth[i], 1e-9)
		near(t, "lower limit", i+1, he.Parameters.Target-p.Lower[i], he.Computed.HalfWidth[i], 1e-9)
	}
	if len(p.Fired) != 0 {
		t.Errorf("EWMA fired at %v; the handbook finds none", p.Fired)
	}

	hc := ref.HandbookCUSUM
	c := watch.CUSUM{K: hc.Parameters.K, H: hc.Parameters.H}
	q, err := c.Series(hc.Data, hc.Parameters.Target, 1)
	if err != nil {
		t.Fatal(err)
	}
	for i := range hc.Data {
		near(t, "high sum", i+1, q.High[i], hc.Computed.Upper[i], 1e-9)
		near(t, "low sum", i+1, q.Low[i], hc.Computed.Lower[i], 1e-9)
	}
	if len(q.Fired) == 0 || q.Fired[0]+1 != hc.Published.First {
		t.Errorf("CUSUM fired at %v, want first at %d", q.Fired, hc.Published.First)
	}
	// Mirrored and in another unit the sides change places and nothing else does.
	scaled := make([]float64, len(hc.Data))
	for i, v := range hc.Data {
		scaled[i] = -8 * (v - hc.Parameters.Target)
	}
	m, err := c.Series(scaled, 0, 8)
	if err != nil || !slices.Equal(m.Fired, q.Fired) || !slices.Equal(m.High, q.Low) || !slices.Equal(m.Low, q.High) {
		t.Errorf("mirrored and scaled: %+v, %v", m, err)
	}
	fast, err := watch.CUSUM{K: 0.5, H: 4, HeadStart: 0.5}.Series([]float64{0, 0}, 0, 1)
	if err != nil || !slices.Equal(fast.High, []float64{1.5, 1}) || !slices.Equal(fast.Low, []float64{1.5, 1}) {
		t.Errorf("head start: %+v, %v", fast, err)
	}
}

func TestSeriesThatCannotBeDrawn(t *testing.T) {
	t.Parallel()
	one, nan := []float64{1}, math.NaN()
	e, c := watch.EWMA{Lambda: 0.2, L: 3}, watch.CUSUM{K: 0.5, H: 4}
	both := func(x []float64, center, sigma float64) []error {
		_, err1 := e.Series(x, center, sigma)
		_, err2 := c.Series(x, center, sigma)
		return []error{err1, err2}
	}
	_, lambda := watch.EWMA{Lambda: 0, L: 3}.Series(one, 0, 1)
	_, k := watch.CUSUM{K: -1, H: 4}.Series(one, 0, 1)
	for name, errs := range map[string][]error{
		"x:":      slices.Concat(both(nil, 0, 1), both([]float64{nan}, 0, 1), both([]float64{1e300}, -1e300, 1e-300)),
		"sigma:":  slices.Concat(both(one, 0, 0), both(one, 0, nan), both(one, 0, math.Inf(1))),
		"center:": both(one, nan, 1), "lambda:": {lambda}, "k:": {k},
	} {
		for _, err := range errs {
			if err == nil || !strings.HasPrefix(err.Error(), name) {
				t.Errorf("%s %v", name, err)
			}
		}
	}
}

func FuzzSeries(f *testing.F) {
	f.Add(1.0, 2.0, 3.0, 0.5, 1.0, 0.2, 3.0)
	f.Fuzz(func(t *testing.T, a, b, c, center, sigma, p, q float64) {
		x := []float64{a, b, c, a}
		var all []float64
		if e, err := (watch.EWMA{Lambda: p, L: q}).Series(x, center, sigma); err == nil {
			all = slices.Concat(all, e.Z, e.Lower, e.Upper)
		}
		if e, err := (watch.CUSUM{K: p, H: q, HeadStart: p}).Series(x, center, sigma); err == nil {
			all = slices.Concat(all, e.High, e.Low)
		}
		for _, v := range all {
			if math.IsNaN(v) || math.IsInf(v, 0) {
				t.Errorf("%v about %g, %g with %g, %g: %v", x, center, sigma, p, q, all)
			}
		}
	})
}
