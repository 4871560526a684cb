package runlength

import (
	"math"
	"math/rand/v2"
	"slices"

	"holdfast/internal/spc/factor"
)

const (
	drawChunk  = 64 // estimates of sigma that share one stream of random numbers
	firstDraws = 32 // chunks before the first look at the precision
	mostDraws  = 400_000
	groups     = 200 // groups of like estimates when percentiles are sought
)

// simulatedSpread draws estimates of sigma until all figures are known to 1 %.
func simulatedSpread(m, n int, e Estimator, opt Options) (Spread, error) {
	draw, err := sigmaDraw(m, n, e)
	if err != nil {
		return Spread{}, err
	}
	var estimates []float64
	done := 0
	most := max(1, min(mostDraws, opt.points()/(m*n))/drawChunk)
	for wave := min(firstDraws, most); ; {
		if opt.stopped() && done > 0 {
			break
		}
		drawn := make([]float64, wave*drawChunk)
		parallel(wave, func() func(int) {
			return func(i int) {
				rng := rand.New(rand.NewPCG(opt.Seed, uint64(done+i)))
				for k := range drawChunk {
					drawn[i*drawChunk+k] = draw(rng)
				}
			}
		})
		estimates = append(estimates, drawn...)
		done += wave
		out, err := spreadOf(m, estimates, finiteVariance(m, n, e))
		if err != nil {
			return Spread{}, err
		}
		excess := out.excess()
		if excess <= 1 || done >= most {
			return out, nil
		}
		wave = min(1+int(float64(done)*(1.1*excess*excess-1)), most-done)
	}
	return spreadOf(m, estimates, finiteVariance(m, n, e))
}

// excess is by how much the worst relative standard error exceeds what is wanted.
func (s Spread) excess() float64 {
	figures := []Figure{s.P10, s.P50, s.P90, s.FalseAlarm}
	if s.HasMean {
		figures = append(figures, s.Mean)
	}
	worst := 0.0
	for _, f := range figures {
		worst = math.Max(worst, f.SE/(wantedError*f.Value))
	}
	return math.Min(worst, 100)
}

// sigmaDraw makes a function that estimates sigma from a fresh basis of standard
// normal readings.
func sigmaDraw(m, n int, e Estimator) (func(*rand.Rand) float64, error) {
	unit, err := factor.D2(max(n, 2))
	if e == MeanSD {
		unit, err = factor.C4(n)
	}
	if err != nil {
		return nil, invalid("%w", err)
	}
	switch e {
	case MeanMovingRange:
		return func(rng *rand.Rand) float64 {
			var sum float64
			before := rng.NormFloat64()
			for range m - 1 {
				x := rng.NormFloat64()
				sum += math.Abs(x - before)
				before = x
			}
			return sum / float64(m-1) / unit
		}, nil
	case MeanSD:
		return func(rng *rand.Rand) float64 {
			var sum float64
			for range m {
				var mean, ss float64
				for i := range n {
					x := rng.NormFloat64()
					d := x - mean
					mean += d / float64(i+1)
					ss += d * (x - mean)
				}
				sum += math.Sqrt(ss / float64(n-1))
			}
			return sum / float64(m) / unit
		}, nil
	}
	return func(rng *rand.Rand) float64 {
		var sum float64
		for range m {
			least := rng.NormFloat64()
			most := least
			for range n - 1 {
				x := rng.NormFloat64()
				least, most = min(least, x), max(most, x)
			}
			sum += most - least
		}
		return sum / float64(m) / unit
	}, nil
}

// finiteVariance tells whether the conditional ARL has a finite variance over the
// bases, without which its mean cannot be simulated. The ARL grows like
// exp(9w²/2); an estimate w needs readings whose squares sum to at least
// m·d2²w²/2 (ranges: one reading up, one down) or m(n-1)c4²w², so the probability
// of w falls like exp of minus half of that.
func finiteVariance(m, n int, e Estimator) bool {
	const need = 2 * limitSigmas * limitSigmas
	switch e {
	case MeanRange:
		d2, err := factor.D2(n)
		return err == nil && float64(m)*d2*d2/2 > need
	case MeanSD:
		c4, err := factor.C4(n)
		return err == nil && float64(m*(n-1))*c4*c4 > need
	}
	return false
}

// spreadOf puts the figures together from simulated estimates of sigma; the
// estimated centre is integrated for each.
func spreadOf(m int, estimates []float64, hasMean bool) (Spread, error) {
	out := Spread{Method: Simulated, HasMean: hasMean}
	out.FalseAlarm = average(estimates, func(w float64) float64 { return meanFalseAlarm(m, w) })
	if hasMean {
		out.Mean = average(estimates, func(w float64) float64 { return meanARL(m, w) })
	}
	// Percentiles are sought by iteration: like estimates are put together, each
	// group standing for as many bases.
	slices.Sort(estimates)
	like := make([]float64, 0, groups)
	for g := range groups {
		part := estimates[g*len(estimates)/groups : (g+1)*len(estimates)/groups]
		var sum float64
		for _, w := range part {
			sum += w
		}
		like = append(like, sum/float64(len(part)))
	}
	for _, target := range []struct {
		q float64
		f *Figure
	}{{0.1, &out.P10}, {0.5, &out.P50}, {0.9, &out.P90}} {
		share := func(arl float64) Figure {
			return average(like, func(w float64) float64 { return shareBelow(m, w, arl) })
		}
		arl, err := percentile(target.q, func(arl float64) float64 { return share(arl).Value })
		if err != nil {
			return Spread{}, err
		}
		// The error of the share over the slope of the share.
		const step = 0.02
		slope := (share(arl*(1+step)).Value - share(arl*(1-step)).Value) / (2 * step * arl)
		se := share(arl).SE * math.Sqrt(groups/float64(len(estimates)))
		*target.f = Figure{arl, se / slope}
	}
	return out, nil
}

// average is the mean of f over x with its standard error.
func average(x []float64, f func(float64) float64) Figure {
	var mean, ss float64
	for i, v := range x {
		y := f(v)
		d := y - mean
		mean += d / float64(i+1)
		ss += d * (y - mean)
	}
	n := float64(len(x))
	return Figure{mean, math.Sqrt(ss / (n - 1) / n)}
}
