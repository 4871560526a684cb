package adjust_test

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"holdfast/internal/spc/adjust"
)

// play runs a machine for n subgroups. move is called after each value with the
// setting in force and returns the change to make.
func play(n int, noise func() float64, move func(y, setting float64, t int) float64) (y []float64, moves []adjust.Adjustment) {
	setting := 0.0
	for t := range n {
		v := setting + noise()
		y = append(y, v)
		if a := move(v, setting, t); a != 0 && t+1 < n {
			moves = append(moves, adjust.Adjustment{Before: t + 1, Size: a})
			setting += a
		}
	}
	return y, moves
}

func compensate(y, _ float64, _ int) float64 { return -y }

// The four rules of Deming's funnel, as the audit sees them: the square of the
// t-th value over the square it would have had, over many histories.
func TestFunnelReference(t *testing.T) {
	t.Parallel()
	const histories, length = 4000, 20
	rules := map[int]func(y, setting float64, t int) float64{
		1: func(_, _ float64, _ int) float64 { return 0 },
		2: compensate,
		3: func(y, setting float64, _ int) float64 { return -y - setting },
		4: func(y, setting float64, _ int) float64 { return y - setting },
	}
	var actual, without [5][length]float64
	for rule, move := range rules {
		rng := rand.New(rand.NewPCG(1986, uint64(rule)))
		// The histories follow one another, each behind a zero point.
		var y []float64
		var moves []adjust.Adjustment
		var zero []int
		for range histories {
			part, adjustments := play(length, rng.NormFloat64, move)
			for _, a := range adjustments {
				a.Before += len(y)
				moves = append(moves, a)
			}
			zero = append(zero, len(y))
			y = append(y, part...)
		}
		a, err := adjust.Review(y, 0, moves, zero, 1)
		if err != nil {
			t.Fatal(err)
		}
		for i, v := range y {
			actual[rule][i%length] += v * v / histories
			without[rule][i%length] += (v - a.Carried[i]) * (v - a.Carried[i]) / histories
		}
	}
	cases := load(t).Funnel.Cases
	for _, c := range cases {
		i := c.T - 1
		se := math.Sqrt(2.0 / histories)
		if got := actual[c.Rule][i]; math.Abs(got-c.Ratio) > 4*se*c.Ratio {
			t.Errorf("rule %d, value %d: mean square %.3f, want %.3f", c.Rule, c.T, got, c.Ratio)
		}
		if got := without[c.Rule][i]; math.Abs(got-1) > 4*se {
			t.Errorf("rule %d, value %d: without adjustments %.3f, want 1", c.Rule, c.T, got)
		}
	}
	if len(cases) != 20 {
		t.Errorf("%d cases, want 20", len(cases))
	}
}

func TestFullCompensationDoublesTheVariance(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(4, 4))
	y, moves := play(50000, rng.NormFloat64, compensate)
	a, err := adjust.Review(y, 0, moves, nil, 1)
	if err != nil || !near(a.Ratio, 2, 0.01) || math.Abs(a.Lag1-load(t).Funnel.Lag1.Exact) > 0.015 {
		t.Errorf("ratio %.4f, lag-1 %.4f, %v; want 2 and -0.5", a.Ratio, a.Lag1, err)
	}
	if a.Unprompted >= 0 || a.Prompted != 0 {
		t.Errorf("sums %g and %g; the adjustments must show as a loss", a.Prompted, a.Unprompted)
	}
}

func TestIntegralActionReference(t *testing.T) {
	t.Parallel()
	r := load(t)
	for _, c := range r.White.Cases {
		rng := rand.New(rand.NewPCG(6, uint64(100*c.G)))
		y, moves := play(12000, rng.NormFloat64, func(y, _ float64, _ int) float64 { return -c.G * y })
		a, err := adjust.Review(y, 0, moves, nil, 1)
		if err != nil || !near(a.Ratio, c.Ratio, 0.04) {
			t.Errorf("gain %.2f: ratio %.4f, %v; want %.4f", c.G, a.Ratio, err, c.Ratio)
		}
	}
	if len(r.White.Cases) < 8 {
		t.Errorf("%d cases, want at least 8", len(r.White.Cases))
	}
	// A wandering process is what integral action is for: the audit must give
	// back the disturbance exactly and show the adjustments as a gain.
	for _, c := range r.IMA.Cases {
		rng := rand.New(rand.NewPCG(7, uint64(1000*c.Theta+10*c.G)))
		var level, before float64
		var disturbance []float64
		y, moves := play(6000, func() float64 {
			shock := rng.NormFloat64()
			level += shock - c.Theta*before
			before = shock
			disturbance = append(disturbance, level)
			return level
		}, func(y, _ float64, _ int) float64 { return -c.G * y })
		a, err := adjust.Review(y, 0, moves, nil, 1)
		if err != nil {
			t.Fatal(err)
		}
		var square float64
		for i, v := range y {
			square += v * v / float64(len(y))
			if !near(v-a.Carried[i], disturbance[i], 1e-8) {
				t.Fatalf("value %d without adjustments %g, want %g", i, v-a.Carried[i], disturbance[i])
			}
		}
		if !near(square, c.Ratio, 4*math.Sqrt(2.0/6000)) {
			t.Errorf("theta %.1f, gain %.1f: variance %.4f, want %.4f", c.Theta, c.G, square, c.Ratio)
		}
		if a.Ratio >= 1 || a.Unprompted <= 0 {
			t.Errorf("theta %.1f, gain %.1f: ratio %.3f, sum %.1f; the adjustments helped", c.Theta, c.G, a.Ratio, a.Unprompted)
		}
	}
}

func TestMistakeRepairedIsALoss(t *testing.T) {
	t.Parallel()
	noise := []float64{0.1, -0.2, 0.15, -0.05, 0.1, -0.1, 0.2, -0.2, 0.05, -0.05}
	y := slices.Clone(noise)
	for i := 3; i < 7; i++ {
		y[i]++ // moved up by mistake before 3, moved back before 7
	}
	a, err := adjust.Review(y, 0, []adjust.Adjustment{{Before: 3, Size: 1}, {Before: 7, Size: -1}}, nil, 1)
	if err != nil {
		t.Fatal(err)
	}
	// mean e² - mean (e+1)² over the four subgroups in between, by hand.
	want := -(1 + 2*(noise[3]+noise[4]+noise[5]+noise[6])/4)
	if !near(a.Gains[0], want, 1e-12) || math.Abs(a.Gains[1]) > 1e-12 || !near(a.Unprompted, 4*want, 1e-12) {
		t.Errorf("gains %v, sum %g; want %g and 0", a.Gains, a.Unprompted, want)
	}
	if a.Ratio <= 1 {
		t.Errorf("ratio %g, want above 1", a.Ratio)
	}
}

func TestJustifiedAdjustmentIsCredited(t *testing.T) {
	t.Parallel()
	// The process moved up by 2 before 3; a signal prompted -2 before 6, while
	// an earlier unprompted +0.5 before 2 was settled with it.
	noise := []float64{0.1, -0.2, 0.15, -0.05, 0.1, -0.1, 0.2, -0.2, 0.05, -0.05}
	y := slices.Clone(noise)
	for i := range y {
		if i >= 2 {
			y[i] += 0.5
		}
		if i >= 3 {
			y[i] += 2
		}
		if i >= 6 {
			y[i] -= 2.5
		}
	}
	moves := []adjust.Adjustment{{Before: 6, Size: -2.5, Prompted: true}, {Before: 2, Size: 0.5}}
	a, err := adjust.Review(y, 0, moves, nil, 1)
	if err != nil {
		t.Fatal(err)
	}
	want := 2.5*2.5 + 2*2.5*(noise[6]+noise[7]+noise[8]+noise[9])/4
	if !near(a.Gains[0], want, 1e-12) || !near(a.Prompted, 4*want, 1e-12) || a.Gains[1] >= 0 {
		t.Errorf("gains %v, sums %g and %g; want %g for the prompted one", a.Gains, a.Prompted, a.Unprompted, want)
	}
	if carried := []float64{0, 0, 0.5, 0.5, 0.5, 0.5, 0, 0, 0, 0}; !slices.Equal(a.Carried, carried) {
		t.Errorf("carried %v, want %v", a.Carried, carried)
	}
	// A wrong move left in force keeps costing, and a right one keeps paying,
	// over every subgroup it governs.
	if !slices.Equal(a.Governed, []int{4, 4}) {
		t.Errorf("governed %v, want 4 and 4", a.Governed)
	}
}

func TestNothingIsCarriedAcrossAZeroPoint(t *testing.T) {
	t.Parallel()
	y := []float64{0, 1, 1.2, 0.1, -0.1, 0.5, 0.2}
	moves := []adjust.Adjustment{{Before: 1, Size: 1}, {Before: 5, Size: 0.5}, {Before: 5, Size: -0.1}, {Before: 7, Size: 9}}
	a, err := adjust.Review(y, 0, moves, []int{3, 5}, 1)
	if err != nil {
		t.Fatal(err)
	}
	for i, want := range []float64{0, 1, 1, 0, 0, 0.4, 0.4} {
		if !near(a.Carried[i], want, 1e-12) {
			t.Errorf("carried at %d: %g, want %g", i, a.Carried[i], want)
		}
	}
	if !slices.Equal(a.Governed, []int{2, 0, 2, 0}) {
		t.Errorf("governed %v", a.Governed)
	}
}

func TestAuditIdentities(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(9, 9))
	y, moves := play(60, rng.NormFloat64, func(y, _ float64, t int) float64 {
		if t%4 == 3 {
			return -0.7 * y
		}
		return 0
	})
	a, err := adjust.Review(y, 0, moves, []int{31}, 3)
	if err != nil {
		t.Fatal(err)
	}
	moved, mirrored := make([]float64, len(y)), make([]float64, len(y))
	scaled, flipped := slices.Clone(moves), slices.Clone(moves)
	for i := range y {
		moved[i], mirrored[i] = 20+8*y[i], -y[i]
	}
	for i := range moves {
		scaled[i].Size *= 8
		flipped[i].Size *= -1
	}
	slices.Reverse(flipped)
	b, err := adjust.Review(moved, 20, scaled, []int{31}, 3)
	if err != nil || !near(b.Ratio, a.Ratio, 1e-9) || !near(b.Low, a.Low, 1e-9) || !near(b.Unprompted, 64*a.Unprompted, 1e-9) {
		t.Errorf("moved and scaled: %+v, %v; want %+v", b, err, a)
	}
	c, err := adjust.Review(mirrored, 0, flipped, []int{31}, 3)
	slices.Reverse(c.Gains)
	if err != nil || c.Ratio != a.Ratio || c.High != a.High || !slices.Equal(c.Gains, a.Gains) {
		t.Errorf("mirrored, adjustments in another order: %+v, %v; want %+v", c, err, a)
	}
	again, _ := adjust.Review(y, 0, moves, []int{31}, 3)
	if again.Low != a.Low || again.High != a.High {
		t.Error("the same seed gave another interval")
	}
	other, _ := adjust.Review(y, 0, moves, []int{31}, 4)
	if other.Low == a.Low {
		t.Error("another seed gave the same interval")
	}
}

// The interval must hold 2 for full compensation at least 90 % of the time, and
// exclude 1 at most 10 % of the time without adjustments, as well as with
// adjustments that neither help nor harm.
func TestAuditCoverage(t *testing.T) {
	t.Parallel()
	const histories = 200
	for _, m := range []int{25, 60, 150} {
		rng := rand.New(rand.NewPCG(41, uint64(m)))
		holdsTwo, noneExcludes, neutralExcludes := 0, 0, 0
		for h := range uint64(histories) {
			y, moves := play(m, rng.NormFloat64, compensate)
			a, err := adjust.Review(y, 0, moves, nil, h)
			if err != nil {
				t.Fatal(err)
			}
			if a.Low <= 2 && a.High >= 2 {
				holdsTwo++
			}

			y, _ = play(m, rng.NormFloat64, func(_, _ float64, _ int) float64 { return 0 })
			if a, err = adjust.Review(y, 0, nil, nil, h); err != nil {
				t.Fatal(err)
			}
			if a.Low > 1 || a.High < 1 {
				noneExcludes++
			}

			// The process stands 0.4 above target while it is moved down by
			// 0.8: as far off on the other side.
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
			if a.Low > 1 || a.High < 1 {
				neutralExcludes++
			}
		}
		share := func(n int) float64 { return 100 * float64(n) / histories }
		t.Logf("%d subgroups: holds 2 in %.1f %%, excludes 1 in %.1f %% without and %.1f %% with neutral adjustments",
			m, share(holdsTwo), share(noneExcludes), share(neutralExcludes))
		if share(holdsTwo) < 90 || share(noneExcludes) > 10 || share(neutralExcludes) > 10 {
			t.Errorf("%d subgroups: the interval does not keep its promise", m)
		}
	}
}
