package limits

import (
	"math"

	"holdfast/internal/spc/factor"
	"holdfast/internal/spc/special"
)

// DefaultMultiple is the distance of the control limits in sigmas unless another
// is asked for.
const DefaultMultiple = 3.0

// Standard is what a revision freezes: from it and a subgroup's size every limit
// follows.
type Standard struct {
	Chart Chart
	// Center of the location chart, in the characteristic's unit.
	Center float64
	// Sigma of a single reading, in the characteristic's unit, above zero.
	Sigma float64
	// Multiple of sigma at which limits lie; 0 means DefaultMultiple.
	Multiple float64
	// Probability puts the limits of the dispersion chart at the quantiles whose
	// tails equal those of a normal statistic beyond Multiple (0.00135 a side for
	// 3), instead of at a multiple of its standard deviation.
	Probability bool
}

func (s Standard) multiple() float64 {
	if s.Multiple == 0 {
		return DefaultMultiple
	}
	return s.Multiple
}

// Check returns an error when the standard cannot give limits.
func (s Standard) Check() error {
	m := s.multiple()
	switch {
	case !s.Chart.Readings():
		return invalid("chart %q is not one of subgroups of readings", s.Chart)
	case !finite(s.Center):
		return invalid("the centre must be a finite number, got %g", s.Center)
	case !finite(s.Sigma) || s.Sigma <= 0:
		return invalid("sigma must be above zero, got %g", s.Sigma)
	case !finite(m) || m <= 0 || m > 10:
		return invalid("the multiple of sigma must be above 0 and at most 10, got %g", m)
	case !finite(s.Center+11*s.Sigma) || !finite(s.Center-11*s.Sigma):
		return invalid("centre and sigma are too large to compute limits")
	}
	return nil
}

// Bands returns the limits of the location and the dispersion chart for a
// subgroup of n readings, 1 ≤ n ≤ factor.MaxSize.
//
//	mean       centre ± L σ/√n
//	median     centre ± L σ·SE(n), SE the standard error of the median
//	range      d2 σ ± L d3 σ
//	s          c4 σ ± L √(1-c4²) σ
//	individual centre ± L σ, moving range as a range of two
//
// A lower limit of a dispersion chart at or below zero is absent. A subgroup of
// one on a chart of means or medians has a location only: the dispersion band is
// the zero Band, whose Exists is false. For individuals n must be 1.
//
// It costs a few multiplications once the constants of n are known; only the
// first call for a size, and every call with Probability set, integrates.
//
// Source: ISO 7870-2:2023; ASTM E2587.
func (s Standard) Bands(n int) (location, dispersion Band, err error) {
	if err := s.Check(); err != nil {
		return absent, absent, err
	}
	if n < 1 || n > factor.MaxSize {
		return absent, absent, invalid("a subgroup must have 1 to %d readings, got %d", factor.MaxSize, n)
	}
	spread := n
	se := 1 / math.Sqrt(float64(n))
	switch s.Chart {
	case Individuals:
		if n != 1 {
			return absent, absent, invalid("a chart of individuals takes one reading at a time, got %d", n)
		}
		spread = 2
	case MedianR:
		if se, err = factor.MedianSE(n); err != nil {
			return absent, absent, err
		}
	}
	location = normalBand(s.Center, s.Sigma*se, s.multiple())
	if spread < 2 {
		return location, absent, nil
	}
	dispersion, err = s.dispersion(spread)
	if err != nil {
		return absent, absent, err
	}
	return location, dispersion, nil
}

func (s Standard) dispersion(n int) (Band, error) {
	mean, sd, err := s.Chart.relativeDispersion(n)
	if err != nil {
		return absent, err
	}
	b := normalBand(mean*s.Sigma, sd*s.Sigma, s.multiple())
	if !s.Probability {
		return b.floored(0), nil
	}
	tail := special.NormalSurvival(s.multiple())
	lower, upper, err := s.Chart.relativeTails(n, tail)
	if err != nil {
		return absent, err
	}
	b.Lower, b.Upper = lower*s.Sigma, upper*s.Sigma
	b.Below, b.Above = (b.Center-b.Lower)/s.multiple(), (b.Upper-b.Center)/s.multiple()
	return b, nil
}

// relativeDispersion gives mean and standard deviation of the plotted measure of
// spread for σ = 1.
func (c Chart) relativeDispersion(n int) (mean, sd float64, err error) {
	if c == XBarS {
		if mean, err = factor.C4(n); err != nil {
			return 0, 0, err
		}
		sd, err = factor.C5(n)
		return mean, sd, err
	}
	if mean, err = factor.D2(n); err != nil {
		return 0, 0, err
	}
	sd, err = factor.D3(n)
	return mean, sd, err
}

// relativeTails gives the quantiles at tail and 1-tail for σ = 1.
func (c Chart) relativeTails(n int, tail float64) (lower, upper float64, err error) {
	if c == XBarS {
		if lower, err = factor.SDQuantile(n, tail); err != nil {
			return 0, 0, err
		}
		upper, err = factor.SDUpperQuantile(n, tail)
		return lower, upper, err
	}
	if lower, err = factor.RangeQuantile(n, tail); err != nil {
		return 0, 0, err
	}
	upper, err = factor.RangeUpperQuantile(n, tail)
	return lower, upper, err
}
