package capability

import (
	"math"

	"holdfast/internal/spc/dist"
	"holdfast/internal/spc/special"
)

// OneSidedToleranceFactor returns the k for which X̄ + k·s of n normal readings lies
// above the given share of the process with the given confidence:
// t(confidence; n-1, z√n)/√n, noncentral t. n is 2 to MaxReadings.
//
// Source: NIST/SEMATECH e-Handbook of Statistical Methods, section 7.2.6.3.
func OneSidedToleranceFactor(n int, coverage, confidence float64) (float64, error) {
	if err := toleranceOK(n, coverage, confidence); err != nil {
		return math.NaN(), err
	}
	root := math.Sqrt(float64(n))
	t, err := dist.NoncentralTQuantile(confidence, float64(n-1), special.NormalQuantile(coverage)*root)
	return t / root, err
}

// TwoSidedToleranceFactor returns the k for which X̄ ± k·s of n normal readings holds
// the given share of the process with the given confidence, exactly: over the law of
// the mean, the probability that s reaches r/k, where r is the half width (in sigmas)
// that holds the share about that mean.
//
// Source: Odeh, Communications in Statistics B 7 (1978), 183-201 (from memory); ISO
// 16269-6.
func TwoSidedToleranceFactor(n int, coverage, confidence float64) (float64, error) {
	if err := toleranceOK(n, coverage, confidence); err != nil {
		return math.NaN(), err
	}
	nu, root := float64(n-1), math.Sqrt(float64(n))
	x, w := special.GaussLegendre(32)
	const panels, reach = 8, 9.0
	// The half widths do not depend on k: compute them once.
	type node struct{ weight, square float64 }
	var nodes []node
	half := reach / (2 * panels)
	for p := range panels {
		mid := half * float64(2*p+1)
		for i := range x {
			z := mid + half*x[i]
			r, ok := halfWidth(z/root, coverage)
			if !ok {
				return math.NaN(), invalid("a coverage of %g cannot be computed", coverage)
			}
			nodes = append(nodes, node{2 * half * w[i] * special.NormalPDF(z), r * r})
		}
	}
	excess := func(k float64) float64 {
		sum := 0.0
		for _, v := range nodes {
			_, q := special.Gamma(nu/2, nu*v.square/(2*k*k))
			sum += v.weight * q
		}
		return sum - confidence
	}
	low, high := 1e-3, 1.0
	for excess(high) < 0 {
		high *= 2
		if high > 1e9 {
			return math.NaN(), invalid("no tolerance factor below 1e9 reaches a confidence of %g with %d readings", confidence, n)
		}
	}
	if excess(low) > 0 {
		return math.NaN(), invalid("a coverage of %g is too small to compute with", coverage)
	}
	k, ok := special.Root(excess, low, high)
	if !ok {
		return math.NaN(), invalid("the tolerance factor cannot be computed")
	}
	return k, nil
}

// halfWidth solves Φ(a+r) - Φ(a-r) = share for r.
func halfWidth(a, share float64) (float64, bool) {
	f := func(r float64) float64 {
		// In the upper tails, where nothing cancels for shares near 1.
		return (1 - share) - special.NormalSurvival(r+a) - special.NormalSurvival(r-a)
	}
	return special.Root(f, 0, a+40)
}

func toleranceOK(n int, coverage, confidence float64) error {
	if n < 2 || n > MaxReadings {
		return invalid("the number of readings must be 2 to %d, got %d", MaxReadings, n)
	}
	if !(coverage > 0 && coverage < 1) {
		return invalid("the coverage must lie between 0 and 1, got %g", coverage)
	}
	return confidenceOK(confidence)
}
