package qualify

import (
	"encoding/json"
	"math"
)

// groups are all cases, by theme, in the order in which they are run.
var groups = []group{
	{"factors and the relative range", factorCases},
	{"summaries of certified data sets", summaryCases},
	{"charts of readings", readingCases},
	{"charts of counts", countCases},
	{"run rules", ruleCases},
	{"run length, computed", lengthCases},
	{"run length, simulated", simulatedCases},
	{"limits from few subgroups", estimatedCases},
	{"change points", changeCases},
	{"adjustment", adjustCases},
	{"capability", capabilityCases},
	{"gauge studies", gaugeCases},
	{"lot sampling", lotCases},
	{"distributions", distributionCases},
}

func jsonNumber(text string) json.Number { return json.Number(text) }

// firstError is the first thing that was wrong in one of the files.
func firstError(nodes ...node) error {
	for _, n := range nodes {
		if n.err() != nil {
			return n.err()
		}
	}
	return nil
}

// sum adds figures that are independent.
func sum(parts ...figure) figure {
	return func() (float64, float64, error) {
		total, squares := 0.0, 0.0
		for _, p := range parts {
			x, se, err := p()
			if err != nil {
				return 0, 0, err
			}
			total += x
			squares += se * se
		}
		return total, math.Sqrt(squares), nil
	}
}

// value is a figure without a standard error.
func value(f func() (float64, error)) figure {
	return func() (float64, float64, error) {
		x, err := f()
		return x, 0, err
	}
}

// indices are positions counted from 1, as the files have them, counted from 0.
func indices(n node) []int {
	out := []int{}
	for _, x := range n.list() {
		out = append(out, x.int()-1)
	}
	return out
}
