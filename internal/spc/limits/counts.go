package limits

import (
	"math"

	"holdfast/internal/spc/factor"
	"holdfast/internal/spc/special"
)

// DefaultTail is the probability left beyond each exact limit of a count chart: the
// 3-sigma tail as it is usually rounded.
const DefaultTail = 0.00135

// maxSize bounds the size of a sample of counts, so that every tail is found in
// bounded time.
const maxSize = 1e9

// CountStandard is what a revision of a chart of counts freezes: P, NP, C, U, LaneyP
// or LaneyU.
type CountStandard struct {
	Chart Chart
	// Center in the units of the plotted points: a proportion for p, a count for np
	// and c, a rate per unit for u.
	Center float64
	// Between is Laney's sigma_z, the spread between subgroups relative to the
	// binomial or Poisson one; for the other charts it is not used.
	Between  float64
	Multiple float64 // 0: DefaultMultiple
	// Probability puts the limits at exact binomial or Poisson quantiles with the
	// probability Tail (0: DefaultTail) beyond each. Laney's charts have none.
	Probability bool
	Tail        float64
	// Size of every sample of an np chart, whose centre is a count of it; samples of
	// another size are then refused. 0: not known, and not looked at. The other
	// charts do not use it.
	Size float64
}

// Counts reports whether the chart is one of counts.
func (c Chart) Counts() bool {
	switch c {
	case P, NP, C, U, LaneyP, LaneyU:
		return true
	}
	return false
}

// binomial reports whether a count on the chart cannot exceed its size.
func (c Chart) binomial() bool { return c == P || c == NP || c == LaneyP }

// EstimateCounts computes the standard of a chart of counts from history: centre =
// all counts / all sizes (np: times the size, which must be the same throughout; c:
// sizes are not used and may be nil), and for Laney's charts sigma_z, the mean
// moving range of z_i = (p_i - centre)/s_i over d2(2).
//
// Counts must not be negative, sizes above 0, and for proportions whole and not
// below the count. A history without a single event, or of nothing but events, has
// no spread and is an error.
//
// Source: Montgomery, Introduction to Statistical Quality Control, chapter 7; Laney,
// Quality Engineering 14 (2002), 531-537.
func EstimateCounts(chart Chart, counts []int, sizes []float64) (CountStandard, error) {
	s := CountStandard{Chart: chart}
	if err := checkCounts(chart, counts, sizes); err != nil {
		return s, err
	}
	total, area := 0.0, 0.0
	for i, k := range counts {
		total += float64(k)
		if chart == C {
			area++
		} else {
			area += sizes[i]
		}
	}
	s.Center = total / area
	if chart == NP {
		s.Size = sizes[0]
		s.Center *= s.Size
	}
	if chart == LaneyP || chart == LaneyU {
		between, err := betweenSpread(chart, s.Center, counts, sizes)
		if err != nil {
			return CountStandard{}, err
		}
		s.Between = between
	}
	if _, err := s.sd(firstSize(sizes)); err != nil {
		return CountStandard{}, err
	}
	return s, nil
}

// Laney completes a given centre with the sigma_z of history.
func (s CountStandard) Laney(counts []int, sizes []float64) (CountStandard, error) {
	if s.Chart != LaneyP && s.Chart != LaneyU {
		return s, invalid("chart %q has no spread between subgroups to estimate", s.Chart)
	}
	if err := checkCounts(s.Chart, counts, sizes); err != nil {
		return s, err
	}
	var err error
	s.Between, err = betweenSpread(s.Chart, s.Center, counts, sizes)
	return s, err
}

func firstSize(sizes []float64) float64 {
	if len(sizes) == 0 {
		return 1
	}
	return sizes[0]
}

func checkCounts(chart Chart, counts []int, sizes []float64) error {
	switch {
	case !chart.Counts():
		return invalid("chart %q is not one of counts", chart)
	case len(counts) == 0:
		return invalid("there are no counts")
	case chart == C && sizes != nil:
		return invalid("a c chart has no sizes: for sizes that differ use a u chart")
	case chart != C && len(sizes) != len(counts):
		return invalid("there are %d counts and %d sizes", len(counts), len(sizes))
	}
	for i, k := range counts {
		size := 1.0
		if chart != C {
			size = sizes[i]
		}
		if err := checkCount(chart, k, size); err != nil {
			return invalid("subgroup %d: %v", i+1, err)
		}
		if chart == NP && size != sizes[0] {
			return invalid("an np chart needs equal sizes: subgroup %d has %g, the first %g", i+1, size, sizes[0])
		}
	}
	return nil
}

func checkCount(chart Chart, count int, size float64) error {
	switch {
	case count < 0 || count > maxSize:
		return invalid("a count must be 0 to %g, got %d", maxSize, count)
	case !(size > 0 && size <= maxSize):
		return invalid("a size must be above 0 and at most %g, got %g", maxSize, size)
	case chart.binomial() && size != math.Trunc(size):
		return invalid("the size of a sample of units must be whole, got %g", size)
	case chart.binomial() && float64(count) > size:
		return invalid("%d of %g units cannot be nonconforming", count, size)
	}
	return nil
}

func (s CountStandard) checkSample(count int, size float64) error {
	if s.Chart == NP && s.Size != 0 && size != s.Size {
		return invalid("this np chart is for samples of %g, got one of %g", s.Size, size)
	}
	return checkCount(s.Chart, count, size)
}

func betweenSpread(chart Chart, center float64, counts []int, sizes []float64) (float64, error) {
	if len(counts) < 2 {
		return 0, invalid("the spread between subgroups needs at least two of them")
	}
	s := CountStandard{Chart: chart, Center: center, Between: 1}
	total, last := 0.0, 0.0
	for i, k := range counts {
		sd, err := s.sd(sizes[i])
		if err != nil {
			return 0, err
		}
		z := (float64(k)/sizes[i] - center) / sd
		if i > 0 {
			total += math.Abs(z - last)
		}
		last = z
	}
	d2, err := factor.D2(2)
	if err != nil {
		return 0, err
	}
	between := total / float64(len(counts)-1) / d2
	if between <= 0 {
		return 0, invalid("the subgroups are all alike: there is no spread between them")
	}
	return between, nil
}

// Point returns what the chart plots for a count in a sample of the given size (not
// used on a c chart): a proportion for p, the count for np and c, a rate for u.
func (s CountStandard) Point(count int, size float64) (float64, error) {
	if s.Chart == C {
		size = 1
	}
	if err := s.checkSample(count, size); err != nil {
		return math.NaN(), err
	}
	if s.Chart == NP {
		return float64(count), nil
	}
	return float64(count) / size, nil
}

// sd is the standard deviation of a plotted point for the given size.
func (s CountStandard) sd(size float64) (float64, error) {
	if !s.Chart.Counts() {
		return 0, invalid("chart %q is not one of counts", s.Chart)
	}
	if s.Chart == C {
		size = 1
	}
	if err := s.checkSample(0, size); err != nil {
		return 0, err
	}
	if !(s.Center > 0) || s.Center > maxSize {
		return 0, invalid("the centre must be above 0, got %g: without any event there is no spread to set limits by", s.Center)
	}
	p := s.Center
	if s.Chart == NP {
		p /= size
	}
	if s.Chart.binomial() && p >= 1 {
		return 0, invalid("the centre must be below the whole sample, got %g", s.Center)
	}
	switch s.Chart {
	case P:
		return math.Sqrt(p * (1 - p) / size), nil
	case NP:
		return math.Sqrt(size * p * (1 - p)), nil
	case C:
		return math.Sqrt(p), nil
	case U:
		return math.Sqrt(p / size), nil
	}
	if !(s.Between > 0) || math.IsInf(s.Between, 1) {
		return 0, invalid("the spread between subgroups must be above 0, got %g", s.Between)
	}
	if s.Chart == LaneyP {
		return s.Between * math.Sqrt(p*(1-p)/size), nil
	}
	return s.Between * math.Sqrt(p/size), nil
}

// Band returns the limits for a sample of the given size (not used on a c chart),
// in the units of the points.
//
// Limits at a multiple of the standard deviation are absent where they fall on or
// outside the possible range: 0, and the whole sample for proportions. Exact limits
// are the least U with P(X > U) ≤ tail and the greatest L with P(X < L) ≤ tail,
// absent when that is 0; a count signals beyond, not on, them.
//
// Source: Montgomery, Introduction to Statistical Quality Control, chapter 7.
func (s CountStandard) Band(size float64) (Band, error) {
	multiple := s.Multiple
	if multiple == 0 {
		multiple = DefaultMultiple
	}
	if !(multiple > 0 && multiple <= 10) {
		return absent, invalid("the multiple of sigma must be above 0 and at most 10, got %g", multiple)
	}
	sd, err := s.sd(size)
	if err != nil {
		return absent, err
	}
	b := normalBand(s.Center, sd, multiple)
	if s.Probability {
		return s.exact(b, size, multiple)
	}
	b = b.floored(0)
	most := math.Inf(1)
	switch s.Chart {
	case P, LaneyP:
		most = 1
	case NP:
		most = size
	}
	if b.Upper >= most {
		b.Upper = math.Inf(1)
	}
	return b, nil
}

// exact replaces the limits of b by quantiles. A side whose limit does not lie
// clear of the centre keeps the standard deviation as its distance.
func (s CountStandard) exact(b Band, size, multiple float64) (Band, error) {
	tail := s.Tail
	if tail == 0 {
		tail = DefaultTail
	}
	if !(tail > 0 && tail < 0.5) {
		return absent, invalid("the tail probability must be between 0 and 0.5, got %g", tail)
	}
	if s.Chart == LaneyP || s.Chart == LaneyU {
		return absent, invalid("chart %q has no exact limits: its points follow no one law", s.Chart)
	}
	if s.Chart == C {
		size = 1
	}
	var lower, upper float64
	unit := 1.0 // of a count, in the units of the points
	if s.Chart == P || s.Chart == U {
		unit = 1 / size
	}
	if s.Chart.binomial() {
		p := s.Center
		if s.Chart == NP {
			p /= size
		}
		lower, upper = quantilePair(tail, size*p, size, func(k float64) (below, above float64) {
			if k >= size {
				return 1, 0
			}
			above, below = special.Beta(k+1, size-k, p, 1-p)
			return below, above
		})
	} else {
		mean := s.Center
		if s.Chart == U {
			mean *= size
		}
		if mean > maxSize {
			return absent, invalid("a mean count of %g is too large", mean)
		}
		lower, upper = quantilePair(tail, mean, math.Inf(1), func(k float64) (below, above float64) {
			above, below = special.Gamma(k+1, mean)
			return below, above
		})
	}
	b.Lower, b.Upper = math.Inf(-1), upper*unit
	if lower > 0 {
		b.Lower = lower * unit
		if b.Lower < b.Center {
			b.Below = (b.Center - b.Lower) / multiple
		}
	}
	if b.Upper > b.Center {
		b.Above = (b.Upper - b.Center) / multiple
	}
	return b, nil
}

// quantilePair finds the least U ≤ most with P(X > U) ≤ tail and the greatest L with
// P(X < L) ≤ tail of a law on the whole numbers from 0, whose tails gives P(X ≤ k)
// and P(X > k). Both searches start at the mean and widen.
func quantilePair(tail, mean, most float64, tails func(k float64) (below, above float64)) (lower, upper float64) {
	step := math.Ceil(3 * math.Sqrt(mean+1))
	// P(X > hi) ≤ tail, P(X > lo) > tail or lo = -1.
	hi := math.Ceil(mean)
	lo := -1.0
	for w := step; ; w *= 2 {
		if hi >= most {
			hi = most
			break
		}
		if _, above := tails(hi); above <= tail {
			break
		}
		lo = hi
		hi += w
	}
	for hi-lo > 1 {
		mid := math.Floor((lo + hi) / 2)
		if _, above := tails(mid); above <= tail {
			hi = mid
		} else {
			lo = mid
		}
	}
	upper = hi
	// P(X ≤ lo-1) ≤ tail or lo = 0, P(X ≤ hi-1) > tail.
	lo, hi = 0, upper+1
	for hi-lo > 1 {
		mid := math.Floor((lo + hi) / 2)
		if below, _ := tails(mid - 1); below <= tail {
			lo = mid
		} else {
			hi = mid
		}
	}
	return lo, upper
}
