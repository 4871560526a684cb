package plant

import (
	"fmt"
	"math"
	"strconv"
	"strings"
)

// Bounds of what a reading or an exact decimal may be. They keep every sum of a
// subgroup of 25 and every cross-scaled comparison inside an int64.
const (
	MaxDecimals = 6
	maxUnits    = int64(1_000_000_000_000)
)

// Decimal is an exact decimal number, Units / 10^Decimals: a specification limit,
// a target, the size of an adjustment.
type Decimal struct {
	Units    int64
	Decimals int
}

var pow10 = [...]int64{1, 10, 100, 1_000, 10_000, 100_000, 1_000_000, 10_000_000, 100_000_000, 1_000_000_000}

// Float returns the nearest float64.
func (d Decimal) Float() float64 { return float64(d.Units) / float64(pow10[d.Decimals]) }

// Compare compares two decimals exactly: -1, 0 or +1.
func (d Decimal) Compare(o Decimal) int {
	a, b := d.Units, o.Units
	switch {
	case d.Decimals < o.Decimals:
		a *= pow10[o.Decimals-d.Decimals]
	case d.Decimals > o.Decimals:
		b *= pow10[d.Decimals-o.Decimals]
	}
	switch {
	case a < b:
		return -1
	case a > b:
		return 1
	}
	return 0
}

// String writes the number with its decimals and a point.
func (d Decimal) String() string { return FormatUnits(d.Units, d.Decimals) }

// MarshalText and UnmarshalText are String and ParseDecimal, so that a decimal
// stays exact in JSON and in the database.
func (d Decimal) MarshalText() ([]byte, error) { return []byte(d.String()), nil }

// UnmarshalText reads what MarshalText wrote.
func (d *Decimal) UnmarshalText(b []byte) error {
	v, err := ParseDecimal(string(b))
	if err == nil {
		*d = v
	}
	return err
}

// FormatUnits writes an integer in the last decimal as a number with a point: 12500
// with three decimals is "12.500".
func FormatUnits(units int64, decimals int) string {
	if decimals == 0 {
		return strconv.FormatInt(units, 10)
	}
	sign := ""
	u := uint64(units)
	if units < 0 {
		sign, u = "-", -u
	}
	digits := strconv.FormatUint(u, 10)
	if len(digits) <= decimals {
		digits = strings.Repeat("0", decimals-len(digits)+1) + digits
	}
	cut := len(digits) - decimals
	return sign + digits[:cut] + "." + digits[cut:]
}

// typed is a number as somebody typed it, taken apart.
type typed struct {
	negative bool
	digits   string // whole and fraction together
	decimals int
}

// takeApart reads an optional sign, digits and at most one decimal sign, which may
// be a comma or a point. It knows no exponents, no grouping, no NaN.
func takeApart(text string) (typed, bool) {
	s := strings.TrimSpace(text)
	var t typed
	switch {
	case strings.HasPrefix(s, "-"):
		t.negative, s = true, s[1:]
	case strings.HasPrefix(s, "\u2212"): // minus sign
		t.negative, s = true, s[len("\u2212"):]
	case strings.HasPrefix(s, "+"):
		s = s[1:]
	}
	whole, fraction, _ := strings.Cut(strings.Replace(s, ",", ".", 1), ".")
	t.digits, t.decimals = whole+fraction, len(fraction)
	if t.digits == "" || len(t.digits) > 18 {
		return t, false
	}
	for _, c := range []byte(t.digits) {
		if c < '0' || c > '9' {
			return t, false
		}
	}
	return t, true
}

// ParseDecimal reads an exact decimal of at most MaxDecimals decimals.
func ParseDecimal(text string) (Decimal, error) {
	t, ok := takeApart(text)
	if !ok {
		return Decimal{}, fmt.Errorf("%q is not a number", text)
	}
	for t.decimals > MaxDecimals && strings.HasSuffix(t.digits, "0") {
		t.digits, t.decimals = t.digits[:len(t.digits)-1], t.decimals-1
	}
	if t.decimals > MaxDecimals {
		return Decimal{}, fmt.Errorf("%q has more than %d decimals", text, MaxDecimals)
	}
	u, err := strconv.ParseInt(t.digits, 10, 64)
	if err != nil || u >= maxUnits {
		return Decimal{}, fmt.Errorf("%q is too large", text)
	}
	if t.negative {
		u = -u
	}
	return Decimal{Units: u, Decimals: t.decimals}, nil
}

// ParseReading reads what was typed for one reading as an integer in the last
// decimal of the characteristic. Fewer decimals than the characteristic has are
// filled up; more are refused unless they are zeros, because rounding is not the
// program's business.
func ParseReading(text string, decimals int) (int64, error) {
	t, ok := takeApart(text)
	if !ok {
		if strings.TrimSpace(text) == "" {
			return 0, Invalidf("", "Nothing was typed here yet.")
		}
		return 0, Invalidf("", "This is not a number. Type it again.")
	}
	for t.decimals > decimals && strings.HasSuffix(t.digits, "0") {
		t.digits, t.decimals = t.digits[:len(t.digits)-1], t.decimals-1
	}
	if t.decimals > decimals {
		if decimals == 0 {
			return 0, Invalidf("", "This is measured in whole numbers.")
		}
		return 0, Invalidf("", "This has more decimals than are measured (%d).", decimals)
	}
	if t.digits == "" {
		t.digits = "0"
	}
	if len(t.digits)+decimals-t.decimals > 18 {
		return 0, Invalidf("", "This number is too large to be a reading.")
	}
	u, err := strconv.ParseInt(t.digits+strings.Repeat("0", decimals-t.decimals), 10, 64)
	if err != nil || u >= maxUnits {
		return 0, Invalidf("", "This number is too large to be a reading.")
	}
	if t.negative {
		u = -u
	}
	return u, nil
}

// ParseDeviation reads a deviation from target, typed in the unit's last digit
// ("+3" is three hundredths where two decimals are measured), and returns the
// reading it stands for.
func ParseDeviation(text string, decimals int, target Decimal) (int64, error) {
	d, err := ParseReading(text, 0)
	if err != nil {
		return 0, err
	}
	t, err := target.In(decimals)
	if err != nil {
		return 0, err
	}
	return t + d, nil
}

// In returns the decimal as an integer with so many decimals; it refuses to round.
func (d Decimal) In(decimals int) (int64, error) {
	if d.Decimals <= decimals {
		return d.Units * pow10[decimals-d.Decimals], nil
	}
	p := pow10[d.Decimals-decimals]
	if d.Units%p != 0 {
		return 0, Invalidf("", "%s has more decimals than are measured (%d).", d, decimals)
	}
	return d.Units / p, nil
}

// FormatFloat writes a computed figure, such as a mean, with so many decimals; what
// would be written as minus zero is written as zero.
func FormatFloat(v float64, decimals int) string {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return ""
	}
	s := strconv.FormatFloat(v, 'f', decimals, 64)
	if strings.HasPrefix(s, "-") && strings.Trim(s, "-0.") == "" {
		return s[1:]
	}
	return s
}
