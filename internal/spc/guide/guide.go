// Package guide says which control chart suits a characteristic, and why in two
// sentences: a decision table read from the top, whose first row that fits wins.
//
// It decides from what is measured and how; it does not look at data. Evidence from
// data (the spread between batches, the variation between subgroups of counts) is told
// by the caller. Thresholds of the table are common practice or our own choice and are
// named where they stand.
package guide

import (
	"errors"
	"fmt"
	"math"

	"holdfast/internal/spc/limits"
)

// ErrInput marks a case that cannot be judged; the message names the argument.
var ErrInput = errors.New("chart guide")

func invalid(format string, args ...any) error {
	return fmt.Errorf("%w: "+format, append([]any{ErrInput}, args...)...)
}

// Measured says what is observed.
type Measured string

const (
	Readings        Measured = "readings"        // numbers on a scale
	Nonconforming   Measured = "nonconforming"   // units that pass or fail
	Nonconformities Measured = "nonconformities" // flaws counted on a unit or an area
	UnitsBetween    Measured = "units-between"   // good units between two rare events
	TimeBetween     Measured = "time-between"    // time or amount between two rare events
)

// Batches says how what is made together hangs together.
type Batches string

const (
	// Pieces are made one after another; neighbours differ as all do.
	Pieces Batches = "pieces"
	// Uniform batches are one mixture: further readings of a batch show the gauge.
	Uniform Batches = "uniform"
	// Nested pieces come in batches (a heat, a mould load, a coil) whose means may
	// vary more than the pieces within.
	Nested Batches = "nested"
)

// Case describes a characteristic and how it is sampled.
type Case struct {
	Measured     Measured
	SubgroupSize int  // readings, units or areas a subgroup; unused between events
	SizeVaries   bool // from subgroup to subgroup
	Streams      int  // spindles, cavities, heads sampled together; 0 and 1 are one
	Batches      Batches
	// BetweenP is the p value of the F test of batch means against the spread within,
	// from a stretch without other causes; nil while nobody looked.
	BetweenP *float64
	// EventRate is the mean number of nonconforming units or nonconformities in one
	// subgroup; nil while it is not known.
	EventRate *float64
	// BetweenSigma is the standard deviation of the z-values of counts between
	// subgroups, about 1 when they vary by chance alone; nil while nobody looked.
	BetweenSigma *float64
	// Parts is how many part numbers share the chart in short runs; 0 and 1 are one.
	// SpreadDiffers tells that their spread is not the same.
	Parts         int
	SpreadDiffers bool
	// Characteristics measured on the same piece that move together; 0 and 1 are one.
	Characteristics int
	Wear            bool // the tool wears and is changed or reset on purpose
	// SmallShift is a lasting shift that must be caught early, in sigmas of the plotted
	// statistic; 0 when there is no such wish. ShiftKnown tells that it is this size
	// and not merely small.
	SmallShift float64
	ShiftKnown bool
	ByHand     bool // points are worked out on paper
}

// Form is what is done to readings before they are plotted.
type Form string

const (
	Plain        Form = ""
	Deviation    Form = "deviation"    // reading minus the part's target
	Standardised Form = "standardised" // that over the part's sigma
)

// Advice is the chart that the guide suggests.
type Advice struct {
	Chart limits.Chart
	Form  Form
	Why   string // two sentences
}

// Largest sizes that the guide takes.
const (
	maxSize  = 1_000_000
	maxCount = 10_000 // streams, parts, characteristics
)

// Thresholds of the table.
const (
	// Above this size the range wastes too much of what readings tell: common practice.
	largestForRange = 8
	// Batch means count as varying more than within below this p: our choice, the
	// level of all our tests on a standard.
	betweenLevel = 0.01
	// Counts count as varying more than chance above this: our choice.
	overdispersed = 1.2
	// Fewer events in a subgroup than this leave a chart of counts blind: common
	// practice.
	rare = 1.0
	// Shifts below this are caught late by single points: common practice.
	small = 1.5
)

func (c Case) check() error {
	switch c.Measured {
	case Readings, Nonconforming, Nonconformities:
		if c.SubgroupSize < 1 || c.SubgroupSize > maxSize {
			return invalid("the subgroup size must be 1 to %d, got %d", maxSize, c.SubgroupSize)
		}
	case UnitsBetween, TimeBetween:
	default:
		return invalid("what is measured must be readings, nonconforming, nonconformities, units-between or time-between, got %q", c.Measured)
	}
	switch c.Batches {
	case Pieces, Uniform, Nested, "":
	default:
		return invalid("the nature of batches must be pieces, uniform or nested, got %q", c.Batches)
	}
	for _, n := range []struct {
		name  string
		value int
	}{{"streams", c.Streams}, {"parts", c.Parts}, {"characteristics", c.Characteristics}} {
		if n.value < 0 || n.value > maxCount {
			return invalid("the number of %s must be 0 to %d, got %d", n.name, maxCount, n.value)
		}
	}
	for _, v := range []struct {
		name  string
		value *float64
		most  float64
	}{{"p value between batches", c.BetweenP, 1}, {"event rate", c.EventRate, math.MaxFloat64}, {"sigma between subgroups", c.BetweenSigma, math.MaxFloat64}} {
		if v.value != nil && !(*v.value >= 0 && *v.value <= v.most) {
			return invalid("the %s must be a number from 0 to %g, got %g", v.name, v.most, *v.value)
		}
	}
	if !(c.SmallShift >= 0) || math.IsInf(c.SmallShift, 1) {
		return invalid("the shift to catch must be 0 or above, got %g", c.SmallShift)
	}
	return nil
}

// form is how readings of several parts share a chart.
func (c Case) form() Form {
	switch {
	case c.Parts < 2 || c.Measured != Readings:
		return Plain
	case c.SpreadDiffers:
		return Standardised
	}
	return Deviation
}

// Choose returns the chart of the first row of the table that fits.
//
// Source: the choice of charts in Montgomery, Introduction to Statistical Quality
// Control, chapters 6, 7, 9 and 10, and common practice; the thresholds are named in
// the package.
func Choose(c Case) (Advice, error) {
	if err := c.check(); err != nil {
		return Advice{}, err
	}
	for _, r := range table {
		if r.measured == c.Measured && r.fits(c) {
			a := Advice{Chart: r.chart, Form: c.form(), Why: r.why}
			if r.chart == limits.TSquared {
				a.Form = Plain
			}
			switch a.Form {
			case Deviation:
				a.Why = r.short + " Each part's target is taken off first, so that all parts share one line."
			case Standardised:
				a.Why = r.short + " Each part's target is taken off and its own sigma divided out, since their spread differs."
			}
			return a, nil
		}
	}
	return Advice{}, invalid("no chart is known for this case")
}
