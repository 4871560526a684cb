package capability_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"holdfast/internal/spc/capability"
	"holdfast/internal/spc/limits"
)

// cover counts how often a bound holds the truth.
type cover struct {
	name       string
	low, high  float64 // accepted share
	hits, runs int
}

func (c *cover) count(holds bool) {
	c.runs++
	if holds {
		c.hits++
	}
}

func (c *cover) judge(t *testing.T) {
	t.Helper()
	share := float64(c.hits) / float64(c.runs)
	t.Logf("%s: %.1f %% of %d histories", c.name, 100*share, c.runs)
	if share < c.low || share > c.high {
		t.Errorf("%s: %.1f %%, want %.1f to %.1f %%", c.name, 100*share, 100*c.low, 100*c.high)
	}
}

// Intervals of 95 % must hold the true index in about 95 % of histories; 400
// histories leave a standard error of 1.1 %.
func TestIntervalCoverage(t *testing.T) {
	t.Parallel()
	const histories = 400
	for _, n := range []int{30, 125} {
		rng := rand.New(rand.NewPCG(11, uint64(n)))
		cp := &cover{name: "Pp, chi-square", low: 0.92, high: 0.98}
		within := &cover{name: "Cp, pooled", low: 0.92, high: 0.98}
		ranges := &cover{name: "Cp, ranges", low: 0.915, high: 0.98}
		bissell := &cover{name: "one-sided Ppk, Bissell", low: 0.915, high: 0.98}
		exact := &cover{name: "one-sided Ppk, exact lower bound", low: 0.92, high: 0.98}
		safe := &cover{name: "centred two-sided Ppk, exact lower bound", low: 0.94, high: 1}
		tolerance := &cover{name: "two-sided tolerance factor", low: 0.92, high: 0.98}
		k, err := capability.TwoSidedToleranceFactor(n, 0.95, 0.95)
		if err != nil {
			t.Fatal(err)
		}
		for range histories {
			groups := make([]capability.Subgroup, n/5)
			for i := range groups {
				for range 5 {
					groups[i].Readings = append(groups[i].Readings, 100+2*rng.NormFloat64())
				}
			}
			// True Cp 4/3, true Cpk of the upper side 1.
			both, err := capability.Assess(groups, capability.Specification{Lower: at(92), Upper: at(108)}, capability.Options{})
			if err != nil {
				t.Fatal(err)
			}
			cp.count(both.Pp.Interval.Low <= 4.0/3 && 4.0/3 <= both.Pp.Interval.High)
			within.count(both.Cp.Interval.Low <= 4.0/3 && 4.0/3 <= both.Cp.Interval.High)
			safe.count(both.Ppk.LowerBound <= 4.0/3)
			one, err := capability.Assess(groups, capability.Specification{Upper: at(106)}, capability.Options{Estimator: limits.RBar})
			if err != nil {
				t.Fatal(err)
			}
			bissell.count(one.Ppk.Interval.Low <= 1 && 1 <= one.Ppk.Interval.High)
			exact.count(one.Ppk.LowerBound <= 1)
			r, err := capability.CpBounds(16/(6*one.SigmaWithin), one.DFWithin, 0.95)
			if err != nil {
				t.Fatal(err)
			}
			ranges.count(r.Interval.Low <= 4.0/3 && 4.0/3 <= r.Interval.High)
			inside, err := capability.NormalPPM(100, 2, capability.Specification{
				Lower: at(both.Mean - k*both.SigmaOverall), Upper: at(both.Mean + k*both.SigmaOverall)})
			if err != nil {
				t.Fatal(err)
			}
			tolerance.count(*inside.Below+*inside.Above <= 0.05*1e6)
		}
		for _, c := range []*cover{cp, within, ranges, bissell, exact, safe, tolerance} {
			c.judge(t)
		}
	}
}

// The likelihood interval of λ must hold the power that made the readings.
func TestBoxCoxIntervalCoverage(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(11, 3))
	c := &cover{name: "Box-Cox, square root", low: 0.925, high: 0.975}
	for range 600 {
		x := make([]float64, 80)
		for i := range x {
			x[i] = math.Pow(10+rng.NormFloat64(), 2)
		}
		b, err := capability.FitBoxCox(x)
		if err != nil {
			t.Fatal(err)
		}
		c.count((b.Low == nil || *b.Low <= 0.5) && (b.High == nil || 0.5 <= *b.High))
	}
	c.judge(t)
}
