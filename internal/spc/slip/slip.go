// Package slip asks whether a typed reading may be a slip of the hand: a
// decimal sign in the wrong place, two digits swapped, one lost or doubled.
//
// It knows what readings are expected, from limits or from a range, and the
// text that was typed. It never corrects anything: a candidate only says that
// one single mistake would explain the text. Most genuine readings far out have
// such an explanation too, so a person must look at the gauge again.
//
// The kinds of mistake are common practice in keyed data entry; no published
// source is claimed for them or for the distances of six and three sigma.
package slip

import (
	"errors"
	"fmt"
	"math"
	"sort"
	"strconv"
	"strings"
)

// Limits of what Check takes. They bound its time: the number of texts tried
// grows with the length of what was typed.
const (
	MaxTyped    = 40 // characters in a typed reading
	MaxDecimals = 15 // decimals of a characteristic
)

// suspectSigmas and nearSigmas are the distances from the centre beyond which
// a reading is suspect and within which a candidate must lie.
const (
	suspectSigmas = 6
	nearSigmas    = 3
	tie           = 1e-9 // distances equal to this share of sigma are equal
)

// ErrInput is wrapped by every error of this package.
var ErrInput = errors.New("slip")

// Expected says which readings are usual and which are so far out that they
// should be looked at again. Make one with [AroundCenter] or [WithinRange].
type Expected struct {
	center             float64 // candidates are ordered by distance from here
	usualLow, usualTop float64
	farLow, farTop     float64
}

// AroundCenter expects readings near center with standard deviation sigma of a
// single reading, both in the characteristic's unit: suspect is what lies more
// than 6 sigma away, a candidate lies within 3 sigma. It fails when a value is
// not finite or sigma is not above zero.
func AroundCenter(center, sigma float64) (Expected, error) {
	if !finite(center) {
		return Expected{}, fmt.Errorf("%w: center is not a number", ErrInput)
	}
	if !finite(sigma) || sigma <= 0 {
		return Expected{}, fmt.Errorf("%w: sigma must be above zero", ErrInput)
	}
	usual, far := sigma*(nearSigmas+tie), sigma*(suspectSigmas+tie)
	return checked(Expected{
		center:   center,
		usualLow: center - usual, usualTop: center + usual,
		farLow: center - far, farTop: center + far,
	})
}

// WithinRange expects readings from lower to upper, both in the
// characteristic's unit: the range of the gauge or of the specification, for
// use before there are limits. Suspect is what lies outside the range widened
// by its width on either side; a candidate lies inside the range itself. It
// fails when a value is not finite or upper is not above lower.
func WithinRange(lower, upper float64) (Expected, error) {
	if !finite(lower) || !finite(upper) {
		return Expected{}, fmt.Errorf("%w: the range needs a lower and an upper end", ErrInput)
	}
	if upper <= lower {
		return Expected{}, fmt.Errorf("%w: the upper end of the range must be above the lower end", ErrInput)
	}
	width := upper - lower
	slack := width * tie
	return checked(Expected{
		center:   lower + width/2,
		usualLow: lower - slack, usualTop: upper + slack,
		farLow: lower - width - slack, farTop: upper + width + slack,
	})
}

// checked refuses an expectation whose bounds overflowed.
func checked(e Expected) (Expected, error) {
	for _, v := range []float64{e.center, e.usualLow, e.usualTop, e.farLow, e.farTop} {
		if !finite(v) {
			return Expected{}, fmt.Errorf("%w: center, sigma or range are too large", ErrInput)
		}
	}
	if e.slack() <= 0 || e.usualTop-e.usualLow <= 0 {
		return Expected{}, fmt.Errorf("%w: sigma or range are too small beside the center", ErrInput)
	}
	return e, nil
}

// slack is the difference below which two distances count as equal.
func (e Expected) slack() float64 { return (e.usualTop - e.usualLow) * tie }

// Finding is the answer of [Expected.Check].
type Finding struct {
	// Suspect says that the reading is so far out that the gauge should be
	// looked at and the reading typed again.
	Suspect bool
	// Candidates are the readings that one single mistake would explain,
	// nearest to the centre first (the lower one first of two equally near),
	// none twice, written with the characteristic's decimals and a point. It
	// is empty when the reading is not suspect.
	Candidates []string
}

// Check judges one typed reading: an optional sign, digits and at most one
// decimal sign, which may be a point or a comma. decimals is the number of
// decimals of the characteristic, 0 to MaxDecimals.
//
// A suspect reading is tried as ten and a hundred times as large and as small,
// with two neighbouring digits swapped, with one digit put in (it was dropped),
// with one of two equal neighbours taken out (it was doubled), with the other
// sign, and, when it has no decimal sign, with the sign put where the decimals
// want it. A candidate must be writable with the given decimals without
// rounding, since rounding would be a second mistake.
//
// Text that is no number, is longer than MaxTyped or has decimals out of
// range is an error.
func (e Expected) Check(typed string, decimals int) (Finding, error) {
	if e.farTop <= e.farLow {
		return Finding{}, fmt.Errorf("%w: nothing is known about the readings to expect", ErrInput)
	}
	if decimals < 0 || decimals > MaxDecimals {
		return Finding{}, fmt.Errorf("%w: decimals must be 0 to %d, got %d", ErrInput, MaxDecimals, decimals)
	}
	n, err := parse(typed)
	if err != nil {
		return Finding{}, err
	}
	if x := n.value(); x >= e.farLow && x <= e.farTop {
		return Finding{}, nil
	}
	return Finding{Suspect: true, Candidates: e.candidates(n, decimals)}, nil
}

// candidates collects the readings inside the usual range that are one mistake
// away from what was typed.
func (e Expected) candidates(typed number, decimals int) []string {
	type found struct {
		text     string
		value    float64
		distance float64
	}
	var all []found
	seen := map[string]bool{}
	for _, n := range oneMistake(typed, decimals) {
		text, ok := n.write(decimals)
		if !ok || seen[text] {
			continue
		}
		seen[text] = true
		v, err := strconv.ParseFloat(text, 64)
		if err != nil || v < e.usualLow || v > e.usualTop {
			continue
		}
		all = append(all, found{text, v, math.Abs(v - e.center)})
	}
	// Two candidates equally far on either side differ in the last bits.
	slack := e.slack()
	sort.Slice(all, func(i, j int) bool { return all[i].value < all[j].value })
	sort.SliceStable(all, func(i, j int) bool {
		return math.Round(all[i].distance/slack) < math.Round(all[j].distance/slack)
	})
	texts := make([]string, len(all))
	for i, f := range all {
		texts[i] = f.text
	}
	return texts
}

func finite(v float64) bool { return !math.IsNaN(v) && !math.IsInf(v, 0) }

// number is a decimal number kept as it was typed, so that trying other
// readings involves no rounding: its value is ±digits·10^-scale.
type number struct {
	negative bool
	digits   string
	scale    int
	signed   bool // a decimal sign was typed
}

func parse(typed string) (number, error) {
	s := strings.TrimSpace(typed)
	if len(s) > MaxTyped {
		return number{}, fmt.Errorf("%w: the reading has more than %d characters", ErrInput, MaxTyped)
	}
	var n number
	if s != "" && (s[0] == '-' || s[0] == '+') {
		n.negative = s[0] == '-'
		s = s[1:]
	}
	var digits strings.Builder
	for i := range len(s) {
		switch c := s[i]; {
		case c >= '0' && c <= '9':
			digits.WriteByte(c)
			if n.signed {
				n.scale++
			}
		case (c == '.' || c == ',') && !n.signed:
			n.signed = true
		default:
			return number{}, fmt.Errorf("%w: the reading %q is not a number", ErrInput, typed)
		}
	}
	if digits.Len() == 0 {
		return number{}, fmt.Errorf("%w: the reading %q has no digits", ErrInput, typed)
	}
	n.digits = digits.String()
	return n, nil
}

// value is the nearest float64; with at most MaxTyped digits it is finite.
func (n number) value() float64 {
	v, _ := strconv.ParseFloat(n.digits+"e"+strconv.Itoa(-n.scale), 64)
	if n.negative {
		return -v
	}
	return v
}

// write gives the number with exactly the decimals wanted, or false when that
// would need rounding.
func (n number) write(decimals int) (string, bool) {
	digits, scale := n.digits, n.scale
	for scale > decimals {
		if digits == "" {
			break
		}
		if digits[len(digits)-1] != '0' {
			return "", false
		}
		digits = digits[:len(digits)-1]
		scale--
	}
	if digits == "" {
		scale = decimals
	}
	if scale < decimals {
		digits += strings.Repeat("0", decimals-scale)
	}
	digits = strings.TrimLeft(digits, "0")
	zero := digits == ""
	if len(digits) <= decimals {
		digits = strings.Repeat("0", decimals-len(digits)+1) + digits
	}
	text := digits
	if decimals > 0 {
		cut := len(digits) - decimals
		text = digits[:cut] + "." + digits[cut:]
	}
	if n.negative && !zero {
		text = "-" + text
	}
	return text, true
}

// oneMistake lists the numbers that a single mistake could have turned into
// the one typed. Numbers may come more than once.
func oneMistake(n number, decimals int) []number {
	var out []number
	with := func(digits string, scale int) {
		m := n
		m.digits, m.scale = digits, scale
		out = append(out, m)
	}
	for _, shift := range []int{-2, -1, 1, 2} {
		scale, digits := n.scale+shift, n.digits
		if scale < 0 {
			digits += strings.Repeat("0", -scale)
			scale = 0
		}
		with(digits, scale)
	}
	if !n.signed && decimals > 0 {
		with(n.digits, decimals)
	}
	whole := len(n.digits) - n.scale // digits before the decimal sign
	for i := 0; i+1 < len(n.digits); i++ {
		a, b := n.digits[i], n.digits[i+1]
		if a == b {
			// Equal digits astride the decimal sign were not one key pressed
			// twice.
			switch rest := n.digits[:i] + n.digits[i+1:]; {
			case i+1 < whole:
				with(rest, n.scale)
			case i >= whole:
				with(rest, n.scale-1)
			}
			continue
		}
		with(n.digits[:i]+string([]byte{b, a})+n.digits[i+2:], n.scale)
	}
	for i := 0; i <= len(n.digits); i++ {
		for d := byte('0'); d <= '9'; d++ {
			digits := n.digits[:i] + string(d) + n.digits[i:]
			if i <= whole {
				with(digits, n.scale)
			}
			if i >= whole {
				with(digits, n.scale+1)
			}
		}
	}
	flipped := n
	flipped.negative = !n.negative
	return append(out, flipped)
}
