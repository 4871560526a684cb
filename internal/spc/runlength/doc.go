// Package runlength prices the rules of a control chart: how many points pass,
// on average and in the median, before the chart signals, on a process left
// alone and on one that has changed.
//
// A run length counts the signalling point. Histories start empty and the change
// is there from the first point (zero state). What can be computed is computed:
//
//   - Rules that see zones only: the chain of all states that the registers of
//     package watch can reach, equivalent states merged (Champ and Woodall 1987).
//   - EWMA and CUSUM: the integral equation of the run length by Gauss-Legendre
//     quadrature (Lucas and Saccucci 1990; Lucas and Crosier 1982).
//   - Charts of means with ranges or standard deviations: both run lengths, since
//     mean and spread of normal readings are independent.
//
// Rules that compare neighbours, and pairs whose charts are not independent, are
// simulated with a given seed and carry a standard error.
//
// Limits are taken as known, except by Estimated, which says how far the true
// false alarm rate may be off when they come from m subgroups. Readings are taken
// as independent and normal. The package knows no clock: whoever has no time left
// says so through Options.Stop.
package runlength

import (
	"errors"
	"fmt"
	"math"
)

// Limits of what is taken. Above them an error says so.
const (
	// MaxShift is the largest shift, in sigmas of the plotted statistic.
	MaxShift = 100
	// MaxStates is the largest number of states a set of zone rules may reach
	// for an exact answer; larger sets are simulated.
	MaxStates = 60_000
	// MaxPoints is how many points a simulation makes at most: less than two
	// seconds on two cores.
	MaxPoints = 50_000_000
)

// ErrInput is wrapped by every error that a person's input can cause.
var ErrInput = errors.New("run length")

func invalid(format string, args ...any) error {
	return fmt.Errorf("%w: "+format, append([]any{ErrInput}, args...)...)
}

// Method tells how a run length was found.
type Method string

// The methods.
const (
	MarkovChain      Method = "markov chain"      // exact up to rounding
	IntegralEquation Method = "integral equation" // quadrature, error far below 0.1 %
	Lattice          Method = "lattice chain"     // discretised and extrapolated, below 0.1 %
	Simulated        Method = "simulation"        // with a standard error
)

// Options steer what has to be simulated.
type Options struct {
	// Seed starts the random numbers. The same seed gives the same answer on
	// every machine, unless Stop cut it short.
	Seed uint64
	// Points bounds the number of points (readings, for Estimated) of one
	// simulation; 0 means MaxPoints, more than that is taken as MaxPoints.
	Points int
	// Stop is asked from time to time whether the answer is wanted now. It may
	// be called from several goroutines. nil means never.
	Stop func() bool
}

func (o Options) points() int {
	if o.Points <= 0 || o.Points > MaxPoints {
		return MaxPoints
	}
	return o.Points
}

func (o Options) stopped() bool { return o.Stop != nil && o.Stop() }

// Change is what happened to the process, in terms of single readings.
type Change struct {
	// Shift of the mean, in sigmas of a reading.
	Shift float64
	// Spread is the ratio of the standard deviation of readings to sigma; 0
	// means 1, no change.
	Spread float64
}

func (c Change) spread() float64 {
	if c.Spread == 0 {
		return 1
	}
	return c.Spread
}

func (c Change) check() error {
	if !(math.Abs(c.Shift) <= MaxShift) {
		return invalid("shift must lie within ±%d sigmas, got %v", MaxShift, c.Shift)
	}
	if s := c.spread(); !(s > 0.01 && s <= 100) {
		return invalid("spread must be a ratio above 0.01 and at most 100, got %v", c.Spread)
	}
	return nil
}

func checkShifts(shifts []float64) error {
	if len(shifts) == 0 {
		return invalid("shifts are empty")
	}
	if len(shifts) > 1000 {
		return invalid("at most 1000 shifts are taken, got %d", len(shifts))
	}
	for _, d := range shifts {
		if !(math.Abs(d) <= MaxShift) {
			return invalid("shifts must lie within ±%d sigmas, got %v", MaxShift, d)
		}
	}
	return nil
}
