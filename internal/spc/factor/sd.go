package factor

import (
	"fmt"
	"math"

	"holdfast/internal/spc/special"
)

// SDCDF returns P(S/σ ≤ s) for the sample standard deviation S (divisor n-1) of n
// independent normal readings, n ≥ 2: (n-1)S²/σ² is chi-square with n-1 degrees of
// freedom. A negative s has probability 0; NaN and infinities are ErrArgument.
func SDCDF(n int, s float64) (float64, error) {
	p, _, err := sdTails(n, s)
	return p, err
}

// SDSurvival returns P(S/σ > s), the complement of SDCDF with full relative
// accuracy in the upper tail.
func SDSurvival(n int, s float64) (float64, error) {
	_, q, err := sdTails(n, s)
	return q, err
}

func sdTails(n int, s float64) (p, q float64, err error) {
	if err := checkSD(n); err != nil {
		return math.NaN(), math.NaN(), err
	}
	if math.IsNaN(s) || math.IsInf(s, 0) {
		return math.NaN(), math.NaN(), fmt.Errorf("%w: the relative standard deviation must be a finite number, got %g", ErrArgument, s)
	}
	if s <= 0 {
		return 0, 1, nil
	}
	nu := float64(n - 1)
	p, q = special.Gamma(nu/2, nu*s*s/2)
	return p, q, nil
}

// SDQuantile returns the s with P(S/σ ≤ s) = p, for 0 < p < 1 and n ≥ 2.
func SDQuantile(n int, p float64) (float64, error) { return sdQuantile(n, p, false) }

// SDUpperQuantile returns the s with P(S/σ > s) = q, for 0 < q < 1 and n ≥ 2.
func SDUpperQuantile(n int, q float64) (float64, error) { return sdQuantile(n, q, true) }

func sdQuantile(n int, p float64, upper bool) (float64, error) {
	if err := checkSD(n); err != nil {
		return math.NaN(), err
	}
	if !(p > 0 && p < 1) {
		return math.NaN(), fmt.Errorf("%w: a probability must lie between 0 and 1, got %g", ErrArgument, p)
	}
	nu := float64(n - 1)
	return math.Sqrt(2 * special.GammaQuantile(nu/2, p, upper) / nu), nil
}

func checkSD(n int) error {
	if n < 2 {
		return fmt.Errorf("%w: the standard deviation needs n ≥ 2, got %d", ErrSubgroupSize, n)
	}
	return nil
}
