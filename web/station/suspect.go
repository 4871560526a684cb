package station

import (
	"math"
	"strconv"

	"holdfast/internal/plant"
	"holdfast/internal/spc/slip"
)

// expected is which readings are usual: around the centre of the revision in force,
// else within the specification. ok is false when nothing is known. In deviation
// entry everything is counted in whole last digits from the target, as it is typed.
func expected(c plant.CharacteristicState, deviation bool) (e slip.Expected, ok bool) {
	origin, scale := 0.0, 1.0
	if deviation && c.Setup.Target != nil {
		origin, scale = c.Setup.Target.Float(), math.Pow10(c.Setup.Decimals)
	}
	var err error
	switch s := c.Setup; {
	case c.Revision != nil:
		e, err = slip.AroundCenter((c.Revision.Center-origin)*scale, c.Revision.Sigma*scale)
	case s.Lower != nil && s.Upper != nil:
		e, err = slip.WithinRange((s.Lower.Float()-origin)*scale, (s.Upper.Float()-origin)*scale)
	default:
		return e, false
	}
	return e, err == nil
}

// suspect reports whether a reading must be looked at and typed again: it is far from
// what is usual and was not typed the same before.
func suspect(c plant.CharacteristicState, r draftReading, deviation bool) bool {
	for _, first := range r.First {
		if units, err := parse(first, c.Setup, deviation); err == nil && units == r.Units {
			return false
		}
	}
	e, ok := expected(c, deviation)
	if !ok {
		return false
	}
	decimals := c.Setup.Decimals
	if deviation && c.Setup.Target != nil {
		decimals = 0
	}
	found, err := e.Check(r.Raw, decimals)
	return err == nil && found.Suspect
}

// askOutside is the interval of readings, in whole last digits, outside of which a
// reading is asked for once more. It is found by asking, so that the page and the
// server can never differ.
func askOutside(c plant.CharacteristicState) (low, high int64, ok bool) {
	e, ok := expected(c, false)
	if !ok {
		return 0, 0, false
	}
	center := 0.0
	if c.Revision != nil {
		center = c.Revision.Center
	} else {
		center = (c.Setup.Lower.Float() + c.Setup.Upper.Float()) / 2
	}
	middle := int64(math.Round(center * math.Pow10(c.Setup.Decimals)))
	usual := func(units int64) bool {
		found, err := e.Check(plant.FormatUnits(units, c.Setup.Decimals), c.Setup.Decimals)
		return err == nil && !found.Suspect
	}
	if !usual(middle) {
		return 0, 0, false
	}
	return middle - reach(func(d int64) bool { return usual(middle - d) }), middle + reach(func(d int64) bool { return usual(middle + d) }), true
}

// reach is the largest distance at which inside holds; it holds at 0 and, once it
// fails, for no larger one.
func reach(inside func(d int64) bool) int64 {
	in, out := int64(0), int64(1)
	for inside(out) {
		if in = out; out > math.MaxInt32 {
			return in
		}
		out *= 2
	}
	for out-in > 1 {
		if mid := in + (out-in)/2; inside(mid) {
			in = mid
		} else {
			out = mid
		}
	}
	return in
}

func itoa(n int) string { return strconv.Itoa(n) }

// number reads a small whole number; anything else is 0.
func number(text string) int {
	n, err := strconv.Atoi(text)
	if err != nil || n < 0 {
		return 0
	}
	return n
}
