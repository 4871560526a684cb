// Package capability compares a process with its specification: the indices Cp,
// Cpk, Pp, Ppk and Cpm with their confidence intervals, the expected and observed
// parts per million outside, fitted distributions and the percentile method for
// readings that are not normal, the Box-Cox transformation, and normal tolerance
// factors.
//
// It computes figures whenever they exist and says separately, as typed values,
// what a claim still lacks (Requirement.Missing). Whether the stretch was stable is
// the caller's knowledge. It knows nothing of clocks, parts or people.
//
// A figure that does not exist, such as Cp without an upper limit, is a nil
// pointer. Input without an answer is an error wrapping ErrInput, or one of package
// sample for the readings themselves, that names the argument and the reason; no
// function returns NaN or an infinity without an error.
package capability

import (
	"errors"
	"fmt"
	"math"

	"holdfast/internal/spc/sample"
)

// ErrInput marks input for which there is no answer; the message names the argument.
var ErrInput = errors.New("capability")

// MaxReadings is the largest number of readings taken at once.
const MaxReadings = 1_000_000

func invalid(format string, args ...any) error {
	return fmt.Errorf("%w: "+format, append([]any{ErrInput}, args...)...)
}

func finite(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }

// readings checks the readings and that they vary.
func readings(x []float64, least int) error {
	if len(x) > MaxReadings {
		return invalid("at most %d readings are taken at once, got %d", MaxReadings, len(x))
	}
	if err := sample.Check(x, least); err != nil {
		return err
	}
	for _, v := range x[1:] {
		if v != x[0] {
			return nil
		}
	}
	return fmt.Errorf("capability: %w", sample.ErrZeroSpread)
}

func confidenceOK(c float64) error {
	if !(c > 0 && c < 1) {
		return invalid("the confidence must lie between 0 and 1, got %g", c)
	}
	return nil
}
