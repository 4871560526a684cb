package watch

import (
	"errors"

	"holdfast/internal/spc/limits"
)

// Subgroup is what the fold needs of a sample, in the characteristic's unit. Each
// kind of chart looks at its own part and at nothing else.
type Subgroup struct {
	// Charts of readings: the number of readings, their mean (their median on a chart
	// of medians; the reading itself on one of individuals), and the measure of spread
	// that the chart plots. The other measure is not looked at.
	//
	// Rare events: Mean is the value itself, the good units or the time between two
	// events, or the instant of the event where the fold takes the differences.
	N               int
	Mean, Range, SD float64

	Count int     // p, np, c, u and Laney's: the count
	Size  float64 // and the size of the sample it was found in; not used on a c chart

	Target float64 // short runs: the target of the part being made,
	Sigma  float64 // and the sigma of its readings where the chart is standardised

	Wear float64 // trend: since the last tool change; less than before is a new tool

	Streams []limits.Subgroup // group chart: one a stream, always in the same order
	Values  []float64         // T-squared: one a characteristic, in the standard's order
}

// Plotted is a point with the limits it is judged by. Value and Band are in the unit
// of the plotted statistic, Z in one-sigma distances of the point's side. Fired is in
// the order of that chart's rules.
type Plotted struct {
	Value float64
	Band  limits.Band
	Z     float64
	Fired Fired
}

// Average is the EWMA after a point, with its limits, in the unit of the location.
// Out is the side on which it is outside them.
type Average struct {
	Value, Lower, Upper float64
	Out                 Side
}

// Sums are both sides of the CUSUM after a point, kept positive, in standard
// errors. Out tells which of them are above the decision interval.
type Sums struct {
	High, Low float64
	Out       Side
}

// Extremes are the streams that a group chart plots, counted from 0. Run is the side
// on which the same stream has been alone at the extreme often enough in a row.
type Extremes struct {
	Highest, Lowest, Widest uint8
	Run                     Side
}

// Judged is what the fold says about one subgroup. Every chart has a Location; the
// zero Plotted, whose Band does not exist, only at the first instant of a chart of
// times between events. What else there is depends on the chart:
//
//	readings, short runs, trend  Dispersion: range, s.d. or moving range
//	three-way                    Dispersion: moving range of the batch means;
//	                             Third: the spread within the batch
//	group                        Location: the highest stream; Third: the lowest;
//	                             Dispersion: the widest; Streams: which they are
//
// Dispersion and Third are the zero Plotted where HasDispersion and HasThird are
// false; EWMA and CUSUM are zero where the standard has none. With Err set nothing
// was judged, the Memory is as it was, and everything else is zero.
type Judged struct {
	Location, Dispersion    Plotted
	HasDispersion, HasThird bool
	Streams                 Extremes
	EWMA                    Average
	CUSUM                   Sums
	Third                   Plotted
	Err                     error
}

// Any reports whether anything fired.
func (d *Judged) Any() bool {
	return d.Location.Fired.Rules|d.Dispersion.Fired.Rules|d.Third.Fired.Rules|
		uint16(d.EWMA.Out|d.CUSUM.Out|d.Streams.Run) != 0
}

// ErrSubgroup marks a subgroup that the standard cannot judge; the message says
// why in the user's words.
var ErrSubgroup = errors.New("this subgroup cannot be judged")
