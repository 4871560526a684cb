package limits

import "math"

// Band is one chart's limits for one plotted point, in the units of the plotted
// statistic.
//
// Lower is -Inf and Upper +Inf where a limit is absent (a lower limit of a range
// at or below zero, for instance). Below and Above are the one-sigma distances on
// each side, by which z is measured: with limits at a multiple of sigma both are
// that sigma; with probability limits each is a third (one over the multiple) of
// the way to its limit; where a limit is absent it is the statistic's own standard
// deviation.
//
// The zero Band is the band of a chart that has no point here, such as the range
// of a single reading: Exists is false.
type Band struct {
	Center, Lower, Upper float64
	Below, Above         float64
}

// Exists reports whether there is a point to judge at all.
func (b Band) Exists() bool { return b.Above > 0 || b.Below > 0 }

// HasLower reports whether there is a lower limit.
func (b Band) HasLower() bool { return b.Exists() && !math.IsInf(b.Lower, -1) }

// HasUpper reports whether there is an upper limit.
func (b Band) HasUpper() bool { return b.Exists() && !math.IsInf(b.Upper, 1) }

// Z returns the distance of x from the centre in the one-sigma distances of its
// side: negative below the centre, 3 on an upper three-sigma limit. For a band
// that does not exist it is NaN.
func (b Band) Z(x float64) float64 {
	d := x - b.Center
	switch {
	case !b.Exists():
		return math.NaN()
	case d < 0:
		return d / b.Below
	case d > 0:
		return d / b.Above
	}
	return d
}

// Tie is the difference, in sigmas of the plotted statistic, below which a value
// and a limit count as equal: figures that are equal on paper differ in the last
// binary digits.
const Tie = 1e-9

// Outside returns -1 when x is strictly below the lower limit, 1 when it is
// strictly above the upper one, else 0. A point on a limit, within Tie, is inside.
func (b Band) Outside(x float64) int {
	switch {
	case !b.Exists():
		return 0
	case x < b.Lower-Tie*b.Below:
		return -1
	case x > b.Upper+Tie*b.Above:
		return 1
	}
	return 0
}

// absent is the band of a chart without a point.
var absent = Band{}

// normalBand is centre ± multiple·sd.
func normalBand(center, sd, multiple float64) Band {
	return Band{
		Center: center,
		Lower:  center - multiple*sd, Upper: center + multiple*sd,
		Below: sd, Above: sd,
	}
}

// floored removes a lower limit that is at or below the least value the statistic
// can take: it could never be crossed.
func (b Band) floored(least float64) Band {
	if b.Lower <= least {
		b.Lower = math.Inf(-1)
	}
	return b
}
