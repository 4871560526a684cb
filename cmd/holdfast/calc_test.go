package main

import (
	"bytes"
	"encoding/json"
	"errors"
	"strings"
	"testing"

	"holdfast/internal/calc"
)

func TestCalcCommand(t *testing.T) {
	t.Parallel()
	for _, tc := range []struct {
		name, in     string
		cmd          calcCmd
		out, problem string
		answered     bool
	}{
		{name: "answer", in: `{"x": [1, 2, 4]}`, cmd: calcCmd{Topic: "summary"}, out: `"n":3,`, answered: true},
		{name: "unknown topic", in: `{}`, cmd: calcCmd{Topic: "horoscope"}, problem: "no such topic: horoscope\n"},
		{name: "unknown topic, example", cmd: calcCmd{Topic: "horoscope", Example: true}, problem: "no such topic: horoscope\n"},
		{name: "unknown field", in: `{"x": [1, 2], "y": 3}`, cmd: calcCmd{Topic: "summary"}, problem: "there is no field \"y\" here; there are x\n"},
		{name: "one reading", in: `{"x": [1]}`, cmd: calcCmd{Topic: "summary"}, problem: "x: too few readings: at least 2 are needed, got 1\n"},
		{name: "not a number", in: `{"x": [1, NaN]}`, cmd: calcCmd{Topic: "summary"}, problem: "the input is not JSON: invalid character 'N' looking for beginning of value, at byte 11\n"},
		{name: "list", out: "Topics:", answered: true},
		{name: "example", cmd: calcCmd{Topic: "factors", Example: true}, out: "{\"n\": 5}\n", answered: true},
	} {
		t.Run(tc.name, func(t *testing.T) {
			t.Parallel()
			var out, problems bytes.Buffer
			answered := tc.cmd.answer(strings.NewReader(tc.in), &out, &problems)
			if answered != tc.answered || !strings.Contains(out.String(), tc.out) || problems.String() != tc.problem {
				t.Errorf("got %v, %q, problems %q; want %v, %q, problems %q", answered, out.String(), problems.String(), tc.answered, tc.out, tc.problem)
			}
			if !answered && out.Len() > 0 {
				t.Errorf("wrote %q beside the problem", out.String())
			}
		})
	}
}

func TestCalcListsEveryTopic(t *testing.T) {
	t.Parallel()
	list := listTopics()
	for _, topic := range calc.Topics() {
		if !strings.Contains(list, "\n  "+topic.Name+" ") || !strings.Contains(list, topic.Line) {
			t.Errorf("the list lacks %s", topic.Name)
		}
		if !json.Valid([]byte(topic.Example)) {
			t.Errorf("the example of %s is not JSON", topic.Name)
		}
	}
}

func TestWrongCommandLinesEndWithTwo(t *testing.T) {
	t.Parallel()
	for _, args := range [][]string{{"calc", "factors", "--bogus"}, {"calc", "factors", "more"}, {"nothing"}, {"user", "add"}} {
		if err := run(t.Context(), args); err == nil || status(err) != 2 {
			t.Errorf("%v: %v, status %d, want 2", args, err, status(err))
		}
	}
	if got := status(errors.New("the disk is full")); got != 1 {
		t.Errorf("another fault has status %d, want 1", got)
	}
}
