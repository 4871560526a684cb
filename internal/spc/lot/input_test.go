package lot_test

import (
	"errors"
	"math"
	"strings"
	"testing"
	"time"

	"holdfast/internal/spc/lot"
)

func TestWrongInputIsNamed(t *testing.T) {
	t.Parallel()
	accept := func(i lot.Inspection, p float64) error {
		_, err := i.Accept(p)
		return err
	}
	smallest := func(r lot.Risks, m lot.Model, size int) error {
		_, err := lot.Smallest(r, m, size, lot.Errors{})
		return err
	}
	double := func(p lot.DoublePlan, m lot.Model, size int, e lot.Errors) error {
		_, err := lot.DoubleInspection{Plan: p, Model: m, Lot: size, Errors: e}.At(0.1)
		return err
	}
	ok := lot.Plan{N: 10, C: 1}
	good := lot.Risks{P1: 0.01, Alpha: 0.05, P2: 0.1, Beta: 0.1}
	_, endless := lot.Inspection{Plan: ok, Model: lot.Binomial}.ATI(0.1)
	_, ltpd := lot.LeastForLTPD(0.01, 0.1, 0.02, lot.Binomial, 500, lot.Errors{})
	_, noLot := lot.LeastForAOQL(0.01, 0.001, lot.Binomial, 0, lot.Errors{})
	_, withError := lot.LeastForAOQL(0.01, 0.001, lot.Hypergeometric, 500, lot.Errors{Miss: 0.1})
	_, sequential := lot.NewSequential(lot.Risks{P1: 0, Alpha: 0.05, P2: 0.1, Beta: 0.1})
	_, step := lot.Sequential{H1: 1, H2: 1, Slope: 0.1}.At(0)
	_, letter := lot.ISOPlan("I", 1, lot.NormalInspection)
	_, column := lot.ISOPlan("K", 2, lot.NormalInspection)
	_, reduced := lot.ISOPlan("K", 1, lot.ReducedInspection)
	_, small := lot.CodeLetter(1, lot.LevelII)
	_, _, stored := lot.Switching{Accepted: 9}.Next(lot.Result{})
	_, _, tighter := lot.Switching{}.Next(lot.Result{AcceptedTighter: true})
	for _, c := range []struct {
		err   error
		words string
	}{
		{accept(lot.Inspection{Plan: ok}, 0.1), `no model ""`},
		{accept(lot.Inspection{Plan: ok, Model: lot.Hypergeometric}, 0.1), "needs the number of units"},
		{accept(lot.Inspection{Plan: lot.Plan{N: 5, C: 5}, Model: lot.Binomial}, 0.1), "one below the sample, got 5"},
		{accept(lot.Inspection{Plan: ok, Model: lot.Binomial, Lot: 9}, 0.1), "sample of 10 cannot be drawn from a lot of 9"},
		{accept(lot.Inspection{Plan: ok, Model: lot.Binomial}, 1.1), "fraction nonconforming must be from 0 to 1"},
		{accept(lot.Inspection{Plan: ok, Model: lot.Binomial}, math.NaN()), "from 0 to 1"},
		{accept(lot.Inspection{Plan: ok, Model: lot.Binomial, Errors: lot.Errors{Miss: 2}}, 0.1), "rate of misses"},
		{accept(lot.Inspection{Plan: ok, Model: lot.Binomial, Errors: lot.Errors{Miss: 0.6, FalseReject: 0.5}}, 0.1), "rejects good units at least as often"},
		{accept(lot.Inspection{Plan: lot.Plan{N: 3000}, Model: lot.Hypergeometric, Lot: 50000, Errors: lot.Errors{Miss: 0.1}}, 0.1), "samples up to 2000"},
		{smallest(lot.Risks{P1: 0.1, Alpha: 0.05, P2: 0.1, Beta: 0.1}, lot.Binomial, 0), "must be below p2"},
		{smallest(lot.Risks{P1: 0.1, Alpha: 0, P2: 0.2, Beta: 0.1}, lot.Binomial, 0), "alpha must lie between"},
		{smallest(lot.Risks{P1: 0.1, Alpha: 0.5, P2: 0.2, Beta: 0.5}, lot.Binomial, 0), "add up to 1"},
		{endless, "endless lot"},
		{ltpd, "process average 0.02 must be below the LTPD"},
		{noLot, "endless lot"},
		{withError, "binomial or the Poisson"},
		{double(lot.DoublePlan{N1: 10, C1: 2, R1: 2, N2: 10, C2: 3}, lot.Binomial, 0, lot.Errors{}), "rejection number 2 must be above"},
		{double(lot.DoublePlan{N1: 10, C1: 2, R1: 4, N2: 10, C2: 1}, lot.Binomial, 0, lot.Errors{}), "must be at least the first"},
		{double(lot.DoublePlan{N1: 10, C1: 2, R1: 4, N2: 0, C2: 3}, lot.Binomial, 0, lot.Errors{}), "both samples"},
		{double(lot.DoublePlan{N1: 10, C1: 2, R1: 4, N2: 10, C2: 3}, lot.Binomial, 15, lot.Errors{}), "lot of 15"},
		{double(lot.DoublePlan{N1: 10, C1: 2, R1: 4, N2: 10, C2: 3}, lot.Hypergeometric, 50, lot.Errors{Miss: 0.1}), "binomial or the Poisson"},
		{sequential, "p1 above 0"},
		{step, "number of units"},
		{letter, `no code letter "I"`},
		{column, "no AQL column 2 %"},
		{reduced, "take them from the standard"},
		{small, "at least 2 units"},
		{stored, "not one it can reach"},
		{tighter, "tighter plan"},
	} {
		if c.err == nil || !errors.Is(c.err, lot.ErrInput) || !strings.Contains(c.err.Error(), c.words) {
			t.Errorf("got %v, want words %q", c.err, c.words)
		}
	}
	// Two points of a small lot that are one.
	if err := smallest(good, lot.Hypergeometric, 4); !errors.Is(err, lot.ErrNoPlan) {
		t.Errorf("a lot of four: %v", err)
	}
	if err := smallest(lot.Risks{P1: 0.5, Alpha: 1e-9, P2: 0.5001, Beta: 1e-9}, lot.Binomial, 0); !errors.Is(err, lot.ErrNoPlan) {
		t.Errorf("points too near: %v", err)
	}
	if (lot.Plan{N: 5}).AcceptsFound() || !ok.AcceptsFound() {
		t.Error("only an acceptance number above zero accepts what was found")
	}
}

func FuzzLot(f *testing.F) {
	f.Add(50, 2, 500, 0.01, 0.1, 0.05, 0.1, 0.02, 0.1, uint8(0))
	f.Add(1, 0, 1, 0.0, 1.0, 0.5, 0.4, 0.0, 0.0, uint8(2))
	f.Add(1999, 1900, 1000000, 0.5, 0.5000001, 1e-12, 1e-12, 0.3, 0.3, uint8(2))
	f.Add(900000, 450000, 1000000, 0.5, 0.51, 1e-12, 1e-12, 0.0, 0.0, uint8(1))
	f.Fuzz(func(t *testing.T, n, c, size int, p1, p2, alpha, beta, e1, e2 float64, which uint8) {
		m := models[int(which)%3]
		e := lot.Errors{FalseReject: e1, Miss: e2}
		begun := time.Now()
		finite := func(values ...float64) {
			t.Helper()
			for _, v := range values {
				if math.IsNaN(v) || math.IsInf(v, 0) {
					t.Fatalf("not finite without an error: %v", values)
				}
			}
		}
		i := lot.Inspection{Plan: lot.Plan{N: n, C: c}, Model: m, Lot: size, Errors: e}
		if pa, err := i.Accept(p1); err == nil {
			finite(pa)
			if pa < 0 || pa > 1+1e-12 {
				t.Fatalf("accepted with %g", pa)
			}
			if v, err := i.ATI(p1); err == nil {
				finite(v)
			}
		}
		if a, b, err := i.AOQL(); err == nil {
			finite(a, b)
		}
		if f, err := lot.Smallest(lot.Risks{P1: p1, Alpha: alpha, P2: p2, Beta: beta}, m, size, e); err == nil {
			finite(f.Alpha, f.Beta)
			if f.Alpha > alpha+1e-9 || f.Beta > beta {
				t.Fatalf("%+v does not keep %g and %g", f, alpha, beta)
			}
		}
		if s, err := lot.NewSequential(lot.Risks{P1: p1, Alpha: alpha, P2: p2, Beta: beta}); err == nil {
			finite(s.H1, s.H2, s.Slope)
			if _, err := s.At(n); err != nil && n >= 1 && n <= lot.MaxSample && s.H1 < 1e9 && s.H2 < 1e9 && s.Slope < 1 {
				t.Fatal(err)
			}
		}
		d := lot.DoubleInspection{Plan: lot.DoublePlan{N1: n, C1: c, R1: c + 3, N2: n, C2: c + 2}, Model: m, Lot: size, Errors: e}
		if v, err := d.At(p1); err == nil {
			finite(v.Accept, v.ASN, v.ASNCurtailed)
			if v.ASNCurtailed > v.ASN+1e-6 {
				t.Fatalf("curtailed %+v", v)
			}
		}
		if size < 20_000 {
			if r, err := lot.LeastForAOQL(alpha, p1, m, size, lot.Errors{}); err == nil {
				finite(r.ATI, r.AOQL)
			}
			if r, err := lot.LeastForLTPD(p2, beta, p1, m, size, lot.Errors{}); err == nil {
				finite(r.ATI, r.AOQL, *r.AtLTPD)
			}
		}
		if took := time.Since(begun); took > 20*time.Second {
			t.Fatalf("took %v", took)
		}
	})
}

// The plan of the handbook's size, one search.
func BenchmarkLotPlan(b *testing.B) {
	for b.Loop() {
		if _, err := lot.Smallest(lot.Risks{P1: 0.01, Alpha: 0.05, P2: 0.05, Beta: 0.1}, lot.Hypergeometric, 10_000, lot.Errors{}); err != nil {
			b.Fatal(err)
		}
	}
}

func BenchmarkLotPlanFine(b *testing.B) {
	for b.Loop() {
		if _, err := lot.Smallest(lot.Risks{P1: 0.01, Alpha: 0.01, P2: 0.012, Beta: 0.01}, lot.Binomial, 0, lot.Errors{}); err != nil {
			b.Fatal(err)
		}
	}
}

func BenchmarkLeastForAOQL(b *testing.B) {
	for b.Loop() {
		if _, err := lot.LeastForAOQL(0.03, 0.01, lot.Binomial, 5000, lot.Errors{}); err != nil {
			b.Fatal(err)
		}
	}
}
