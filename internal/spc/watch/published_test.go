package watch_test

import (
	"encoding/json"
	"math"
	"os"
	"slices"
	"testing"

	"holdfast/internal/spc/limits"
	"holdfast/internal/spc/watch"
)

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

// edges is one limit for all points or one a point; an absent lower limit is 0.
type edges []float64

func (e *edges) UnmarshalJSON(raw []byte) error {
	var one float64
	if json.Unmarshal(raw, &one) == nil {
		*e = edges{one}
		return nil
	}
	return json.Unmarshal(raw, (*[]float64)(e))
}

func (e edges) at(i int) float64 { return e[min(i, len(e)-1)] }

// countSet is one set of counts of attributes.json.
type countSet struct {
	Data, D, Counts []int
	Units           []float64
	Computed        struct {
		Center   float64
		SigmaZ   float64 `json:"sigma_z"`
		LCL, UCL edges
		Outside  []int `json:"rows_outside"`
		Z        []float64
	}
}

// The fold over published counts: points, limits, z and the points outside, from 1.
// Source: Montgomery, Introduction to Statistical Quality Control (data from memory,
// printed totals reproduced); NIST/SEMATECH e-Handbook 6.3.3.2; Laney (2002). Limits
// and z computed independently.
func TestFoldOverPublishedCounts(t *testing.T) {
	t.Parallel()
	var file struct {
		C  countSet `json:"c_chart_printed_circuit"`
		P  countSet `json:"p_chart_variable_n"`
		U  countSet `json:"u_chart_variable_n"`
		NP countSet `json:"np_chart"`
		LP countSet `json:"laney_p_prime"`
		LU countSet `json:"laney_u_prime"`
		PO countSet `json:"laney_p_prime_purchase_orders"`
	}
	load(t, "attributes.json", &file)
	var sizes struct { // beside a wholly different "N"
		P  struct{ N []float64 } `json:"p_chart_variable_n"`
		LP struct{ N []float64 } `json:"laney_p_prime"`
	}
	load(t, "attributes.json", &sizes)
	file.PO.D = file.P.D
	for _, tc := range []struct {
		name  string
		chart limits.Chart
		set   countSet
		sizes []float64
	}{
		{"printed circuits", limits.C, file.C, nil},
		{"purchase orders", limits.P, file.P, sizes.P.N},
		{"dyed cloth", limits.U, file.U, file.U.Units},
		{"wafers", limits.NP, file.NP, slices.Repeat([]float64{50}, 30)},
		{"Laney p', constructed", limits.LaneyP, file.LP, sizes.LP.N},
		{"Laney u', constructed", limits.LaneyU, file.LU, file.LU.Units},
		{"Laney p', purchase orders", limits.LaneyP, file.PO, sizes.P.N},
	} {
		counts, want := slices.Concat(tc.set.Data, tc.set.D, tc.set.Counts), tc.set.Computed
		standard, err := limits.EstimateCounts(tc.chart, counts, tc.sizes)
		if err != nil {
			t.Fatal(err)
		}
		j := judgeOf(t, watch.Standard{Model: watch.Counts{CountStandard: standard}, LocationRules: watch.DefaultsAt(tc.chart, watch.PanelLocation, 1, 0)})
		var m watch.Memory
		var outside []int
		for i, k := range counts {
			s := watch.Subgroup{Count: k}
			if tc.sizes != nil {
				s.Size = tc.sizes[i]
			}
			d := j.Step(&m, s)
			if d.Err != nil {
				t.Fatal(d.Err)
			}
			b, lower := d.Location.Band, math.Max(0, d.Location.Band.Lower)
			near(t, tc.name+": centre", i+1, b.Center, want.Center, 1e-11*want.Center)
			near(t, tc.name+": lower limit", i+1, lower, want.LCL.at(i), 1e-10*want.Center)
			near(t, tc.name+": upper limit", i+1, b.Upper, want.UCL.at(i), 1e-11*want.UCL.at(i))
			if want.Z != nil {
				near(t, tc.name+": z", i+1, d.Location.Z, want.Z[i], 1e-10)
			}
			if d.Location.Fired.Has(0) {
				outside = append(outside, i+1)
			}
		}
		if !slices.Equal(outside, want.Outside) || m.Points != uint64(len(counts)) {
			t.Errorf("%s: outside %v, want %v", tc.name, outside, want.Outside)
		}
	}
}

// Exact limits: a count on one does not fire, the next beyond does. Source: binomial
// and Poisson tails computed independently with a general-purpose scientific library.
func TestFoldFiresBeyondExactLimits(t *testing.T) {
	t.Parallel()
	var file struct {
		Exact struct {
			Cases []struct {
				Dist                           string
				N, P, Mean, Tail, Lower, Upper float64
			}
		} `json:"exact_limits"`
	}
	load(t, "attributes.json", &file)
	if len(file.Exact.Cases) != 24 {
		t.Fatalf("%d cases", len(file.Exact.Cases))
	}
	for _, c := range file.Exact.Cases {
		s := limits.CountStandard{Chart: limits.P, Center: c.P, Probability: true, Tail: c.Tail}
		if c.Dist == "poisson" {
			s.Chart, s.Center = limits.C, c.Mean
		}
		j := judgeOf(t, watch.Standard{Model: watch.Counts{CountStandard: s}, LocationRules: watch.DefaultsAt(s.Chart, watch.PanelLocation, 1, 0)})
		fires := func(count float64) watch.Side {
			var m watch.Memory
			d := j.Step(&m, watch.Subgroup{Count: int(count), Size: c.N})
			if d.Err != nil {
				t.Fatalf("%+v, count %g: %v", c, count, d.Err)
			}
			return d.Location.Fired.Side(0)
		}
		for count, want := range map[float64]watch.Side{c.Upper: watch.None, c.Upper + 1: watch.High, c.Lower: watch.None, c.Lower - 1: watch.Low} {
			if count < 0 || c.Dist == "binomial" && count > c.N {
				continue
			}
			if got := fires(count); got != want {
				t.Errorf("%+v: a count of %g fires on %s, want %s", c, count, got, want)
			}
		}
	}
}

// NIST/SEMATECH e-Handbook 6.3.2.2, 6.3.3.1 and 6.3.3.2: printed limits; points outside
// computed independently.
func TestFoldOverExamplesOfTheHandbook(t *testing.T) {
	t.Parallel()
	var file struct {
		Examples []struct {
			Section   string
			Data      []float64
			Published struct{ Center, UCL, LCL json.Number }
			Computed  struct {
				Outside []int `json:"rows_outside"`
			}
		}
	}
	load(t, "nist_handbook.json", &file)
	met := 0
	for _, e := range file.Examples {
		var s watch.Standard
		draw := func(v float64) watch.Subgroup { return watch.Subgroup{Count: int(v), Size: 50} }
		counts := make([]int, len(e.Data))
		for i, v := range e.Data {
			counts[i] = int(v)
		}
		tol := 6e-5
		switch e.Section {
		case "6.3.2.2":
			var subgroups []limits.Subgroup
			for _, v := range e.Data {
				subgroups = append(subgroups, limits.Subgroup{N: 1, Location: v})
			}
			est, err := limits.Estimate(limits.Individuals, limits.MRBar, subgroups)
			if err != nil {
				t.Fatal(err)
			}
			s.Standard = limits.Standard{Chart: limits.Individuals, Center: est.Center, Sigma: est.Sigma}
			draw = func(v float64) watch.Subgroup { return watch.Subgroup{N: 1, Mean: v} }
			tol = 2e-3 // the handbook divides by 1.128
		case "6.3.3.1", "6.3.3.2":
			chart, sizes := limits.C, []float64(nil)
			if e.Section == "6.3.3.2" {
				chart, sizes = limits.P, slices.Repeat([]float64{50}, len(counts))
			}
			est, err := limits.EstimateCounts(chart, counts, sizes)
			if err != nil {
				t.Fatal(err)
			}
			s.Model = watch.Counts{CountStandard: est}
		default:
			continue
		}
		met++
		s.LocationRules = []watch.Rule{{Kind: watch.Beyond, Z: 3}}
		j := judgeOf(t, s)
		var m watch.Memory
		var outside []int
		for i, v := range e.Data {
			d := j.Step(&m, draw(v))
			if d.Err != nil {
				t.Fatal(d.Err)
			}
			for name, pair := range map[string][2]any{
				"centre": {d.Location.Band.Center, e.Published.Center}, "upper limit": {d.Location.Band.Upper, e.Published.UCL}, "lower limit": {d.Location.Band.Lower, e.Published.LCL},
			} {
				want, err := pair[1].(json.Number).Float64()
				if err != nil {
					t.Fatal(err)
				}
				near(t, e.Section+" printed "+name, i+1, pair[0].(float64), want, tol)
			}
			if d.Any() {
				outside = append(outside, i+1)
			}
		}
		if !slices.Equal(outside, e.Computed.Outside) {
			t.Errorf("%s: outside %v, want %v", e.Section, outside, e.Computed.Outside)
		}
	}
	if met != 3 {
		t.Errorf("%d examples, want 3", met)
	}
}
