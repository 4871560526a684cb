package runlength_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"holdfast/internal/spc/runlength"
	"holdfast/internal/spc/watch"
)

// historyARL computes the run length of zone rules from histories of zones kept
// as plain lists, with the rules applied literally, and solves the equations by
// Gaussian elimination. It shares nothing with the code under test but the
// definitions.
func historyARL(rules []watch.Rule, shift float64) float64 {
	window := 0
	cuts := []float64{0}
	for _, r := range rules {
		window = max(window, r.M-1)
		if r.Z > 0 {
			cuts = append(cuts, r.Z, -r.Z)
		}
	}
	phi := func(z float64) float64 { return math.Erfc(-z/math.Sqrt2) / 2 }
	type zone struct{ z, p float64 }
	var zones []zone
	edges := append([]float64{math.Inf(-1)}, sorted(cuts)...)
	edges = append(edges, math.Inf(1))
	for i := range len(edges) - 1 {
		a, b := edges[i], edges[i+1]
		if a == b {
			continue
		}
		mid := (math.Max(a, b-1) + math.Min(b, a+1)) / 2
		zones = append(zones, zone{mid, phi(b-shift) - phi(a-shift)})
	}
	fires := func(h []float64) bool {
		now := h[len(h)-1]
		count := func(m int, ok func(z float64) bool) (k int) {
			for _, z := range h[max(0, len(h)-m):] {
				if ok(z) {
					k++
				}
			}
			return k
		}
		for _, r := range rules {
			side := math.Copysign(1, now)
			var hit bool
			switch r.Kind {
			case watch.Beyond:
				hit = math.Abs(now) > r.Z
			case watch.KOfM:
				hit = side*now > r.Z && count(r.M, func(z float64) bool { return side*z > r.Z }) >= r.K
			case watch.OneSide:
				hit = count(r.M, func(z float64) bool { return side*z > 0 }) == r.M
			case watch.Within:
				hit = count(r.M, func(z float64) bool { return math.Abs(z) < r.Z }) == r.M
			case watch.Outside:
				hit = count(r.M, func(z float64) bool { return math.Abs(z) > r.Z }) == r.M
			}
			if hit {
				return true
			}
		}
		return false
	}
	key := func(h []float64) string {
		b := make([]byte, len(h))
		for i, z := range h {
			for j, c := range zones {
				if c.z == z {
					b[i] = byte('a' + j)
				}
			}
		}
		return string(b)
	}
	ids := map[string]int{"": 0}
	histories := [][]float64{nil}
	type entry struct {
		to int
		p  float64
	}
	var rows [][]entry
	for at := 0; at < len(histories); at++ {
		var row []entry
		for _, c := range zones {
			h := append(append([]float64(nil), histories[at]...), c.z)
			if fires(h) {
				continue
			}
			h = h[max(0, len(h)-window):]
			id, seen := ids[key(h)]
			if !seen {
				id = len(histories)
				ids[key(h)] = id
				histories = append(histories, h)
			}
			row = append(row, entry{id, c.p})
		}
		rows = append(rows, row)
	}
	n := len(rows)
	m := make([][]float64, n)
	for i, row := range rows {
		m[i] = make([]float64, n+1)
		m[i][i], m[i][n] = 1, 1
		for _, e := range row {
			m[i][e.to] -= e.p
		}
	}
	// Backwards, so that the empty history is what is left.
	for k := n - 1; k > 0; k-- {
		for i := range k {
			f := m[i][k] / m[k][k]
			if f == 0 {
				continue
			}
			for j := range k {
				m[i][j] -= f * m[k][j]
			}
			m[i][n] -= f * m[k][n]
		}
	}
	return m[0][n] / m[0][0]
}

func sorted(x []float64) []float64 {
	for i := range x {
		for j := i; j > 0 && x[j] < x[j-1]; j-- {
			x[j], x[j-1] = x[j-1], x[j]
		}
	}
	return x
}

func TestZoneChainEqualsPlainHistories(t *testing.T) {
	t.Parallel()
	for _, rules := range [][]watch.Rule{
		{{Kind: watch.KOfM, K: 2, M: 3, Z: 2}},
		{{Kind: watch.KOfM, K: 2, M: 4, Z: 1.5}, {Kind: watch.Beyond, Z: 2.5}},
		{{Kind: watch.KOfM, K: 3, M: 4, Z: 1}, {Kind: watch.OneSide, M: 5}},
		{{Kind: watch.Within, M: 4, Z: 0.7}, {Kind: watch.Outside, M: 3, Z: 1.2}},
		{{Kind: watch.OneSide, M: 4}, {Kind: watch.Within, M: 5, Z: 1}, {Kind: watch.Beyond, Z: 3}},
	} {
		shifts := []float64{0, 0.6, -1.3}
		got, err := runlength.Rules(rules, shifts, runlength.Options{})
		if err != nil {
			t.Fatal(err)
		}
		for i, d := range shifts {
			if want := historyARL(rules, d); !near(got[i].Mean, want, 1e-9) {
				t.Errorf("%v, shift %g: %.12g, plain histories give %.12g", rules, d, got[i].Mean, want)
			}
		}
	}
}

func TestRunLengthIdentities(t *testing.T) {
	t.Parallel()
	rules := append(watch.WesternElectric(), watch.Rule{Kind: watch.Within, M: 15, Z: 1})
	got, err := runlength.Rules(rules, []float64{0.8, -0.8}, runlength.Options{})
	if err != nil || !near(got[0].Mean, got[1].Mean, 1e-12) {
		t.Errorf("mirrored shifts: %v, %v", means(got), err)
	}
	// An EWMA with all weight on the newest point, and a CUSUM so eager that one
	// point decides, are a chart of single points.
	single, err := runlength.Rules([]watch.Rule{{Kind: watch.Beyond, Z: 3}}, []float64{0, 1.2}, runlength.Options{})
	if err != nil {
		t.Fatal(err)
	}
	ewma, err := runlength.EWMA(watch.EWMA{Lambda: 1, L: 3}, "", []float64{0, 1.2})
	if err != nil || !near(ewma[0].Mean, single[0].Mean, 1e-9) || !near(ewma[1].Mean, single[1].Mean, 1e-9) {
		t.Errorf("EWMA with lambda 1: %v, %v; want %v", means(ewma), err, means(single))
	}
	cusum, err := runlength.CUSUM(watch.CUSUM{K: 2.999999, H: 1e-6}, []float64{0, 1.2})
	if err != nil || !near(cusum[0].Mean, single[0].Mean, 1e-4) || !near(cusum[1].Mean, single[1].Mean, 1e-4) {
		t.Errorf("CUSUM of one point: %v, %v; want %v", means(cusum), err, means(single))
	}
	down, err := runlength.CUSUM(watch.CUSUM{K: 0.4, H: 4, HeadStart: 0.3}, []float64{0.7, -0.7})
	if err != nil || !near(down[0].Mean, down[1].Mean, 1e-12) {
		t.Errorf("mirrored CUSUM: %v, %v", means(down), err)
	}
	// A process far away is caught as soon as the rules allow.
	for points, rule := range map[float64]watch.Rule{
		1: {Kind: watch.Beyond, Z: 3}, 2: {Kind: watch.KOfM, K: 2, M: 3, Z: 2}, 8: {Kind: watch.OneSide, M: 8},
		15: {Kind: watch.Outside, M: 15, Z: 1},
	} {
		r, err := runlength.Rules([]watch.Rule{rule}, []float64{90}, runlength.Options{})
		if err != nil || r[0].Mean != points {
			t.Errorf("%v, far away: %v, %v; want %g", rule, means(r), err, points)
			continue
		}
		if m, err := r[0].Median(); err != nil || m != points {
			t.Errorf("%v, far away: median %g, %v; want %g", rule, m, err, points)
		}
	}
	// Adding a rule can only shorten the run.
	before := math.Inf(1)
	for n := 1; n <= len(rules); n++ {
		r, err := runlength.Rules(rules[:n], []float64{0.3}, runlength.Options{})
		if err != nil || r[0].Mean > before {
			t.Errorf("%d rules: %v, %v; %g with one less", n, means(r), err, before)
		}
		before = r[0].Mean
	}
}

// accumulate simulates charts with memory through the steps of package watch.
func accumulate(runs int, seed uint64, first func() func(z float64) bool, shift float64) (lengths []float64) {
	rng := rand.New(rand.NewPCG(seed, 77))
	for range runs {
		step := first()
		n := 1.0
		for !step(shift + rng.NormFloat64()) {
			n++
		}
		lengths = append(lengths, n)
	}
	return lengths
}

// The survival function and the mean of EWMA and CUSUM against the charts
// themselves, including head starts for which no formula is published.
func TestMemoryChartsEqualSimulation(t *testing.T) {
	t.Parallel()
	const runs = 6000
	ewma := func(e watch.EWMA) func() func(float64) bool {
		return func() func(float64) bool {
			var s watch.EWMAState
			return func(z float64) bool { _, side := e.Step(&s, z, 1); return side != 0 }
		}
	}
	cusum := func(c watch.CUSUM) func() func(float64) bool {
		return func() func(float64) bool {
			var s watch.CUSUMState
			return func(z float64) bool { return c.Step(&s, z) != 0 }
		}
	}
	type chart struct {
		name  string
		shift float64
		exact func(d float64) ([]runlength.RunLength, error)
		live  func() func(float64) bool
	}
	var charts []chart
	for _, e := range []watch.EWMA{{Lambda: 0.1, L: 2}, {Lambda: 0.4, L: 2.5}, {Lambda: 0.02, L: 1.5}} {
		charts = append(charts, chart{"EWMA", 0.3, func(d float64) ([]runlength.RunLength, error) {
			return runlength.EWMA(e, runlength.ExactLimits, []float64{d})
		}, ewma(e)})
	}
	for _, c := range []watch.CUSUM{{K: 0.5, H: 3}, {K: 0.25, H: 5, HeadStart: 0.5}, {K: 0.5, H: 4, HeadStart: 0.8},
		{K: 0.1, H: 4, HeadStart: 1}, {K: 0, H: 3, HeadStart: 0.5}} {
		charts = append(charts, chart{"CUSUM", -0.2, func(d float64) ([]runlength.RunLength, error) {
			return runlength.CUSUM(c, []float64{d})
		}, cusum(c)})
	}
	for i, c := range charts {
		got, err := c.exact(c.shift)
		if err != nil {
			t.Fatal(err)
		}
		r := got[0]
		lengths := accumulate(runs, uint64(i), c.live, c.shift)
		var mean, ss float64
		for _, n := range lengths {
			mean += n / runs
		}
		for _, n := range lengths {
			ss += (n - mean) * (n - mean)
		}
		if se := math.Sqrt(ss/(runs-1)) / math.Sqrt(runs); math.Abs(mean-r.Mean) > 4*se {
			t.Errorf("%s %d: mean %.4f, simulated %.4f ± %.4f", c.name, i, r.Mean, mean, se)
		}
		for _, p := range []float64{0.1, 0.5, 0.9} {
			q, err := r.Quantile(p)
			if err != nil {
				t.Fatal(err)
			}
			var beyond float64
			for _, n := range lengths {
				if n > q {
					beyond += 1.0 / runs
				}
			}
			// The lattice gives the curve of a CUSUM to about 1 %.
			if math.Abs(beyond-r.Survival(int(q))) > 4*math.Sqrt(p*(1-p)/runs)+0.01 {
				t.Errorf("%s %d: P(run > %g) %.4f, simulated %.4f", c.name, i, q, r.Survival(int(q)), beyond)
			}
			if r.Survival(int(q)) > 1-p+1e-9 || (q > 1 && r.Survival(int(q)-1) <= 1-p) {
				t.Errorf("%s %d: %g is not the %g quantile", c.name, i, q, p)
			}
		}
		// The survival function sums to the mean.
		var sum float64
		for n := range 20000 {
			sum += r.Survival(n)
		}
		if !near(sum, r.Mean, 0.005) {
			t.Errorf("%s %d: survival sums to %.5f, mean %.5f", c.name, i, sum, r.Mean)
		}
	}
}

// Two widths of the lattice agree with the integral equation where both apply.
func TestLatticeAgreesWithIntegralEquation(t *testing.T) {
	t.Parallel()
	// Just below and just above a head start of 1/2 + k/h the method changes.
	for _, c := range []watch.CUSUM{{K: 0.5, H: 4}, {K: 0.3, H: 5}, {K: 1, H: 2.5}} {
		edge := 0.5 + c.K/c.H
		for _, d := range []float64{0, -0.5} {
			below, above := c, c
			below.HeadStart, above.HeadStart = edge-1e-7, edge+1e-7
			a, err := runlength.CUSUM(below, []float64{d})
			if err != nil {
				t.Fatal(err)
			}
			b, err := runlength.CUSUM(above, []float64{d})
			if err != nil {
				t.Fatal(err)
			}
			if a[0].Method != runlength.IntegralEquation || b[0].Method != runlength.Lattice ||
				!near(a[0].Mean, b[0].Mean, 5e-4) {
				t.Errorf("%+v, shift %g: %s %.6f, %s %.6f", c, d, a[0].Method, a[0].Mean, b[0].Method, b[0].Mean)
			}
		}
	}
}
