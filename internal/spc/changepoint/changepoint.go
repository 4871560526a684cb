// Package changepoint estimates when a process changed, given that a chart has
// signalled at the last subgroup of the stretch it is shown.
//
// The stretch runs from the last boundary (a set-up, a restart, a new revision)
// to the signal; the level and the spread before the change are known from the
// revision. Every function returns the maximum likelihood estimate of the
// moment of change, all moments that are likely beside it, and the size of the
// change. Time and memory grow linearly with the number of subgroups.
//
// The package knows nothing of clocks, streams or limits: the caller chooses
// the stretch, cuts it if it is long, and turns indices into times.
package changepoint

import (
	"errors"
	"fmt"
	"math"
)

// MaxSubgroups is the longest stretch taken.
const MaxSubgroups = 10_000_000

// LikelyCut is the fall of the statistic below its maximum within which a
// moment of change is still likely. Before the change the statistic behaves
// like a random walk with drift away from its maximum, and so it does after
// it; the larger of the two one-sided maxima stays below c with probability
// (1-exp(-c/2))², which is 0.95 at c = 7.35.
//
// Source: derived from the maximum of a Gaussian random walk with drift
// (exponential in its continuous limit); the usual 3.84 of one fixed parameter
// does not apply.
const LikelyCut = 7.35

// tie is the relative difference below which two values of the statistic are
// equal: rounding alone makes smaller ones.
const tie = 1e-9

// ErrInput is wrapped by every error of this package.
var ErrInput = errors.New("change point")

// Estimate tells where a change lies and how large it is.
type Estimate struct {
	// After is the index (from 0) of the last subgroup before the change; -1
	// when all of the stretch lies after it.
	After int
	// Likely holds every index, in the sense of After, whose statistic is at
	// most LikelyCut below the maximum; ascending, never empty.
	Likely []int
	// Level is the mean, rate, proportion or standard deviation estimated from
	// the subgroups after the change.
	Level float64
	// Size is the change: Level less the known level, in the same unit. For
	// Dispersion it is a ratio instead. It is biased away from zero, because
	// only large values signal.
	Size float64
	// SizeSE is the standard error of Size, given the moment of change.
	SizeSE float64
	// Statistic is the maximised statistic: twice the log likelihood ratio.
	Statistic float64
}

// Location estimates when the mean of a process moved from the known center.
//
//	C_t = (Σ w_i (x_i - center))² / (σ² Σ w_i),  sums over the subgroups after t
//
// means holds the subgroup means in time order, in the characteristic's unit.
// With sizes nil all weights are 1 and sigma is the standard deviation of a
// mean; otherwise sizes holds the number of readings of each subgroup and
// sigma is the standard deviation of a single reading. Of equal maxima the
// earliest is taken.
//
// It fails when a value is not finite, sigma is not above zero, a size is below
// 1, the lengths differ, or there are none or more than MaxSubgroups.
//
// Source: Samuel, Pignatiello and Calvin (1998), Quality Engineering 10,
// extended to unequal sizes by weighting.
func Location(means []float64, sizes []int, center, sigma float64) (Estimate, error) {
	if err := checkStretch(len(means), "means"); err != nil {
		return Estimate{}, err
	}
	if sizes != nil && len(sizes) != len(means) {
		return Estimate{}, fmt.Errorf("%w: %d means but %d sizes", ErrInput, len(means), len(sizes))
	}
	if !finite(center) {
		return Estimate{}, fmt.Errorf("%w: center is not a number", ErrInput)
	}
	if !finite(sigma) || sigma <= 0 {
		return Estimate{}, fmt.Errorf("%w: sigma must be above zero", ErrInput)
	}
	for i, x := range means {
		if !finite(x) {
			return Estimate{}, fmt.Errorf("%w: mean %d is not a number", ErrInput, i)
		}
		if sizes != nil && sizes[i] < 1 {
			return Estimate{}, fmt.Errorf("%w: size %d must be at least 1", ErrInput, i)
		}
	}
	profile := make([]float64, len(means))
	levels := make([]float64, len(means)) // weighted mean deviation after t, in sigmas
	weights := make([]float64, len(means))
	var sum, weight float64
	for i := len(means) - 1; i >= 0; i-- {
		w := 1.0
		if sizes != nil {
			w = float64(sizes[i])
		}
		sum += float64(w * ((means[i] - center) / sigma))
		weight += w
		profile[i] = sum / weight * sum
		levels[i], weights[i] = sum/weight, weight
	}
	e, at, err := maximum(profile)
	if err != nil {
		return Estimate{}, err
	}
	e.Size = levels[at] * sigma
	e.SizeSE = sigma / math.Sqrt(weights[at])
	e.Level = center + e.Size
	return e.checked()
}

// maximum finds the moment of change in a profile whose entry i is the
// statistic with subgroup i the first one changed. It also returns that i.
// A NaN entry marks a moment that cannot be judged.
func maximum(profile []float64) (Estimate, int, error) {
	best, judged := math.Inf(-1), false
	for _, c := range profile {
		if math.IsNaN(c) {
			continue
		}
		judged = true
		best = math.Max(best, c)
	}
	if !judged {
		return Estimate{}, 0, fmt.Errorf("%w: no moment of change can be judged", ErrInput)
	}
	if math.IsInf(best, 0) {
		return Estimate{}, 0, fmt.Errorf("%w: the values are too far from the known level", ErrInput)
	}
	slack := tie * math.Max(1, best)
	at := -1
	var likely []int
	for i, c := range profile {
		if math.IsNaN(c) {
			continue
		}
		if at < 0 && c >= best-slack {
			at = i
		}
		if best-c <= LikelyCut+slack {
			likely = append(likely, i-1)
		}
	}
	return Estimate{After: at - 1, Likely: likely, Statistic: profile[at]}, at, nil
}

func (e Estimate) checked() (Estimate, error) {
	for _, v := range []float64{e.Level, e.Size, e.SizeSE, e.Statistic} {
		if !finite(v) {
			return Estimate{}, fmt.Errorf("%w: the values are too large to compute with", ErrInput)
		}
	}
	return e, nil
}

func checkStretch(m int, name string) error {
	if m == 0 {
		return fmt.Errorf("%w: %s are empty", ErrInput, name)
	}
	if m > MaxSubgroups {
		return fmt.Errorf("%w: %d subgroups, at most %d are taken", ErrInput, m, MaxSubgroups)
	}
	return nil
}

func finite(v float64) bool { return !math.IsNaN(v) && !math.IsInf(v, 0) }
