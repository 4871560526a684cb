// Package gauge judges measuring: crossed studies of parts, appraisers and trials by
// analysis of variance and by averages and ranges, repeated measurement of a master
// (bias, Cg, Cgk), linearity over the range, and the agreement of appraisers who
// sort by attributes (kappa, rates of false rejects and misses).
//
// It says how much of the spread is the gauge's; whether that is good enough is the
// plant's decision. It knows nothing of gauges' names, dates or people.
//
// A figure that does not exist is a nil pointer. Input without an answer is an error
// wrapping ErrInput that names the argument and the reason; no function returns NaN
// or an infinity without an error.
package gauge

import (
	"errors"
	"fmt"
	"math"
)

// ErrInput marks input for which there is no answer; the message names the argument.
var ErrInput = errors.New("gauge study")

// MaxReadings is the largest number of readings or ratings of one study.
const MaxReadings = 1_000_000

// maxSize bounds the size of a reading: squares of such readings still have sums.
const maxSize = 1e140

func invalid(format string, args ...any) error {
	return fmt.Errorf("%w: "+format, append([]any{ErrInput}, args...)...)
}

func finite(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }

func some(x float64) *float64 { return &x }

// readingOK checks one reading; where names its place in the user's words.
func readingOK(x float64, where string, at ...any) error {
	if !finite(x) || math.Abs(x) > maxSize {
		return invalid("%s must be a finite number of at most %g in size, got %g", fmt.Sprintf(where, at...), maxSize, x)
	}
	return nil
}

// toleranceOK admits no tolerance at all, or one above zero.
func toleranceOK(tolerance *float64) error {
	if tolerance != nil && (!(*tolerance > 0) || math.IsInf(*tolerance, 1)) {
		return invalid("the tolerance must be above zero, got %g", *tolerance)
	}
	return nil
}

// allFinite is the last guard of every result.
func allFinite(values ...*float64) error {
	for _, v := range values {
		if v != nil && !finite(*v) {
			return invalid("the readings are too large or too far apart to compute with")
		}
	}
	return nil
}
