package lot_test

import (
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"holdfast/internal/spc/lot"
)

// choose is the binomial coefficient, plainly.
func choose(n, k int) float64 {
	if k < 0 || k > n {
		return 0
	}
	c := 1.0
	for i := range k {
		c = c * float64(n-i) / float64(i+1)
	}
	return c
}

var models = []lot.Model{lot.Binomial, lot.Poisson, lot.Hypergeometric}

// Acceptance by summing plain terms.
func plain(m lot.Model, size int, p lot.Plan, fraction float64) float64 {
	sum := 0.0
	d := int(math.Round(fraction * float64(size)))
	for k := 0; k <= p.C; k++ {
		switch m {
		case lot.Binomial:
			sum += choose(p.N, k) * math.Pow(fraction, float64(k)) * math.Pow(1-fraction, float64(p.N-k))
		case lot.Poisson:
			mean := float64(p.N) * fraction
			term := math.Exp(-mean)
			for i := 1; i <= k; i++ {
				term *= mean / float64(i)
			}
			sum += term
		default:
			sum += choose(d, k) * choose(size-d, p.N-k) / choose(size, p.N)
		}
	}
	return sum
}

func TestAcceptanceByPlainSums(t *testing.T) {
	t.Parallel()
	v := must(t)
	for _, m := range models {
		for _, p := range []lot.Plan{{N: 1}, {N: 5, C: 1}, {N: 13, C: 3}, {N: 40, C: 5}} {
			for _, f := range []float64{0, 0.01, 0.1, 0.5, 1} {
				got := v(lot.Inspection{Plan: p, Model: m, Lot: 60}.Accept(f))
				if want := plain(m, 60, p, f); math.Abs(got-want) > 1e-12 {
					t.Errorf("%s %+v at %g: %g, by sums %g", m, p, f, got, want)
				}
			}
		}
	}
}

// All plans up to 200 units: the search must find the first that keeps both risks.
func TestSmallestPlanByTryingAll(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(9, 1))
	const size = 200
	for try := range 150 {
		m := models[try%3]
		r := lot.Risks{P1: 0.2 * rng.Float64(), Alpha: 0.01 + 0.2*rng.Float64(), Beta: 0.01 + 0.2*rng.Float64()}
		r.P2 = r.P1 + 0.02 + 0.6*rng.Float64()
		want, found := lot.Plan{}, false
		for n := 1; n <= size && !found; n++ {
			for c := 0; c < n && !found; c++ {
				i := lot.Inspection{Plan: lot.Plan{N: n, C: c}, Model: m, Lot: size}
				a, err := i.Accept(r.P1)
				if err != nil {
					t.Fatal(err)
				}
				b, err := i.Accept(r.P2)
				if err != nil {
					t.Fatal(err)
				}
				if a >= 1-r.Alpha && b <= r.Beta {
					want, found = lot.Plan{N: n, C: c}, true
				}
			}
		}
		got, err := lot.Smallest(r, m, size, lot.Errors{})
		if !found {
			if !errors.Is(err, lot.ErrNoPlan) {
				t.Errorf("%s %+v: %+v, %v; no plan exists", m, r, got, err)
			}
			continue
		}
		if err != nil || got.Plan != want || got.Alpha > r.Alpha+1e-12 || got.Beta > r.Beta {
			t.Errorf("%s %+v: %+v, %v; want %+v", m, r, got, err, want)
		}
	}
}

// With a good share near one the first acceptance numbers fail for their samples
// altogether; the search must go on.
func TestSmallestPlanForHighFractions(t *testing.T) {
	t.Parallel()
	got, err := lot.Smallest(lot.Risks{P1: 0.2, Alpha: 0.05, P2: 0.99, Beta: 0.05}, lot.Binomial, 0, lot.Errors{})
	if err != nil || got.Plan != (lot.Plan{N: 2, C: 1}) {
		t.Errorf("%+v, %v; want 2 and 1", got, err)
	}
}

// The AOQL by a fine grid, for endless and small lots; hypergeometric over every
// possible number of nonconforming units.
func TestAOQLByTryingAll(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(9, 2))
	for try := range 90 {
		m := models[try%3]
		size := 20 + rng.IntN(300)
		p := lot.Plan{N: 1 + rng.IntN(size-1)}
		p.C = rng.IntN(min(p.N, 8))
		i := lot.Inspection{Plan: p, Model: m, Lot: size}
		if try%2 == 0 {
			i.Errors = lot.Errors{FalseReject: 0.02, Miss: 0.1}
		}
		top := 0.0
		steps := 2000
		if m == lot.Hypergeometric {
			steps = size
		}
		for k := 0; k <= steps; k++ {
			v, err := i.AOQ(float64(k) / float64(steps))
			if err != nil {
				t.Fatal(err)
			}
			top = math.Max(top, v)
		}
		got, at, err := i.AOQL()
		if err != nil || got < top-1e-12 || got > top+1e-3*top+1e-7 || at < 0 || at > 1 {
			t.Errorf("%s %+v of %d: AOQL %g at %g, %v; the grid finds %g", m, p, size, got, at, err, top)
		}
		if back, _ := i.AOQ(at); math.Abs(back-got) > 1e-12 {
			t.Errorf("AOQ at %g is %g, AOQL %g", at, back, got)
		}
	}
}

// Every plan of a lot, the cheapest that protects.
func TestLeastInspectionByTryingAll(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(9, 3))
	for try := range 12 {
		m := models[try%3]
		size := 60 + rng.IntN(120)
		average := 0.01 + 0.02*rng.Float64()
		ltpd, aoql := 0.08+0.1*rng.Float64(), 0.02+0.03*rng.Float64()
		forLTPD, forAOQL := math.Inf(1), math.Inf(1)
		for n := 1; n < size; n++ {
			for c := 0; c < min(n, 12); c++ {
				i := lot.Inspection{Plan: lot.Plan{N: n, C: c}, Model: m, Lot: size}
				total, err := i.ATI(average)
				if err != nil {
					t.Fatal(err)
				}
				if total < forLTPD {
					if pa, _ := i.Accept(ltpd); pa <= 0.1 {
						forLTPD = total
					}
				}
				if total < forAOQL {
					if limit, _, _ := i.AOQL(); limit <= aoql {
						forAOQL = total
					}
				}
			}
		}
		got, err := lot.LeastForLTPD(ltpd, 0.1, average, m, size, lot.Errors{})
		if math.IsInf(forLTPD, 1) {
			if !errors.Is(err, lot.ErrNoPlan) {
				t.Errorf("%s lot %d: %+v, %v; no plan exists", m, size, got, err)
			}
		} else if err != nil || math.Abs(got.ATI-forLTPD) > 1e-9 || *got.AtLTPD > 0.1 {
			t.Errorf("%s lot %d LTPD %g: %+v, %v; least total %g", m, size, ltpd, got, err, forLTPD)
		}
		got, err = lot.LeastForAOQL(aoql, average, m, size, lot.Errors{})
		if math.IsInf(forAOQL, 1) {
			if !errors.Is(err, lot.ErrNoPlan) {
				t.Errorf("%s lot %d: %+v, %v; no plan exists", m, size, got, err)
			}
		} else if err != nil || math.Abs(got.ATI-forAOQL) > 1e-9 || got.AOQL > aoql {
			t.Errorf("%s lot %d AOQL %g: %+v, %v; least total %g", m, size, aoql, got, err, forAOQL)
		}
	}
}

// A plan of 65 and 3 for lots of 5000, AOQL 3 %, process average 1 %, stands in printed
// tables (Dodge and Romig, from memory); the computed one inspects no more.
func TestLeastInspectionBesideAPrintedPlan(t *testing.T) {
	t.Parallel()
	got, err := lot.LeastForAOQL(0.03, 0.01, lot.Binomial, 5000, lot.Errors{})
	if err != nil {
		t.Fatal(err)
	}
	printed, err := lot.Inspection{Plan: lot.Plan{N: 65, C: 3}, Model: lot.Binomial, Lot: 5000}.ATI(0.01)
	if err != nil || got.ATI > printed || got.ATI < 0.9*printed || got.AOQL > 0.03 {
		t.Errorf("%+v, printed plan inspects %g, %v", got, printed, err)
	}
}

// Inspection with error, unit by unit, with a fixed seed: within four standard errors.
func TestInspectionErrorBySimulation(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(9, 4))
	e := lot.Errors{FalseReject: 0.03, Miss: 0.2}
	const size, bad, runs = 80, 8, 40000
	p := lot.Plan{N: 20, C: 2}
	accepted := 0
	units := make([]bool, size)
	for range runs {
		for i := range units {
			units[i] = i < bad
		}
		found := 0
		for i := range p.N {
			j := i + rng.IntN(size-i)
			units[i], units[j] = units[j], units[i]
			if units[i] && rng.Float64() >= e.Miss || !units[i] && rng.Float64() < e.FalseReject {
				found++
			}
		}
		if found <= p.C {
			accepted++
		}
	}
	want, err := lot.Inspection{Plan: p, Model: lot.Hypergeometric, Lot: size, Errors: e}.Accept(0.1)
	if err != nil {
		t.Fatal(err)
	}
	got := float64(accepted) / runs
	if se := math.Sqrt(want * (1 - want) / runs); math.Abs(got-want) > 4*se {
		t.Errorf("accepted %g, computed %g ± %g", got, want, se)
	}
	// In a large lot the sum becomes the binomial at the apparent fraction.
	large, err := lot.Inspection{Plan: p, Model: lot.Hypergeometric, Lot: 100_000_000, Errors: e}.Accept(0.1)
	if err != nil {
		t.Fatal(err)
	}
	apparent, err := lot.Inspection{Plan: p, Model: lot.Binomial, Errors: e}.Accept(0.1)
	if err != nil || math.Abs(large-apparent) > 1e-6 {
		t.Errorf("large lot %g, apparent fraction %g, %v", large, apparent, err)
	}
	if a := e.Apparent(0.1); math.Abs(a-(0.08+0.027)) > 1e-15 {
		t.Errorf("apparent fraction %g", a)
	}
}

// A plan through inspection error keeps the risks for the true fractions.
func TestSmallestPlanWithInspectionError(t *testing.T) {
	t.Parallel()
	r := lot.Risks{P1: 0.01, Alpha: 0.05, P2: 0.08, Beta: 0.1}
	e := lot.Errors{FalseReject: 0.005, Miss: 0.15}
	for _, m := range models {
		got, err := lot.Smallest(r, m, 2000, e)
		if err != nil {
			t.Fatal(err)
		}
		perfect, err := lot.Smallest(r, m, 2000, lot.Errors{})
		if err != nil || got.Plan.N <= perfect.Plan.N {
			t.Errorf("%s: %+v with error, %+v without, %v", m, got, perfect, err)
		}
		i := lot.Inspection{Plan: got.Plan, Model: m, Lot: 2000, Errors: e}
		a, _ := i.Accept(r.P1)
		b, _ := i.Accept(r.P2)
		if a < 0.95 || b > 0.1 {
			t.Errorf("%s: accepts %g and %g", m, a, b)
		}
	}
}

// Double plans: the waiting time by its definition, unit after unit, and the whole plan
// by simulation.
func TestDoublePlanByDefinition(t *testing.T) {
	t.Parallel()
	plan := lot.DoublePlan{N1: 15, C1: 0, R1: 4, N2: 25, C2: 3}
	for _, m := range []lot.Model{lot.Binomial, lot.Hypergeometric} {
		const size, bad = 100, 9
		got, err := lot.DoubleInspection{Plan: plan, Model: m, Lot: size}.At(float64(bad) / size)
		if err != nil {
			t.Fatal(err)
		}
		// at most m in j units after d in the first sample
		atMost := func(d, j, most int) float64 {
			if most < 0 {
				return 0
			}
			if m == lot.Binomial {
				return plain(m, size, lot.Plan{N: j, C: most}, float64(bad)/size)
			}
			sum := 0.0
			for k := 0; k <= most; k++ {
				sum += choose(bad-d, k) * choose(size-plan.N1-bad+d, j-k) / choose(size-plan.N1, j)
			}
			return sum
		}
		first := func(k int) float64 {
			if k == 0 {
				return plain(m, size, lot.Plan{N: plan.N1}, float64(bad)/size)
			}
			return plain(m, size, lot.Plan{N: plan.N1, C: k}, float64(bad)/size) - plain(m, size, lot.Plan{N: plan.N1, C: k - 1}, float64(bad)/size)
		}
		accept, asn, curtailed := first(0), float64(plan.N1), float64(plan.N1)
		for d := plan.C1 + 1; d < plan.R1; d++ {
			accept += first(d) * atMost(d, plan.N2, plan.C2-d)
			asn += first(d) * float64(plan.N2)
			for j := range plan.N2 {
				curtailed += first(d) * atMost(d, j, plan.C2-d)
			}
		}
		for name, v := range map[string][2]float64{"accept": {got.Accept, accept}, "ASN": {got.ASN, asn}, "curtailed": {got.ASNCurtailed, curtailed}} {
			if math.Abs(v[0]-v[1]) > 1e-10*v[1] {
				t.Errorf("%s %s: %g, by definition %g", m, name, v[0], v[1])
			}
		}
	}
	// The Poisson plan is the limit of the binomial one for small fractions.
	big := lot.DoublePlan{N1: 15000, C1: 0, R1: 4, N2: 25000, C2: 3}
	a, err := lot.DoubleInspection{Plan: big, Model: lot.Binomial}.At(9e-5)
	if err != nil {
		t.Fatal(err)
	}
	b, err := lot.DoubleInspection{Plan: big, Model: lot.Poisson}.At(9e-5)
	if err != nil || math.Abs(a.Accept-b.Accept) > 1e-4 || math.Abs(a.ASNCurtailed-b.ASNCurtailed) > 1e-3*a.ASNCurtailed {
		t.Errorf("binomial %+v, Poisson %+v, %v", a, b, err)
	}
}

// A double plan whose second sample can decide nothing is the single plan.
func TestDoublePlanThatIsSingle(t *testing.T) {
	t.Parallel()
	d, err := lot.DoubleInspection{Plan: lot.DoublePlan{N1: 50, C1: 2, R1: 3, N2: 10, C2: 2}, Model: lot.Binomial}.At(0.03)
	if err != nil {
		t.Fatal(err)
	}
	s, err := lot.Inspection{Plan: lot.Plan{N: 50, C: 2}, Model: lot.Binomial}.Accept(0.03)
	if err != nil || d.Accept != s || d.ASN != 50 || d.ASNCurtailed != 50 {
		t.Errorf("%+v, single %g, %v", d, s, err)
	}
}

// Wald's plans item by item with a fixed seed: both risks together stay below their sum
// (Wald 1947), each within its bound.
func TestSequentialRisksBySimulation(t *testing.T) {
	t.Parallel()
	r := lot.Risks{P1: 0.02, Alpha: 0.05, P2: 0.12, Beta: 0.1}
	s, err := lot.NewSequential(r)
	if err != nil {
		t.Fatal(err)
	}
	rng := rand.New(rand.NewPCG(9, 5))
	steps := []lot.Step{{}}
	for n := 1; n <= 2000; n++ {
		step, err := s.At(n)
		if err != nil {
			t.Fatal(err)
		}
		steps = append(steps, step)
	}
	const runs = 20000
	rejected := func(p float64) float64 {
		count := 0
		for range runs {
			d := 0
			for n := 1; ; n++ {
				if rng.Float64() < p {
					d++
				}
				if a := steps[n].AcceptAtMost; a != nil && d <= *a {
					break
				}
				if a := steps[n].RejectAtLeast; a != nil && d >= *a {
					count++
					break
				}
			}
		}
		return float64(count) / runs
	}
	alpha, beta := rejected(r.P1), 1-rejected(r.P2)
	if alpha > r.Alpha/(1-r.Beta)+0.005 || beta > r.Beta/(1-r.Alpha)+0.008 || alpha+beta > r.Alpha+r.Beta+0.01 {
		t.Errorf("alpha %g, beta %g", alpha, beta)
	}
}

// More nonconforming units are never accepted more often, and a larger acceptance number
// never accepts less.
func TestCurvesFall(t *testing.T) {
	t.Parallel()
	for _, m := range models {
		for c := range 4 {
			before := 2.0
			for k := 0; k <= 100; k++ {
				i := lot.Inspection{Plan: lot.Plan{N: 30, C: c}, Model: m, Lot: 400}
				pa, err := i.Accept(float64(k) / 100)
				if err != nil || pa > before {
					t.Errorf("%s c %d at %d %%: %g after %g, %v", m, c, k, pa, before, err)
				}
				i.Plan.C++
				if more, _ := i.Accept(float64(k) / 100); more < pa-1e-15 {
					t.Errorf("%s c %d at %d %%: %g with one more", m, c, k, more)
				}
				before = pa
			}
		}
	}
}

func ExampleSmallest() {
	f, err := lot.Smallest(lot.Risks{P1: 0.01, Alpha: 0.05, P2: 0.05, Beta: 0.1}, lot.Binomial, 0, lot.Errors{})
	fmt.Println(f.Plan.N, f.Plan.C, err)
	// Output: 132 3 <nil>
}
