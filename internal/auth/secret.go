package auth

import (
	"crypto/rand"
	"fmt"
	"io"
	"log/slog"
	"math/big"
	"strings"
	"unicode/utf8"

	"golang.org/x/text/unicode/norm"

	"holdfast/internal/plant"
)

// Secret is a password as it was typed. Whatever prints, logs or encodes it
// gets a placeholder; string(s) is the one way to its text.
type Secret string

const hidden = "[secret]"

func (Secret) String() string               { return hidden }
func (Secret) LogValue() slog.Value         { return slog.StringValue(hidden) }
func (Secret) MarshalJSON() ([]byte, error) { return []byte(`"` + hidden + `"`), nil }
func (Secret) MarshalText() ([]byte, error) { return []byte(hidden), nil }
func (Secret) Format(f fmt.State, _ rune)   { _, _ = io.WriteString(f, hidden) } // also for verbs that do not fit, such as %d
func (Secret) GobEncode() ([]byte, error) {
	return nil, fmt.Errorf("auth: a secret is not to be stored")
}

const (
	// MaxLength is the most characters a secret may have. It is never cut.
	MaxLength = 128
	// maxBytes bounds what is looked at before characters are counted; four
	// bytes a character, and as many again for what normalisation joins.
	maxBytes = 8 * MaxLength
	// leastMinLength is the least that Rules.MinLength may ask for.
	leastMinLength = 8
)

// normal brings a secret into the form that is hashed, so that the same
// characters typed on another keyboard are the same secret. ok is false when it
// is too long to be anybody's.
//
// NFKC: SP 800-63B (2017), 5.1.1.2, allows NFKC or NFKD; it also makes the full
// width digits of some keyboards plain ones.
func (s Secret) normal() (text string, ok bool) {
	if len(s) > maxBytes || !utf8.ValidString(string(s)) {
		return "", false
	}
	text = norm.NFKC.String(string(s))
	return text, utf8.RuneCountInString(text) <= MaxLength
}

// Rules say which secrets people may choose: long enough, and not what is tried
// first. There are no rules about kinds of characters and no expiry.
//
// Source: NIST SP 800-63B-4 (2025), 3.1.1.2: at least 15 characters where the
// secret alone lets somebody in, at least 8 where it is one of two factors;
// at least 64 allowed; each code point counts as one; no composition rules; no
// periodic change; compared with a blocklist (sequences, repetition, the login,
// the name of the service). A list of leaked secrets is not part of this
// program; a plant that has one may refuse more before calling Check.
type Rules struct {
	MinLength int // characters; 0 means 15, less than 8 means 8
}

// Check says what is wrong with a chosen secret, or nil. own are words about the
// person, such as login and name, that may not make up the secret.
func (r Rules) Check(s Secret, own ...string) error {
	least := r.MinLength
	if least == 0 {
		least = 15
	}
	least = max(least, leastMinLength)
	text, ok := s.normal()
	n := utf8.RuneCountInString(text)
	switch {
	case !utf8.ValidString(string(s)):
		return plant.Invalidf("password", "This password holds characters that cannot be stored. Choose another.")
	case !ok:
		return plant.Invalidf("password", "A password may have at most %d characters.", MaxLength)
	case n < least:
		return plant.Invalidf("password", "A password needs at least %d characters; this one has %d. Several words in a row are fine.", least, n)
	case monotonous(text):
		return plant.Invalidf("password", "This password is a simple repetition or sequence. Choose another.")
	}
	rest := squash(text)
	for _, word := range strings.Fields("holdfast password " + strings.Join(own, " ")) {
		// Two letters would strike out half of any text.
		if w := squash(word); utf8.RuneCountInString(w) > 2 {
			rest = strings.ReplaceAll(rest, w, "")
		}
	}
	if utf8.RuneCountInString(rest) < leastMinLength/2 {
		return plant.Invalidf("password", "This password is little more than a name that others know. Choose another.")
	}
	return nil
}

// squash keeps what is left of a text when case and spaces do not count.
func squash(s string) string {
	return strings.Join(strings.Fields(strings.ToLower(norm.NFKC.String(s))), "")
}

// monotonous reports a text made of a repeated piece of up to four characters,
// or of steps of one up or down the alphabet, the digits or a keyboard's rows.
func monotonous(s string) bool {
	runes := []rune(squash(s))
	for period := 1; period <= 4 && period*2 <= len(runes); period++ {
		same := true
		for i := period; i < len(runes) && same; i++ {
			same = runes[i] == runes[i-period]
		}
		if same {
			return true
		}
	}
	const rows = "abcdefghijklmnopqrstuvwxyz 0123456789012345 qwertyuiop asdfghjkl zxcvbnm qwertzuiop yxcvbnm azertyuiop"
	steps := 0
	for i := 1; i < len(runes); i++ {
		up, down := string(runes[i-1:i+1]), string([]rune{runes[i], runes[i-1]})
		if strings.Contains(rows, up) || strings.Contains(rows, down) {
			steps++
		}
	}
	// A break or two between rows does not make it better.
	return len(runes) > 1 && steps >= len(runes)-1-len(runes)/6
}

// RandomSecret makes a secret that is easy to read out and to type: four groups
// of two syllables, about 49 bits. It is for demos and first passwords.
func RandomSecret() Secret {
	const consonants, vowels = "bdfghklmnprstvwz", "aeiou" // none that look or sound alike when read out
	var b strings.Builder
	for i := range 8 {
		if i > 0 && i%2 == 0 {
			b.WriteByte('-')
		}
		b.WriteByte(consonants[randomBelow(len(consonants))])
		b.WriteByte(vowels[randomBelow(len(vowels))])
	}
	return Secret(b.String())
}

func randomBelow(n int) int64 {
	v, err := rand.Int(rand.Reader, big.NewInt(int64(n)))
	if err != nil { // crypto/rand's reader does not fail
		panic("auth: no random numbers: " + err.Error())
	}
	return v.Int64()
}
