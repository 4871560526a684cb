package limits

import (
	"errors"
	"fmt"
	"math"
)

// ErrInput marks input for which no limits exist; the message names the argument.
var ErrInput = errors.New("limits")

func invalid(format string, args ...any) error {
	return fmt.Errorf("%w: "+format, append([]any{ErrInput}, args...)...)
}

// Chart names a kind of control chart.
type Chart string

// Charts of readings: they have a location and a dispersion band (Standard.Bands).
const (
	XBarR       Chart = "xbar-r"      // means with ranges
	XBarS       Chart = "xbar-s"      // means with standard deviations
	MedianR     Chart = "median-r"    // medians with ranges
	Individuals Chart = "individuals" // single readings with moving ranges of two
)

// Charts of counts and of rare events.
const (
	P      Chart = "p"       // proportion nonconforming
	NP     Chart = "np"      // number nonconforming, constant size
	C      Chart = "c"       // count of nonconformities
	U      Chart = "u"       // nonconformities per unit
	LaneyP Chart = "laney-p" // proportion with variation between subgroups
	LaneyU Chart = "laney-u" // rate with variation between subgroups
	G      Chart = "g"       // good units between events
	T      Chart = "t"       // time between events
)

// Charts with memory, and the further kinds of methods section 2.
const (
	EWMA     Chart = "ewma"      // exponentially weighted moving average
	CUSUM    Chart = "cusum"     // two-sided tabular cumulative sum
	ThreeWay Chart = "three-way" // batch means, their moving ranges, spread within
	Group    Chart = "group"     // highest and lowest of several streams
	Trend    Chart = "trend"     // limits about a fitted slope
	TSquared Chart = "t-squared" // several characteristics of the same parts
)

// Readings reports whether the chart is one of single readings in subgroups: the
// kinds that Standard.Bands answers for.
func (c Chart) Readings() bool {
	switch c {
	case XBarR, XBarS, MedianR, Individuals:
		return true
	}
	return false
}

// DispersionStatistic tells what the lower chart of a pair plots: "range", "sd",
// "moving-range", or "" for a chart that has none.
func (c Chart) DispersionStatistic() string {
	switch c {
	case XBarR, MedianR:
		return "range"
	case XBarS:
		return "sd"
	case Individuals:
		return "moving-range"
	}
	return ""
}

func finite(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }
