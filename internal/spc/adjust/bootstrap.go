package adjust

import (
	"math"
	"math/rand/v2"
	"slices"
)

// replicates is the number of bootstrap samples: enough that the ends of a 95 %
// interval rest on fifty samples each.
const replicates = 2000

// blockLength grows with the cube root of the series, which keeps the
// dependence between neighbouring subgroups that adjusting creates.
//
// Source: the rate is that of Künsch (1989) and Hall, Horowitz and Jing (1995);
// the constant is our own.
func blockLength(m int) int {
	return min(m, int(math.Ceil(1.5*math.Cbrt(float64(m)))))
}

// ratioInterval gives Σ actual / Σ without and its 95 % interval by a circular
// block bootstrap of the pairs (Politis and Romano 1992), studentised on the
// logarithm: each sample's distance from the estimate is measured in its own
// standard error, which repairs the short tails that plain percentiles have
// with few blocks. It is false when the lower sum is zero.
func ratioInterval(actual, without []float64, seed uint64) (ratio, low, high float64, ok bool) {
	m := len(actual)
	var top float64
	for i := range actual {
		top = math.Max(top, math.Max(actual[i], without[i]))
	}
	if top == 0 || !finite(top) {
		return 0, 0, 0, false
	}
	// Sums over the series laid twice end to end make any circular block the
	// difference of two entries.
	a, b := make([]float64, 2*m+1), make([]float64, 2*m+1)
	for i := range 2 * m {
		a[i+1] = a[i] + actual[i%m]/top
		b[i+1] = b[i] + without[i%m]/top
	}
	if a[m] <= 0 || b[m] <= 0 {
		return 0, 0, 0, false
	}
	ratio = a[m] / b[m]
	if slices.Equal(actual, without) {
		return 1, 1, 1, true
	}

	length := blockLength(m)
	blocks := (m + length - 1) / length
	// The standard error of the full series comes from all its circular
	// blocks; that of a sample from the blocks drawn.
	var variance float64
	for s := range m {
		d := (a[s+length]-a[s])/a[m] - (b[s+length]-b[s])/b[m]
		variance += d * d
	}
	se := math.Sqrt(variance / float64(length))
	if se == 0 {
		return ratio, ratio, ratio, true
	}
	rng := rand.New(rand.NewPCG(seed, 0x5eed))
	pivots := make([]float64, 0, replicates)
	da, db := make([]float64, blocks), make([]float64, blocks)
	for range replicates {
		var sa, sb float64
		for k := range blocks {
			s := rng.IntN(m)
			da[k], db[k] = a[s+length]-a[s], b[s+length]-b[s]
			sa += da[k]
			sb += db[k]
		}
		if sa <= 0 || sb <= 0 {
			continue
		}
		var v float64
		for k := range blocks {
			d := da[k]/sa - db[k]/sb
			v += d * d
		}
		if v <= 0 {
			continue
		}
		pivots = append(pivots, (math.Log(sa/sb)-math.Log(ratio))/math.Sqrt(v))
	}
	if len(pivots) < replicates/2 {
		return 0, 0, 0, false
	}
	slices.Sort(pivots)
	at := func(p float64) float64 { return pivots[int(p*float64(len(pivots)-1)+0.5)] }
	return ratio, ratio * math.Exp(-se*at(0.975)), ratio * math.Exp(-se*at(0.025)), true
}

// fewestGoverned is how few subgroups still give an interval for a sum: with fewer, the
// blocks say next to nothing of how much it may vary.
const fewestGoverned = 8

// sumInterval bounds the sum of x by the same bootstrap as ratioInterval, studentised on
// the sum itself.
func sumInterval(x []float64, seed uint64) Interval {
	m := len(x)
	if m < fewestGoverned {
		return Interval{}
	}
	var top float64
	for _, v := range x {
		top = math.Max(top, math.Abs(v))
	}
	if top == 0 || !finite(top) {
		return Interval{}
	}
	sums := make([]float64, 2*m+1)
	for i := range 2 * m {
		sums[i+1] = sums[i] + x[i%m]/top
	}
	total := sums[m]
	length := blockLength(m)
	blocks := (m + length - 1) / length
	mean := total / float64(m)
	var variance float64
	for s := range m {
		d := sums[s+length] - sums[s] - float64(length)*mean
		variance += d * d
	}
	se := math.Sqrt(variance / float64(length))
	if se == 0 {
		return Interval{}
	}
	rng := rand.New(rand.NewPCG(seed, 0x5eed))
	pivots := make([]float64, 0, replicates)
	drawn := make([]float64, blocks)
	for range replicates {
		var sum float64
		for k := range blocks {
			s := rng.IntN(m)
			drawn[k] = sums[s+length] - sums[s]
			sum += drawn[k]
		}
		var v float64
		for _, b := range drawn {
			d := b - sum/float64(blocks)
			v += d * d
		}
		if v <= 0 {
			continue
		}
		pivots = append(pivots, (sum-float64(blocks*length)*mean)/math.Sqrt(v))
	}
	if len(pivots) < replicates/2 {
		return Interval{}
	}
	slices.Sort(pivots)
	at := func(p float64) float64 { return pivots[int(p*float64(len(pivots)-1)+0.5)] }
	return Interval{Low: (total - se*at(0.975)) * top, High: (total - se*at(0.025)) * top, Known: true}
}
