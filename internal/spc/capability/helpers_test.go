package capability_test

import (
	"encoding/json"
	"math"
	"os"
	"strconv"
	"strings"
	"testing"

	"holdfast/internal/spc/capability"
)

func load(t testing.TB, name string, into any) {
	t.Helper()
	raw, err := os.ReadFile("testdata/" + name)
	if err != nil {
		t.Fatal(err)
	}
	if err := json.Unmarshal(raw, into); err != nil {
		t.Fatal(err)
	}
}

// piston holds 25 subgroups of 5 ring diameters (Montgomery, from memory).
func piston(t testing.TB) []capability.Subgroup {
	t.Helper()
	var file struct {
		Cases []struct {
			Name string
			Data [][]float64
		}
	}
	load(t, "variables_charts.json", &file)
	for _, c := range file.Cases {
		if strings.HasPrefix(c.Name, "piston ring") {
			var out []capability.Subgroup
			for _, row := range c.Data {
				out = append(out, capability.Subgroup{Readings: row})
			}
			return out
		}
	}
	t.Fatal("no piston ring data")
	return nil
}

// michelson holds the 100 measurements of NIST's data set Michelso.
func michelson(t testing.TB) []float64 {
	t.Helper()
	raw, err := os.ReadFile("testdata/Michelso.csv")
	if err != nil {
		t.Fatal(err)
	}
	var out []float64
	for _, line := range strings.Fields(string(raw))[1:] {
		v, err := strconv.ParseFloat(line, 64)
		if err != nil {
			t.Fatal(err)
		}
		out = append(out, v)
	}
	return out
}

// agrees allows one unit in the eleventh significant digit: the files print twelve,
// some eleven.
func agrees(got, want float64) bool { return within(got, want, 1e-11) }

func within(got, want, relative float64) bool {
	return math.Abs(got-want) <= relative*math.Max(math.Abs(want), 1e-300)
}

// same compares a figure that may not exist.
func same(t *testing.T, what string, got, want *float64, relative float64) {
	t.Helper()
	switch {
	case got == nil && want == nil:
	case got == nil || want == nil:
		t.Errorf("%s: exists %v, want %v", what, got != nil, want != nil)
	case !within(*got, *want, relative):
		t.Errorf("%s = %.13g, want %.13g", what, *got, *want)
	}
}

func at(x float64) *float64 { return &x }
