package special

import "math"

// Beta returns the regularised incomplete beta functions I_x(a, b) and its
// complement I_y(b, a), where y = 1-x is passed as well because callers often
// know it more sharply than 1-x; a, b > 0, 0 ≤ x ≤ 1. The smaller of the two keeps
// its relative accuracy for a, b of 1/2 and above.
//
// Source: Didonato and Morris (1992) for the continued fraction, evaluated by
// Lentz's method; Loader (2000) for the leading factor.
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
		lower = math.Min(1, lead*betaFraction(a, b, x, y))
		return lower, 1 - lower
	}
	upper = math.Min(1, lead*betaFraction(b, a, y, x))
	return 1 - upper, upper
}

// betaFraction is the continued fraction of I_x(a, b) over x^a y^b / B(a, b), in
// the contracted form of Didonato and Morris (ACM TOMS 18 (1992), 360-373, section
// 6): it needs half the terms and uses y, so that nothing cancels where x is near 1.
func betaFraction(a, b, x, y float64) float64 {
	lambda := a - (a+b)*x
	if a > b {
		lambda = (a+b)*y - b
	}
	f := nonzero(a * (lambda + 1) / (a + 1))
	c, d := f, 0.0
	for k := 1; k < maxTerms; k++ {
		n := float64(k)
		odd := a + 2*n - 1
		w := n * (b - n) * x / odd
		alpha := w * x * ((a + n - 1) / odd) * (a + b + n - 1)
		beta := n + w + (a+n)/(odd+2)*(lambda+1+n*(1+y))
		d = 1 / nonzero(beta+alpha*d)
		c = nonzero(beta + alpha/c)
		step := c * d
		f *= step
		if math.Abs(step-1) < 1e-16 {
			break
		}
	}
	return 1 / f
}

// BetaQuantile solves I_x(a, b) = p when upper is false, 1 - I_x(a, b) = p when
// it is true, and returns x with its complement y = 1-x, both sharp also where one
// is tiny; a, b > 0, 0 < p < 1.
func BetaQuantile(a, b, p float64, upper bool) (x, y float64) {
	if !(a > 0) || !(b > 0) || !(p > 0 && p < 1) {
		return math.NaN(), math.NaN()
	}
	if p > 0.5 {
		p, upper = 1-p, !upper
	}
	// On the scale u = ln(x/y) neither end of the interval is special.
	f := func(u float64) float64 {
		lo, up := Beta(a, b, 1/(1+math.Exp(-u)), 1/(1+math.Exp(u)))
		if upper {
			return -math.Log(up / p)
		}
		return math.Log(lo / p)
	}
	u := increasingRoot(f, math.Log(a/b), math.Min(1, 0.3*math.Sqrt(1/a+1/b)))
	return 1 / (1 + math.Exp(-u)), 1 / (1 + math.Exp(u))
}
