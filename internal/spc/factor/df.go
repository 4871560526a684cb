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

// C4Nu returns c4 for nu > 0 degrees of freedom, not necessarily whole: the mean of
// √(X/nu), X chi-square. C4(n) is C4Nu(n-1).
func C4Nu(nu float64) (float64, error) {
	if !(nu > 0) || math.IsInf(nu, 1) {
		return math.NaN(), fmt.Errorf("%w: the degrees of freedom must be above 0, got %g", ErrArgument, nu)
	}
	return math.Exp(logC4(nu)), nil
}

// EffectiveDFMovingRange returns the degrees of freedom of the mean moving range
// over d2(2), from the given number of moving ranges of two of which so many pairs
// are neighbours (share a reading): m readings in one unbroken row have m-1 ranges
// and m-2 such pairs. Neighbours are correlated: with D, D' their signed
// differences, E|D||D'| = 2√3/π + 1/3 in units of σ².
//
// Source: Nabeya, Annals of the Institute of Statistical Mathematics 3 (1951), 1-6,
// for the absolute moments of two correlated normals; Cryer and Ryan, Journal of
// Quality Technology 22 (1990), 187-192, for the variance.
func EffectiveDFMovingRange(ranges, neighbours int) (float64, error) {
	if err := checkRanges(ranges, neighbours); err != nil {
		return math.NaN(), err
	}
	const covariance = 2*1.7320508075688772/math.Pi + 1.0/3 - 4/math.Pi
	const variance = 2 - 4/math.Pi
	r := float64(ranges)
	cv := math.Sqrt((r*variance+2*float64(neighbours)*covariance)*math.Pi/4) / r
	return EffectiveDF(cv)
}

// EffectiveDFMedianMovingRange is EffectiveDFMovingRange for the median moving range
// over its factor 0.9539. It rests on the variance of a median of many ranges, so
// it is rough below about twenty.
//
// Source: the asymptotic variance of the median of a dependent sequence, Sen,
// Annals of Mathematical Statistics 39 (1968), 1724-1730.
func EffectiveDFMedianMovingRange(ranges, neighbours int) (float64, error) {
	if err := checkRanges(ranges, neighbours); err != nil {
		return math.NaN(), err
	}
	// Half of all |differences| lie within ±a standard deviations of theirs.
	a := special.NormalQuantile(0.75)
	// Both of two neighbours, correlated -1/2, do with this probability.
	s := math.Sqrt(0.75)
	both := special.Panels(func(z float64) float64 {
		return special.NormalPDF(z) * (special.NormalCDF((a+z/2)/s) - special.NormalCDF((z/2-a)/s))
	}, -a, a, 2)
	density := 2 * special.NormalPDF(a)
	r := float64(ranges)
	cv := math.Sqrt(r/4+2*float64(neighbours)*(both-0.25)) / (r * density * a)
	return EffectiveDF(cv)
}

func checkRanges(ranges, neighbours int) error {
	if ranges < 1 || neighbours < 0 || neighbours >= ranges {
		return fmt.Errorf("%w: %d moving ranges with %d pairs of neighbours do not exist", ErrArgument, ranges, neighbours)
	}
	return nil
}
