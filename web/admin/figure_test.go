package admin

import (
	"math"
	"testing"
)

func TestFiguresAreWrittenWithoutNoise(t *testing.T) {
	t.Parallel()
	tenth := 0.1
	for _, tc := range []struct {
		v      float64
		digits int
		want   figure
	}{
		{tenth + 0.2, valueDigits, figure{Text: "0.3"}},
		{73.9984, valueDigits, figure{Text: "73.9984"}},
		{1.1283791670955128, valueDigits, figure{Text: "1.1283791671"}},
		{-0.12094862296739294, valueDigits, figure{Text: "−0.120948622967"}},
		{125, valueDigits, figure{Text: "125"}},
		{200000, valueDigits, figure{Text: "200000"}},
		{123456789012.4, valueDigits, figure{Text: "123456789012"}},
		{999999999999.9, valueDigits, figure{Text: "1", Power: "12"}}, // rounds up into the next power
		{3.2966356768827673e-06, valueDigits, figure{Text: "3.29663567688", Power: "−6"}},
		{6.02214076e23, valueDigits, figure{Text: "6.02214076", Power: "23"}},
		{0.0005000005, sizeDigits, figure{Text: "0.0005"}},
		{0.0000999, sizeDigits, figure{Text: "9.99", Power: "−5"}},
		{-4.8716586e-13, sizeDigits, figure{Text: "−4.87", Power: "−13"}},
		{1234.5, sizeDigits, figure{Text: "1230"}},
		{0, sizeDigits, figure{Text: "0"}},
		{math.Copysign(0, -1), valueDigits, figure{Text: "0"}},
		{math.NaN(), valueDigits, figure{}},
		{math.Inf(1), valueDigits, figure{}},
	} {
		if got := newFigure(format(), tc.v, tc.digits); got != tc.want {
			t.Errorf("%v with %d digits: %+v, want %+v", tc.v, tc.digits, got, tc.want)
		}
	}
}
