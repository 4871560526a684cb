package dist

import (
	"fmt"
	"math"

	"holdfast/internal/spc/special"
)

// maxNoncentrality bounds the noncentrality; 3·Cpk·√n stays far below it for any
// study that is ever made.
const maxNoncentrality = 1e6

// NoncentralTCDF returns P(T ≤ t) for the noncentral t with nu ≥ 1 degrees of
// freedom (not necessarily whole, at most 1e7) and noncentrality delta, |delta| ≤
// 1e6: the law of (Z+delta)/√(X/nu), Z standard normal, X chi-square.
//
// It is the integral of Φ(t·s - delta) against the density of s = √(X/nu), on
// panels that follow both the width of that density and the step of Φ, so it holds
// for the large noncentralities of capability indices where series and normal
// approximations give out. Each tail is integrated in its own right.
//
// Source: Johnson, Kotz and Balakrishnan, Continuous Univariate Distributions 2
// (1995), section 31.3.
func NoncentralTCDF(t, nu, delta float64) (float64, error) {
	if err := noncentralOK(t, nu, delta); err != nil {
		return math.NaN(), err
	}
	return noncentralTail(t, nu, delta), nil
}

// NoncentralTSurvival returns P(T > t), the complement of NoncentralTCDF. Since
// P(T > t | delta) = P(T ≤ -t | -delta), its tail is as sharp.
func NoncentralTSurvival(t, nu, delta float64) (float64, error) {
	if err := noncentralOK(t, nu, delta); err != nil {
		return math.NaN(), err
	}
	return noncentralTail(-t, nu, -delta), nil
}

// NoncentralTQuantile returns the t with P(T ≤ t) = p, 0 < p < 1.
func NoncentralTQuantile(p, nu, delta float64) (float64, error) {
	if err := first(probability(p), noncentralOK(0, nu, delta)); err != nil {
		return math.NaN(), err
	}
	tail := func(t float64) float64 { return math.Log(noncentralTail(t, nu, delta) / p) }
	if p > 0.5 {
		q := 1 - p
		tail = func(t float64) float64 { return -math.Log(noncentralTail(-t, nu, -delta) / q) }
	}
	return increasing(tail, delta, 1+math.Abs(delta)/math.Sqrt(nu))
}

// NoncentralTNoncentrality returns the delta at which P(T ≤ t) = p: the larger p,
// the smaller delta. It gives exact confidence bounds of one-sided capability
// indices, 0 < p < 1.
func NoncentralTNoncentrality(t, nu, p float64) (float64, error) {
	if err := first(probability(p), noncentralOK(t, nu, 0)); err != nil {
		return math.NaN(), err
	}
	tail := func(delta float64) float64 { return -math.Log(noncentralTail(t, nu, delta) / p) }
	if p > 0.5 {
		q := 1 - p
		tail = func(delta float64) float64 { return math.Log(noncentralTail(-t, nu, -delta) / q) }
	}
	return increasing(tail, t, 1+math.Abs(t)/math.Sqrt(nu))
}

func noncentralOK(t, nu, delta float64) error {
	switch {
	case math.IsNaN(t) || math.Abs(t) > 1e12:
		return fmt.Errorf("%w: t must be a number of at most 1e12 in size, got %g", ErrArgument, t)
	case !(nu >= 1 && nu <= 1e7):
		return fmt.Errorf("%w: the degrees of freedom must be 1 to 1e7, got %g", ErrArgument, nu)
	case math.IsNaN(delta) || math.Abs(delta) > maxNoncentrality:
		return fmt.Errorf("%w: the noncentrality must be at most %g in size, got %g", ErrArgument, maxNoncentrality, delta)
	}
	return nil
}

// increasing finds the zero of an increasing f by widening steps from start.
func increasing(f func(float64) float64, start, step float64) (float64, error) {
	capped := func(x float64) float64 { return math.Max(-1e4, math.Min(1e4, f(x))) }
	lo, hi := start-step, start+step
	for i := 0; capped(lo) > 0; i++ {
		if i > 60 {
			return bad("the quantile is beyond the range of t")
		}
		lo -= step
		step *= 2
	}
	for i := 0; capped(hi) < 0; i++ {
		if i > 60 {
			return bad("the quantile is beyond the range of t")
		}
		hi += step
		step *= 2
	}
	x, ok := special.Root(capped, lo, hi)
	if !ok {
		return bad("the quantile cannot be computed")
	}
	return x, nil
}

// noncentralTail integrates Φ(t·s - delta) f(s) over s > 0. The integrand is
// log-concave for nu ≥ 1, so it has one mode and falls steadily on both sides; the
// integral runs as far as it is above e^-45 of its peak.
func noncentralTail(t, nu, delta float64) float64 {
	a := nu / 2
	lead := math.Ln2 + (math.Log(a)-math.Log(2*math.Pi))/2 - special.StirlingError(a)
	log := func(s float64) float64 {
		if s <= 0 {
			s = 1e-300
		}
		d := s - 1
		excess := d*(2+d) - 2*math.Log(s)
		if math.Abs(d) < 0.5 {
			// At a million degrees of freedom the plain form would lose ten digits.
			excess = d*(2+d) - 2*math.Log1p(d)
		}
		return lead - a*excess - math.Log(s) + special.LogNormalCDF(t*s-delta)
	}
	mode := peak(log, 1/math.Sqrt(2*nu))
	top := log(mode)
	if math.IsInf(top, -1) || top < -745 {
		return 0
	}
	// Curvature is at least that of f; where Φ is in its tail, t² adds to it.
	wide := 1 / math.Sqrt(2*nu)
	lo := edge(log, mode, -wide, top-45)
	hi := edge(log, mode, wide, top-45)
	sum := 0.0
	x, w := special.GaussLegendre(16)
	for s := lo; s < hi; {
		length := 2 * wide
		if t != 0 {
			// Steps of Φ: short panels within 10/|t| of where t·s = delta, and
			// everywhere on its falling side.
			if u := t*s - delta; u < 10 && u > -12 || t > 0 && u <= -12 || t < 0 && u >= 10 {
				length = math.Min(length, 2/math.Sqrt(2*nu+t*t))
			}
			if t < 0 && t*s-delta >= 10 {
				// Still on the flat side: go no further than where the step begins.
				length = math.Max(2/math.Sqrt(2*nu+t*t), math.Min(2*wide, (t*s-delta-10)/-t))
			}
		}
		if nu != math.Trunc(nu) {
			// s^(nu-1) is not smooth at 0: panels that double resolve it.
			length = math.Min(length, math.Max(s, hi*0x1p-40))
		}
		length = math.Min(length, hi-s)
		if s+length == s {
			break
		}
		half := length / 2
		for i := range x {
			sum += half * w[i] * math.Exp(log(s+half+half*x[i]))
		}
		s += length
	}
	return math.Min(1, sum)
}

// peak finds the maximum of a log-concave g on s > 0 by golden sections after
// bracketing from s = 1. A rough place is enough: it only centres the panels.
func peak(g func(float64) float64, step float64) float64 {
	lo, hi := 1-step, 1+step
	lo = math.Max(lo, 0)
	best := g(1)
	for width := step; lo > 0 && g(lo) > best; width *= 2 {
		best = g(lo)
		lo = math.Max(0, lo-width)
	}
	for width := step; g(hi) > best; width *= 2 {
		best = g(hi)
		hi += width
	}
	const ratio = 0.6180339887498949
	p, q := hi-ratio*(hi-lo), lo+ratio*(hi-lo)
	gp, gq := g(p), g(q)
	for range 80 {
		if gp < gq {
			lo, p, gp = p, q, gq
			q = lo + ratio*(hi-lo)
			gq = g(q)
		} else {
			hi, q, gq = q, p, gp
			p = hi - ratio*(hi-lo)
			gp = g(p)
		}
		if hi-lo < 1e-3*step && math.Abs(gp-gq) < 0.1 {
			break
		}
	}
	return (lo + hi) / 2
}

// edge walks from the mode in widening steps until g has fallen to the level, then
// halves its way back to about where it does.
func edge(g func(float64) float64, mode, step, level float64) float64 {
	near, far := mode, mode+step
	for far > 0 && g(far) > level {
		near = far
		step *= 2
		far += step
	}
	if far <= 0 {
		far = 0
		if g(far) > level {
			return 0
		}
	}
	for range 12 {
		mid := (near + far) / 2
		if g(mid) > level {
			near = mid
		} else {
			far = mid
		}
	}
	return far
}
