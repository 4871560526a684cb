package limits_test

import (
	"encoding/json"
	"math"
	"os"
	"testing"
)

// load reads a file of testdata.
func load(t *testing.T, name string, into any) {
	t.Helper()
	raw, err := os.ReadFile("testdata/" + name)
	if err != nil {
		t.Fatal(err)
	}
	if err := json.Unmarshal(raw, into); err != nil {
		t.Fatal(err)
	}
}

// example is one worked example of the handbook.
type example struct {
	Section             string
	Data                []float64
	Published, Computed map[string]any
	Parameters          map[string]any
	PublishedStatus     string `json:"published_status"`
}

func handbook(t *testing.T, section string) example {
	t.Helper()
	var file struct{ Examples []example }
	load(t, "nist_handbook.json", &file)
	for _, e := range file.Examples {
		if e.Section == section {
			return e
		}
	}
	t.Fatalf("no example %s", section)
	return example{}
}

// series reads a list of numbers out of an example.
func series(t *testing.T, v any) []float64 {
	t.Helper()
	list, ok := v.([]any)
	if !ok {
		t.Fatalf("not a list: %v", v)
	}
	out := make([]float64, len(list))
	for i, x := range list {
		out[i] = x.(float64)
	}
	return out
}

// agrees allows half a unit in the twelfth significant digit, or the absolute
// tolerance when that is larger.
func agrees(got, want, absolute float64) bool {
	return math.Abs(got-want) <= math.Max(absolute, 6e-12*math.Abs(want))
}
