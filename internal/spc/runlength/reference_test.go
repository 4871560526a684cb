package runlength_test

import (
	_ "embed"
	"encoding/json"
	"math"
	"slices"
	"testing"

	"holdfast/internal/spc/runlength"
	"holdfast/internal/spc/watch"
)

// The values were computed outside this code (sparse elimination on zone
// histories, a 400 node quadrature, a recursion on relative ranks) and compared
// with Champ and Woodall (1987), Technometrics 29; Lucas and Saccucci (1990),
// Technometrics 32; Lucas (1976), Journal of Quality Technology 8; Lucas and
// Crosier (1982), Technometrics 24; Hawkins (1993), Journal of Quality Technology
// 25. The published figures in the file are recalled from memory and stand at the
// precision they were printed with.
//
//go:embed testdata/arl.json
var arlJSON []byte

type published struct{ ARL []*float64 }

type arlFile struct {
	RunRules struct {
		Cases []struct {
			Rules     []string
			States    int
			Shift     []float64
			ARL       []float64
			Published *published
			Quantiles json.RawMessage `json:"run_length_at_shift_0"`
		}
	} `json:"run_rules"`
	ClosedForms struct{ Values map[string]any } `json:"closed_forms"`
	Trend       struct {
		Cases []struct {
			Points int
			ARL    float64
		}
	}
	Alternating struct {
		Cases []struct {
			Points int
			ARL    float64
		}
	}
	EWMA struct {
		Cases []struct {
			Lambda, L float64
			Shift     []float64
			Constant  []float64 `json:"arl_zero_state"`
			Exact     []float64 `json:"arl_zero_state_exact_time_varying_limits"`
			Published *published
		}
		Design []struct {
			Lambda, L float64
			ARL       float64 `json:"arl_in_control"`
		} `json:"design_constant_limits"`
	}
	CUSUM struct {
		Cases []struct {
			K, H      float64
			Shift     []float64
			TwoSided  []float64 `json:"two_sided_zero_state_arl"`
			HeadStart []float64 `json:"two_sided_headstart_h_over_2_arl"`
			Published struct {
				TwoSided  []*float64 `json:"two_sided_zero_state"`
				HeadStart []*float64 `json:"two_sided_headstart"`
			}
		}
		Design []struct {
			K, H float64
			ARL  float64 `json:"two_sided_in_control_arl"`
		} `json:"design_h"`
	}
	Power struct {
		Cases []struct {
			N     int
			Shift float64 `json:"shift_in_process_sigma"`
			ARL   float64
		}
	} `json:"xbar_power"`
}

func load(t testing.TB) (f arlFile) {
	t.Helper()
	if err := json.Unmarshal(arlJSON, &f); err != nil {
		t.Fatal(err)
	}
	return f
}

// named are the rules of the reference file that are rules here. Two of its
// cases contrast them with readings of a rule that are not used here: 2 of 3
// beyond 2 without regard to side, and 8 beyond 1 not all on one side.
var named = map[string]watch.Rule{
	"1":            {Kind: watch.Beyond, Z: 3},
	"2of3":         {Kind: watch.KOfM, K: 2, M: 3, Z: 2},
	"4of5":         {Kind: watch.KOfM, K: 4, M: 5, Z: 1},
	"run7":         {Kind: watch.OneSide, M: 7},
	"run8":         {Kind: watch.OneSide, M: 8},
	"run9":         {Kind: watch.OneSide, M: 9},
	"15within1":    {Kind: watch.Within, M: 15, Z: 1},
	"8beyond1_any": {Kind: watch.Outside, M: 8, Z: 1},
}

func near(got, want, tol float64) bool {
	return math.Abs(got-want) <= tol*math.Max(1, math.Abs(want))
}

// rounds tells whether got prints like a published figure: whole numbers from a
// hundred, one decimal from ten, below that in steps of fine.
func rounds(got, printed, fine float64) bool {
	step := fine
	switch {
	case printed >= 100:
		step = 1
	case printed >= 10:
		step = 0.1
	}
	return math.Abs(got-printed) <= step/2*(1+1e-6)
}

func means(r []runlength.RunLength) (out []float64) {
	for _, l := range r {
		out = append(out, l.Mean)
	}
	return out
}

func TestZoneRulesReference(t *testing.T) {
	t.Parallel()
	checked, printed := 0, 0
	for _, c := range load(t).RunRules.Cases {
		var rules []watch.Rule
		for _, name := range c.Rules {
			rules = append(rules, named[name])
		}
		if slices.Contains(rules, watch.Rule{}) {
			continue
		}
		checked++
		got, err := runlength.Rules(rules, c.Shift, runlength.Options{})
		if err != nil {
			t.Fatalf("%v: %v", c.Rules, err)
		}
		for i, r := range got {
			if !near(r.Mean, c.ARL[i], 5e-10) || r.StandardError != 0 || r.Method != runlength.MarkovChain {
				t.Errorf("%v, shift %g: %.10g ± %g by %s, want %.10g", c.Rules, c.Shift[i], r.Mean, r.StandardError, r.Method, c.ARL[i])
			}
			if c.Published == nil || c.Published.ARL[i] == nil {
				continue
			}
			printed++
			if want := *c.Published.ARL[i]; math.Abs(r.Mean-want) > 0.005001 {
				t.Errorf("%v, shift %g: %.4f does not print as %.2f (Champ and Woodall 1987)", c.Rules, c.Shift[i], r.Mean, want)
			}
		}
	}
	if checked != 17 || printed < 120 {
		t.Errorf("%d rule sets and %d printed figures checked, want 17 and at least 120", checked, printed)
	}
}

func TestClosedForms(t *testing.T) {
	t.Parallel()
	// Success runs: (1-p^r)/((1-p) p^r), Feller, An Introduction to Probability
	// Theory I, XIII.7. On one side it is 2^r - 1 (both sides together).
	run := func(p float64, r int) float64 {
		q := math.Pow(p, float64(r))
		return (1 - q) / ((1 - p) * q)
	}
	tail := math.Erfc(1/math.Sqrt2) / 1 // P(|Z| > 1)
	for _, tc := range []struct {
		rule watch.Rule
		want float64
	}{
		{watch.Rule{Kind: watch.OneSide, M: 8}, 255},
		{watch.Rule{Kind: watch.OneSide, M: 30}, math.Pow(2, 30) - 1},
		{watch.Rule{Kind: watch.Within, M: 15, Z: 1}, run(1-tail, 15)},
		{watch.Rule{Kind: watch.Outside, M: 8, Z: 1}, run(tail, 8)},
		{watch.Rule{Kind: watch.Within, M: 63, Z: 3}, run(1-math.Erfc(3/math.Sqrt2), 63)},
		{watch.Rule{Kind: watch.Beyond, Z: 6}, 1 / math.Erfc(6/math.Sqrt2)},
		{watch.Rule{Kind: watch.Beyond, Z: 8}, 1 / math.Erfc(8/math.Sqrt2)},
	} {
		got, err := runlength.Rules([]watch.Rule{tc.rule}, []float64{0}, runlength.Options{})
		if err != nil || !near(got[0].Mean, tc.want, 1e-10) {
			t.Errorf("%v: %v, %v; want %.10g", tc.rule, got, err, tc.want)
		}
	}
}

// One point beyond 3 on means: power by normal tail areas.
func TestMeanChartPowerReference(t *testing.T) {
	t.Parallel()
	cases := load(t).Power.Cases
	for _, c := range cases {
		d := c.Shift * math.Sqrt(float64(c.N))
		got, err := runlength.Rules([]watch.Rule{named["1"]}, []float64{d}, runlength.Options{})
		if err != nil || !near(got[0].Mean, c.ARL, 1e-9) {
			t.Errorf("n %d, shift %g: %v, %v; want %g", c.N, c.Shift, got, err, c.ARL)
		}
	}
	if len(cases) != 16 {
		t.Errorf("%d cases, want 16", len(cases))
	}
}

func TestEWMAReference(t *testing.T) {
	t.Parallel()
	f := load(t).EWMA
	for _, c := range f.Cases {
		e := watch.EWMA{Lambda: c.Lambda, L: c.L}
		for limits, want := range map[runlength.StartUp][]float64{
			runlength.ConstantLimits: c.Constant, runlength.ExactLimits: c.Exact, "": c.Exact,
		} {
			got, err := runlength.EWMA(e, limits, c.Shift)
			if err != nil {
				t.Fatal(err)
			}
			for i, r := range got {
				if !near(r.Mean, want[i], 1e-6) {
					t.Errorf("%+v, %s limits, shift %g: %.9g, want %.9g", e, limits, c.Shift[i], r.Mean, want[i])
				}
				if limits == runlength.ConstantLimits && c.Published != nil && c.Published.ARL[i] != nil &&
					!rounds(r.Mean, *c.Published.ARL[i], 0.1) {
					t.Errorf("%+v, shift %g: %.4f does not print as %v (Lucas and Saccucci 1990)", e, c.Shift[i], r.Mean, *c.Published.ARL[i])
				}
			}
		}
	}
	for _, c := range f.Design {
		got, err := runlength.EWMA(watch.EWMA{Lambda: c.Lambda, L: c.L}, runlength.ConstantLimits, []float64{0})
		if err != nil || !near(got[0].Mean, c.ARL, 1e-7) {
			t.Errorf("lambda %g, L %g: %v, %v; want %g", c.Lambda, c.L, means(got), err, c.ARL)
		}
	}
	if len(f.Cases) != 11 || len(f.Design) != 14 {
		t.Errorf("%d cases and %d designs, want 11 and 14", len(f.Cases), len(f.Design))
	}
}

func TestCUSUMReference(t *testing.T) {
	t.Parallel()
	f := load(t).CUSUM
	for _, c := range f.Cases {
		for head, want := range map[float64][]float64{0: c.TwoSided, 0.5: c.HeadStart} {
			printed := c.Published.TwoSided
			if head > 0 {
				printed = c.Published.HeadStart
			}
			got, err := runlength.CUSUM(watch.CUSUM{K: c.K, H: c.H, HeadStart: head}, c.Shift)
			if err != nil {
				t.Fatal(err)
			}
			for i, r := range got {
				if !near(r.Mean, want[i], 1e-8) {
					t.Errorf("h %g, head start %g, shift %g: %.10g, want %.10g", c.H, head, c.Shift[i], r.Mean, want[i])
				}
				if printed[i] != nil && !rounds(r.Mean, *printed[i], 0.01) {
					t.Errorf("h %g, head start %g, shift %g: %.4f does not print as %v (Lucas and Crosier 1982)",
						c.H, head, c.Shift[i], r.Mean, *printed[i])
				}
			}
		}
	}
	for _, c := range f.Design {
		got, err := runlength.CUSUM(watch.CUSUM{K: c.K, H: c.H}, []float64{0})
		if err != nil || !near(got[0].Mean, c.ARL, 1e-7) {
			t.Errorf("k %g, h %g: %v, %v; want %g", c.K, c.H, means(got), err, c.ARL)
		}
	}
	if len(f.Cases) != 2 || len(f.Design) != 6 {
		t.Errorf("%d cases and %d designs, want 2 and 6", len(f.Cases), len(f.Design))
	}
}
