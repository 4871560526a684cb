package capability

import (
	"math"

	"holdfast/internal/spc/dist"
)

// Interval holds a quantity between Low and High.
type Interval struct{ Low, High float64 }

// Bounds are the two-sided interval of an index and its one-sided bounds, each at
// the confidence asked for.
type Bounds struct {
	Interval   Interval
	LowerBound float64
	UpperBound float64
}

// CpBounds returns the bounds of Cp or Pp estimated as value ≥ 0 with nu degrees of
// freedom of sigma (n-1 for the overall s.d. of n readings; at most 1e9):
//
//	C √(χ²_{α/2,ν}/ν)  to  C √(χ²_{1-α/2,ν}/ν)
//
// They are exact for normal readings when sigma is the root of a variance; for
// estimators from ranges nu is an effective number and they are close.
//
// Source: NIST/SEMATECH e-Handbook of Statistical Methods, section 6.1.6.
func CpBounds(value, nu, confidence float64) (Bounds, error) {
	if err := confidenceOK(confidence); err != nil {
		return Bounds{}, err
	}
	if !(value >= 0) || math.IsInf(value, 1) {
		return Bounds{}, invalid("Cp must be zero or above, got %g", value)
	}
	if !(nu > 0 && nu <= dist.MaxParameter) {
		return Bounds{}, invalid("the degrees of freedom must be above 0 and at most %g, got %g", dist.MaxParameter, nu)
	}
	alpha := 1 - confidence
	var failed error
	at := func(quantile func(p, nu float64) (float64, error), p float64) float64 {
		q, err := quantile(p, nu)
		if err != nil {
			failed = err
		}
		return value * math.Sqrt(q/nu)
	}
	b := Bounds{
		Interval:   Interval{at(dist.ChiSquareQuantile, alpha/2), at(dist.ChiSquareUpperQuantile, alpha/2)},
		LowerBound: at(dist.ChiSquareQuantile, alpha),
		UpperBound: at(dist.ChiSquareUpperQuantile, alpha),
	}
	if failed == nil && !finite(b.Interval.High) {
		failed = invalid("Cp is too large to compute with: %g", value)
	}
	return b, failed
}

// CpkBounds returns the normal approximation of the bounds of Cpk or Ppk estimated
// as value from n ≥ 2 readings with nu degrees of freedom of sigma, and its standard
// error:
//
//	C ± z √(1/(9n) + C²/(2ν))
//
// Source: Bissell, Applied Statistics 39 (1990), 331-340.
func CpkBounds(value float64, n int, nu, confidence float64) (b Bounds, standardError float64, err error) {
	if err := cpkOK(value, n, nu, confidence); err != nil {
		return Bounds{}, math.NaN(), err
	}
	se := math.Sqrt(1/(9*float64(n)) + value*value/(2*nu))
	alpha := 1 - confidence
	two, err := dist.NormalUpperQuantile(alpha / 2)
	if err != nil {
		return Bounds{}, math.NaN(), err
	}
	one, err := dist.NormalUpperQuantile(alpha)
	if err != nil {
		return Bounds{}, math.NaN(), err
	}
	return Bounds{
		Interval:   Interval{value - two*se, value + two*se},
		LowerBound: value - one*se,
		UpperBound: value + one*se,
	}, se, nil
}

// ExactBounds returns the exact bounds of a one-sided index, (U-μ)/3σ or (μ-L)/3σ,
// estimated as value from n ≥ 2 readings with nu ≥ 1 degrees of freedom of sigma:
// 3√n·Ĉ is noncentral t with noncentrality 3√n·C. For the Cpk of a two-sided
// specification the lower bound is on the safe side, not exact.
//
// Source: Kane, Journal of Quality Technology 18 (1986), 41-52; Kushler and Hurley,
// Journal of Quality Technology 24 (1992), 188-195 (from memory).
func ExactBounds(value float64, n int, nu, confidence float64) (Bounds, error) {
	alpha := 1 - confidence
	var failed error
	at := func(p float64) float64 {
		c, err := exactAt(value, n, nu, confidence, p)
		if err != nil {
			failed = err
		}
		return c
	}
	b := Bounds{
		Interval:   Interval{at(1 - alpha/2), at(alpha / 2)},
		LowerBound: at(1 - alpha),
		UpperBound: at(alpha),
	}
	if failed != nil {
		return Bounds{}, failed
	}
	return b, nil
}

// exactAt returns the true index at which an estimate of at most this value has the
// probability p. The lower bound, at 1-α, is where an estimate as high as this one is
// already rare.
func exactAt(value float64, n int, nu, confidence, p float64) (float64, error) {
	if err := cpkOK(value, n, nu, confidence); err != nil {
		return math.NaN(), err
	}
	scale := 3 * math.Sqrt(float64(n))
	if nu < 1 || nu > 1e7 {
		return math.NaN(), invalid("the exact bounds need 1 to 1e7 degrees of freedom of sigma, got %g", nu)
	}
	if math.Abs(scale*value) > maxDistance {
		return math.NaN(), invalid("an index of %g is beyond any real process: check that specification and readings have the same unit", value)
	}
	delta, err := dist.NoncentralTNoncentrality(scale*value, nu, p)
	return delta / scale, err
}

// maxDistance bounds 3√n·|C|, so that its bounds stay within what the noncentral t
// is computed for.
const maxDistance = 2e5

func cpkOK(value float64, n int, nu, confidence float64) error {
	if err := confidenceOK(confidence); err != nil {
		return err
	}
	switch {
	case !finite(value) || math.Abs(value) > 1e100:
		return invalid("Cpk must be a finite number, got %g", value)
	case n < 2:
		return invalid("at least 2 readings are needed, got %d", n)
	case !(nu > 0) || math.IsInf(nu, 1):
		return invalid("the degrees of freedom of sigma must be above 0, got %g", nu)
	}
	return nil
}
