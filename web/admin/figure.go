package admin

import (
	"math"
	"strconv"
	"strings"

	"holdfast/web/ui"
)

// Significant digits that figures are written with. A double holds 15 to 17; beyond
// twelve they are the noise of its last places. A difference and its allowance are
// there to be compared in size.
const (
	valueDigits = 12
	sizeDigits  = 3
)

// figure is a real number as it is printed: Power is empty unless the text is to be
// multiplied by that power of ten.
type figure struct{ Text, Power string }

// newFigure writes v with at most so many significant digits and no zeros at its end.
// Sizes that would need many zeros get a power of ten.
func newFigure(f ui.Format, v float64, digits int) figure {
	if v == 0 || math.IsNaN(v) || math.IsInf(v, 0) {
		return figure{Text: f.Number(v, 0)}
	}
	rounded := strconv.FormatFloat(v, 'e', digits-1, 64)
	mantissa, power, _ := strings.Cut(rounded, "e")
	_, after, _ := strings.Cut(mantissa, ".")
	decimals := len(strings.TrimRight(after, "0"))
	exponent, _ := strconv.Atoi(power) // FormatFloat wrote it
	if exponent >= -4 && exponent < valueDigits {
		x, _ := strconv.ParseFloat(rounded, 64)
		return figure{Text: f.Number(x, max(0, decimals-exponent))}
	}
	x, _ := strconv.ParseFloat(mantissa, 64)
	return figure{Text: f.Number(x, decimals), Power: f.Number(float64(exponent), 0)}
}
