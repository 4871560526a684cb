package adjust

import (
	"fmt"
	"math"
)

// Stretch is a series of subgroups with what a capability index needs of them.
type Stretch struct {
	Means     []float64 // subgroup means, in time order
	Variances []float64 // subgroup variances, divisor n-1; ignored where n is 1
	Sizes     []int     // readings in each subgroup, at least 1
}

// Ppk gives the overall capability index of the readings as they were, and as
// they would have been with carried (see [Audit]) taken off every reading. The
// spread within subgroups is the same in both, since adjusting does not touch
// it; only the subgroup means move.
//
//	Ppk = min(upper - mean, mean - lower) / 3s
//
// s is the standard deviation of all readings with divisor N-1, put together
// from the spread within and between. An absent side of the specification is
// an infinity: -Inf below, +Inf above.
//
// It fails when lengths differ, a value is not finite, a variance is negative,
// both sides are absent or out of order, there are fewer than 2 readings, or a
// series has no spread.
//
// Source: the usual definition of Ppk (ISO 22514-2 for the normal case); the
// decomposition is the identity of the analysis of variance.
func Ppk(s Stretch, carried []float64, lower, upper float64) (actual, without float64, err error) {
	m := len(s.Means)
	if len(s.Variances) != m || len(s.Sizes) != m || len(carried) != m {
		return 0, 0, fmt.Errorf("%w: means, variances, sizes and carried must have one entry a subgroup", ErrInput)
	}
	if m > MaxSubgroups {
		return 0, 0, fmt.Errorf("%w: %d subgroups, at most %d are taken", ErrInput, m, MaxSubgroups)
	}
	if math.IsNaN(lower) || math.IsNaN(upper) || !(lower < upper) ||
		(math.IsInf(lower, 0) && math.IsInf(upper, 0)) {
		return 0, 0, fmt.Errorf("%w: the specification needs a lower or an upper limit, the lower one below", ErrInput)
	}
	for i, x := range s.Means {
		if !finite(x) || !finite(carried[i]) {
			return 0, 0, fmt.Errorf("%w: mean or carried sum %d is not a number", ErrInput, i)
		}
		if s.Sizes[i] < 1 {
			return 0, 0, fmt.Errorf("%w: size %d must be at least 1", ErrInput, i)
		}
		if s.Sizes[i] > 1 && (!finite(s.Variances[i]) || s.Variances[i] < 0) {
			return 0, 0, fmt.Errorf("%w: variance %d must be a number, not negative", ErrInput, i)
		}
	}
	if actual, err = ppk(s, make([]float64, m), lower, upper); err != nil {
		return 0, 0, err
	}
	without, err = ppk(s, carried, lower, upper)
	return actual, without, err
}

func ppk(s Stretch, carried []float64, lower, upper float64) (float64, error) {
	var n, mean, ss float64
	for i, x := range s.Means {
		w := float64(s.Sizes[i])
		n += w
		d := x - carried[i] - mean
		mean += d * w / n
		ss += d * (x - carried[i] - mean) * w // Welford, weighted
		if s.Sizes[i] > 1 {
			ss += (w - 1) * s.Variances[i]
		}
	}
	if n < 2 {
		return 0, fmt.Errorf("%w: at least 2 readings are needed", ErrInput)
	}
	sd := math.Sqrt(ss / (n - 1))
	if !(sd > 0) {
		return 0, fmt.Errorf("%w: the readings do not vary", ErrInput)
	}
	v := math.Min(upper-mean, mean-lower) / (3 * sd)
	if !finite(v) {
		return 0, fmt.Errorf("%w: the values are too large to compute with", ErrInput)
	}
	return v, nil
}
