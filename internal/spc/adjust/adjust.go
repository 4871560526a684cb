// Package adjust answers two questions about setting a machine: should it be
// adjusted now and by how much, and did the adjustments of the past help.
//
// The audit rests on one idea: an adjustment stays in force until it is undone,
// so what an unprompted adjustment does to the process is what it still
// carries, not only what it did to the next subgroup. Taking the carried sum
// off the readings gives the process as it would have been.
//
// The package knows nothing of clocks, charts or matters: the caller says which
// subgroups count and which adjustments a signal prompted. Randomness is used
// by the bootstrap interval only and comes from the seed that is given.
package adjust

import (
	"errors"
	"fmt"
	"math"

	"holdfast/internal/spc/changepoint"
)

// MaxSubgroups is the longest series taken.
const MaxSubgroups = 1_000_000

// ErrInput is wrapped by every error of this package.
var ErrInput = errors.New("adjustment")

// z95 is the 0.975 quantile of the standard normal distribution.
const z95 = 1.959963984540054

// tie is the relative difference within which half a step is half a step.
const tie = 1e-9

// Advice says what to do with an offset from target.
type Advice struct {
	// Adjust is the change to make, in the characteristic's unit and a multiple
	// of the machine's step; 0 means leave the machine alone.
	Adjust float64
	// Offset is the estimated distance from target.
	Offset float64
	// Low and High bound the offset with 95 % confidence. While zero lies
	// between them there is no reason to adjust.
	Low, High float64
}

// Advise judges the offset from target of subgroups that were all taken since
// the change. Live, only subgroups taken after the signal may be given: the
// ones that signalled were selected for being large and overstate the offset.
//
//	d = weighted mean - target, standard error σ/√(Σ w)
//
// If the 95 % interval d ± 1.96 s.e. holds zero, Adjust is 0; otherwise it is
// -d rounded to a multiple of step, halves away from zero (step 0: not
// rounded). means, sizes and sigma are those of [changepoint.Location].
//
// It fails when a value is not finite, sigma is not above zero, step is
// negative, or there are no subgroups: then take another round first.
//
// Source: normal theory for a mean with known variance; common practice.
func Advise(means []float64, sizes []int, target, sigma, step float64) (Advice, error) {
	if !finite(target) {
		return Advice{}, fmt.Errorf("%w: target is not a number", ErrInput)
	}
	if !finite(step) || step < 0 {
		return Advice{}, fmt.Errorf("%w: step must not be negative", ErrInput)
	}
	if !finite(sigma) || sigma <= 0 {
		return Advice{}, fmt.Errorf("%w: sigma must be above zero", ErrInput)
	}
	if len(means) == 0 {
		return Advice{}, fmt.Errorf("%w: means are empty; take another round first", ErrInput)
	}
	if len(means) > MaxSubgroups {
		return Advice{}, fmt.Errorf("%w: %d subgroups, at most %d are taken", ErrInput, len(means), MaxSubgroups)
	}
	if sizes != nil && len(sizes) != len(means) {
		return Advice{}, fmt.Errorf("%w: %d means but %d sizes", ErrInput, len(means), len(sizes))
	}
	var sum, weight float64
	for i, x := range means {
		if !finite(x) {
			return Advice{}, fmt.Errorf("%w: mean %d is not a number", ErrInput, i)
		}
		w := 1.0
		if sizes != nil {
			if sizes[i] < 1 {
				return Advice{}, fmt.Errorf("%w: size %d must be at least 1", ErrInput, i)
			}
			w = float64(sizes[i])
		}
		sum += float64(w * (x - target))
		weight += w
	}
	return decide(sum/weight, sigma/math.Sqrt(weight), step)
}

// AdviseAtSignal judges the offset with the moment of change estimated from
// the same subgroups, the signal being the last one. It overstates the offset,
// since only large means signal; use it for history and study, and [Advise]
// with later subgroups at the machine. center is the known level before the
// change; the other arguments are those of [Advise].
func AdviseAtSignal(means []float64, sizes []int, center, sigma, target, step float64) (Advice, error) {
	e, err := changepoint.Location(means, sizes, center, sigma)
	if err != nil {
		return Advice{}, err
	}
	first := e.After + 1
	if sizes != nil {
		sizes = sizes[first:]
	}
	return Advise(means[first:], sizes, target, sigma, step)
}

// decide turns an offset and its standard error into advice.
func decide(offset, se, step float64) (Advice, error) {
	a := Advice{Offset: offset, Low: offset - z95*se, High: offset + z95*se}
	if a.Low > 0 || a.High < 0 {
		a.Adjust = roundTo(-offset, step)
	}
	for _, v := range []float64{a.Adjust, a.Offset, a.Low, a.High} {
		if !finite(v) {
			return Advice{}, fmt.Errorf("%w: the values are too large to compute with", ErrInput)
		}
	}
	return a, nil
}

// roundTo rounds to a multiple of step, halves away from zero; decimal halves
// are not exact in binary, so what is a half within rounding counts as one.
func roundTo(v, step float64) float64 {
	if step == 0 {
		return v
	}
	steps := math.Floor(math.Abs(v)/step*(1+tie) + 0.5)
	if steps == 0 {
		return 0
	}
	return math.Copysign(steps*step, v)
}

// Harmonic gives the adjustment to make after each try when a machine is set
// up: after the j-th try (from 1)
//
//	-(y_j - target)/(j + ratio)
//
// y holds the readings of the tries so far, each taken after the adjustment
// before it, in the characteristic's unit. ratio is the variance of the process
// over the variance of the setting error when the latter is known, 0
// otherwise. The results are not rounded.
//
// It fails when a value is not finite, ratio is negative, or y is empty or
// longer than MaxSubgroups.
//
// Source: Grubbs (1954), reprinted 1983 in Journal of Quality Technology 15.
func Harmonic(y []float64, target, ratio float64) ([]float64, error) {
	if len(y) == 0 {
		return nil, fmt.Errorf("%w: y is empty; make a first try", ErrInput)
	}
	if len(y) > MaxSubgroups {
		return nil, fmt.Errorf("%w: %d tries, at most %d are taken", ErrInput, len(y), MaxSubgroups)
	}
	if !finite(target) {
		return nil, fmt.Errorf("%w: target is not a number", ErrInput)
	}
	if !finite(ratio) || ratio < 0 {
		return nil, fmt.Errorf("%w: ratio must not be negative", ErrInput)
	}
	out := make([]float64, len(y))
	for i, v := range y {
		if !finite(v) {
			return nil, fmt.Errorf("%w: try %d is not a number", ErrInput, i)
		}
		a := (target - v) / (float64(i+1) + ratio)
		if !finite(a) {
			return nil, fmt.Errorf("%w: the values are too large to compute with", ErrInput)
		}
		out[i] = a
	}
	return out, nil
}

// Compensated gives the series as it would have been had every value been corrected by
// its whole deviation from target before the next was taken: the first as it is, every
// other its distance from the one before.
//
//	x_t = target + (y_t - y_{t-1})
//
// y holds the values of a process that was left alone. For fewer than 2 values there is
// none, and it returns nil.
//
// Source: rule 2 of the funnel, Deming, Out of the Crisis (1986).
func Compensated(y []float64, target float64) []float64 {
	if len(y) < 2 {
		return nil
	}
	out := make([]float64, len(y))
	out[0] = y[0]
	for i := 1; i < len(y); i++ {
		out[i] = target + (y[i] - y[i-1])
	}
	return out
}

func finite(v float64) bool { return !math.IsNaN(v) && !math.IsInf(v, 0) }
