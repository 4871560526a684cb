package words

import (
	"embed"
	"encoding/json"
	"fmt"
	"io/fs"
	"path"
	"strconv"
	"strings"
	"sync"

	"golang.org/x/text/feature/plural"
	"golang.org/x/text/language"
	"golang.org/x/text/message"
	"golang.org/x/text/message/catalog"
)

//go:embed en/*.json de/*.json es/*.json
var embedded embed.FS

// Files is the embedded catalogue, one folder a language.
func Files() fs.FS { return embedded }

// Message is the words of one key before arguments are put in: one format, or one
// a plural form.
type Message struct {
	Text   string            // when there are no forms
	Plural int               // the argument that decides, from 1
	Forms  map[string]string // by selector: "one", "other", "=0"
}

// UnmarshalJSON reads a string or an object of forms.
func (m *Message) UnmarshalJSON(data []byte) error {
	if len(data) > 0 && data[0] == '"' {
		return json.Unmarshal(data, &m.Text)
	}
	var raw map[string]any
	if err := json.Unmarshal(data, &raw); err != nil {
		return err
	}
	m.Plural, m.Forms = 1, make(map[string]string, len(raw))
	for k, v := range raw {
		switch v := v.(type) {
		case float64:
			if k != "plural" || v < 1 || v > 9 || v != float64(int(v)) {
				return fmt.Errorf("%q: only \"plural\" is a number, that of an argument", k)
			}
			m.Plural = int(v)
		case string:
			if !validSelector(k) {
				return fmt.Errorf("%q is no plural form", k)
			}
			m.Forms[k] = v
		default:
			return fmt.Errorf("%q is neither text nor a number", k)
		}
	}
	if m.Forms["other"] == "" {
		return fmt.Errorf("the form \"other\" is missing")
	}
	return nil
}

func validSelector(s string) bool {
	switch s {
	case "zero", "one", "two", "few", "many", "other":
		return true
	}
	if rest, ok := strings.CutPrefix(s, "="); ok {
		_, err := strconv.Atoi(rest)
		return err == nil
	}
	return false
}

// Formats lists the formats of the message.
func (m Message) Formats() []string {
	if m.Forms == nil {
		return []string{m.Text}
	}
	var out []string
	for _, f := range m.Forms {
		out = append(out, f)
	}
	return out
}

// Map returns the message with f applied to each of its formats.
func (m Message) Map(f func(string) string) Message {
	out := Message{Text: m.Text, Plural: m.Plural}
	if m.Forms == nil {
		out.Text = f(m.Text)
		return out
	}
	out.Forms = make(map[string]string, len(m.Forms))
	for k, v := range m.Forms {
		out.Forms[k] = f(v)
	}
	return out
}

// message is what the text library takes. Exact numbers are looked at before the
// plural forms and "other" last, as the library tries them in order.
func (m Message) message() []catalog.Message {
	if m.Forms == nil {
		return []catalog.Message{catalog.String(m.Text)}
	}
	var exact, forms, rest []any
	for k, v := range m.Forms {
		switch {
		case k == "other":
			rest = append(rest, k, v)
		case strings.HasPrefix(k, "="):
			exact = append(exact, k, v)
		default:
			forms = append(forms, k, v)
		}
	}
	return []catalog.Message{plural.Selectf(m.Plural, "%d", append(append(exact, forms...), rest...)...)}
}

// Dictionary is the words of one language by key.
type Dictionary map[string]Message

// English is the embedded dictionary that every other one falls back to.
func English() Dictionary { return english }

var (
	english  Dictionary
	register sync.Mutex
)

func init() {
	for _, lang := range []string{"en", "de", "es"} {
		d, err := Read(embedded, lang)
		if err == nil {
			if lang == "en" {
				english = d
			}
			err = Register(lang, d)
		}
		if err != nil {
			panic("words: the embedded catalogue is broken: " + err.Error())
		}
	}
}

// Read reads the files of one language from a folder. A key must begin with the
// name of its file and stand once.
func Read(files fs.FS, folder string) (Dictionary, error) {
	names, err := fs.Glob(files, folder+"/*.json")
	if err != nil {
		return nil, err
	}
	all := make(Dictionary)
	for _, name := range names {
		data, err := fs.ReadFile(files, name)
		if err != nil {
			return nil, err
		}
		keys, err := keysOf(data)
		if err != nil {
			return nil, fmt.Errorf("%s: %w", name, err)
		}
		seen := make(map[string]bool, len(keys))
		for _, k := range keys {
			if _, err := keyIn(path.Base(name), k); err != nil {
				return nil, fmt.Errorf("%s: %w", name, err)
			}
			if seen[k] {
				return nil, fmt.Errorf("%s: %q stands there twice", name, k)
			}
			seen[k] = true
		}
		var one Dictionary
		if err := json.Unmarshal(data, &one); err != nil {
			return nil, fmt.Errorf("%s: %w", name, err)
		}
		for k, m := range one {
			key, _ := keyIn(path.Base(name), k) // looked at above
			if _, twice := all[key]; twice {
				return nil, fmt.Errorf("%s: %q stands in another file, too", name, k)
			}
			all[key] = m
		}
	}
	return all, nil
}

// keysOf lists the keys of a JSON object as they stand, repeated ones too, which
// unmarshalling into a map would hide.
func keysOf(data []byte) ([]string, error) {
	dec := json.NewDecoder(strings.NewReader(string(data)))
	if t, err := dec.Token(); err != nil || t != json.Delim('{') {
		return nil, fmt.Errorf("the file is no JSON object: %v", err)
	}
	var keys []string
	for dec.More() {
		t, err := dec.Token()
		if err != nil {
			return nil, err
		}
		keys = append(keys, t.(string)) // a key of an object is always a string
		var skip json.RawMessage
		if err := dec.Decode(&skip); err != nil {
			return nil, err
		}
	}
	return keys, nil
}

// surfacesOf are the first parts of the keys.
func surfacesOf(dict map[string]entry) map[string]bool {
	says := make(map[string]bool)
	for key := range dict {
		if surface, _, ok := strings.Cut(key, "."); ok {
			says[surface] = true
		}
	}
	return says
}

// entry marks a key as known.
type entry struct{}

// Register adds a language, or replaces it. It is for start-up and tests.
func Register(lang string, d Dictionary) error {
	register.Lock()
	defer register.Unlock()
	tag, err := language.Parse(lang)
	if err != nil {
		return fmt.Errorf("language %q: %w", lang, err)
	}
	cat := catalog.NewBuilder(catalog.Fallback(tag))
	base, dict := make(map[string]entry), make(map[string]entry)
	for k, m := range english {
		base[k] = entry{}
		if err := cat.Set(tag, k, m.message()...); err != nil {
			return fmt.Errorf("%q: %w", k, err)
		}
	}
	for k, m := range d {
		dict[k] = entry{}
		if err := cat.Set(tag, k, m.message()...); err != nil {
			return fmt.Errorf("%q: %w", k, err)
		}
	}
	next := &shelf{printers: map[string]*Printer{}}
	if old := current.Load(); old != nil {
		for _, t := range old.tags {
			next.tags = append(next.tags, t)
			next.printers[t.String()] = old.printers[t.String()]
		}
	}
	if _, known := next.printers[tag.String()]; !known {
		next.tags = append(next.tags, tag)
	}
	next.printers[tag.String()] = &Printer{tag: tag, dict: dict, base: base, says: surfacesOf(dict),
		out: message.NewPrinter(tag, message.Catalog(cat))}
	next.matcher = language.NewMatcher(next.tags)
	current.Store(next)
	return nil
}
