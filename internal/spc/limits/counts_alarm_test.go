package limits_test

import (
	"errors"
	"math"
	"testing"

	"holdfast/internal/spc/dist"
	"holdfast/internal/spc/limits"
)

// How often 3-sigma charts of counts alarm, in control and after a change: limits from
// this package, tails from package dist, against tails computed independently with a
// general-purpose scientific library.
func TestAlarmRatesOfCountCharts(t *testing.T) {
	t.Parallel()
	type alarm struct {
		Mean, P float64
		Prob    float64 `json:"prob_signal"`
	}
	var file struct {
		RunLength struct {
			C []struct {
				C0    float64
				Cases []alarm
			}
			P []struct {
				P0    float64
				N     int
				Cases []alarm
			}
		} `json:"run_length"`
	}
	load(t, "attributes.json", &file)
	checked := 0
	check := func(name string, b limits.Band, want float64, cdf, survival func(int) (float64, error)) {
		t.Helper()
		checked++
		// Beyond the upper limit: above the whole number at or below it.
		got, err := survival(int(math.Floor(b.Upper)))
		if b.HasLower() {
			below, lowErr := cdf(int(math.Ceil(b.Lower)) - 1)
			got, err = got+below, errors.Join(err, lowErr)
		}
		if err != nil || math.Abs(got-want) > 1e-10*want {
			t.Errorf("%s: %.12g, want %.12g, %v", name, got, want, err)
		}
	}
	for _, chart := range file.RunLength.C {
		b, err := limits.CountStandard{Chart: limits.C, Center: chart.C0}.Band(0)
		if err != nil {
			t.Fatal(err)
		}
		for _, c := range chart.Cases {
			check("c", b, c.Prob,
				func(k int) (float64, error) { return dist.PoissonCDF(k, c.Mean) },
				func(k int) (float64, error) { return dist.PoissonSurvival(k, c.Mean) })
		}
	}
	for _, chart := range file.RunLength.P {
		n := float64(chart.N)
		b, err := limits.CountStandard{Chart: limits.NP, Center: n * chart.P0}.Band(n)
		if err != nil {
			t.Fatal(err)
		}
		for _, c := range chart.Cases {
			check("np", b, c.Prob,
				func(k int) (float64, error) { return dist.BinomialCDF(k, chart.N, c.P) },
				func(k int) (float64, error) { return dist.BinomialSurvival(k, chart.N, c.P) })
		}
	}
	if checked != 31 {
		t.Errorf("%d alarm rates checked, want 31", checked)
	}
}
