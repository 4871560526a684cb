package capability

import (
	"math"

	"holdfast/internal/spc/special"
)

var ln2Pi = math.Log(2 * math.Pi)

func (d *prepared) n() float64 { return float64(len(d.sorted)) }

func (d *prepared) fitNormal() fitted {
	return fitted{
		law:           normalLaw{d.mean, d.sd},
		parameters:    []Parameter{{"mean", d.mean}, {"sd", d.sd}},
		logLikelihood: -d.n() * (ln2Pi/2 + math.Log(d.sd) + 0.5),
	}
}

func (d *prepared) fitLognormal() fitted {
	if err := d.needs(Lognormal, false); err != nil {
		return fitted{err: err}
	}
	return fitted{
		law:           lognormalLaw{normalLaw{d.logMean, d.logSD}},
		parameters:    []Parameter{{"log_mean", d.logMean}, {"log_sd", d.logSD}},
		logLikelihood: -d.n()*(ln2Pi/2+math.Log(d.logSD)+0.5) - d.logSum,
	}
}

// fitWeibull solves Σ x^k ln x / Σ x^k - 1/k = mean ln x, whose left side rises with
// k, by Newton steps kept inside a bracket.
func (d *prepared) fitWeibull() fitted {
	if err := d.needs(Weibull, false); err != nil {
		return fitted{err: err}
	}
	top := d.logs[len(d.logs)-1]
	// sums returns ln Σ (x/max)^k, and the excess of the equation with its slope.
	sums := func(k float64) (logSum, excess, slope float64) {
		var w, wl, wll float64
		for _, l := range d.logs {
			e := math.Exp(k * (l - top))
			v := l - d.logMean
			w += e
			wl += e * v
			wll += e * v * v
		}
		m := wl / w
		return math.Log(w), m - 1/k, wll/w - m*m + 1/(k*k)
	}
	// Logarithms of Weibull readings have the s.d. π/(√6 k).
	k := math.Pi / math.Sqrt(6) / d.logSD
	low, high := 0.0, math.Inf(1)
	for range 200 {
		_, excess, slope := sums(k)
		if excess > 0 {
			high = k
		} else {
			low = k
		}
		next := k - excess/slope
		if !(next > low && next < high) {
			next = (low + high) / 2
			if math.IsInf(high, 1) {
				next = 2 * k
			}
		}
		step := math.Abs(next - k)
		k = next
		if step <= 1e-14*k {
			break
		}
	}
	logSum, _, _ := sums(k)
	n := d.n()
	logScale := top + (logSum-math.Log(n))/k
	return fitted{
		law:           weibullLaw{k, math.Exp(logScale)},
		parameters:    []Parameter{{"shape", k}, {"scale", math.Exp(logScale)}},
		logLikelihood: n*(math.Log(k)-1+k*(d.logMean-logScale)) - d.logSum,
	}
}

// fitGamma solves ln k - ψ(k) = ln(mean) - mean(ln x); the right side is taken as
// the mean of d - ln(1+d), d the relative deviation, which does not cancel.
func (d *prepared) fitGamma() fitted {
	if err := d.needs(Gamma, false); err != nil {
		return fitted{err: err}
	}
	s := 0.0
	for _, x := range d.sorted {
		v := (x - d.mean) / d.mean
		s += v - math.Log1p(v)
	}
	n := d.n()
	s /= n
	if !(s > 1e-16) || math.IsInf(s, 1) {
		return fitted{err: invalid("the gamma distribution cannot be told from a constant: the readings differ by too little")}
	}
	// Closed start, within a few percent (Minka 2002).
	start := math.Log((3 - s + math.Sqrt((s-3)*(s-3)+24*s)) / (12 * s))
	f := func(y float64) float64 { return math.Log(s / logMinusDigamma(math.Exp(y))) }
	y, ok := special.Root(f, start-0.5, start+0.5)
	if !ok {
		return fitted{err: invalid("the gamma distribution cannot be fitted to these readings")}
	}
	shape := math.Exp(y)
	return fitted{
		law:        gammaLaw{shape, d.mean / shape},
		parameters: []Parameter{{"shape", shape}, {"scale", d.mean / shape}},
		// k ln k - k - ln Γ(k) by Stirling's formula, so that large k do not cancel.
		logLikelihood: -d.logSum - n*shape*s + n*(math.Log(shape)/2-ln2Pi/2-special.StirlingError(shape)),
	}
}

// logMinusDigamma is ln k - ψ(k), by the asymptotic series 6.3.18 of Abramowitz and
// Stegun after the recurrence has lifted k to 12.
func logMinusDigamma(k float64) float64 {
	shift := 0.0
	from := k
	for k < 12 {
		shift += 1 / k
		k++
	}
	u := 1 / (k * k)
	series := 1/(2*k) + u*(1.0/12-u*(1.0/120-u*(1.0/252-u*(1.0/240-u*(1.0/132-u*(691.0/32760-u/12))))))
	if from == k {
		return series
	}
	return series + shift + math.Log(from/k)
}

func (d *prepared) fitRayleigh() fitted {
	if err := d.needs(Rayleigh, false); err != nil {
		return fitted{err: err}
	}
	scale := d.scale * math.Sqrt(d.meanSquare()/2)
	return fitted{
		law:           weibullLaw{2, math.Sqrt2 * scale},
		parameters:    []Parameter{{"scale", scale}},
		logLikelihood: d.logSum - d.n()*(2*math.Log(scale)+1),
	}
}

// meanSquare is the mean of (x/scale)².
func (d *prepared) meanSquare() float64 {
	total := 0.0
	for _, x := range d.sorted {
		u := x / d.scale
		total += u * u
	}
	return total / d.n()
}

// fitFolded finds the maximum of the likelihood on the curve sd² + mean² = mean
// square, which holds all its stationary points. On it the stationary ones solve
//
//	δ = mean of 2x/(1 + exp(2 (m-δ) x / sd²)),  the normal mean being m - δ,
//
// m the mean reading; δ = m, the half normal, always does.
func (d *prepared) fitFolded() fitted {
	if err := d.needs(FoldedNormal, true); err != nil {
		return fitted{err: err}
	}
	n := d.n()
	u := make([]float64, len(d.sorted))
	for i, x := range d.sorted {
		u[i] = x / d.scale
	}
	m, v := d.mean/d.scale, d.sd/d.scale
	v *= v
	variance := func(delta float64) float64 { return v + delta*(2*m-delta) }
	f := func(delta float64) float64 {
		rate := 2 * (m - delta) / variance(delta)
		total := 0.0
		for _, x := range u {
			total += 2 * x / (1 + math.Exp(rate*x))
		}
		return total/n - delta
	}
	likelihood := func(delta float64) float64 {
		mean, s2 := m-delta, variance(delta)
		total := 0.0
		for _, x := range u {
			total += math.Log1p(math.Exp(-2*mean*x/s2)) - (x-mean)*(x-mean)/(2*s2)
		}
		return total - n*(ln2Pi+math.Log(s2))/2
	}
	best, highest := m, likelihood(m)
	consider := func(delta float64) {
		if l := likelihood(delta); l > highest {
			best, highest = delta, l
		}
	}
	low := f(0)
	if low < 1e-17*m {
		// Folding touches no reading: the law is the normal one.
		consider(0)
	}
	before := 0.0
	for _, share := range []float64{0.02, 0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.7, 0.8, 0.9, 0.95, 0.98, 0.99, 0.997, 0.999} {
		delta := share * m
		value := f(delta)
		if low > 0 && value <= 0 {
			if root, ok := special.Root(f, before, delta); ok {
				consider(root)
			}
		}
		before, low = delta, value
	}
	mean, sd := (m-best)*d.scale, math.Sqrt(variance(best))*d.scale
	return fitted{
		law:           foldedLaw{mean, sd},
		parameters:    []Parameter{{"mean", mean}, {"sd", sd}},
		logLikelihood: highest - n*math.Log(d.scale),
	}
}
