package changepoint

import (
	"fmt"
	"math"
)

// Poisson estimates when the rate of events moved from the known center (events
// per unit).
//
//	C_t = 2 (D ln(D/(center·S)) - (D - center·S))
//
// with D the counts and S the sizes summed over the subgroups after t. counts
// are whole numbers from 0, sizes the units inspected (nil: one each), above
// zero, not necessarily whole. Level is D/S, Size its difference from center,
// SizeSE √(Level/S), all per unit.
//
// It fails when a value is out of its domain, the lengths differ, or there are
// none or more than MaxSubgroups.
//
// Source: Poisson likelihood ratio against a known rate, with the maximisation
// of Samuel, Pignatiello and Calvin (1998), Quality Engineering 10.
func Poisson(counts, sizes []float64, center float64) (Estimate, error) {
	if !finite(center) || center <= 0 {
		return Estimate{}, fmt.Errorf("%w: center must be above zero", ErrInput)
	}
	if err := checkCounts(counts, sizes); err != nil {
		return Estimate{}, err
	}
	return countChange(counts, sizes, center,
		func(d, s float64) float64 { return 2 * poissonDivergence(d, center*s) },
		func(rate, s float64) float64 { return math.Sqrt(rate / s) })
}

// Binomial estimates when the proportion of nonconforming units moved from the
// known center, strictly between 0 and 1.
//
//	C_t = 2 (D ln(p/center) + (S-D) ln((1-p)/(1-center))),  p = D/S
//
// with D the counts and S the sizes summed over the subgroups after t. counts
// and sizes (nil: one each) are whole numbers, no count above its size. Level
// is p, Size its difference from center, SizeSE √(p(1-p)/S).
//
// It fails when a value is out of its domain, the lengths differ, or there are
// none or more than MaxSubgroups.
//
// Source: binomial likelihood ratio against a known proportion, with the
// maximisation of Samuel, Pignatiello and Calvin (1998), Quality Engineering 10.
func Binomial(counts, sizes []float64, center float64) (Estimate, error) {
	if !finite(center) || center <= 0 || center >= 1 {
		return Estimate{}, fmt.Errorf("%w: center must lie between 0 and 1", ErrInput)
	}
	if err := checkCounts(counts, sizes); err != nil {
		return Estimate{}, err
	}
	for i, d := range counts {
		size := 1.0
		if sizes != nil {
			size = sizes[i]
		}
		if size != math.Trunc(size) {
			return Estimate{}, fmt.Errorf("%w: size %d must be a whole number", ErrInput, i)
		}
		if d > size {
			return Estimate{}, fmt.Errorf("%w: count %d is larger than its size", ErrInput, i)
		}
	}
	return countChange(counts, sizes, center,
		func(d, s float64) float64 {
			// The two Poisson divergences add up to the binomial one: their
			// linear terms cancel.
			return 2 * (poissonDivergence(d, center*s) + poissonDivergence(s-d, (1-center)*s))
		},
		func(p, s float64) float64 { return math.Sqrt(p * (1 - p) / s) })
}

// countChange maximises a statistic of the summed counts and sizes.
func countChange(counts, sizes []float64, center float64,
	statistic, se func(sum, size float64) float64) (Estimate, error) {
	profile := make([]float64, len(counts))
	rates := make([]float64, len(counts))
	units := make([]float64, len(counts))
	var d, s float64
	for i := len(counts) - 1; i >= 0; i-- {
		d += counts[i]
		if sizes != nil {
			s += sizes[i]
		} else {
			s++
		}
		profile[i] = statistic(d, s)
		rates[i], units[i] = d/s, s
	}
	e, at, err := maximum(profile)
	if err != nil {
		return Estimate{}, err
	}
	e.Level = rates[at]
	e.Size = e.Level - center
	e.SizeSE = se(e.Level, units[at])
	return e.checked()
}

// poissonDivergence is d ln(d/m) - (d - m) for a count d and its mean m,
// without cancellation when they are close.
func poissonDivergence(d, m float64) float64 {
	if d == 0 {
		return m
	}
	if u := (m - d) / d; math.Abs(u) < 0.5 {
		return d * (u - math.Log1p(u))
	}
	return d*(math.Log(d)-math.Log(m)) - (d - m)
}

func checkCounts(counts, sizes []float64) error {
	if err := checkStretch(len(counts), "counts"); err != nil {
		return err
	}
	if sizes != nil && len(sizes) != len(counts) {
		return fmt.Errorf("%w: %d counts but %d sizes", ErrInput, len(counts), len(sizes))
	}
	for i, d := range counts {
		if !finite(d) || d < 0 || d != math.Trunc(d) {
			return fmt.Errorf("%w: count %d must be a whole number, not negative", ErrInput, i)
		}
		if sizes != nil && (!finite(sizes[i]) || sizes[i] <= 0) {
			return fmt.Errorf("%w: size %d must be above zero", ErrInput, i)
		}
	}
	return nil
}
