package special

import "math"

// NormalPDF is the standard normal density at z.
func NormalPDF(z float64) float64 {
	return math.Exp(-z*z/2) / math.Sqrt(2*math.Pi)
}

// NormalCDF is P(Z ≤ z) for a standard normal Z. It keeps its relative accuracy
// far into the lower tail (z = -38) because it never forms 1 minus something.
func NormalCDF(z float64) float64 {
	return math.Erfc(-z/math.Sqrt2) / 2
}

// NormalSurvival is P(Z > z), the complement of NormalCDF with the same accuracy
// in the upper tail.
func NormalSurvival(z float64) float64 {
	return math.Erfc(z/math.Sqrt2) / 2
}

// NormalQuantile is the z with P(Z ≤ z) = p, for 0 ≤ p ≤ 1; 0 and 1 give the
// infinities, anything else outside gives NaN.
func NormalQuantile(p float64) float64 {
	if p > 0.5 {
		return -lowerNormalQuantile(1 - p)
	}
	return lowerNormalQuantile(p)
}

// NormalUpperQuantile is the z with P(Z > z) = q: the form to use for small
// tails, since 1-q would lose them.
func NormalUpperQuantile(q float64) float64 {
	return -NormalQuantile(q)
}

// lowerNormalQuantile solves Φ(z) = p for p ≤ 1/2. The start is the rational
// approximation 26.2.23 of Abramowitz and Stegun (absolute error below 4.5e-4);
// Newton steps on ln Φ then converge to the last bits, also at p = 1e-300 where
// a step on Φ itself would underflow.
func lowerNormalQuantile(p float64) float64 {
	switch {
	case math.IsNaN(p) || p < 0 || p > 0.5:
		return math.NaN()
	case p == 0:
		return math.Inf(-1)
	case p == 0.5:
		return 0
	}
	t := math.Sqrt(-2 * math.Log(p))
	z := -(t - (2.515517+t*(0.802853+t*0.010328))/(1+t*(1.432788+t*(0.189269+t*0.001308))))
	for range 6 {
		c := NormalCDF(z)
		if c == 0 {
			// Below the smallest number: the start is as good as it gets.
			return z
		}
		step := math.Log(c/p) * c / NormalPDF(z)
		z -= step
		if math.Abs(step) <= 1e-15*math.Abs(z) {
			break
		}
	}
	return z
}

// LogNormalCDF is ln P(Z ≤ z), finite for every finite z above about -1e150.
func LogNormalCDF(z float64) float64 {
	switch {
	case z > 0:
		return math.Log1p(-NormalSurvival(z))
	case z > -37:
		return math.Log(NormalCDF(z))
	}
	// Asymptotic series, Abramowitz and Stegun 26.2.12; at z = -37 the first
	// term left out is below 1e-14.
	u := 1 / (z * z)
	return -z*z/2 - math.Log(-z) - math.Log(2*math.Pi)/2 +
		math.Log1p(-u*(1-u*(3-u*(15-u*105))))
}

// LogNormalTails is ln P(Z ≤ z) and ln P(Z > z) at the cost of one of them.
func LogNormalTails(z float64) (lower, upper float64) {
	if math.Abs(z) > 37 {
		return LogNormalCDF(z), LogNormalCDF(-z)
	}
	small := NormalSurvival(math.Abs(z))
	far, near := math.Log(small), math.Log1p(-small)
	if z < 0 {
		return far, near
	}
	return near, far
}
