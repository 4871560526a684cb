package calc_test

import (
	"encoding/json"
	"errors"
	"strings"
	"testing"

	"holdfast/internal/calc"
)

// TestExamplesWork runs the input that each topic shows.
func TestExamplesWork(t *testing.T) {
	t.Parallel()
	names := map[string]bool{}
	for _, topic := range calc.Topics() {
		t.Run(topic.Name, func(t *testing.T) {
			t.Parallel()
			out, err := topic.Run([]byte(topic.Example))
			if err != nil {
				t.Fatal(err)
			}
			var o map[string]any
			if err := json.Unmarshal(out, &o); err != nil || len(o) == 0 {
				t.Errorf("the answer %s is not an object with fields: %v", out, err)
			}
		})
		if topic.Line == "" || !strings.HasSuffix(topic.Line, ".") || names[topic.Name] {
			t.Errorf("topic %s is listed twice or without its line", topic.Name)
		}
		names[topic.Name] = true
	}
}

func TestUnknownTopic(t *testing.T) {
	t.Parallel()
	_, err := calc.Run("horoscope", []byte("{}"))
	if !errors.Is(err, calc.ErrNoTopic) || err.Error() != "no such topic: horoscope" {
		t.Errorf("got %v", err)
	}
}
