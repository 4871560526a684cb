package factor

import (
	"fmt"
	"math"

	"holdfast/internal/spc/special"
)

// EffectiveDF returns the degrees of freedom nu at which an unbiased estimate of
// sigma from a pooled variance would have the coefficient of variation cv, that
// is the nu > 0 with √(1-c4²)/c4 = cv, c4 taken at nu+1 readings. Small cv gives
// nu ≈ 1/(2 cv²). cv must be in (0, 10]; above, nothing is known about sigma.
func EffectiveDF(cv float64) (float64, error) {
	if !(cv > 0 && cv <= 10) {
		return math.NaN(), fmt.Errorf("%w: the relative error of sigma must be above 0 and at most 10, got %g", ErrArgument, cv)
	}
	target := math.Log1p(cv * cv)
	// 1 + cv² = 1/c4², so that only ln c4 is needed and nothing cancels.
	f := func(y float64) float64 { return math.Log(target / (-2 * logC4(math.Exp(y)))) }
	guess := math.Log(1 / (2 * cv * cv))
	lo, hi := guess-8, guess+1
	y, ok := special.Root(f, lo, hi)
	if !ok {
		return math.NaN(), fmt.Errorf("%w: no degrees of freedom have a relative error of %g", ErrArgument, cv)
	}
	return math.Exp(y), nil
}

// EffectiveDFRange returns the degrees of freedom of R̄/d2 from m subgroups of n
// readings: the relative error of the estimate is d3/(d2 √m).
//
// Source: the matching of Patnaik, Biometrika 37 (1950), 78-87, here on the
// coefficient of variation of the unbiased estimate.
func EffectiveDFRange(n, m int) (float64, error) {
	d2, err := D2(n)
	if err != nil {
		return math.NaN(), err
	}
	d3, _ := D3(n)
	return dfOfMean(d3/d2, m)
}

// EffectiveDFSD returns the degrees of freedom of S̄/c4 from m subgroups of n
// readings: the relative error of the estimate is √(1-c4²)/(c4 √m).
func EffectiveDFSD(n, m int) (float64, error) {
	c4, err := C4(n)
	if err != nil {
		return math.NaN(), err
	}
	c5, _ := C5(n)
	return dfOfMean(c5/c4, m)
}

func dfOfMean(cv float64, m int) (float64, error) {
	if m < 1 {
		return math.NaN(), fmt.Errorf("%w: at least one subgroup is needed, got %d", ErrArgument, m)
	}
	return EffectiveDF(cv / math.Sqrt(float64(m)))
}
