package special

import "math"

// Beta returns the regularised incomplete beta functions I_x(a, b) and its
// complement I_y(b, a), where y = 1-x is passed as well because callers often
// know it more sharply than 1-x; a, b > 0, 0 ≤ x ≤ 1. The smaller of the two keeps
// its relative accuracy for a, b of 1/2 and above.
//
// Source: continued fraction 26.5.8 of Abramowitz and Stegun, evaluated by
// Lentz's method, with the leading factor after Loader (2000).
func Beta(a, b, x, y float64) (lower, upper float64) {
	switch {
	case !(a > 0) || !(b > 0) || !(x >= 0) || !(y >= 0) || x > 1 || y > 1:
		return math.NaN(), math.NaN()
	case x == 0:
		return 0, 1
	case y == 0:
		return 1, 0
	}
	lead := a * b / (a + b) * BinomialPMF(a, a+b, x, y)
	if x <= (a+1)/(a+b+2) {
		lower = math.Min(1, lead*betaFraction(a, b, x)/a)
		return lower, 1 - lower
	}
	upper = math.Min(1, lead*betaFraction(b, a, y)/b)
	return 1 - upper, upper
}

func betaFraction(a, b, x float64) float64 {
	c := 1.0
	d := 1 / nonzero(1-(a+b)*x/(a+1))
	f := d
	for k := 1; k < maxTerms; k++ {
		m := float64(k)
		even := m * (b - m) * x / ((a + 2*m - 1) * (a + 2*m))
		d = 1 / nonzero(1+even*d)
		c = nonzero(1 + even/c)
		f *= d * c
		odd := -(a + m) * (a + b + m) * x / ((a + 2*m) * (a + 2*m + 1))
		d = 1 / nonzero(1+odd*d)
		c = nonzero(1 + odd/c)
		step := d * c
		f *= step
		if math.Abs(step-1) < 1e-16 {
			break
		}
	}
	return f
}
