package calc

import (
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"
)

// Topic is one question that can be asked.
type Topic struct {
	Name string
	// Line says in one line what is answered.
	Line string
	// Example is an input that works.
	Example string

	run func(in []byte) (any, error)
}

// topic ties a typed function to its name: the input is read strictly, the answer is a
// value that JSON can hold.
func topic[In, Out any](name, line, example string, f func(In) (Out, error)) Topic {
	return Topic{Name: name, Line: line, Example: example, run: func(in []byte) (any, error) {
		var v In
		if err := decode(in, &v); err != nil {
			return nil, err
		}
		return f(v)
	}}
}

// Topics returns all topics in the order in which they are listed.
func Topics() []Topic {
	return slices.Concat(basics, charts, rare, memory, kinds, studies, prices, changes, capabilities, gauges, lots, entries, guides)
}

// ErrNoTopic is wrapped by the error of a topic that does not exist.
var ErrNoTopic = errors.New("no such topic")

// Find returns the topic of the given name.
func Find(name string) (Topic, error) {
	for _, t := range Topics() {
		if t.Name == name {
			return t, nil
		}
	}
	return Topic{}, fmt.Errorf("%w: %s", ErrNoTopic, name)
}

// Run answers one input, a JSON object, with another. Every error is one line that
// names the argument and the reason; nothing is answered then.
func Run(name string, in []byte) ([]byte, error) {
	t, err := Find(name)
	if err != nil {
		return nil, err
	}
	return t.Run(in)
}

// Run answers one input.
func (t Topic) Run(in []byte) ([]byte, error) {
	if len(in) > MaxBytes {
		return nil, fmt.Errorf("the input is longer than %d bytes", MaxBytes)
	}
	answer, err := t.run(in)
	if err != nil {
		return nil, oneLine{err}
	}
	out, err := json.Marshal(answer)
	var value *json.UnsupportedValueError
	if errors.As(err, &value) {
		return nil, errors.New("the answer is beyond the range of numbers")
	}
	if err != nil {
		return nil, oneLine{fmt.Errorf("write the answer: %w", err)}
	}
	return out, nil
}

// oneLine keeps an error to one line whatever texts went into it.
type oneLine struct{ error }

func (e oneLine) Error() string { return strings.Join(strings.Fields(e.error.Error()), " ") }
func (e oneLine) Unwrap() error { return e.error }

// number is a number that may not exist.
type number = *float64

// some returns a number that exists. A negative zero is written as 0.
func some(x float64) number {
	x = plain(x)
	return &x
}

// plain turns a negative zero into a plain one: -0 is an odd answer to read.
func plain(x float64) float64 { return x + 0 }

// present returns x unless it is infinite, as absent limits are.
func present(x float64) number {
	if math.IsInf(x, 0) {
		return nil
	}
	return some(x)
}

// if exists returns x when it exists.
func ifExists(x float64, exists bool) number {
	if !exists {
		return nil
	}
	return some(x)
}

// orDefault is the value of an optional number.
func orDefault(x number, otherwise float64) float64 {
	if x == nil {
		return otherwise
	}
	return *x
}

// list makes sure that an empty list is written as [] and not as null.
func list[T any](x []T) []T {
	if x == nil {
		return []T{}
	}
	return x
}

// positive checks an optional multiple, tail or the like that must be above 0.
func positive(name string, x number) error {
	if x != nil && *x <= 0 {
		return fmt.Errorf("%s must be above 0, not %v", name, *x)
	}
	return nil
}

// sameLength checks that two lists go together.
func sameLength(a string, n int, b string, m int) error {
	if n != m {
		return fmt.Errorf("%s and %s must be equally long, not %d and %d", a, b, n, m)
	}
	return nil
}
