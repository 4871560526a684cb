package auth

import (
	"strings"
	"unicode/utf8"

	"holdfast/internal/plant"
)

// Bounds of a PIN. Four to twelve digits is what ISO 9564-1 allows for cards (from
// memory); NIST SP 800-63B-4, 3.2.10, asks for at least four where the secret only
// unlocks what somebody holds and recommends six (from memory). A PIN here counts only on
// an enrolled tablet and is slowed down there, and six digits can still be typed with
// gloves.
const (
	MinPIN = 6
	MaxPIN = 12
)

// CheckPIN says what is wrong with a chosen PIN, or nil: digits only, long enough, no
// repetition or sequence, at least three different digits, and not made of the badge.
func CheckPIN(pin Secret, badge string) error {
	text, _ := pin.normal()
	n := utf8.RuneCountInString(text)
	different := map[rune]bool{}
	for _, r := range text {
		if r < '0' || r > '9' {
			return plant.Invalidf("pin", "A PIN is made of digits only.")
		}
		different[r] = true
	}
	switch {
	case n < MinPIN || n > MaxPIN:
		return plant.Invalidf("pin", "A PIN has %d to %d digits.", MinPIN, MaxPIN)
	case monotonous(text) || len(different) < 3:
		return plant.Invalidf("pin", "This PIN is a simple repetition or sequence. Choose another.")
	}
	if digits := strings.Map(digitsOnly, badge); len(digits) >= 4 && (strings.Contains(text, digits) || strings.Contains(digits, text)) {
		return plant.Invalidf("pin", "This PIN is the number of the badge. Choose another.")
	}
	return nil
}

// RandomPIN makes a PIN that CheckPIN lets pass, for somebody with this badge.
func RandomPIN(badge string) Secret {
	for {
		var b strings.Builder
		for range MinPIN {
			b.WriteByte(byte('0' + randomBelow(10)))
		}
		if CheckPIN(Secret(b.String()), badge) == nil {
			return Secret(b.String())
		}
	}
}
