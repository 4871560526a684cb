package lot_test

import (
	"encoding/json"
	"fmt"
	"math"
	"os"
	"testing"

	"holdfast/internal/spc/lot"
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

// near allows half a unit in the eleventh digit, the last that the file prints.
func near(t *testing.T, what string, got, want float64) {
	t.Helper()
	if math.Abs(got-want) > 5.1e-11*math.Abs(want)+1e-15 {
		t.Errorf("%s = %.13g, want %.13g", what, got, want)
	}
}

// must turns a computed value into a number or ends the test.
func must(t *testing.T) func(float64, error) float64 {
	return func(x float64, err error) float64 {
		t.Helper()
		if err != nil {
			t.Fatal(err)
		}
		return x
	}
}

// Source: three laws of a general-purpose scientific library.
func TestOperatingCharacteristics(t *testing.T) {
	t.Parallel()
	var file struct {
		Cases []struct {
			Lot  int `json:"lot_size"`
			N, C int
			OC   []struct {
				P, Binomial, Poisson float64
				Hypergeometric       *float64
			}
		}
	}
	if err := json.Unmarshal(decode(t, "oc"), &file); err != nil {
		t.Fatal(err)
	}
	if len(file.Cases) != 7 {
		t.Fatalf("%d cases", len(file.Cases))
	}
	v := must(t)
	for _, c := range file.Cases {
		i := lot.Inspection{Plan: lot.Plan{N: c.N, C: c.C}, Lot: c.Lot}
		for _, o := range c.OC {
			name := fmt.Sprintf("N %d n %d c %d p %g", c.Lot, c.N, c.C, o.P)
			i.Model = lot.Binomial
			near(t, name+" binomial", v(i.Accept(o.P)), o.Binomial)
			i.Model = lot.Poisson
			near(t, name+" Poisson", v(i.Accept(o.P)), o.Poisson)
			i.Model = lot.Hypergeometric
			got := v(i.Accept(o.P))
			if o.Hypergeometric != nil {
				near(t, name+" hypergeometric", got, *o.Hypergeometric)
			}
		}
	}
}

// decode reads one member of the file: encoding/json cannot tell N from n in one
// struct, so members with both are read by exact keys.
func decode(t testing.TB, member string) json.RawMessage {
	t.Helper()
	var all map[string]any
	load(t, "acceptance.json", &all)
	raw, err := json.Marshal(rename(all[member]))
	if err != nil {
		t.Fatal(err)
	}
	return raw
}

// rename gives the lot size N a key of its own.
func rename(v any) any {
	switch v := v.(type) {
	case map[string]any:
		out := map[string]any{}
		for k, e := range v {
			if k == "N" {
				k = "lot_size"
			}
			out[k] = rename(e)
		}
		return out
	case []any:
		for i := range v {
			v[i] = rename(v[i])
		}
	}
	return v
}

// Source: Montgomery, Introduction to Statistical Quality Control (from memory),
// n = 89, c = 2, printed to four decimals.
func TestOperatingCharacteristicAsPrinted(t *testing.T) {
	t.Parallel()
	var file struct {
		Published struct{ P, Pa, Computed []float64 } `json:"oc_published_n89_c2"`
	}
	load(t, "acceptance.json", &file)
	if len(file.Published.P) != 10 {
		t.Fatal("no cases")
	}
	i := lot.Inspection{Plan: lot.Plan{N: 89, C: 2}, Model: lot.Binomial}
	for k, p := range file.Published.P {
		got := must(t)(i.Accept(p))
		near(t, "acceptance", got, file.Published.Computed[k])
		if math.Abs(got-file.Published.Pa[k]) > 5.1e-5 {
			t.Errorf("p %g: %g, printed %g", p, got, file.Published.Pa[k])
		}
	}
}

// Source: exhaustive search, two independent ones agree.
func TestSmallestPlans(t *testing.T) {
	t.Parallel()
	type plan struct {
		Lot                    int `json:"lot_size"`
		AQL, Alpha, LTPD, Beta float64
		N, C                   int
		At1                    float64 `json:"pa_at_p1"`
		At2                    float64 `json:"pa_at_p2"`
	}
	for _, m := range []struct {
		member string
		model  lot.Model
		count  int
	}{{"smallest_plans_binomial", lot.Binomial, 10}, {"smallest_plans_hypergeometric", lot.Hypergeometric, 5}} {
		var file struct{ Cases []plan }
		if err := json.Unmarshal(decode(t, m.member), &file); err != nil {
			t.Fatal(err)
		}
		if len(file.Cases) != m.count {
			t.Fatalf("%d cases", len(file.Cases))
		}
		for _, c := range file.Cases {
			got, err := lot.Smallest(lot.Risks{P1: c.AQL, Alpha: c.Alpha, P2: c.LTPD, Beta: c.Beta}, m.model, c.Lot, lot.Errors{})
			if err != nil || got.Plan != (lot.Plan{N: c.N, C: c.C}) {
				t.Errorf("%+v: %+v, %v", c, got, err)
			}
			near(t, "acceptance at p1", 1-got.Alpha, c.At1)
			near(t, "acceptance at p2", got.Beta, c.At2)
		}
	}
}

// Source: computed independently; 687 units at p = 0.01 for N = 10000, n = 89, c = 2 is
// printed in Montgomery (from memory). p at the AOQL is printed to six digits or fewer.
func TestRectifyingInspection(t *testing.T) {
	t.Parallel()
	var file struct {
		Cases []struct {
			Lot   int `json:"lot_size"`
			N, C  int
			AOQL  float64
			At    float64 `json:"p_at_aoql"`
			Large float64 `json:"aoql_large_lot"`
			Cases []struct{ P, Pa, AOQ, ATI float64 }
		}
	}
	if err := json.Unmarshal(decode(t, "rectifying"), &file); err != nil {
		t.Fatal(err)
	}
	if len(file.Cases) != 5 {
		t.Fatal("no cases")
	}
	v := must(t)
	for _, c := range file.Cases {
		i := lot.Inspection{Plan: lot.Plan{N: c.N, C: c.C}, Model: lot.Binomial, Lot: c.Lot}
		for _, p := range c.Cases {
			near(t, "Pa", v(i.Accept(p.P)), p.Pa)
			near(t, "AOQ", v(i.AOQ(p.P)), p.AOQ)
			near(t, "ATI", v(i.ATI(p.P)), p.ATI)
			if c.N == 89 && p.P == 0.01 && math.Round(v(i.ATI(p.P))) != 687 {
				t.Errorf("ATI %g, printed 687", v(i.ATI(p.P)))
			}
		}
		aoql, at, err := i.AOQL()
		if err != nil {
			t.Fatal(err)
		}
		near(t, "AOQL", aoql, c.AOQL)
		if math.Abs(at-c.At) > 6e-7 {
			t.Errorf("n %d: AOQL at %.8f, want %g", c.N, at, c.At)
		}
		i.Lot = 0
		aoql, _, err = i.AOQL()
		if err != nil {
			t.Fatal(err)
		}
		near(t, "AOQL of an endless lot", aoql, c.Large)
	}
}

// Source: computed independently; 0.279 accepted on the first sample at p = 0.05 of the
// first plan is printed in Montgomery (from memory).
func TestDoublePlans(t *testing.T) {
	t.Parallel()
	var file struct {
		Double struct {
			Cases []struct {
				N1, C1, R1, N2, C2 int
				Cases              []struct {
					P            float64
					AcceptFirst  float64 `json:"accept_first"`
					RejectFirst  float64 `json:"reject_first"`
					AcceptSecond float64 `json:"accept_second"`
					Accept       float64 `json:"accept_total"`
					ASN          float64 `json:"asn_complete"`
					Curtailed    float64 `json:"asn_curtailed_second_sample_on_rejection"`
				}
			}
		}
	}
	load(t, "acceptance.json", &file)
	if len(file.Double.Cases) != 5 {
		t.Fatal("no cases")
	}
	for k, c := range file.Double.Cases {
		i := lot.DoubleInspection{Plan: lot.DoublePlan{N1: c.N1, C1: c.C1, R1: c.R1, N2: c.N2, C2: c.C2}, Model: lot.Binomial}
		for _, w := range c.Cases {
			got, err := i.At(w.P)
			if err != nil {
				t.Fatal(err)
			}
			near(t, "first accepted", got.AcceptFirst, w.AcceptFirst)
			near(t, "first rejected", got.RejectFirst, w.RejectFirst)
			near(t, "second accepted", got.AcceptSecond, w.AcceptSecond)
			near(t, "accepted", got.Accept, w.Accept)
			near(t, "ASN", got.ASN, w.ASN)
			near(t, "ASN curtailed", got.ASNCurtailed, w.Curtailed)
			if k == 0 && w.P == 0.05 && math.Abs(got.AcceptFirst-0.279) > 5e-4 {
				t.Errorf("accepted on the first %g, printed 0.279", got.AcceptFirst)
			}
		}
	}
}

// Source: Wald's formulas computed independently; Montgomery prints 1.22, 1.57 and 0.028
// for the first plan (from memory).
func TestSequentialPlans(t *testing.T) {
	t.Parallel()
	var file struct {
		Sequential struct {
			Cases []struct {
				P1, Alpha, P2, Beta, H1, H2, Slope float64
				Table                              []struct {
					N      int
					Accept *int `json:"accept_if_at_most"`
					Reject *int `json:"reject_if_at_least"`
				}
			}
		}
	}
	load(t, "acceptance.json", &file)
	if len(file.Sequential.Cases) != 3 {
		t.Fatal("no cases")
	}
	for k, c := range file.Sequential.Cases {
		s, err := lot.NewSequential(lot.Risks{P1: c.P1, Alpha: c.Alpha, P2: c.P2, Beta: c.Beta})
		if err != nil {
			t.Fatal(err)
		}
		near(t, "h1", s.H1, c.H1)
		near(t, "h2", s.H2, c.H2)
		near(t, "slope", s.Slope, c.Slope)
		if k == 0 && (math.Abs(s.H1-1.22) > 5e-3 || math.Abs(s.H2-1.57) > 5e-3 || math.Abs(s.Slope-0.028) > 5e-4) {
			t.Errorf("%+v, printed 1.22, 1.57, 0.028", s)
		}
		for _, w := range c.Table {
			step, err := s.At(w.N)
			if err != nil {
				t.Fatal(err)
			}
			for _, v := range [][2]*int{{step.AcceptAtMost, w.Accept}, {step.RejectAtLeast, w.Reject}} {
				if (v[0] == nil) != (v[1] == nil) || v[0] != nil && *v[0] != *v[1] {
					t.Errorf("plan %d after %d: %v, want %v %v", k, w.N, step, w.Accept, w.Reject)
				}
			}
		}
	}
}

// Source: NIST/SEMATECH e-Handbook, sections 6.2.3.2 and 6.2.6 (from memory), 6.2.4
// (plans seen in an excerpt). The printed AOQ is that of an endless lot, the printed ATI
// whole.
func TestHandbookPlans(t *testing.T) {
	t.Parallel()
	var file struct{ Examples []map[string]any }
	load(t, "nist_handbook.json", &file)
	if len(file.Examples) != 3 {
		t.Fatal("no examples")
	}
	list := func(v any) (out []*float64) {
		for _, e := range v.([]any) {
			if e == nil {
				out = append(out, nil)
				continue
			}
			f := e.(float64)
			out = append(out, &f)
		}
		return out
	}
	v := must(t)
	single := file.Examples[0]
	published, computed := single["published"].(map[string]any), single["computed"].(map[string]any)
	large := lot.Inspection{Plan: lot.Plan{N: 52, C: 3}, Model: lot.Binomial}
	sized := large
	sized.Lot = 10000
	pa, aoq := list(published["pa"]), list(published["aoq"])
	for k, p := range list(single["p"]) {
		near(t, "Pa", v(large.Accept(*p)), *list(computed["pa_binomial"])[k])
		near(t, "AOQ, endless", v(large.AOQ(*p)), *list(computed["aoq_large_lot_p_times_pa"])[k])
		near(t, "AOQ", v(sized.AOQ(*p)), *list(computed["aoq_with_(N-n)/N"])[k])
		if pa[k] != nil && math.Abs(v(large.Accept(*p))-*pa[k]) > 5.1e-4 {
			t.Errorf("p %g: Pa %g, printed %g", *p, v(large.Accept(*p)), *pa[k])
		}
		if aoq[k] != nil && math.Abs(v(large.AOQ(*p))-*aoq[k]) > 5.1e-5 {
			t.Errorf("p %g: AOQ %g, printed %g", *p, v(large.AOQ(*p)), *aoq[k])
		}
	}
	for k, p := range list(published["ati_p"]) {
		got := v(sized.ATI(*p))
		near(t, "ATI", got, *list(computed["ati"])[k])
		if math.Abs(got-*list(published["ati"])[k]) > 1 {
			t.Errorf("p %g: ATI %g, printed %g", *p, got, *list(published["ati"])[k])
		}
	}
	double := file.Examples[1]["computed"].(map[string]any)
	for name, plan := range map[string]lot.DoublePlan{
		"plan_equal_samples":        {N1: 108, C1: 2, R1: 5, N2: 108, C2: 4},
		"plan_double_second_sample": {N1: 77, C1: 1, R1: 5, N2: 154, C2: 4},
		"asn_example":               {N1: 50, C1: 2, R1: 7, N2: 100, C2: 6},
	} {
		for _, e := range double[name].([]any) {
			w := e.(map[string]any)
			got, err := lot.DoubleInspection{Plan: plan, Model: lot.Binomial}.At(w["p"].(float64))
			if err != nil {
				t.Fatal(err)
			}
			near(t, name+" first", got.AcceptFirst, w["accept_on_first"].(float64))
			near(t, name+" rejected", got.RejectFirst, w["reject_on_first"].(float64))
			near(t, name+" accepted", got.Accept, w["accept_total"].(float64))
			near(t, name+" ASN", got.ASN, w["asn"].(float64))
		}
	}
	seq := file.Examples[2]
	s, err := lot.NewSequential(lot.Risks{P1: 0.01, Alpha: 0.05, P2: 0.1, Beta: 0.1})
	if err != nil {
		t.Fatal(err)
	}
	for name, got := range map[string]float64{"h1": s.H1, "h2": s.H2, "slope": s.Slope} {
		near(t, name, got, seq["computed"].(map[string]any)[name].(float64))
		if printed := seq["published"].(map[string]any)[name].(float64); math.Abs(got-printed) > 5e-4 {
			t.Errorf("%s %g, printed %g", name, got, printed)
		}
	}
}
