package adjust_test

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"holdfast/internal/spc/adjust"
)

// TestSumCoverage: over 200 seeded histories a sum's interval must hold the loss that
// full compensation of a stable process makes (its variance at every subgroup, since
// compensating doubles it; Deming 1986) at least 90 % of the time, hold the gain of a
// justified adjustment as often, and claim an effect of neutral ones at most 10 % of
// the time.
func TestSumCoverage(t *testing.T) {
	t.Parallel()
	const histories = 200
	for _, m := range []int{25, 60, 150} {
		rng := rand.New(rand.NewPCG(43, uint64(m)))
		holdsLoss, holdsGain, neutralClaims := 0, 0, 0
		for h := range uint64(histories) {
			y, moves := play(m, rng.NormFloat64, compensate)
			a, err := adjust.Review(y, 0, moves, nil, h)
			if err != nil {
				t.Fatal(err)
			}
			governed := 0
			for _, n := range a.Governed {
				governed += n
			}
			if in := a.UnpromptedWithin; in.Known && in.Low <= -float64(governed) && in.High >= -float64(governed) {
				holdsLoss++
			}

			// The process moved up by 1.5 and a signal prompted the whole of it back.
			for i := range y {
				y[i] = rng.NormFloat64()
			}
			if a, err = adjust.Review(y, 0, []adjust.Adjustment{{Before: m / 5, Size: -1.5, Prompted: true}}, nil, h); err != nil {
				t.Fatal(err)
			}
			want := 1.5 * 1.5 * float64(m-m/5)
			if in := a.PromptedWithin; in.Known && in.Low <= want && in.High >= want {
				holdsGain++
			}

			// As far off on the other side.
			moves = nil
			for i := range m {
				y[i] = rng.NormFloat64()
				if i%20 < 10 {
					y[i] -= 0.4
				}
				if i%10 == 0 {
					moves = append(moves, adjust.Adjustment{Before: i, Size: []float64{-0.8, 0.8}[i/10%2]})
				}
			}
			if a, err = adjust.Review(y, 0, moves, nil, h); err != nil {
				t.Fatal(err)
			}
			if in := a.UnpromptedWithin; in.Known && (in.Low > 0 || in.High < 0) {
				neutralClaims++
			}
		}
		share := func(n int) float64 { return 100 * float64(n) / histories }
		t.Logf("%d subgroups: holds the loss in %.1f %%, the gain in %.1f %%, claims an effect of neutral ones in %.1f %%",
			m, share(holdsLoss), share(holdsGain), share(neutralClaims))
		if share(holdsLoss) < 90 || share(holdsGain) < 90 || share(neutralClaims) > 10 {
			t.Errorf("%d subgroups: the interval does not keep its promise", m)
		}
	}
}

func TestSumsOfFewSubgroupsHaveNoInterval(t *testing.T) {
	t.Parallel()
	y := []float64{0.1, -0.2, 1, 0.9, 1.2, 0.1, -0.1, 0.3, -0.4, 0.2}
	a, err := adjust.Review(y, 0, []adjust.Adjustment{{Before: 2, Size: 1}, {Before: 5, Size: -1, Prompted: true}}, nil, 1)
	if err != nil || a.UnpromptedWithin.Known || a.PromptedWithin.Known {
		t.Errorf("%+v, %v; three and five subgroups allow no interval", a, err)
	}
	if a, err = adjust.Review(y, 0, nil, nil, 1); err != nil || a.UnpromptedWithin.Known || a.PromptedWithin.Known {
		t.Errorf("%+v, %v; nothing was adjusted", a, err)
	}
}

// Compensating doubles the variance and gives neighbours the correlation -1/2 (Deming
// 1986); the same by hand for a few values.
func TestCompensated(t *testing.T) {
	t.Parallel()
	if got := adjust.Compensated([]float64{11, 9, 9.5, 12}, 10); !slices.Equal(got, []float64{11, 8, 10.5, 12.5}) {
		t.Errorf("%v", got)
	}
	if adjust.Compensated([]float64{1}, 0) != nil {
		t.Error("one value has no next one")
	}
	rng := rand.New(rand.NewPCG(3, 9))
	y := make([]float64, 50000)
	for i := range y {
		y[i] = rng.NormFloat64()
	}
	var square, cross float64
	x := adjust.Compensated(y, 0)
	for i := 1; i < len(x); i++ {
		square += x[i] * x[i]
		cross += x[i] * x[i-1]
	}
	c := load(t).Funnel
	if r := square / float64(len(x)-1); math.Abs(r-2) > 0.05 || math.Abs(cross/square-c.Lag1.Exact) > 0.015 {
		t.Errorf("variance %.3f, lag-1 %.3f; want 2 and %.1f", r, cross/square, c.Lag1.Exact)
	}
}
