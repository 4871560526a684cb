package runlength_test

import (
	_ "embed"
	"encoding/json"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"holdfast/internal/spc/runlength"
)

// Computed outside this code: double quadrature for the pooled estimate, and
// simulation of 400,000 to 1,000,000 bases for all estimators.
//
//go:embed testdata/phase1.json
var phase1JSON []byte

type simulatedBasis struct {
	M, N           int
	Estimator      string
	Average        float64            `json:"average_arl"`
	AverageSE      float64            `json:"average_arl_se"`
	FalseAlarm     float64            `json:"expected_false_alarm_rate"`
	FalseAlarmSE   float64            `json:"expected_false_alarm_rate_se"`
	Percentiles    map[string]float64 `json:"percentiles_of_conditional_arl"`
	PercentilesSEs map[string]float64 `json:"percentiles_se"`
}

type phase1File struct {
	Pooled struct {
		Cases []struct {
			M, N       int
			Shift      float64 `json:"shift_in_process_sigma"`
			FalseAlarm float64 `json:"expected_false_alarm_rate"`
			Average    float64 `json:"average_arl"`
		}
	} `json:"exact_pooled_sd"`
	MonteCarlo  struct{ Cases []simulatedBasis } `json:"monte_carlo"`
	Individuals struct{ Cases []simulatedBasis } `json:"individuals_mean_moving_range"`
}

func loadPhase1(t *testing.T) (f phase1File) {
	t.Helper()
	if err := json.Unmarshal(phase1JSON, &f); err != nil {
		t.Fatal(err)
	}
	return f
}

func TestEstimatedPooledReference(t *testing.T) {
	t.Parallel()
	checked := 0
	for _, c := range loadPhase1(t).Pooled.Cases {
		if c.Shift != 0 {
			continue // a shifted process is not a question of false alarms
		}
		checked++
		s, err := runlength.Estimated(c.M, c.N, runlength.PooledSD, runlength.Options{})
		if err != nil || !s.HasMean || !near(s.Mean.Value, c.Average, 1e-6) ||
			math.Abs(s.FalseAlarm.Value/c.FalseAlarm-1) > 1e-6 || s.Mean.SE != 0 {
			t.Errorf("m %d, n %d: %+v, %v; want %g and %g", c.M, c.N, s, err, c.Average, c.FalseAlarm)
		}
	}
	if checked != 7 {
		t.Errorf("%d cases checked, want 7", checked)
	}
}

func TestEstimatedSimulatedReference(t *testing.T) {
	t.Parallel()
	f := loadPhase1(t)
	names := map[string]runlength.Estimator{
		"pooled_sd_over_c4": runlength.PooledSD, "mean_sd_over_c4": runlength.MeanSD,
		"mean_range_over_d2": runlength.MeanRange, "": runlength.MeanMovingRange,
	}
	for i, c := range append(f.MonteCarlo.Cases, f.Individuals.Cases...) {
		s, err := runlength.Estimated(c.M, max(c.N, 1), names[c.Estimator], runlength.Options{Seed: uint64(i)})
		if err != nil {
			t.Fatal(err)
		}
		check := func(what string, got runlength.Figure, want, se float64) {
			t.Helper()
			if math.Abs(got.Value-want) > 4*math.Hypot(got.SE, se) {
				t.Errorf("m %d, n %d, %s, %s: %.6g ± %.2g, want %.6g ± %.2g",
					c.M, c.N, names[c.Estimator], what, got.Value, got.SE, want, se)
			}
			if got.SE > 0.01*got.Value {
				t.Errorf("m %d, n %d, %s, %s: standard error %g of %g is above 1 %%",
					c.M, c.N, names[c.Estimator], what, got.SE, got.Value)
			}
		}
		check("p10", s.P10, c.Percentiles["0.1"], c.PercentilesSEs["0.1"])
		check("p50", s.P50, c.Percentiles["0.5"], c.PercentilesSEs["0.5"])
		check("p90", s.P90, c.Percentiles["0.9"], c.PercentilesSEs["0.9"])
		check("false alarms", s.FalseAlarm, c.FalseAlarm, c.FalseAlarmSE)
		if s.HasMean != (c.N > 1) {
			t.Errorf("m %d, n %d: mean given %v", c.M, c.N, s.HasMean)
		}
		if s.HasMean {
			check("mean", s.Mean, c.Average, c.AverageSE)
		}
	}
	if n := len(f.MonteCarlo.Cases) + len(f.Individuals.Cases); n != 19 {
		t.Errorf("%d cases, want 19", n)
	}
}

// A small basis drawn reading by reading, without any of the shortcuts.
func TestEstimatedBySimulationOfWholeBases(t *testing.T) {
	t.Parallel()
	const m, n, bases = 8, 3, 40000
	s, err := runlength.Estimated(m, n, runlength.PooledSD, runlength.Options{})
	if err != nil {
		t.Fatal(err)
	}
	rng := rand.New(rand.NewPCG(12, 5))
	c4 := math.Sqrt(2.0/16) * math.Gamma(8.5) / math.Gamma(8) // 16 degrees of freedom
	var arls []float64
	var alarms float64
	for range bases {
		var centre, ss float64
		for range m {
			x := []float64{rng.NormFloat64(), rng.NormFloat64(), rng.NormFloat64()}
			mean := (x[0] + x[1] + x[2]) / n
			centre += mean / m
			for _, v := range x {
				ss += (v - mean) * (v - mean)
			}
		}
		sigma := math.Sqrt(ss/(m*(n-1))) / c4
		upper, lower := centre*math.Sqrt(n)+3*sigma, centre*math.Sqrt(n)-3*sigma
		p := math.Erfc(upper/math.Sqrt2)/2 + math.Erfc(-lower/math.Sqrt2)/2
		arls = append(arls, 1/p)
		alarms += p / bases
	}
	slices.Sort(arls)
	for q, got := range map[float64]float64{0.1: s.P10.Value, 0.5: s.P50.Value, 0.9: s.P90.Value} {
		at := sortedShare(arls, got)
		if math.Abs(at-q) > 4*math.Sqrt(q*(1-q)/bases) {
			t.Errorf("%g of the bases lie below the %g percentile %g", at, q, got)
		}
	}
	if math.Abs(alarms/s.FalseAlarm.Value-1) > 0.04 {
		t.Errorf("mean false alarm rate %g, simulated %g", s.FalseAlarm.Value, alarms)
	}
}

func sortedShare(x []float64, v float64) float64 {
	at, _ := slices.BinarySearch(x, v)
	return float64(at) / float64(len(x))
}

func TestEstimatedLimitsBecomeKnown(t *testing.T) {
	t.Parallel()
	s, err := runlength.Estimated(20000, 10, runlength.PooledSD, runlength.Options{})
	if err != nil || !near(s.P50.Value, 370.3983, 1e-3) || !near(s.Mean.Value, 370.3983, 1e-3) || s.P90.Value > 385 {
		t.Errorf("%+v, %v; want about 370.4", s, err)
	}
	// With 4 degrees of freedom the conditional ARL has no mean.
	s, err = runlength.Estimated(2, 3, runlength.PooledSD, runlength.Options{})
	if err != nil || s.HasMean || !(s.P10.Value < s.P50.Value && s.P50.Value < s.P90.Value) {
		t.Errorf("%+v, %v", s, err)
	}
}
