package words

import (
	"fmt"
	"strings"

	"holdfast/internal/plant"
)

// problemFiles hold the sentences of plant.Error in another language: problems.json and,
// for an area with many, problems-….json. Their keys are the English formats as they
// stand in the sources, so English needs no such files.
func problemFile(name string) bool {
	return name == "problems.json" || strings.HasPrefix(name, "problems-")
}

const problemKey = "problem: "

// Problem says what is wrong in the language of the printer; in English when the
// language does not have the sentence.
func (p *Printer) Problem(e *plant.Error) string {
	format, args := e.Sentence()
	key := problemKey + format
	if _, ok := p.dict[key]; !ok {
		return e.Message
	}
	said := make([]any, len(args))
	for i, a := range args {
		if d, ok := a.(plant.Decimal); ok {
			a = p.Number(d.String())
		}
		said[i] = a
	}
	return p.out.Sprintf(key, said...)
}

// HasProblem reports whether the language has its own sentence for an English format
// of plant.Error.
func (p *Printer) HasProblem(format string) bool {
	_, ok := p.dict[problemKey+format]
	return ok
}

// Number puts the decimal sign of the language and the typographic minus into a
// number that was written with a point.
func (p *Printer) Number(s string) string {
	if sign := p.T("ui.decimal-sign"); sign != "." {
		s = strings.Replace(s, ".", sign, 1)
	}
	return strings.Replace(s, "-", "\u2212", 1)
}

// keyIn is the key under which a message of a file is kept, and an error when it
// does not belong there.
func keyIn(file, key string) (string, error) {
	if problemFile(file) {
		return problemKey + key, nil
	}
	if surface := strings.TrimSuffix(file, ".json") + "."; !strings.HasPrefix(key, surface) {
		return "", fmt.Errorf("%q does not begin with %q", key, surface)
	}
	return key, nil
}
