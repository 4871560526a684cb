package runlength_test

import (
	"errors"
	"math"
	"strings"
	"testing"

	"holdfast/internal/spc/limits"
	"holdfast/internal/spc/runlength"
	"holdfast/internal/spc/watch"
)

func TestRunLengthRefusesBadInput(t *testing.T) {
	t.Parallel()
	nan, zero := math.NaN(), []float64{0}
	rules := func(r []watch.Rule, shifts []float64) error {
		_, err := runlength.Rules(r, shifts, runlength.Options{})
		return err
	}
	ewma := func(lambda, l float64, limits runlength.StartUp) error {
		_, err := runlength.EWMA(watch.EWMA{Lambda: lambda, L: l}, limits, zero)
		return err
	}
	cusum := func(k, h, head float64) error {
		_, err := runlength.CUSUM(watch.CUSUM{K: k, H: h, HeadStart: head}, zero)
		return err
	}
	estimated := func(m, n int, e runlength.Estimator) error {
		_, err := runlength.Estimated(m, n, e, runlength.Options{})
		return err
	}
	standard := func(s watch.Standard, n int, c runlength.Change) error {
		_, err := runlength.Standard(s, n, c, runlength.Options{})
		return err
	}
	price := func(s runlength.Sampling) error {
		_, err := runlength.PriceOf(pair(limits.XBarR, beyond3, nil), 5, s, nil, runlength.Options{})
		return err
	}
	noSigma := pair(limits.XBarR, beyond3, nil)
	noSigma.Sigma = 0
	for _, tc := range []struct {
		word string
		err  error
	}{
		{"rules are empty", rules(nil, zero)},
		{"shifts are empty", rules(beyond3, nil)},
		{"shifts must", rules(beyond3, []float64{nan})},
		{"shifts must", rules(beyond3, []float64{1e9})},
		{"kind", rules([]watch.Rule{{Kind: "odd"}}, zero)},
		{"m:", rules([]watch.Rule{{Kind: watch.RisingOrFalling, M: 99}}, zero)},
		{"never", rules([]watch.Rule{{Kind: watch.Beyond, Z: 50}}, zero)},
		{"lambda", ewma(0, 3, "")},
		{"lambda", ewma(0.001, 3, "")},
		{"L", ewma(0.2, nan, "")},
		{"L up to", ewma(0.2, 30, "")},
		{"limits are", ewma(0.2, 3, "some")},
		{"k:", cusum(-1, 5, 0)},
		{"h up to", cusum(0.5, 500, 0)},
		{"head_start", cusum(0.5, 5, 2)},
		{"head start above", cusum(0.1, 40, 1)},
		{"never", cusum(20, 50, 0)},
		{"m must", estimated(1, 5, runlength.PooledSD)},
		{"n must", estimated(25, 0, runlength.PooledSD)},
		{"m·n", estimated(1_000_000, 5, runlength.PooledSD)},
		{"m·n", estimated(math.MaxInt, math.MaxInt, runlength.PooledSD)},
		{"estimator", estimated(25, 5, "median")},
		{"does not go", estimated(25, 5, runlength.MeanMovingRange)},
		{"does not go", estimated(25, 1, runlength.MeanRange)},
		{"sigma", standard(noSigma, 5, runlength.Change{})},
		{"1 to 100", standard(pair(limits.XBarR, beyond3, nil), 0, runlength.Change{})},
		{"does not take", standard(pair(limits.Individuals, beyond3, nil), 5, runlength.Change{})},
		{"no rules", standard(pair(limits.XBarR, nil, nil), 5, runlength.Change{})},
		{"shift", standard(pair(limits.XBarR, beyond3, nil), 5, runlength.Change{Shift: nan})},
		{"spread", standard(pair(limits.XBarR, beyond3, nil), 5, runlength.Change{Spread: -1})},
		{"interval", price(runlength.Sampling{HoursPerWeek: 40})},
		{"hours per week", price(runlength.Sampling{IntervalHours: 1, HoursPerWeek: 200})},
		{"parts", price(runlength.Sampling{IntervalHours: 1, HoursPerWeek: 40, PartsPerHour: -1})},
	} {
		if !errors.Is(tc.err, runlength.ErrInput) || !strings.Contains(tc.err.Error(), tc.word) {
			t.Errorf("%s: error %v", tc.word, tc.err)
		}
	}
	if _, err := (runlength.RunLength{}).Median(); err == nil {
		t.Error("an empty run length has a median")
	}
}

func finite(t *testing.T, r runlength.RunLength) {
	t.Helper()
	if math.IsNaN(r.Mean) || math.IsInf(r.Mean, 0) || r.Mean < 1-1e-9 || math.IsNaN(r.StandardError) || r.StandardError < 0 {
		t.Fatalf("impossible run length %v ± %v by %s", r.Mean, r.StandardError, r.Method)
	}
	if q, err := r.Quantile(0.9); err == nil && (math.IsNaN(q) || math.IsInf(q, 0) || q < 1) {
		t.Fatalf("impossible quantile %v", q)
	}
}

func FuzzRules(f *testing.F) {
	f.Add(uint8(1), uint8(2), uint8(3), 2.0, uint8(0), uint8(8), 3.0, 0.5)
	f.Add(uint8(4), uint8(1), uint8(15), 1.0, uint8(5), uint8(8), 1.0, -2.0)
	f.Add(uint8(2), uint8(0), uint8(9), 0.0, uint8(0), uint8(0), 3.0, 99.0)
	kinds := []watch.Kind{watch.Beyond, watch.KOfM, watch.OneSide, watch.RisingOrFalling, watch.Within, watch.Outside, "odd"}
	f.Fuzz(func(t *testing.T, kind, k, m uint8, z float64, kind2, m2 uint8, z2, shift float64) {
		rule := func(kind, k, m uint8, z float64) watch.Rule {
			r := watch.Rule{Kind: kinds[int(kind)%len(kinds)]}
			if r.Kind != watch.Beyond {
				r.M = int(m % 20)
			}
			if r.Kind == watch.KOfM {
				r.K = int(k)
			}
			if r.Kind != watch.OneSide && r.Kind != watch.RisingOrFalling {
				r.Z = z
			}
			return r
		}
		got, err := runlength.Rules([]watch.Rule{rule(kind, k, m, z), rule(kind2, k, m2, z2)}, []float64{shift},
			runlength.Options{Points: 100_000})
		if err == nil {
			finite(t, got[0])
		}
	})
}

func FuzzMemoryCharts(f *testing.F) {
	f.Add(0.2, 3.0, 0.5, 5.0, 0.5, 1.0, 20, 5)
	f.Add(1.0, 0.1, 0.0, 0.1, 1.0, -50.0, 2, 2)
	f.Fuzz(func(t *testing.T, lambda, l, k, h, head, shift float64, m, n int) {
		if lambda > 0 && lambda < 0.05 {
			lambda += 0.05 // small weights are slow, not different
		}
		if h > 12 {
			h = math.Mod(h, 12)
		}
		if got, err := runlength.EWMA(watch.EWMA{Lambda: lambda, L: l}, "", []float64{shift}); err == nil {
			finite(t, got[0])
		}
		if got, err := runlength.CUSUM(watch.CUSUM{K: k, H: h, HeadStart: head}, []float64{shift}); err == nil {
			finite(t, got[0])
		}
		if s, err := runlength.Estimated(m, n, runlength.PooledSD, runlength.Options{}); err == nil {
			for _, v := range []runlength.Figure{s.P10, s.P50, s.P90, s.Mean, s.FalseAlarm} {
				if math.IsNaN(v.Value) || math.IsInf(v.Value, 0) || v.Value < 0 {
					t.Fatalf("m %d, n %d: %+v", m, n, s)
				}
			}
		}
	})
}
