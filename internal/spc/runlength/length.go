package runlength

import (
	"math"
	"slices"
	"sort"
)

// RunLength is the distribution of the number of points up to and including the
// first signal.
type RunLength struct {
	// Mean is the average run length (ARL).
	Mean float64
	// StandardError of Mean; 0 where it is computed.
	StandardError float64
	// Method tells how it was found.
	Method Method

	// curve gives survival, with survival[n] = P(run length > n) for n from 0,
	// and the hazard with which every further point signals; nil for a sample.
	curve func() (survival []float64, hazard float64)
	// sample holds the simulated run lengths, ascending, instead of survival.
	sample []int
}

// Survival is the probability that the run length exceeds n points.
func (r RunLength) Survival(n int) float64 {
	switch {
	case n < 0:
		return 1
	case len(r.sample) > 0:
		at := sort.SearchInts(r.sample, n+1)
		return float64(len(r.sample)-at) / float64(len(r.sample))
	case r.curve == nil:
		return 0
	}
	survival, hazard := r.curve()
	last := len(survival) - 1
	if n <= last {
		return survival[n]
	}
	return survival[last] * math.Exp(float64(n-last)*math.Log1p(-hazard))
}

// known wraps a curve that is there already.
func known(survival []float64, hazard float64) func() ([]float64, float64) {
	return func() ([]float64, float64) { return survival, hazard }
}

// Quantile is the least number of points by which the chart has signalled with
// probability p, 0 < p < 1. It is an error when p lies outside, or when the
// number is beyond counting.
func (r RunLength) Quantile(p float64) (float64, error) {
	if !(p > 0 && p < 1) {
		return 0, invalid("a probability must lie between 0 and 1, got %v", p)
	}
	if m := len(r.sample); m > 0 {
		return float64(r.sample[min(m-1, int(math.Ceil(p*float64(m)))-1)]), nil
	}
	if r.curve == nil {
		return 0, invalid("this run length has no distribution")
	}
	survival, hazard := r.curve()
	last := len(survival) - 1
	// An exact half must not be missed by the last bit.
	left := (1 - p) * (1 + 1e-12)
	if survival[last] <= left {
		return float64(sort.Search(last, func(n int) bool { return survival[n] <= left })), nil
	}
	n := float64(last) + math.Ceil(math.Log((1-p)/survival[last])/math.Log1p(-hazard)-1e-9)
	if math.IsNaN(n) || math.IsInf(n, 0) {
		return 0, errNever
	}
	// A hazard of 1 signals at the next point.
	return math.Max(n, float64(last+1)), nil
}

// Median is the number of points by which the chart has signalled in half of all
// cases.
func (r RunLength) Median() (float64, error) { return r.Quantile(0.5) }

// Earlier is the run length of two charts watched together that are independent:
// the first signal of either. It needs computed run lengths; simulated ones are
// an error, as charts that have to be simulated are simulated together.
func Earlier(a, b RunLength) (RunLength, error) {
	if a.curve == nil || b.curve == nil {
		return RunLength{}, invalid("only computed run lengths can be put together")
	}
	aSurvival, aHazard := a.curve()
	bSurvival, bHazard := b.curve()
	survival := make([]float64, max(len(aSurvival), len(bSurvival)))
	for n := range survival {
		survival[n] = a.Survival(n) * b.Survival(n)
	}
	method := a.Method
	if b.Method != MarkovChain {
		method = b.Method
	}
	return fromCurve(method, survival, aHazard+bHazard-aHazard*bHazard)
}

// fromCurve makes a run length whose mean is the sum of its survival function.
func fromCurve(method Method, survival []float64, hazard float64) (RunLength, error) {
	last := len(survival) - 1
	var mean float64
	for _, s := range survival[:last] {
		mean += s
	}
	if s := survival[last]; s > 0 {
		mean += s / hazard
	}
	if math.IsNaN(mean) || math.IsInf(mean, 0) {
		return RunLength{}, errNever
	}
	return RunLength{Mean: mean, Method: method, curve: known(survival, hazard)}, nil
}

// calibrated sets the hazard of the tail so that survival sums to the mean, which
// is the better known of the two, where the tail is a good part of it.
func calibrated(mean float64, survival []float64, hazard float64) ([]float64, float64) {
	last := len(survival) - 1
	left := mean
	for _, s := range survival[:last] {
		left -= s
	}
	if s := survival[last]; s > 0.1*hazard*mean && left > s/hazard/2 {
		hazard = s / left
	}
	return survival, hazard
}

// errNever says that a run length is beyond float64.
var errNever = invalid("the chart practically never signals under these rules")

// fromSample makes a run length of simulated ones.
func fromSample(lengths []int) RunLength {
	slices.Sort(lengths)
	n := float64(len(lengths))
	var mean, ss float64
	for i, v := range lengths {
		d := float64(v) - mean
		mean += d / float64(i+1)
		ss += d * (float64(v) - mean)
	}
	return RunLength{Mean: mean, StandardError: math.Sqrt(ss / (n - 1) / n), Method: Simulated, sample: lengths}
}
