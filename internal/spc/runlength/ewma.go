package runlength

import (
	"math"

	"holdfast/internal/spc/special"
	"holdfast/internal/spc/watch"
)

// StartUp says which limits an EWMA has in its first points.
type StartUp string

// The two kinds of EWMA limits.
const (
	// ExactLimits widen with the variance of the average, as the chart draws
	// them: L·sqrt(λ/(2-λ)·(1-(1-λ)^(2i))).
	ExactLimits StartUp = "exact"
	// ConstantLimits are L·sqrt(λ/(2-λ)) from the first point on, as published
	// tables have them.
	ConstantLimits StartUp = "constant"
)

// The EWMA parameters for which the quadrature has been tried.
const (
	leastLambda = 0.005
	mostEWMAL   = 10
)

// normalPeak is the standard normal density at zero; beyond farKernel it is
// below 1e-22 and taken as nothing.
const (
	normalPeak = 0.3989422804014327
	farKernel  = 10
)

// settled is the relative distance from the constant limits below which the
// exact ones have become constant.
const settled = 1e-7

// EWMA gives the run length of an EWMA chart, started at the centre, for each
// shift of the plotted statistic, in sigmas of that statistic (of a mean, for
// means). An empty limits means ExactLimits.
//
// The integral equation over the average is solved by Gauss-Legendre quadrature;
// with exact limits the density of the average is carried forward point by point
// until the limits are constant. The error is far below 0.1 %.
//
// λ runs from 0.005 to 1 and L up to 10; other values, shifts beyond MaxShift and
// charts that practically never signal are errors.
//
// Source: Lucas and Saccucci (1990), Technometrics 32; Crowder (1987),
// Technometrics 29, for the integral equation.
func EWMA(e watch.EWMA, limits StartUp, shifts []float64) ([]RunLength, error) {
	if err := e.Validate(); err != nil {
		return nil, invalid("%w", err)
	}
	if e.Lambda < leastLambda || e.L > mostEWMAL {
		return nil, invalid("an EWMA needs lambda from %v and L up to %v, got %v and %v",
			leastLambda, mostEWMAL, e.Lambda, e.L)
	}
	if limits == "" {
		limits = ExactLimits
	}
	if limits != ExactLimits && limits != ConstantLimits {
		return nil, invalid("limits are %q or %q, got %q", ExactLimits, ConstantLimits, limits)
	}
	if err := checkShifts(shifts); err != nil {
		return nil, err
	}
	out := make([]RunLength, len(shifts))
	for i, d := range shifts {
		var err error
		// A shift down is the mirror image of one up.
		if out[i], err = newEWMAChain(e, math.Abs(d)).runLength(limits); err != nil {
			return nil, err
		}
	}
	return out, nil
}

// ewmaChain is an EWMA under one shift.
type ewmaChain struct {
	watch.EWMA
	shift float64
	limit float64 // constant half-width
	nodes int
	rule  quadrature
}

func newEWMAChain(e watch.EWMA, shift float64) ewmaChain {
	c := ewmaChain{EWMA: e, shift: shift, limit: e.L * math.Sqrt(e.Lambda/(2-e.Lambda))}
	// The kernel is a normal density with standard deviation λ. Three nodes to
	// every two of those make the quadrature exact to eight digits and more.
	c.nodes = 28 + int(math.Ceil(3*c.limit/e.Lambda))
	c.rule = newQuadrature(c.nodes)
	return c
}

// kernel is the density of the next average at y, coming from u.
func (c ewmaChain) kernel(u, y float64) float64 {
	d := (y - c.mean(u)) / c.Lambda
	if d > farKernel || d < -farKernel {
		return 0
	}
	return math.Exp(-d*d/2) * (normalPeak / c.Lambda)
}

func (c ewmaChain) mean(u float64) float64 { return (1-c.Lambda)*u + float64(c.Lambda*c.shift) }

// spread carries a density, given by weights at x, to nodes on ±half and returns
// it in the same form.
func (c ewmaChain) spread(x, weights []float64, half float64) (nodes, next []float64) {
	nodes, w := c.rule.on(-half, half)
	next = make([]float64, len(nodes))
	for j, y := range nodes {
		var sum float64
		for i, u := range x {
			sum += weights[i] * c.kernel(u, y)
		}
		next[j] = w[j] * sum
	}
	return nodes, next
}

func (c ewmaChain) runLength(limits StartUp) (RunLength, error) {
	// The average starts at the centre: a density with all its weight there.
	x, weights, before := []float64{0}, []float64{1}, []float64{1}
	remaining := 1.0 // (1-λ)^(2i)
	for {
		remaining *= (1 - c.Lambda) * (1 - c.Lambda)
		half := c.limit * math.Sqrt(1-remaining)
		constant := limits == ConstantLimits || remaining < settled
		if constant {
			half = c.limit
		}
		x, weights = c.spread(x, weights, half)
		var alive float64
		for _, w := range weights {
			alive += w
		}
		if alive < 1e-15 {
			return fromCurve(IntegralEquation, append(before, 0), 1)
		}
		if constant {
			break
		}
		before = append(before, alive)
	}
	chain := newDenseChain(c.nodes)
	nodes, w := c.rule.on(-c.limit, c.limit)
	for i, u := range nodes {
		for j, y := range nodes {
			chain.q[i*chain.n+j] = w[j] * c.kernel(u, y)
		}
		m := c.mean(u)
		chain.fires[i] = special.NormalSurvival((c.limit-m)/c.Lambda) + special.NormalCDF((-c.limit-m)/c.Lambda)
	}
	return chain.finish(before, weights, chain.means(), IntegralEquation)
}
