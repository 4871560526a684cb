package special

import "math"

// maxTerms bounds every series and continued fraction. The slowest needs a few
// times the square root of its largest parameter, so this serves parameters up
// to about 1e10.
const maxTerms = 1_000_000

// StirlingError is ln Γ(x+1) - ((x+½) ln x - x + ½ ln 2π), what Stirling's
// formula leaves out, for x > 0.
//
// Source: Loader, Fast and Accurate Computation of Binomial Probabilities (2000).
func StirlingError(x float64) float64 {
	if x < 15 {
		l, _ := math.Lgamma(x + 1)
		return l - (x+0.5)*math.Log(x) + x - math.Log(2*math.Pi)/2
	}
	u := 1 / (x * x)
	return (1.0/12 - u*(1.0/360-u*(1.0/1260-u*(1.0/1680-u*(1.0/1188-u*691.0/360360))))) / x
}

// deviance is x ln(x/m) + m - x, without cancellation where x is near m.
func deviance(x, m float64) float64 {
	d := x - m
	if math.Abs(d) >= 0.1*(x+m) {
		return x*math.Log(x/m) - d
	}
	v := d / (x + m)
	sum := d * v
	term := 2 * x * v
	for k := 3; k < 1000; k += 2 {
		term *= v * v
		next := sum + term/float64(k)
		if next == sum {
			break
		}
		sum = next
	}
	return sum
}

// PoissonPMF is m^x e^-m / Γ(x+1) for x ≥ 0 and m ≥ 0; x need not be whole. Its
// relative error stays near 1e-14 where exponents of a million would cancel.
func PoissonPMF(x, m float64) float64 {
	switch {
	case m == 0:
		if x == 0 {
			return 1
		}
		return 0
	case x < 1e-6:
		l, _ := math.Lgamma(x + 1)
		return math.Exp(x*math.Log(m) - m - l)
	case math.IsInf(m, 1):
		return 0
	}
	return math.Exp(-StirlingError(x)-deviance(x, m)) / math.Sqrt(2*math.Pi*x)
}

// BinomialPMF is Γ(n+1)/(Γ(x+1)Γ(n-x+1)) p^x q^(n-x) for 0 ≤ x ≤ n and
// p + q = 1; x and n need not be whole.
func BinomialPMF(x, n, p, q float64) float64 {
	switch {
	case p == 0 || q == 0:
		if p == 0 && x == 0 || q == 0 && x == n {
			return 1
		}
		return 0
	case x == 0:
		return math.Exp(n * log1mp(p, q))
	case x == n:
		return math.Exp(n * log1mp(q, p))
	}
	lead := StirlingError(n) - StirlingError(x) - StirlingError(n-x) - deviance(x, n*p) - deviance(n-x, n*q)
	return math.Exp(lead) * math.Sqrt(n/(2*math.Pi*x*(n-x)))
}

// log1mp is ln q where q = 1-p, taken from whichever is known more sharply.
func log1mp(p, q float64) float64 {
	if p < 0.5 {
		return math.Log1p(-p)
	}
	return math.Log(q)
}

// Gamma returns the regularised incomplete gamma functions P(a, x) and
// Q(a, x) = 1 - P, each computed without forming the other's complement where it
// is the small one; a > 0, x ≥ 0.
//
// Source: series 6.5.29 and continued fraction 6.5.31 of Abramowitz and Stegun,
// with the leading factor after Loader (2000).
func Gamma(a, x float64) (p, q float64) {
	switch {
	case !(a > 0) || !(x >= 0):
		return math.NaN(), math.NaN()
	case x == 0:
		return 0, 1
	case math.IsInf(x, 1):
		return 1, 0
	case a < 0.3 && x < 1.1:
		return gammaSmall(a, x)
	}
	lead := PoissonPMF(a, x)
	if x < a+1 {
		sum, term := 1.0, 1.0
		for k := 1; k < maxTerms; k++ {
			term *= x / (a + float64(k))
			sum += term
			if term < sum*1e-17 {
				break
			}
		}
		p = math.Min(1, lead*sum)
		return p, 1 - p
	}
	b := x + 1 - a
	c := 1e300
	d := 1 / b
	f := d
	for k := 1; k < maxTerms; k++ {
		an := -float64(k) * (float64(k) - a)
		b += 2
		d = 1 / nonzero(an*d+b)
		c = nonzero(b + an/c)
		step := d * c
		f *= step
		if math.Abs(step-1) < 1e-16 {
			break
		}
	}
	q = math.Min(1, lead*a*f)
	return 1 - q, q
}

// gammaSmall serves small a, where P is near 1 already at tiny x:
// P = x^a/Γ(a+1) (1 + a Σ (-x)^k/((a+k) k!)).
func gammaSmall(a, x float64) (p, q float64) {
	l, _ := math.Lgamma(a + 1)
	lead := a*math.Log(x) - l
	u := -math.Expm1(lead)
	sum, term := 0.0, 1.0
	for k := 1; k < 60; k++ {
		term *= -x / float64(k)
		sum += term / (a + float64(k))
	}
	q = u - (1-u)*a*sum
	return math.Exp(lead) * (1 + a*sum), q
}

func nonzero(x float64) float64 {
	if math.Abs(x) < 1e-300 {
		return 1e-300
	}
	return x
}

// GammaQuantile returns the x with P(a, x) = p when upper is false, Q(a, x) = p
// when it is true; a > 0, 0 < p < 1. Answers below the smallest normal number
// are 0.
func GammaQuantile(a, p float64, upper bool) float64 {
	if !(a > 0) || !(p > 0 && p < 1) {
		return math.NaN()
	}
	if p > 0.5 {
		// The complement of p is exact here (Sterbenz), and it is the smaller.
		p, upper = 1-p, !upper
	}
	// Wilson and Hilferty's cube root; the exact leading term where that fails.
	z := NormalQuantile(p)
	if upper {
		z = -z
	}
	guess := 1 - 1/(9*a) + z/(3*math.Sqrt(a))
	start := math.Log(a) + 3*math.Log(guess)
	if guess < 0.2 || a < 0.5 {
		l, _ := math.Lgamma(a + 1)
		lower := math.Log(p)
		if upper {
			lower = math.Log1p(-p)
		}
		start = (lower + l) / a
	}
	f := func(y float64) float64 {
		lo, up := Gamma(a, math.Exp(y))
		if upper {
			return -math.Log(up / p)
		}
		return math.Log(lo / p)
	}
	return math.Exp(increasingRoot(f, start, 0.01+0.1/math.Sqrt(a)))
}

// increasingRoot finds the zero of an increasing f from a starting point by
// widening steps. Infinite values of f only say on which side the root is.
func increasingRoot(f func(float64) float64, start, step float64) float64 {
	capped := func(y float64) float64 {
		return math.Max(-1e300, math.Min(1e300, f(y)))
	}
	start = math.Max(-700, math.Min(700, start))
	v := capped(start)
	lo, hi := start, start
	switch {
	case v == 0:
		return start
	case v > 0:
		for v > 0 {
			hi = lo
			lo -= step
			step *= 2
			if lo < -745 {
				return math.Inf(-1)
			}
			v = capped(lo)
		}
	default:
		for v < 0 {
			lo = hi
			hi += step
			step *= 2
			if hi > 1e4 {
				return math.Inf(1)
			}
			v = capped(hi)
		}
	}
	y, ok := Root(capped, lo, hi)
	if !ok {
		return math.NaN()
	}
	return y
}
