package runlength_test

import (
	_ "embed"
	"encoding/json"
	"math"
	"runtime"
	"slices"
	"sync/atomic"
	"testing"

	"holdfast/internal/spc/runlength"
	"holdfast/internal/spc/watch"
)

// Simulated outside this code, a million run lengths a case; the tests are those
// of Nelson (1984), Journal of Quality Technology 16.
//
//go:embed testdata/arl_combined_tests.json
var combinedJSON []byte

func TestCombinedRulesReference(t *testing.T) {
	t.Parallel()
	var file struct {
		Cases []struct {
			Tests []string
			Shift float64
			ARL   float64
			SE    float64            `json:"standard_error"`
			SD    float64            `json:"sd_run_length"`
			Run   *int               `json:"run_pts"`
			Trend *int               `json:"trend_pts"`
			Parts map[string]float64 `json:"percentiles"`
		}
	}
	if err := json.Unmarshal(combinedJSON, &file); err != nil {
		t.Fatal(err)
	}
	checked := 0
	for i, c := range file.Cases {
		if slices.Contains(c.Tests, "8b") {
			continue // a contrast case: 8 beyond 1 not all on one side
		}
		checked++
		nelson := watch.Nelson()
		if c.Run != nil {
			nelson[1].M = *c.Run
		}
		if c.Trend != nil {
			nelson[2].M = *c.Trend
		}
		var rules []watch.Rule
		for _, number := range c.Tests {
			rules = append(rules, nelson[number[0]-'1'])
		}
		got, err := runlength.Rules(rules, []float64{c.Shift}, runlength.Options{Seed: uint64(i), Points: 1_000_000})
		if err != nil {
			t.Fatal(err)
		}
		r := got[0]
		if math.Abs(r.Mean-c.ARL) > 4*math.Hypot(r.StandardError, c.SE) {
			t.Errorf("tests %v, shift %g: %.3f ± %.3f, want %.3f ± %.3f", c.Tests, c.Shift, r.Mean, r.StandardError, c.ARL, c.SE)
		}
		if len(c.Tests) == 8 && r.StandardError > 0.01*r.Mean {
			t.Errorf("tests %v, shift %g: standard error %.3f of %.3f is above 1 %%", c.Tests, c.Shift, r.StandardError, r.Mean)
		}
		median, err := r.Median()
		// A percentile of N runs errs by about sd/√N at the median.
		if want := c.Parts["0.5"]; err != nil || math.Abs(median-want) > 4*r.StandardError*c.SD/r.Mean+1 {
			t.Errorf("tests %v, shift %g: median %g, %v; want %g", c.Tests, c.Shift, median, err, want)
		}
	}
	if checked != 13 {
		t.Errorf("%d cases checked, want 13", checked)
	}
}

// Rules on neighbours alone do not depend on the distribution; the reference is
// a collocation of the integral equation and a recursion on relative ranks.
func TestNeighbourRulesReference(t *testing.T) {
	t.Parallel()
	f := load(t)
	for kind, cases := range map[watch.Kind][]struct {
		Points int
		ARL    float64
	}{watch.RisingOrFalling: f.Trend.Cases, watch.Alternating: f.Alternating.Cases} {
		for _, c := range cases {
			if c.ARL > 700 {
				continue // only more time in the same code
			}
			got, err := runlength.Rules([]watch.Rule{{Kind: kind, M: c.Points}}, []float64{0.7}, runlength.Options{Seed: 5, Points: 1_500_000})
			if err != nil || math.Abs(got[0].Mean-c.ARL) > 4*got[0].StandardError || got[0].Method != runlength.Simulated {
				t.Errorf("%s %d: %+v, %v; want %g", kind, c.Points, means(got), err, c.ARL)
			}
		}
	}
}

func TestSimulationIsReproducible(t *testing.T) {
	rules := []watch.Rule{{Kind: watch.Beyond, Z: 3}, {Kind: watch.Alternating, M: 14}}
	run := func(seed uint64) float64 {
		got, err := runlength.Rules(rules, []float64{0}, runlength.Options{Seed: seed, Points: 400_000})
		if err != nil {
			t.Fatal(err)
		}
		return got[0].Mean
	}
	first := run(3)
	before := runtime.GOMAXPROCS(1)
	alone := run(3)
	runtime.GOMAXPROCS(before)
	if first != alone {
		t.Errorf("one core gives %v, several %v", alone, first)
	}
	if run(4) == first {
		t.Error("another seed gives the same answer")
	}
}

func TestSimulationStopsWhenAsked(t *testing.T) {
	t.Parallel()
	rules := []watch.Rule{{Kind: watch.RisingOrFalling, M: 7}}
	var asked atomic.Int64
	got, err := runlength.Rules(rules, []float64{0}, runlength.Options{Stop: func() bool { return asked.Add(1) > 40 }})
	if err != nil || got[0].StandardError < 0.01*got[0].Mean || math.Abs(got[0].Mean-2881.85) > 5*got[0].StandardError {
		t.Errorf("%v, %v; want an early and rough answer", got, err)
	}
	if _, err = runlength.Rules(rules, []float64{0}, runlength.Options{Stop: func() bool { return true }}); err == nil {
		t.Error("an answer without a single run")
	}
}

func TestRareSignals(t *testing.T) {
	t.Parallel()
	// 1/P(|Z| > 4.3) is 58,548: too long for complete runs within the points given,
	// short enough for a count of signals. The alternation adds next to nothing.
	rules := []watch.Rule{{Kind: watch.Beyond, Z: 4.3}, {Kind: watch.Alternating, M: 63}}
	got, err := runlength.Rules(rules, []float64{0}, runlength.Options{Seed: 1, Points: 2_000_000})
	want := 1 / math.Erfc(4.3/math.Sqrt2)
	if err != nil || got[0].StandardError < 0.05*want || math.Abs(got[0].Mean-want) > 4*got[0].StandardError {
		t.Errorf("%v, %v; want %g", got, err, want)
	}
	never := []watch.Rule{{Kind: watch.Alternating, M: 63}}
	if _, err := runlength.Rules(never, []float64{0}, runlength.Options{Points: 200_000}); err == nil {
		t.Error("rules that practically never fire gave an answer")
	}
}
