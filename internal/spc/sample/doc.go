// Package sample summarises readings: means, standard deviations, medians, moving
// ranges, lag-1 correlation, skewness, and the Anderson-Darling test of normality.
//
// Sums are compensated and variances are taken about the mean in a second pass, so
// that readings with a large common part (10000000.2, 10000000.3) keep the digits
// they have. It uses the standard library only.
//
// Too few readings, a NaN or infinity among them, a result beyond the largest
// number, and zero spread where a quotient by the spread is asked for, are errors;
// no function returns a NaN without one.
package sample

import (
	"errors"
	"fmt"
	"math"
)

var (
	// ErrTooFew marks fewer readings than the statistic needs.
	ErrTooFew = errors.New("too few readings")
	// ErrNotFinite marks a NaN or an infinity among the readings, or readings so
	// large that the result is beyond the largest number.
	ErrNotFinite = errors.New("readings must be finite numbers")
	// ErrZeroSpread marks readings that are all equal where a spread is divided by.
	ErrZeroSpread = errors.New("all readings are equal")
)

// Check returns an error when there are fewer than least readings or one of them is
// not a finite number; the error names its position, counted from 1.
func Check(x []float64, least int) error {
	if len(x) < least {
		return fmt.Errorf("%w: at least %d are needed, got %d", ErrTooFew, least, len(x))
	}
	for i, v := range x {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return fmt.Errorf("%w: reading %d is %g", ErrNotFinite, i+1, v)
		}
	}
	return nil
}
