package limits

import (
	"math"

	"holdfast/internal/spc/factor"
)

// timePower turns exponential times into nearly normal ones.
//
// Source: Nelson, Journal of Quality Technology 26 (1994), 239-243.
const timePower = 1 / 3.6

// RareStandard is what a revision of a chart of rare events freezes: G (good units
// counted from 0 between events) or T (time between events).
type RareStandard struct {
	Chart Chart
	// Center: the mean number of good units for g; for t the mean of the times
	// raised to 1/3.6, in that scale.
	Center float64
	// Sigma of a time raised to 1/3.6; not used for g, whose spread follows from
	// its mean.
	Sigma    float64
	Multiple float64 // 0: DefaultMultiple
	// Probability puts the limits of a g chart at geometric quantiles with Tail (0:
	// DefaultTail) beyond each; without it a g chart has no lower limit and would
	// never see events come closer together.
	Probability bool
	Tail        float64
}

// EstimateRare computes the standard from the values of a g or a t chart in their
// order; g values must be whole. At least two are needed, for t not all equal.
//
// Source: Benneyan, Health Care Management Science 4 (2001), 305-318, for g; Nelson
// (1994) for t.
func EstimateRare(chart Chart, values []float64) (RareStandard, error) {
	s := RareStandard{Chart: chart}
	if chart != G && chart != T {
		return s, invalid("chart %q is not one of rare events", chart)
	}
	if len(values) < 2 {
		return s, invalid("a chart of rare events needs at least two values, got %d", len(values))
	}
	sum, steps, last := 0.0, 0.0, 0.0
	for i, v := range values {
		if err := s.checkValue(v); err != nil {
			return RareStandard{}, invalid("value %d: %v", i+1, err)
		}
		if chart == T {
			v = math.Pow(v, timePower)
		}
		sum += v
		if i > 0 {
			steps += math.Abs(v - last)
		}
		last = v
	}
	s.Center = sum / float64(len(values))
	if chart == T {
		d2, err := factor.D2(2)
		if err != nil {
			return RareStandard{}, err
		}
		s.Sigma = steps / float64(len(values)-1) / d2
	}
	if err := s.check(); err != nil {
		return RareStandard{}, err
	}
	return s, nil
}

func (s RareStandard) checkValue(v float64) error {
	switch {
	case !(v >= 0 && v <= 1e15):
		return invalid("it must be 0 to 1e15, got %g", v)
	case s.Chart == G && v != math.Trunc(v):
		return invalid("a number of good units must be whole, got %g", v)
	}
	return nil
}

func (s RareStandard) check() error {
	switch {
	case s.Chart != G && s.Chart != T:
		return invalid("chart %q is not one of rare events", s.Chart)
	case !(s.Center > 0 && s.Center <= 1e15):
		return invalid("the centre must be above 0, got %g", s.Center)
	case s.Chart == T && !(s.Sigma > 0 && s.Sigma <= 1e15):
		return invalid("sigma must be above 0, got %g: the times do not vary", s.Sigma)
	case s.Chart == T && s.Probability:
		return invalid("a t chart has no exact limits here: its times are made nearly normal instead")
	case !(s.multiple() > 0 && s.multiple() <= 10):
		return invalid("the multiple of sigma must be above 0 and at most 10, got %g", s.multiple())
	case !(s.Tail >= 0 && s.Tail < 0.5):
		return invalid("the tail probability must be between 0 and 0.5, got %g", s.Tail)
	}
	return nil
}

func (s RareStandard) multiple() float64 {
	if s.Multiple == 0 {
		return DefaultMultiple
	}
	return s.Multiple
}

// Band returns the limits in the units of the values, the same for every point.
//
//	g           m ± L √(m(m+1)); the lower one is always below 0 and absent
//	g, exact    least U with P(X > U) = (1-p)^(U+1) ≤ tail, greatest L with
//	            P(X < L) = 1-(1-p)^L ≤ tail, p = 1/(m+1), absent when that is 0
//	t           (c ± L σ)^3.6; a lower limit at or below 0 is absent
//
// For t the one-sigma distances of the band are straight thirds of the way to each
// limit; Z judges on the transformed scale.
func (s RareStandard) Band() (Band, error) {
	if err := s.check(); err != nil {
		return absent, err
	}
	l := s.multiple()
	if s.Chart == G {
		sd := math.Sqrt(s.Center * (s.Center + 1))
		b := normalBand(s.Center, sd, l).floored(0)
		if s.Probability {
			b = s.geometric(b)
		}
		return b, nil
	}
	back := func(y float64) float64 { return math.Pow(y, 1/timePower) }
	b := Band{Center: back(s.Center), Lower: math.Inf(-1), Upper: back(s.Center + l*s.Sigma)}
	b.Above = (b.Upper - b.Center) / l
	if low := s.Center - l*s.Sigma; low > 0 {
		b.Lower = back(low)
		b.Below = (b.Center - b.Lower) / l
	} else {
		b.Below = b.Center - back(math.Max(0, s.Center-s.Sigma))
	}
	if !finite(b.Upper) {
		return absent, invalid("the times are too large to compute with")
	}
	return b, nil
}

func (s RareStandard) geometric(b Band) Band {
	tail := s.Tail
	if tail == 0 {
		tail = DefaultTail
	}
	// ln(1-p) with p = 1/(m+1).
	good := -math.Log1p(1 / s.Center)
	above := func(k float64) float64 { return math.Exp((k + 1) * good) } // P(X > k)
	below := func(k float64) float64 { return -math.Expm1(k * good) }    // P(X < k)
	upper := math.Max(0, math.Ceil(math.Log(tail)/good-1))
	// The logarithms may be off by a hair where the answer is whole.
	for upper > 0 && above(upper-1) <= tail {
		upper--
	}
	for above(upper) > tail {
		upper++
	}
	lower := math.Max(0, math.Floor(math.Log1p(-tail)/good))
	for lower > 0 && below(lower) > tail {
		lower--
	}
	for below(lower+1) <= tail {
		lower++
	}
	l := s.multiple()
	b.Upper, b.Lower = upper, math.Inf(-1)
	if upper > b.Center {
		b.Above = (upper - b.Center) / l
	}
	if lower > 0 {
		b.Lower = lower
		if lower < b.Center {
			b.Below = (b.Center - lower) / l
		}
	}
	return b
}

// Z returns the distance of a value from the centre in sigmas: for g by the band,
// for t on the scale of the times raised to 1/3.6.
func (s RareStandard) Z(value float64) (float64, error) {
	if err := s.check(); err != nil {
		return math.NaN(), err
	}
	if err := s.checkValue(value); err != nil {
		return math.NaN(), err
	}
	if s.Chart == T {
		return (math.Pow(value, timePower) - s.Center) / s.Sigma, nil
	}
	b, err := s.Band()
	if err != nil {
		return math.NaN(), err
	}
	return b.Z(value), nil
}
