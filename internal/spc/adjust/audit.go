package adjust

import (
	"fmt"
	"math"
	"sort"
)

// Adjustment is one change of the machine's setting.
type Adjustment struct {
	// Before is the index (from 0) of the first subgroup made with it; the
	// number of subgroups when none has been made since.
	Before int
	// Size is what it adds to the characteristic, in its unit.
	Size float64
	// Prompted says that a signal asked for it.
	Prompted bool
}

// Audit is what the adjustments of a stretch did.
type Audit struct {
	// Gains holds for each adjustment, in the order given, by how much the mean
	// square deviation from target of the subgroups it governs is smaller than
	// it would have been: positive helped, negative cost. An adjustment that
	// governs no subgroup gains 0.
	Gains []float64
	// Governed holds how many subgroups each adjustment governs: those up to
	// the next adjustment or zero point.
	Governed []int
	// Prompted and Unprompted are the sums of gain times subgroups governed.
	Prompted, Unprompted float64
	// PromptedWithin and UnpromptedWithin bound the sums with 95 % confidence.
	PromptedWithin, UnpromptedWithin Interval
	// Carried holds for each subgroup the sum of unprompted adjustments in
	// force: without them the process would have been at y - Carried.
	Carried []float64
	// Ratio is the mean square deviation from target over what it would have
	// been without the unprompted adjustments: 2 for full compensation of the
	// last deviation on a stable process, below 1 if they helped.
	Ratio float64
	// Low and High bound the ratio with 95 % confidence (block bootstrap). High is
	// +Inf where the stretch is too short to bound it.
	Low, High float64
	// Lag1 is the lag-1 correlation of the adjusted series; near -0.5 it is the
	// fingerprint of full compensation.
	Lag1 float64
}

// Interval is a 95 % interval, if the stretch allows one: it does not where fewer than
// fewestGoverned subgroups are governed, or what they gained does not vary.
type Interval struct {
	Low, High float64
	Known     bool
}

// Review audits the adjustments of a stretch.
//
// y holds the subgroup means (or single readings) in time order and target
// their aim, in the characteristic's unit. zero lists the indices before which
// the setting was made afresh (set-up, tool change, restart mark): nothing is
// carried across them. An adjustment before the same subgroup as a zero point
// comes after it.
//
// With U the carried sum and a_j the size, adjustment j gains
//
//	unprompted: mean (y-U-target)² - mean (y-target)²
//	prompted:   mean (y-a_j-target)² - mean (y-target)²
//
// over the subgroups it governs. A prompted adjustment answers a change that a
// signal showed, so the unprompted ones before it are settled with it: U starts
// again at 0. A mistaken adjustment repaired by an opposite one shows as the
// loss in between.
//
// It fails for fewer than 2 or more than MaxSubgroups subgroups, values that are
// not finite, indices outside the series, and zero spread.
//
// Source: the experiments of Deming, Out of the Crisis (1986), and the feedback
// arithmetic of Box and Luceño, Statistical Control by Monitoring and Feedback
// Adjustment (1997), give the values it must reproduce; the accounting by
// carried sums is our own.
func Review(y []float64, target float64, adjustments []Adjustment, zero []int, seed uint64) (Audit, error) {
	if err := checkSeries(y, target, adjustments, zero); err != nil {
		return Audit{}, err
	}
	order := make([]int, len(adjustments))
	for i := range order {
		order[i] = i
	}
	sort.SliceStable(order, func(i, j int) bool {
		return adjustments[order[i]].Before < adjustments[order[j]].Before
	})
	isZero := make(map[int]bool, len(zero))
	for _, i := range zero {
		isZero[i] = true
	}

	a := Audit{
		Gains:    make([]float64, len(adjustments)),
		Governed: make([]int, len(adjustments)),
		Carried:  make([]float64, len(y)),
	}
	actual, without := make([]float64, len(y)), make([]float64, len(y))
	var prompted, unprompted []float64 // what each governed subgroup gained
	governor, next := -1, 0
	var carried float64
	for i, v := range y {
		if isZero[i] {
			carried, governor = 0, -1
		}
		for next < len(order) && adjustments[order[next]].Before == i {
			governor = order[next]
			if adjustments[governor].Prompted {
				carried = 0
			} else {
				carried += adjustments[governor].Size
			}
			next++
		}
		d := v - target
		a.Carried[i] = carried
		actual[i] = d * d
		without[i] = (d - carried) * (d - carried)
		if governor < 0 {
			continue
		}
		a.Governed[governor]++
		if adjustments[governor].Prompted {
			undone := d - adjustments[governor].Size
			a.Gains[governor] += undone*undone - actual[i]
			prompted = append(prompted, undone*undone-actual[i])
		} else {
			a.Gains[governor] += without[i] - actual[i]
			unprompted = append(unprompted, without[i]-actual[i])
		}
	}
	for j, n := range a.Governed {
		if adjustments[j].Prompted {
			a.Prompted += a.Gains[j]
		} else {
			a.Unprompted += a.Gains[j]
		}
		if n > 0 {
			a.Gains[j] /= float64(n)
		}
	}
	a.PromptedWithin, a.UnpromptedWithin = sumInterval(prompted, seed), sumInterval(unprompted, seed)
	var ok bool
	if a.Lag1, ok = lag1(y); !ok {
		return Audit{}, fmt.Errorf("%w: y does not vary", ErrInput)
	}
	if a.Ratio, a.Low, a.High, ok = ratioInterval(actual, without, seed); !ok {
		return Audit{}, fmt.Errorf("%w: without the adjustments every value would lie on target; no ratio exists", ErrInput)
	}
	return a.checked()
}

func (a Audit) checked() (Audit, error) {
	for _, v := range append([]float64{a.Prompted, a.Unprompted, a.Ratio, a.Low, a.Lag1}, a.Gains...) {
		if !finite(v) {
			return Audit{}, fmt.Errorf("%w: the values are too large to compute with", ErrInput)
		}
	}
	return a, nil
}

func checkSeries(y []float64, target float64, adjustments []Adjustment, zero []int) error {
	if len(y) < 2 {
		return fmt.Errorf("%w: y needs at least 2 subgroups, got %d", ErrInput, len(y))
	}
	if len(y) > MaxSubgroups || len(adjustments) > MaxSubgroups || len(zero) > MaxSubgroups {
		return fmt.Errorf("%w: at most %d subgroups, adjustments and zero points are taken", ErrInput, MaxSubgroups)
	}
	if !finite(target) {
		return fmt.Errorf("%w: target is not a number", ErrInput)
	}
	for i, v := range y {
		if !finite(v) {
			return fmt.Errorf("%w: value %d of y is not a number", ErrInput, i)
		}
	}
	for j, a := range adjustments {
		if !finite(a.Size) {
			return fmt.Errorf("%w: the size of adjustment %d is not a number", ErrInput, j)
		}
		if a.Before < 0 || a.Before > len(y) {
			return fmt.Errorf("%w: adjustment %d lies before index %d, but y has %d subgroups", ErrInput, j, a.Before, len(y))
		}
	}
	for j, i := range zero {
		if i < 0 || i > len(y) {
			return fmt.Errorf("%w: zero point %d lies at index %d, but y has %d subgroups", ErrInput, j, i, len(y))
		}
	}
	return nil
}

// lag1 is Σ (y_i-m)(y_{i+1}-m) / Σ (y_i-m)², m the mean of all; false when y
// does not vary.
func lag1(y []float64) (float64, bool) {
	var scale float64
	for _, v := range y {
		scale = math.Max(scale, math.Abs(v))
	}
	if scale == 0 {
		return 0, false
	}
	var mean float64
	for i, v := range y {
		mean += (v/scale - mean) / float64(i+1)
	}
	var cross, square, before float64
	varies := false
	for i, v := range y {
		d := v/scale - mean
		square += float64(d * d)
		if i > 0 {
			cross += float64(before * d)
			varies = varies || v != y[0]
		}
		before = d
	}
	if !varies || square == 0 {
		return 0, false
	}
	return cross / square, true
}
