package dist

import (
	"math"

	"holdfast/internal/spc/special"
)

// NormalCDF returns P(Z ≤ z) for a standard normal Z, sharp in the lower tail.
func NormalCDF(z float64) (float64, error) {
	if err := finite("z", z); err != nil {
		return math.NaN(), err
	}
	return special.NormalCDF(z), nil
}

// NormalSurvival returns P(Z > z) for a standard normal Z, sharp in the upper tail.
func NormalSurvival(z float64) (float64, error) {
	if err := finite("z", z); err != nil {
		return math.NaN(), err
	}
	return special.NormalSurvival(z), nil
}

// NormalQuantile returns the z with P(Z ≤ z) = p, 0 < p < 1.
func NormalQuantile(p float64) (float64, error) {
	if err := probability(p); err != nil {
		return math.NaN(), err
	}
	return special.NormalQuantile(p), nil
}

// NormalUpperQuantile returns the z with P(Z > z) = q, 0 < q < 1.
func NormalUpperQuantile(q float64) (float64, error) {
	if err := probability(q); err != nil {
		return math.NaN(), err
	}
	return special.NormalUpperQuantile(q), nil
}

// TCDF returns P(T ≤ t) for Student's t with nu > 0 degrees of freedom.
func TCDF(t, nu float64) (float64, error) {
	lower, _, err := tTails(t, nu)
	return lower, err
}

// TSurvival returns P(T > t) for Student's t with nu > 0 degrees of freedom.
func TSurvival(t, nu float64) (float64, error) {
	_, upper, err := tTails(t, nu)
	return upper, err
}

// tTails uses P(|T| > t) = I_x(nu/2, 1/2) at x = nu/(nu+t²), Abramowitz and Stegun
// 26.7.1 and 26.5.27.
func tTails(t, nu float64) (lower, upper float64, err error) {
	if err := first(finite("t", t), positive("the degrees of freedom", nu)); err != nil {
		return math.NaN(), math.NaN(), err
	}
	x, y := shares(nu, t*t)
	both, _ := special.Beta(nu/2, 0.5, x, y)
	far, near := both/2, 1-both/2
	if t < 0 {
		return far, near, nil
	}
	return near, far, nil
}

// shares returns a/(a+b) and b/(a+b), also where b has overflowed.
func shares(a, b float64) (x, y float64) {
	if math.IsInf(b, 1) {
		return 0, 1
	}
	return a / (a + b), b / (a + b)
}

// TQuantile returns the t with P(T ≤ t) = p, 0 < p < 1, nu > 0.
func TQuantile(p, nu float64) (float64, error) {
	t, err := TUpperQuantile(p, nu)
	return -t, err
}

// TUpperQuantile returns the t with P(T > t) = q, 0 < q < 1, nu > 0.
func TUpperQuantile(q, nu float64) (float64, error) {
	if err := first(probability(q), positive("the degrees of freedom", nu)); err != nil {
		return math.NaN(), err
	}
	sign := 1.0
	if q > 0.5 {
		q, sign = 1-q, -1
	}
	var x, y float64
	switch {
	case q == 0.5:
		return 0, nil
	case q > 0.25:
		// Near the middle the probability within ±t is the sharper one.
		x, y = special.BetaQuantile(0.5, nu/2, 1-2*q, false)
	default:
		x, y = special.BetaQuantile(0.5, nu/2, 2*q, true)
	}
	t := math.Sqrt(nu * x / y)
	if math.IsInf(t, 0) || math.IsNaN(t) {
		return bad("the t quantile at %g with %g degrees of freedom is beyond the largest number", q, nu)
	}
	return sign * t, nil
}

// ChiSquareCDF returns P(X ≤ x) for chi-square with nu > 0 degrees of freedom; it is
// 0 for negative x.
func ChiSquareCDF(x, nu float64) (float64, error) {
	lower, _, err := gammaTails(x, nu/2, 2)
	return lower, err
}

// ChiSquareSurvival returns P(X > x) for chi-square with nu > 0 degrees of freedom.
func ChiSquareSurvival(x, nu float64) (float64, error) {
	_, upper, err := gammaTails(x, nu/2, 2)
	return upper, err
}

// ChiSquareQuantile returns the x with P(X ≤ x) = p, 0 < p < 1, nu > 0.
func ChiSquareQuantile(p, nu float64) (float64, error) {
	return gammaQuantile(p, nu/2, 2, false)
}

// ChiSquareUpperQuantile returns the x with P(X > x) = q, 0 < q < 1, nu > 0.
func ChiSquareUpperQuantile(q, nu float64) (float64, error) {
	return gammaQuantile(q, nu/2, 2, true)
}

// GammaCDF returns P(X ≤ x) for the gamma law with the given shape and scale, both
// above 0, mean shape·scale; it is 0 for negative x.
func GammaCDF(x, shape, scale float64) (float64, error) {
	lower, _, err := gammaTails(x, shape, scale)
	return lower, err
}

// GammaSurvival returns P(X > x) for the gamma law.
func GammaSurvival(x, shape, scale float64) (float64, error) {
	_, upper, err := gammaTails(x, shape, scale)
	return upper, err
}

// GammaQuantile returns the x with P(X ≤ x) = p, 0 < p < 1.
func GammaQuantile(p, shape, scale float64) (float64, error) {
	return gammaQuantile(p, shape, scale, false)
}

// GammaUpperQuantile returns the x with P(X > x) = q, 0 < q < 1.
func GammaUpperQuantile(q, shape, scale float64) (float64, error) {
	return gammaQuantile(q, shape, scale, true)
}

func gammaTails(x, shape, scale float64) (lower, upper float64, err error) {
	if err := first(finite("x", x), positive("the shape or the degrees of freedom", shape), scaleOK(scale)); err != nil {
		return math.NaN(), math.NaN(), err
	}
	lower, upper = special.Gamma(shape, math.Max(0, x)/scale)
	return lower, upper, nil
}

func gammaQuantile(p, shape, scale float64, upper bool) (float64, error) {
	if err := first(probability(p), positive("the shape or the degrees of freedom", shape), scaleOK(scale)); err != nil {
		return math.NaN(), err
	}
	x := scale * special.GammaQuantile(shape, p, upper)
	if math.IsInf(x, 0) || math.IsNaN(x) {
		return bad("the quantile at %g is beyond the largest number", p)
	}
	return x, nil
}

// scaleOK admits any unit of measurement, not only parameters of moderate size.
func scaleOK(scale float64) error {
	if !(scale > 0) || math.IsInf(scale, 1) {
		return positive("the scale", -1)
	}
	return nil
}

// FCDF returns P(X ≤ x) for F with d1 and d2 degrees of freedom, both above 0; it
// is 0 for negative x.
func FCDF(x, d1, d2 float64) (float64, error) {
	lower, _, err := fTails(x, d1, d2)
	return lower, err
}

// FSurvival returns P(X > x) for F with d1 and d2 degrees of freedom.
func FSurvival(x, d1, d2 float64) (float64, error) {
	_, upper, err := fTails(x, d1, d2)
	return upper, err
}

func fTails(x, d1, d2 float64) (lower, upper float64, err error) {
	if err := first(finite("x", x), positive("the degrees of freedom", d1), positive("the degrees of freedom", d2)); err != nil {
		return math.NaN(), math.NaN(), err
	}
	if x <= 0 {
		return 0, 1, nil
	}
	b, a := shares(d2, d1*x)
	lower, upper = special.Beta(d1/2, d2/2, a, b)
	return lower, upper, nil
}

// FQuantile returns the x with P(X ≤ x) = p, 0 < p < 1.
func FQuantile(p, d1, d2 float64) (float64, error) { return fQuantile(p, d1, d2, false) }

// FUpperQuantile returns the x with P(X > x) = q, 0 < q < 1.
func FUpperQuantile(q, d1, d2 float64) (float64, error) { return fQuantile(q, d1, d2, true) }

func fQuantile(p, d1, d2 float64, upper bool) (float64, error) {
	if err := first(probability(p), positive("the degrees of freedom", d1), positive("the degrees of freedom", d2)); err != nil {
		return math.NaN(), err
	}
	x, y := special.BetaQuantile(d1/2, d2/2, p, upper)
	f := d2 / d1 * (x / y)
	if math.IsInf(f, 0) || math.IsNaN(f) {
		return bad("the F quantile at %g is beyond the largest number", p)
	}
	return f, nil
}

// BetaCDF returns P(X ≤ x) for the beta law with shapes a, b > 0; 0 below 0, 1 above 1.
func BetaCDF(x, a, b float64) (float64, error) {
	lower, _, err := betaTails(x, a, b)
	return lower, err
}

// BetaSurvival returns P(X > x) for the beta law.
func BetaSurvival(x, a, b float64) (float64, error) {
	_, upper, err := betaTails(x, a, b)
	return upper, err
}

func betaTails(x, a, b float64) (lower, upper float64, err error) {
	if err := first(finite("x", x), positive("the first shape", a), positive("the second shape", b)); err != nil {
		return math.NaN(), math.NaN(), err
	}
	x = math.Max(0, math.Min(1, x))
	lower, upper = special.Beta(a, b, x, 1-x)
	return lower, upper, nil
}

// BetaQuantile returns the x with P(X ≤ x) = p, 0 < p < 1.
func BetaQuantile(p, a, b float64) (float64, error) { return betaQuantile(p, a, b, false) }

// BetaUpperQuantile returns the x with P(X > x) = q, 0 < q < 1.
func BetaUpperQuantile(q, a, b float64) (float64, error) { return betaQuantile(q, a, b, true) }

func betaQuantile(p, a, b float64, upper bool) (float64, error) {
	if err := first(probability(p), positive("the first shape", a), positive("the second shape", b)); err != nil {
		return math.NaN(), err
	}
	x, _ := special.BetaQuantile(a, b, p, upper)
	if math.IsNaN(x) {
		return bad("the beta quantile at %g with shapes %g and %g cannot be computed", p, a, b)
	}
	return x, nil
}
