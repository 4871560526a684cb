package qualify

import (
	"encoding/json"
	"fmt"
	"sync"

	"holdfast/internal/calc"
)

// input is the object that a topic is asked with.
type input map[string]any

// answer is what a topic answers to one input; it is asked once, when first needed.
type answer struct {
	topic string
	in    input
	once  sync.Once
	out   any
	err   error
}

func ask(topic string, in input) *answer { return &answer{topic: topic, in: in} }

func (a *answer) get() (any, error) {
	a.once.Do(func() {
		in, err := json.Marshal(a.in)
		if err != nil {
			a.err = err
			return
		}
		out, err := calc.Run(a.topic, in)
		if err != nil {
			a.err = fmt.Errorf("calc %s: %w", a.topic, err)
			return
		}
		a.err = json.Unmarshal(out, &a.out)
	})
	return a.out, a.err
}

// value follows names and indices into the answer; nil is a null that is there.
func (a *answer) value(path ...any) (any, error) {
	v, err := a.get()
	if err != nil {
		return nil, err
	}
	for _, step := range path {
		switch step := step.(type) {
		case string:
			o, isObject := v.(map[string]any)
			next, has := o[step]
			if !isObject || !has {
				return nil, fmt.Errorf("calc %s answers without %v", a.topic, path)
			}
			v = next
		case int:
			l, isList := v.([]any)
			if !isList || step < 0 || step >= len(l) {
				return nil, fmt.Errorf("calc %s answers without %v", a.topic, path)
			}
			v = l[step]
		}
	}
	return v, nil
}

// number is a number of the answer.
func (a *answer) number(path ...any) (float64, error) {
	v, err := a.value(path...)
	if err != nil {
		return 0, err
	}
	switch v := v.(type) {
	case float64:
		return v, nil
	case bool:
		if v {
			return 1, nil
		}
		return 0, nil
	}
	return 0, fmt.Errorf("calc %s answers with %v where a number should be", a.topic, v)
}

// at is a number of the answer as a figure.
func (a *answer) at(path ...any) figure {
	return func() (float64, float64, error) {
		x, err := a.number(path...)
		return x, 0, err
	}
}

// with is a number of the answer whose standard error stands elsewhere in it.
func (a *answer) with(se []any, path ...any) figure {
	return func() (float64, float64, error) {
		x, err := a.number(path...)
		if err != nil {
			return 0, 0, err
		}
		e, err := a.number(se...)
		return x, e, err
	}
}

// through is a number of the answer put through a function.
func (a *answer) through(f func(float64) (float64, error), path ...any) figure {
	return func() (float64, float64, error) {
		x, err := a.number(path...)
		if err != nil {
			return 0, 0, err
		}
		x, err = f(x)
		return x, 0, err
	}
}

// whole reads a list of whole numbers of the answer.
func (a *answer) whole(path ...any) ([]int, error) {
	v, err := a.value(path...)
	if err != nil {
		return nil, err
	}
	l, isList := v.([]any)
	if !isList {
		return nil, fmt.Errorf("calc %s answers without a list %v", a.topic, path)
	}
	out := make([]int, len(l))
	for i, e := range l {
		x, isNumber := e.(float64)
		if !isNumber {
			return nil, fmt.Errorf("calc %s answers with %v in %v", a.topic, e, path)
		}
		out[i] = int(x)
	}
	return out, nil
}

// differing counts the members that are in one of two lists but not in both.
func differing(want []int, got func() ([]int, error)) figure {
	return func() (float64, float64, error) {
		g, err := got()
		if err != nil {
			return 0, 0, err
		}
		count := map[int]int{}
		for _, i := range want {
			count[i]++
		}
		for _, i := range g {
			count[i]--
		}
		n := 0
		for _, c := range count {
			if c != 0 {
				n++
			}
		}
		return float64(n), 0, nil
	}
}
