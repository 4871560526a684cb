package runlength

import (
	"math"
	"math/rand/v2"
	"slices"

	"holdfast/internal/spc/factor"
	"holdfast/internal/spc/limits"
	"holdfast/internal/spc/watch"
)

// MaxSubgroup is the largest subgroup size of which both charts are judged
// together.
const MaxSubgroup = 100

// Standard gives the run length of everything a standard watches at once, for
// subgroups of n readings (1 on a chart of individuals): both charts of the pair
// with their rules, and the EWMA or CUSUM if there is one. The first signal of
// any of them counts.
//
// Means with ranges or with standard deviations, zone rules only, are computed:
// mean and spread of normal readings are independent, so the probabilities that
// neither has signalled multiply. Everything else is simulated through the very
// fold that judges live data, with opt; individuals with moving ranges are not
// independent.
//
// It fails for a standard that cannot judge, n out of range, nothing that could
// signal, and rules that practically never fire.
//
// Source: Champ and Woodall (1987) for each chart; the independence of mean and
// spread is a classical property of normal samples (Geary 1936).
func Standard(s watch.Standard, n int, change Change, opt Options) (RunLength, error) {
	if err := change.check(); err != nil {
		return RunLength{}, err
	}
	if n < 1 || n > MaxSubgroup {
		return RunLength{}, invalid("a subgroup has 1 to %d readings, got %d", MaxSubgroup, n)
	}
	if s.Chart == limits.Individuals != (n == 1) {
		return RunLength{}, invalid("a chart of %q does not take subgroups of %d", s.Chart, n)
	}
	if len(s.LocationRules)+len(s.DispersionRules) == 0 && s.EWMA == nil && s.CUSUM == nil {
		return RunLength{}, invalid("there are no rules that could signal")
	}
	// In sigmas: the answer does not depend on centre and unit.
	if err := s.Check(); err != nil {
		return RunLength{}, invalid("%w", err)
	}
	s.Center, s.Sigma = 0, 1
	if exactPair(s) {
		r, ok, err := independentPair(s, n, change)
		if ok || err != nil {
			return r, err
		}
	}
	judge, err := watch.NewJudge(s)
	if err != nil {
		return RunLength{}, invalid("%w", err)
	}
	return simulate(opt, judgeProcess(judge, s.Chart, n, change))
}

// exactPair tells whether both charts can be computed and put together.
func exactPair(s watch.Standard) bool {
	return (s.Chart == limits.XBarR || s.Chart == limits.XBarS) && s.EWMA == nil && s.CUSUM == nil &&
		!comparesNeighbours(s.LocationRules) && !comparesNeighbours(s.DispersionRules)
}

// independentPair is false when a chart has too many states.
func independentPair(s watch.Standard, n int, change Change) (RunLength, bool, error) {
	_, band, err := s.Bands(n)
	if err != nil {
		return RunLength{}, false, invalid("%w", err)
	}
	var charts []RunLength
	add := func(rules []watch.Rule, probabilities func([]cell) ([]float64, error)) (bool, error) {
		if len(rules) == 0 {
			return true, nil
		}
		chain, ok, err := newZoneChain(rules)
		if !ok || err != nil {
			return ok, err
		}
		p, err := probabilities(chain.cells)
		if err != nil {
			return false, err
		}
		r, err := chain.solve(p)
		charts = append(charts, r)
		return true, err
	}
	ok, err := add(s.LocationRules, func(cells []cell) ([]float64, error) {
		return normalCells(cells, change.Shift*math.Sqrt(float64(n)), change.spread()), nil
	})
	if !ok || err != nil {
		return RunLength{}, false, err
	}
	ok, err = add(s.DispersionRules, func(cells []cell) ([]float64, error) {
		return spreadCells(cells, band, s.Chart, n, change.spread())
	})
	if !ok || err != nil {
		return RunLength{}, false, err
	}
	if len(charts) == 1 {
		return charts[0], true, nil
	}
	r, err := Earlier(charts[0], charts[1])
	return r, err == nil, err
}

// spreadCells gives the probabilities of the cells of z for a range or standard
// deviation of n readings whose spread is sigma times ratio, in a band for
// sigma 1.
func spreadCells(cells []cell, band limits.Band, chart limits.Chart, n int, ratio float64) ([]float64, error) {
	below, above := factor.RangeCDF, factor.RangeSurvival
	if chart == limits.XBarS {
		below, above = factor.SDCDF, factor.SDSurvival
	}
	value := func(z float64) float64 {
		if z < 0 {
			return math.Max(0, (band.Center+z*band.Below)/ratio)
		}
		return (band.Center + z*band.Above) / ratio
	}
	p := make([]float64, len(cells))
	for i, c := range cells {
		low, high := 0.0, 0.0
		tail := c.low >= 0 // take the tail that loses no digits
		var err error
		f := below
		if tail {
			f = above
		}
		if !math.IsInf(c.low, -1) {
			if low, err = f(n, value(c.low)); err != nil {
				return nil, invalid("%w", err)
			}
		}
		switch {
		case math.IsInf(c.high, 1) && !tail:
			high = 1
		case math.IsInf(c.high, 1):
		default:
			if high, err = f(n, value(c.high)); err != nil {
				return nil, invalid("%w", err)
			}
		}
		p[i] = math.Abs(high - low)
	}
	return p, nil
}

// judgeProcess simulates subgroups of n readings through the fold.
func judgeProcess(judge *watch.Judge, chart limits.Chart, n int, change Change) func() process {
	return func() process {
		x := make([]float64, n)
		return func(rng *rand.Rand, limit int) (int, bool) {
			var m watch.Memory
			for i := 1; i <= limit; i++ {
				for j := range x {
					x[j] = change.Shift + change.spread()*rng.NormFloat64()
				}
				out := judge.Step(&m, subgroup(x, chart))
				if out.Any() {
					return i, true
				}
			}
			return limit, false
		}
	}
}

// subgroup summarises readings for the fold; x may be sorted on the way.
func subgroup(x []float64, chart limits.Chart) watch.Subgroup {
	s := watch.Subgroup{N: len(x), Mean: x[0]}
	if len(x) == 1 {
		return s
	}
	if chart == limits.MedianR {
		slices.Sort(x)
		half := len(x) / 2
		s.Mean = (x[half] + x[(len(x)-1)/2]) / 2
		s.Range = x[len(x)-1] - x[0]
		return s
	}
	sum, least, most := 0.0, x[0], x[0]
	for _, v := range x {
		sum += v
		least, most = min(least, v), max(most, v)
	}
	s.Mean, s.Range = sum/float64(len(x)), most-least
	if chart == limits.XBarS {
		var ss float64
		for _, v := range x {
			ss += (v - s.Mean) * (v - s.Mean)
		}
		s.SD = math.Sqrt(ss / float64(len(x)-1))
	}
	return s
}
