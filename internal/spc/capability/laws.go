package capability

import (
	"math"

	"holdfast/internal/spc/special"
)

// normalLaw has a mean and a standard deviation.
type normalLaw struct{ mean, sd float64 }

func (l normalLaw) z(x float64) float64 { return (x - l.mean) / l.sd }

func (l normalLaw) tails(x float64) (lower, upper float64) {
	return special.NormalCDF(l.z(x)), special.NormalSurvival(l.z(x))
}

func (l normalLaw) logTails(x float64) (lower, upper float64) { return special.LogNormalTails(l.z(x)) }

func (l normalLaw) quantile(p float64, upper bool) float64 {
	z := special.NormalQuantile(p)
	if upper {
		z = -z
	}
	return l.mean + z*l.sd
}

// lognormalLaw is the law of exp(X), X normal.
type lognormalLaw struct{ log normalLaw }

func (l lognormalLaw) tails(x float64) (lower, upper float64) {
	if x <= 0 {
		return 0, 1
	}
	return l.log.tails(math.Log(x))
}

func (l lognormalLaw) logTails(x float64) (lower, upper float64) { return l.log.logTails(math.Log(x)) }

func (l lognormalLaw) quantile(p float64, upper bool) float64 {
	return math.Exp(l.log.quantile(p, upper))
}

// weibullLaw has P(X > x) = exp(-(x/scale)^shape). The Rayleigh law is the one with
// shape 2 and scale √2 times its own.
type weibullLaw struct{ shape, scale float64 }

func (l weibullLaw) power(x float64) float64 {
	return math.Exp(l.shape * (math.Log(x) - math.Log(l.scale)))
}

func (l weibullLaw) tails(x float64) (lower, upper float64) {
	if x <= 0 {
		return 0, 1
	}
	t := l.power(x)
	return -math.Expm1(-t), math.Exp(-t)
}

func (l weibullLaw) logTails(x float64) (lower, upper float64) {
	t := l.power(x)
	if t < 1e-300 {
		// The power itself may have underflowed; its logarithm has not.
		return l.shape * (math.Log(x) - math.Log(l.scale)), 0
	}
	return math.Log(-math.Expm1(-t)), -t
}

func (l weibullLaw) quantile(p float64, upper bool) float64 {
	t := -math.Log1p(-p)
	if upper {
		t = -math.Log(p)
	}
	return l.scale * math.Exp(math.Log(t)/l.shape)
}

// foldedLaw is the law of |X|, X normal with this mean and standard deviation.
type foldedLaw struct{ mean, sd float64 }

func (l foldedLaw) tails(x float64) (lower, upper float64) {
	if x <= 0 {
		return 0, 1
	}
	a, b := (x-l.mean)/l.sd, (x+l.mean)/l.sd
	upper = special.NormalSurvival(a) + special.NormalSurvival(b)
	if upper < 0.5 {
		return 1 - upper, upper
	}
	ratio, width := l.mean/l.sd, x/l.sd
	if width*math.Max(1, ratio) < 1e-3 {
		// The density about zero times the width: the difference below would cancel.
		return 2 * width * special.NormalPDF(ratio) * (1 + (ratio*ratio-1)*width*width/6), upper
	}
	return special.NormalCDF(a) - special.NormalCDF(-b), upper
}

func (l foldedLaw) logTails(x float64) (lower, upper float64) {
	p, q := l.tails(x)
	lower, upper = math.Log(p), math.Log(q)
	if q == 0 {
		// The nearer tail carries nearly all of it.
		near := special.LogNormalCDF(-(x - l.mean) / l.sd)
		far := special.LogNormalCDF(-(x + l.mean) / l.sd)
		upper = near + math.Log1p(math.Exp(far-near))
	}
	if p == 0 {
		// At zero, or with a density about zero that has underflowed.
		x = math.Max(x, math.SmallestNonzeroFloat64)
		lower = math.Ln2 - l.mean*l.mean/(2*l.sd*l.sd) - ln2Pi/2 + math.Log(x) - math.Log(l.sd)
	}
	return lower, upper
}

func (l foldedLaw) quantile(p float64, upper bool) float64 {
	f := func(x float64) float64 {
		lower, above := l.tails(x)
		if upper {
			return p - above
		}
		return lower - p
	}
	half := p
	if !upper {
		half = 1 - p
	}
	// P(|X| > x) is at most twice the nearer tail.
	high := l.mean + l.sd*math.Max(1e-3, special.NormalUpperQuantile(half/2))
	for range 3 {
		if f(high) < 0 {
			high += l.sd
		}
	}
	x, ok := special.Root(f, 0, high)
	if !ok {
		return math.NaN()
	}
	return x
}

// gammaLaw has mean shape·scale.
type gammaLaw struct{ shape, scale float64 }

func (l gammaLaw) tails(x float64) (lower, upper float64) {
	return special.Gamma(l.shape, math.Max(0, x)/l.scale)
}

func (l gammaLaw) logTails(x float64) (lower, upper float64) {
	t := x / l.scale
	p, q := special.Gamma(l.shape, t)
	return l.logOf(p, q, t)
}

// logOf takes logarithms of both tails at t = x/scale, and the leading terms of their
// series (Abramowitz and Stegun 6.5.29, 6.5.32) where one has underflowed.
func (l gammaLaw) logOf(p, q, t float64) (lower, upper float64) {
	lower, upper = math.Log(p), math.Log(q)
	if p == 0 {
		lower = l.logDensity(t) + math.Log(t/l.shape) - math.Log1p(-t/(l.shape+1))
	}
	if q == 0 {
		upper = l.logDensity(t) - math.Log1p((1-l.shape)/t)
	}
	return lower, upper
}

// logDensity is the logarithm of the density of x/scale.
func (l gammaLaw) logDensity(t float64) float64 {
	a := l.shape
	// a ln t - t - ln Γ(a+1), by Stirling's formula so that nothing large cancels.
	d := (t - a) / a
	return a*(math.Log1p(d)-d) - math.Log(2*math.Pi*a)/2 - special.StirlingError(a) + math.Log(a) - math.Log(t)
}

func (l gammaLaw) quantile(p float64, upper bool) float64 {
	return l.scale * special.GammaQuantile(l.shape, p, upper)
}

// directShape is the gamma shape up to which the tails of every reading are computed
// directly; above, series get long, and the law is so smooth that its density can
// be summed from reading to reading.
const directShape = 20

// logTailsOf returns both log tails at every reading of a sorted list.
func logTailsOf(l law, sorted []float64) (lower, upper []float64) {
	lower, upper = make([]float64, len(sorted)), make([]float64, len(sorted))
	if g, ok := l.(gammaLaw); ok && g.shape > directShape {
		g.summed(sorted, lower, upper)
		return lower, upper
	}
	for i, x := range sorted {
		lower[i], upper[i] = l.logTails(x)
	}
	return lower, upper
}

// summed fills in the log tails by integrating the density between neighbours, up
// from the lowest reading to the median for the lower tail and down from the highest
// for the upper one.
func (l gammaLaw) summed(sorted, lower, upper []float64) {
	n := len(sorted)
	spread := math.Sqrt(l.shape)
	between := func(a, b float64) float64 {
		if a == b {
			return 0
		}
		// Three points a piece of a quarter of the spread: exact to 1e-9 of the piece.
		pieces := int(math.Min(64, math.Ceil(4*(b-a)/spread)))
		half := (b - a) / float64(2*pieces)
		total := 0.0
		for k := range pieces {
			mid := a + half*float64(2*k+1)
			for _, g := range [...]struct{ x, w float64 }{{-0.7745966692414834, 5.0 / 9}, {0, 8.0 / 9}, {0.7745966692414834, 5.0 / 9}} {
				total += g.w * half * math.Exp(l.logDensity(mid+half*g.x))
			}
		}
		return total
	}
	at := func(i int) float64 { return sorted[i] / l.scale }
	p, q := l.tails(sorted[0])
	lower[0], upper[0] = l.logOf(p, q, at(0))
	i := 1
	for ; i < n && p < 0.5; i++ {
		if at(i) < l.shape-30*spread {
			// Far below everything: sums of such terms would start from nothing.
			p, _ = l.tails(sorted[i])
		} else {
			p += between(at(i-1), at(i))
		}
		lower[i], upper[i] = l.logOf(p, 1-p, at(i))
	}
	split := i
	p, q = l.tails(sorted[n-1])
	lower[n-1], upper[n-1] = l.logOf(p, q, at(n-1))
	for i = n - 2; i >= split; i-- {
		if at(i) > l.shape+30*spread {
			_, q = l.tails(sorted[i])
		} else {
			q += between(at(i), at(i+1))
		}
		lower[i], upper[i] = l.logOf(1-q, q, at(i))
	}
}

// andersonDarling is A² of sorted readings against a law.
func andersonDarling(sorted []float64, l law) float64 {
	lower, upper := logTailsOf(l, sorted)
	n := len(sorted)
	total := 0.0
	for i := range n {
		total += float64(2*i+1)*lower[i] + float64(2*(n-i)-1)*upper[i]
	}
	size := float64(n)
	return -size - total/size
}
