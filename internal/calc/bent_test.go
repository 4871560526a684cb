package calc_test

import (
	"encoding/json"
	"fmt"
	"strings"
	"testing"
	"time"

	"holdfast/internal/calc"
)

// longest is the time that one answer may take, twice the limit of a simulation and
// what the race detector costs.
const longest = 12 * time.Second

// ask runs a topic and checks what holds for every input: one line or one JSON object,
// within the time.
func ask(t *testing.T, topic calc.Topic, in []byte) {
	t.Helper()
	start := time.Now()
	out, err := topic.Run(in)
	if took := time.Since(start); took > longest {
		t.Errorf("%s took %v for %.300s", topic.Name, took, in)
	}
	if err != nil {
		if out != nil || err.Error() == "" || strings.ContainsAny(err.Error(), "\n\r") || strings.Contains(err.Error(), "NaN") {
			t.Errorf("%s: %q beside %q for %.300s", topic.Name, err, out, in)
		}
		return
	}
	var o map[string]any
	if err := json.Unmarshal(out, &o); err != nil || len(o) == 0 {
		t.Errorf("%s answers %s for %.300s: %v", topic.Name, out, in, err)
	}
}

// bent are the values that take the place of one value of an example.
var bent = []string{
	"null", "true", `"x"`, `""`, "[]", "{}", "[[]]", "[null]", "-1", "0", "1", "2", "0.5", "1e-320", "1e-9", "3e4", "1e6", "1e9", "1e15", "1e18", "1e155", "-1e155",
	"1e308", "-1e308", "1e400", "-0", "2.5",
}

// TestBentExamples puts every odd value in the place of every value of every example,
// and leaves every field out once. Nothing may panic, hang, or answer with what is no
// number.
func TestBentExamples(t *testing.T) {
	t.Parallel()
	for _, topic := range calc.Topics() {
		t.Run(topic.Name, func(t *testing.T) {
			t.Parallel()
			var example any
			if err := json.Unmarshal([]byte(topic.Example), &example); err != nil {
				t.Fatal(err)
			}
			for _, in := range variants(example) {
				ask(t, topic, []byte(in))
			}
		})
	}
}

// variants lists a value with one of its parts replaced or left out, each in turn.
func variants(v any) []string {
	out := append([]string{}, bent...)
	write := func(v any) string {
		b, err := json.Marshal(v)
		if err != nil {
			panic(fmt.Sprintf("a decoded value cannot be written: %v", err))
		}
		return string(b)
	}
	switch v := v.(type) {
	case map[string]any:
		for k, part := range v {
			rest := map[string]json.RawMessage{}
			for other, x := range v {
				if other != k {
					rest[other] = json.RawMessage(write(x))
				}
			}
			out = append(out, write(rest))
			for _, part := range variants(part) {
				rest[k] = json.RawMessage(part)
				if b, err := json.Marshal(rest); err == nil {
					out = append(out, string(b))
				}
			}
		}
	case []any:
		// The first and the last stand for all others.
		for _, i := range []int{0, len(v) - 1} {
			if i < 0 {
				continue
			}
			list := make([]json.RawMessage, len(v))
			for j, x := range v {
				list[j] = json.RawMessage(write(x))
			}
			for _, part := range variants(v[i]) {
				list[i] = json.RawMessage(part)
				if b, err := json.Marshal(list); err == nil {
					out = append(out, string(b))
				}
			}
			if i > 0 {
				list[i] = json.RawMessage(write(v[i]))
				out = append(out, write(list[:i]))
			}
		}
	}
	return out
}

// FuzzTopics asks every topic with anything at all.
func FuzzTopics(f *testing.F) {
	topics := calc.Topics()
	for i, t := range topics {
		f.Add(i, []byte(t.Example))
	}
	f.Add(0, []byte(`{"x": [1, 2], "x": [3, 4]}`))
	f.Add(0, []byte(strings.Repeat("[", 10_000)))
	f.Fuzz(func(t *testing.T, i int, in []byte) {
		if i < 0 || i >= len(topics) {
			return
		}
		ask(t, topics[i], in)
	})
}
