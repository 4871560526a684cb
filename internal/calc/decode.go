package calc

import (
	"bytes"
	"encoding"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"
	"reflect"
	"strings"
)

// maxDepth bounds how deep values may be nested; no topic needs more than five.
const maxDepth = 32

// object is a JSON object with its fields in their order: encoding/json would let the
// second of two fields of one name win, and matches names without regard to case.
type object struct {
	names  []string
	values map[string]any
}

// parse reads one JSON value and nothing behind it.
func parse(in []byte) (any, error) {
	dec := json.NewDecoder(bytes.NewReader(in))
	dec.UseNumber()
	v, err := parseValue(dec, 0)
	if err != nil {
		return nil, notJSON(in, err)
	}
	if _, err := dec.Token(); !errors.Is(err, io.EOF) {
		return nil, errors.New("the input holds something after its JSON object")
	}
	return v, nil
}

// notJSON says what is wrong and where. A decoder that is read token by token counts
// bytes from its last token, so the place comes from reading the whole once more.
func notJSON(in []byte, err error) error {
	var syntax *json.SyntaxError
	switch {
	case errors.Is(err, io.EOF), errors.Is(err, io.ErrUnexpectedEOF):
		return errors.New("the input ends before its JSON object does")
	case errors.As(err, &syntax):
		var whole json.RawMessage
		errors.As(json.Unmarshal(in, &whole), &syntax)
		return fmt.Errorf("the input is not JSON: %s, at byte %d", syntax, syntax.Offset)
	}
	return err
}

func parseValue(dec *json.Decoder, depth int) (any, error) {
	if depth > maxDepth {
		return nil, fmt.Errorf("the input is nested more than %d deep", maxDepth)
	}
	t, err := dec.Token()
	if err != nil {
		return nil, err
	}
	switch t {
	case json.Delim('{'):
		o := object{values: map[string]any{}}
		for dec.More() {
			key, err := dec.Token()
			if err != nil {
				return nil, err
			}
			name, isName := key.(string)
			if !isName {
				return nil, errors.New("the input is not JSON: a field has no name")
			}
			if _, twice := o.values[name]; twice {
				return nil, fmt.Errorf("the field %q is given twice", name)
			}
			if o.values[name], err = parseValue(dec, depth+1); err != nil {
				return nil, err
			}
			o.names = append(o.names, name)
		}
		_, err := dec.Token()
		return o, err
	case json.Delim('['):
		list := []any{}
		for dec.More() {
			v, err := parseValue(dec, depth+1)
			if err != nil {
				return nil, err
			}
			list = append(list, v)
		}
		_, err := dec.Token()
		return list, err
	}
	return t, nil
}

// decode reads an input into a struct. Field names are those of the json tags. A
// pointer may be null or absent; so may a field tagged omitempty; all others must be
// given.
func decode(in []byte, into any) error {
	v, err := parse(in)
	if err != nil {
		return err
	}
	o, isObject := v.(object)
	if !isObject {
		return errors.New("the input must be one JSON object")
	}
	return assignObject("", o, reflect.ValueOf(into).Elem())
}

// at joins the name of a field to where it stands.
func at(where, name string) string {
	if where == "" {
		return name
	}
	return where + "." + name
}

func assignObject(where string, o object, into reflect.Value) error {
	known := map[string]bool{}
	var list []string
	for i := range into.NumField() {
		name, options, _ := strings.Cut(into.Type().Field(i).Tag.Get("json"), ",")
		known[name] = true
		list = append(list, name)
		v, given := o.values[name]
		field := into.Field(i)
		optional := options == "omitempty" || field.Kind() == reflect.Pointer
		if !given || v == nil && optional {
			if !optional {
				return fmt.Errorf("%s is missing", at(where, name))
			}
			continue
		}
		if err := assign(at(where, name), v, field); err != nil {
			return err
		}
	}
	for _, name := range o.names {
		if !known[name] {
			return fmt.Errorf("there is no field %q here; there are %s", at(where, name), strings.Join(list, ", "))
		}
	}
	return nil
}

// assign puts one parsed value into a Go value.
func assign(where string, v any, into reflect.Value) error {
	if into.CanAddr() {
		switch own := into.Addr().Interface().(type) {
		case json.Unmarshaler:
			if err := own.UnmarshalJSON(unparse(v)); err != nil {
				return fmt.Errorf("%s: %w", where, err)
			}
			return nil
		case encoding.TextUnmarshaler:
			text, isText := v.(string)
			if !isText {
				return fmt.Errorf("%s must be a text", where)
			}
			if err := own.UnmarshalText([]byte(text)); err != nil {
				return fmt.Errorf("%s: %w", where, err)
			}
			return nil
		}
	}
	switch into.Kind() {
	case reflect.Pointer:
		into.Set(reflect.New(into.Type().Elem()))
		return assign(where, v, into.Elem())
	case reflect.Struct:
		o, isObject := v.(object)
		if !isObject {
			return fmt.Errorf("%s must be an object, as in {\"...\": ...}", where)
		}
		return assignObject(where, o, into)
	case reflect.Slice:
		list, isList := v.([]any)
		if !isList {
			return fmt.Errorf("%s must be a list, as in [...]", where)
		}
		into.Set(reflect.MakeSlice(into.Type(), len(list), len(list)))
		for i, v := range list {
			if err := assign(fmt.Sprintf("%s[%d]", where, i), v, into.Index(i)); err != nil {
				return err
			}
		}
		return nil
	case reflect.String:
		text, isText := v.(string)
		if !isText {
			return fmt.Errorf("%s must be a text", where)
		}
		into.SetString(text)
		return nil
	case reflect.Bool:
		b, isBool := v.(bool)
		if !isBool {
			return fmt.Errorf("%s must be true or false", where)
		}
		into.SetBool(b)
		return nil
	case reflect.Float64, reflect.Int, reflect.Uint64:
		return assignNumber(where, v, into)
	}
	return fmt.Errorf("%s has a type that is not read", where)
}

func assignNumber(where string, v any, into reflect.Value) error {
	n, isNumber := v.(json.Number)
	if !isNumber {
		return fmt.Errorf("%s must be a number", where)
	}
	x, err := n.Float64()
	if err != nil || math.IsInf(x, 0) {
		return fmt.Errorf("%s is beyond the range of numbers", where)
	}
	if into.Kind() == reflect.Float64 {
		into.SetFloat(x)
		return nil
	}
	// Above 2^53 float64 no longer tells neighbours apart.
	if x != math.Trunc(x) || math.Abs(x) > 1<<53 {
		return fmt.Errorf("%s must be a whole number", where)
	}
	if into.Kind() == reflect.Uint64 {
		if x < 0 {
			return fmt.Errorf("%s must not be negative", where)
		}
		into.SetUint(uint64(x))
		return nil
	}
	into.SetInt(int64(x))
	return nil
}

// unparse writes a parsed value back as JSON for types that read themselves.
func unparse(v any) []byte {
	switch v := v.(type) {
	case object:
		var b bytes.Buffer
		b.WriteByte('{')
		for i, name := range v.names {
			if i > 0 {
				b.WriteByte(',')
			}
			b.Write(unparse(name))
			b.WriteByte(':')
			b.Write(unparse(v.values[name]))
		}
		b.WriteByte('}')
		return b.Bytes()
	case []any:
		var b bytes.Buffer
		b.WriteByte('[')
		for i, e := range v {
			if i > 0 {
				b.WriteByte(',')
			}
			b.Write(unparse(e))
		}
		b.WriteByte(']')
		return b.Bytes()
	}
	// Texts, numbers as they were written, booleans and null cannot fail.
	b, _ := json.Marshal(v)
	return b
}
