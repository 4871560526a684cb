package watch

import "fmt"

// Side is where a signal lies: above the centre or below it, rising or falling.
type Side uint8

// A two-sided CUSUM can be out on both sides at once, so the sides are bits.
const (
	None Side = 0
	High Side = 1
	Low  Side = 2
	Both Side = High | Low
)

func (s Side) String() string {
	switch s {
	case None:
		return "neither side"
	case High:
		return "high side"
	case Low:
		return "low side"
	case Both:
		return "both sides"
	}
	return fmt.Sprintf("side %d", uint8(s))
}

// Better reports whether a signal on this side is a change for the better, given
// which direction is worse (None when it is not known or both are). A signal
// without a side, or on both, is never called better. For a dispersion chart the
// worse direction is High.
func (s Side) Better(worse Side) bool {
	return worse == High && s == Low || worse == Low && s == High
}

// Describe says a firing in words, as in "2 of 3 beyond 2 sigma, high side" or
// "spread: 8 on the low side". The dispersion chart is the spread.
func Describe(rule Rule, side Side, dispersion bool) string {
	words := rule.String()
	oneSided := side == High || side == Low
	switch {
	case !oneSided:
	case rule.Kind == Beyond:
		words = fmt.Sprintf("beyond %s, %s", rule.distance(), side)
	case rule.Kind == KOfM:
		words = fmt.Sprintf("%d of %d beyond %s, %s", rule.K, rule.M, rule.distance(), side)
	case rule.Kind == OneSide:
		words = fmt.Sprintf("%d on the %s", rule.M, side)
	case rule.Kind == RisingOrFalling && side == High:
		words = fmt.Sprintf("%d rising", rule.M)
	case rule.Kind == RisingOrFalling:
		words = fmt.Sprintf("%d falling", rule.M)
	}
	if dispersion {
		return "spread: " + words
	}
	return words
}
