package words

import (
	"context"
	"net/http"
	"sync/atomic"

	"golang.org/x/text/language"
	"golang.org/x/text/message"
)

// Printer says words in one language. It is safe for concurrent use.
type Printer struct {
	tag  language.Tag
	dict map[string]entry
	base map[string]entry // English, for keys that dict lacks
	says map[string]bool  // surfaces of which it has words
	out  *message.Printer
}

// T returns the words of a key with its arguments put in. A key that is in no
// catalogue comes back in brackets, which no test lets pass.
func (p *Printer) T(key string, args ...any) string {
	if _, ok := p.dict[key]; !ok {
		if _, ok := p.base[key]; !ok {
			return "[" + key + "]"
		}
	}
	return p.out.Sprintf(key, args...)
}

// Has reports whether the key has words.
func (p *Printer) Has(key string) bool {
	_, own := p.dict[key]
	_, base := p.base[key]
	return own || base
}

// On is the printer for the pages of a surface ("station", "board"): this one when its
// language has words of that surface, else the English one, so that no page mixes
// two languages. A test holds the words of a surface complete once there are any.
func (p *Printer) On(surface string) *Printer {
	if p.says[surface] {
		return p
	}
	return current.Load().printers[language.English.String()]
}

// Lang is the language as the lang attribute of a page wants it.
func (p *Printer) Lang() string { return p.tag.String() }

// shelf is all languages at one moment; registering one makes a new shelf.
type shelf struct {
	tags     []language.Tag // English first
	printers map[string]*Printer
	matcher  language.Matcher
}

var current atomic.Pointer[shelf]

// For returns the printer of a language, such as "en", or of the nearest one that
// there is.
func For(lang string) *Printer {
	return current.Load().match(lang)
}

// Known returns the printer of exactly this language; false when there is none.
func Known(lang string) (*Printer, bool) {
	p, ok := current.Load().printers[lang]
	return p, ok
}

// Languages lists what there is, English first.
func Languages() []string {
	s := current.Load()
	out := make([]string, len(s.tags))
	for i, t := range s.tags {
		out[i] = t.String()
	}
	return out
}

func (s *shelf) match(wanted ...string) *Printer {
	_, i := language.MatchStrings(s.matcher, wanted...)
	return s.printers[s.tags[i].String()]
}

type contextKey struct{}

// Into makes From return p for requests with this context.
func Into(ctx context.Context, p *Printer) context.Context {
	return context.WithValue(ctx, contextKey{}, p)
}

// Cookie is the name of the cookie in which a browser keeps its language.
const Cookie = "language"

// From returns the printer of a request: the one that was put into its context,
// else the language of its cookie, else the best of what the browser asks for.
func From(r *http.Request) *Printer {
	if p, ok := r.Context().Value(contextKey{}).(*Printer); ok {
		return p
	}
	var wanted []string
	if c, err := r.Cookie(Cookie); err == nil {
		wanted = append(wanted, c.Value)
	}
	return current.Load().match(append(wanted, r.Header.Get("Accept-Language"))...)
}

// Count writes a whole number with the grouping of the language, "1,340".
func (p *Printer) Count(n int) string { return p.out.Sprint(n) }
