package chart

import (
	"math"
	"slices"
)

// scale maps values to a vertical stretch, high values on top.
type scale struct {
	lo, hi      float64 // values at bottom and top
	top, bottom float64 // px
}

// y returns the px of v; the second result is false if v lies beyond the axis
// and was put at its edge.
func (s scale) y(v float64) (float64, bool) {
	switch {
	case v > s.hi:
		return s.top, false
	case v < s.lo:
		return s.bottom, false
	}
	return s.at(v), true
}

// at is y without the check, for limits and ticks that are clamped quietly.
// Halves keep the difference of two huge values finite.
func (s scale) at(v float64) float64 {
	v = min(max(v, s.lo), s.hi)
	return s.top + (s.hi/2-v/2)/(s.hi/2-s.lo/2)*(s.bottom-s.top)
}

// widen makes sure that lo < hi by a margin that arithmetic can hold.
func widen(lo, hi float64) (float64, float64) {
	if !finite(lo) || !finite(hi) {
		return 0, 1
	}
	if lo > hi {
		lo, hi = hi, lo
	}
	least := 1e-9 * max(math.Abs(lo), math.Abs(hi), 1e-280)
	if hi/2-lo/2 < least {
		pad := max(math.Abs(lo)*0.01, least)
		if lo == 0 && hi == 0 {
			pad = 1
		}
		lo, hi = lo-pad, hi+pad
	}
	lo, hi = max(lo, -math.MaxFloat64/4), min(hi, math.MaxFloat64/4)
	if lo >= hi {
		return 0, 1
	}
	return lo, hi
}

// How far a panel follows its values. The axis reaches at least the limits plus
// a margin, and follows values beyond them by up to overshoot band heights; a
// wilder one is shown at the edge, or it would press the band into a line.
const (
	margin    = 0.10
	overshoot = 0.60
)

// axisRange chooses the values at the ends of an axis from limits and values.
// floor is the least value possible (0 for a range or a count), or NaN.
func axisRange(limits []Limits, values []float64, floor float64) (lo, hi float64) {
	lo, hi = math.Inf(1), math.Inf(-1)
	for _, l := range limits {
		if !finite(l.Centre) {
			continue
		}
		low, _, up, _ := l.ends(floor)
		lo, hi = min(lo, low), max(hi, up)
	}
	if lo > hi { // no limits yet: the values alone
		lo, hi = middleOf(values)
		lo, hi = widen(lo, hi)
		pad := (hi/2 - lo/2) * 0.3
		if finite(floor) {
			return min(floor, lo), hi + pad
		}
		return lo - pad, hi + pad
	}
	lo, hi = widen(lo, hi)
	size := hi - lo
	low, up := lo-margin*size, hi+margin*size
	for _, v := range values {
		if finite(v) {
			low = min(low, max(v-0.06*size, lo-overshoot*size))
			up = max(up, min(v+0.06*size, hi+overshoot*size))
		}
	}
	low, up = widen(floorAt(low, floor), up)
	return low, up
}

func floorAt(lo, floor float64) float64 {
	if finite(floor) {
		return max(lo, floor)
	}
	return lo
}

// middleOf returns the span of values without those far from the bulk: further
// than three times the middle half's width from it.
func middleOf(values []float64) (lo, hi float64) {
	v := make([]float64, 0, len(values))
	for _, x := range values {
		if finite(x) {
			v = append(v, x)
		}
	}
	if len(v) == 0 {
		return 0, 1
	}
	slices.Sort(v)
	q1, q3 := v[len(v)/4], v[len(v)*3/4]
	fence := 3 * (q3/2 - q1/2) * 2
	if fence == 0 || len(v) < 8 || !finite(fence) {
		return v[0], v[len(v)-1]
	}
	return max(v[0], q1-fence), min(v[len(v)-1], q3+fence)
}

// niceTicks returns round values inside [lo, hi], about want of them, and the
// decimals they need. Steps are 1, 2 or 5 times a power of ten.
func niceTicks(lo, hi float64, want int) (ticks []float64, decimals int) {
	span := hi - lo
	if !finite(span) || span <= 0 || want < 1 {
		return nil, 0
	}
	raw := span / float64(want)
	exp := math.Floor(math.Log10(raw))
	base := math.Pow(10, exp)
	if base == 0 || !finite(base) {
		return nil, 0
	}
	step := 10 * base
	for _, m := range []float64{1, 2, 5} {
		if m*base >= raw*0.75 {
			step = m * base
			break
		}
	}
	decimals = max(0, -int(math.Floor(math.Log10(step)+1e-9)))
	first := math.Ceil(lo/step - 1e-9)
	if math.Abs(first) > 1e14 { // the step is lost in the digits of the value
		return nil, 0
	}
	for k := first; k*step <= hi+step*1e-9 && len(ticks) < 12; k++ {
		ticks = append(ticks, k*step)
	}
	return ticks, decimals
}
