// Package wordstest registers a pseudo-locale: English with accents, in brackets
// and about a third longer. A page shown in it gives away words that bypass the
// catalogue (they look like English), words that are cut off (the bracket is
// gone), and layouts that break with longer languages. Only tests import it.
package wordstest

import (
	"strings"
	"sync"
	"testing"
	"unicode"

	"holdfast/web/words"
)

// Lang is the language tag of the pseudo-locale; put it into the cookie
// words.Cookie, or into Accept-Language.
const Lang = "en-XA"

var once sync.Once

// Register makes the pseudo-locale known to this test binary.
func Register(t testing.TB) *words.Printer {
	t.Helper()
	var err error
	once.Do(func() {
		pseudo := make(words.Dictionary)
		for k, m := range words.English() {
			pseudo[k] = m.Map(Disguise)
		}
		err = words.Register(Lang, pseudo)
	})
	if err != nil {
		t.Fatalf("register the pseudo-locale: %v", err)
	}
	return words.For(Lang)
}

// LanguageNames are the languages as the switch names them: each in itself, so they look
// translated in no language.
func LanguageNames() []string {
	var names []string
	for _, lang := range words.Languages() {
		names = append(names, words.For(lang).T("ui.language"))
	}
	return names
}

var accents = strings.NewReplacer(
	"a", "á", "e", "ë", "i", "î", "o", "ö", "u", "û", "c", "ç", "n", "ñ", "s", "š", "y", "ý", "z", "ž",
	"A", "Á", "E", "Ë", "I", "Î", "O", "Ö", "U", "Û", "C", "Ç", "N", "Ñ", "S", "Š", "Y", "Ý", "Z", "Ž")

// Disguise turns a format into its pseudo-locale form. Verbs and names in braces
// stay as they are, as do formats that hold no letter of their own.
func Disguise(format string) string {
	var out strings.Builder
	letters := 0
	for rest := format; rest != ""; {
		cut := strings.IndexAny(rest, "%{")
		if cut < 0 {
			cut = len(rest)
		}
		plain := rest[:cut]
		for _, r := range plain {
			if unicode.IsLetter(r) {
				letters++
			}
		}
		out.WriteString(accents.Replace(plain))
		rest = rest[cut:]
		if rest == "" {
			break
		}
		end := verbEnd(rest)
		out.WriteString(rest[:end])
		rest = rest[end:]
	}
	if letters == 0 {
		return format
	}
	return "⟦" + out.String() + strings.Repeat("~", (letters+2)/3) + "⟧"
}

// verbEnd is the length of the verb ("%[2]d", "%%") or braces ("{time}") that s
// begins with.
func verbEnd(s string) int {
	if s[0] == '{' {
		if i := strings.IndexByte(s, '}'); i >= 0 {
			return i + 1
		}
		return 1
	}
	for i := 1; i < len(s); i++ {
		if c := s[i]; c == '%' || c >= 'a' && c <= 'z' || c >= 'A' && c <= 'Z' {
			return i + 1
		}
	}
	return len(s)
}
