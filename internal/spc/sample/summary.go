package sample

import (
	"fmt"
	"math"
	"slices"
)

// Summary describes readings in their order. Lengths are in the readings' unit;
// Lag1 and Skewness have none.
type Summary struct {
	N                int
	Mean             float64
	SD               float64 // divisor N-1
	Min, Median, Max float64 // the median of an even number is the mean of the middle two
	// Mean and median of |x[i] - x[i-1]|.
	MeanMovingRange, MedianMovingRange float64
	// Constant is true when all readings are equal: then Lag1 and Skewness do not
	// exist and are left at 0.
	Constant bool
	// Lag1 is Σ (x_i-m)(x_{i+1}-m) / Σ (x_i-m)², m the mean of all.
	Lag1 float64
	// Skewness is m3 / m2^(3/2), moments with divisor N.
	Skewness float64
}

// Summarize computes a Summary of at least two readings. It does not change x.
func Summarize(x []float64) (Summary, error) {
	if err := Check(x, 2); err != nil {
		return Summary{}, err
	}
	m := moments(x)
	s := Summary{
		N: len(x), Mean: m.mean, SD: math.Sqrt(m.square / float64(len(x)-1)),
		Min: slices.Min(x), Max: slices.Max(x),
	}
	sorted := slices.Clone(x)
	slices.Sort(sorted)
	s.Median = middle(sorted)
	ranges := movingRanges(x)
	s.MeanMovingRange = sum(ranges) / float64(len(ranges))
	slices.Sort(ranges)
	s.MedianMovingRange = middle(ranges)
	s.Constant = s.Min == s.Max
	if !s.Constant {
		s.Lag1 = m.lag1(x)
		s.Skewness = m.skewness(x)
	}
	for _, v := range []float64{s.Mean, s.SD, s.Median, s.MeanMovingRange, s.MedianMovingRange, s.Lag1, s.Skewness} {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return Summary{}, overflow()
		}
	}
	return s, nil
}

func overflow() error {
	return fmt.Errorf("%w: they are too large or too far apart to compute with", ErrNotFinite)
}

// Mean returns the arithmetic mean of at least one reading.
func Mean(x []float64) (float64, error) {
	if err := Check(x, 1); err != nil {
		return math.NaN(), err
	}
	return known(moments(x).mean)
}

// SD returns the sample standard deviation, divisor n-1, of at least two readings;
// 0 when they are all equal.
func SD(x []float64) (float64, error) {
	if err := Check(x, 2); err != nil {
		return math.NaN(), err
	}
	return known(math.Sqrt(moments(x).square / float64(len(x)-1)))
}

// Median returns the median of at least one reading; of an even number it is the
// mean of the middle two. It does not change x.
func Median(x []float64) (float64, error) {
	if err := Check(x, 1); err != nil {
		return math.NaN(), err
	}
	sorted := slices.Clone(x)
	slices.Sort(sorted)
	return known(middle(sorted))
}

// Range returns the largest minus the smallest of at least one reading.
func Range(x []float64) (float64, error) {
	if err := Check(x, 1); err != nil {
		return math.NaN(), err
	}
	return known(slices.Max(x) - slices.Min(x))
}

// MovingRanges returns the len(x)-1 absolute differences of neighbouring readings;
// at least two readings are needed.
func MovingRanges(x []float64) ([]float64, error) {
	if err := Check(x, 2); err != nil {
		return nil, err
	}
	r := movingRanges(x)
	if math.IsInf(slices.Max(r), 1) {
		return nil, overflow()
	}
	return r, nil
}

// Lag1 returns the lag-1 autocorrelation Σ (x_i-m)(x_{i+1}-m) / Σ (x_i-m)², m the
// mean of all, of at least two readings that are not all equal.
//
// Source: NIST/SEMATECH e-Handbook of Statistical Methods, section 1.3.5.12.
func Lag1(x []float64) (float64, error) {
	if err := Check(x, 2); err != nil {
		return math.NaN(), err
	}
	m := moments(x)
	if constant(x) {
		return math.NaN(), fmt.Errorf("lag-1 correlation: %w", ErrZeroSpread)
	}
	return known(m.lag1(x))
}

// Skewness returns m3 / m2^(3/2), central moments with divisor n, of at least three
// readings that are not all equal.
func Skewness(x []float64) (float64, error) {
	if err := Check(x, 3); err != nil {
		return math.NaN(), err
	}
	if constant(x) {
		return math.NaN(), fmt.Errorf("skewness: %w", ErrZeroSpread)
	}
	return known(moments(x).skewness(x))
}

func known(v float64) (float64, error) {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return math.NaN(), overflow()
	}
	return v, nil
}

func constant(x []float64) bool { return slices.Min(x) == slices.Max(x) }

// central holds the mean and the sum of squares about it.
type central struct{ mean, square float64 }

func moments(x []float64) central {
	// About the first reading, so that a large common part cancels exactly
	// before anything is rounded.
	origin := x[0]
	var total, lost float64
	for _, v := range x {
		total, lost = neumaier(total, lost, v-origin)
	}
	n := float64(len(x))
	offset := (total + lost) / n
	var squares, left float64
	for _, v := range x {
		d := (v - origin) - offset
		squares += d * d
		left += d
	}
	return central{origin + offset, math.Max(0, squares-left*left/n)}
}

// neumaier adds v to a compensated sum.
//
// Source: Neumaier, ZAMM 54 (1974), 39-51.
func neumaier(total, lost, v float64) (float64, float64) {
	t := total + v
	if math.Abs(total) >= math.Abs(v) {
		lost += (total - t) + v
	} else {
		lost += (v - t) + total
	}
	return t, lost
}

func sum(x []float64) float64 {
	var total, lost float64
	for _, v := range x {
		total, lost = neumaier(total, lost, v)
	}
	return total + lost
}

func (m central) lag1(x []float64) float64 {
	products := 0.0
	for i := 1; i < len(x); i++ {
		products += (x[i-1] - m.mean) * (x[i] - m.mean)
	}
	return products / m.square
}

func (m central) skewness(x []float64) float64 {
	// In units of the spread, so that no cube overflows.
	s := math.Sqrt(m.square / float64(len(x)))
	cubes := 0.0
	for _, v := range x {
		d := (v - m.mean) / s
		cubes += d * d * d
	}
	return cubes / float64(len(x))
}

func middle(sorted []float64) float64 {
	n := len(sorted)
	if n%2 == 1 {
		return sorted[n/2]
	}
	// The halves are added last: two large readings must not overflow.
	return sorted[n/2-1]/2 + sorted[n/2]/2
}

func movingRanges(x []float64) []float64 {
	r := make([]float64, len(x)-1)
	for i := range r {
		r[i] = math.Abs(x[i+1] - x[i])
	}
	return r
}

// Accumulator takes readings one at a time and keeps their count, mean and sum of
// squares about the mean (Welford's method). The zero Accumulator is empty.
//
// Source: Welford, Technometrics 4 (1962), 419-420; Chan, Golub and LeVeque, The
// American Statistician 37 (1983), 242-247, for Merge.
type Accumulator struct {
	n            int
	mean, square float64
}

// Add takes one more reading.
func (a *Accumulator) Add(x float64) {
	a.n++
	d := x - a.mean
	a.mean += d / float64(a.n)
	a.square += d * (x - a.mean)
}

// Merge takes everything another accumulator has taken.
func (a *Accumulator) Merge(b Accumulator) {
	if b.n == 0 {
		return
	}
	n := float64(a.n + b.n)
	d := b.mean - a.mean
	a.square += b.square + d*d*(float64(a.n)/n)*float64(b.n)
	a.mean += d * (float64(b.n) / n)
	a.n += b.n
}

// N is the number of readings taken.
func (a *Accumulator) N() int { return a.n }

// SumOfSquares is the sum of squares about the mean.
func (a *Accumulator) SumOfSquares() float64 { return a.square }

// Mean returns the mean of at least one finite reading.
func (a *Accumulator) Mean() (float64, error) {
	if a.n < 1 {
		return math.NaN(), fmt.Errorf("%w: at least 1 is needed, got 0", ErrTooFew)
	}
	return known(a.mean)
}

// SD returns the sample standard deviation of at least two finite readings.
func (a *Accumulator) SD() (float64, error) {
	if a.n < 2 {
		return math.NaN(), fmt.Errorf("%w: at least 2 are needed, got %d", ErrTooFew, a.n)
	}
	return known(math.Sqrt(a.square / float64(a.n-1)))
}
