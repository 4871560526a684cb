package watch_test

import (
	"encoding/json"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"slices"
	"testing"

	"holdfast/internal/spc/watch"
)

// flags is testdata/run_rule_flags.json. Source: computed independently of this
// program by applying the definitions literally to four short series; points are
// counted from 1.
type flags struct {
	Cases []struct {
		Name   string
		Z      []float64
		Points map[string][]int
	}
}

func TestRulesMatchIndependentFlags(t *testing.T) {
	t.Parallel()
	raw, err := os.ReadFile("testdata/run_rule_flags.json")
	if err != nil {
		t.Fatal(err)
	}
	var ref flags
	if err := json.Unmarshal(raw, &ref); err != nil {
		t.Fatal(err)
	}
	if len(ref.Cases) != 4 {
		t.Fatalf("testdata has %d series, want 4", len(ref.Cases))
	}
	names := map[string]watch.Rule{
		"beyond_3":                            {Kind: watch.Beyond, Z: 3},
		"run_7_one_side":                      {Kind: watch.OneSide, M: 7},
		"run_8_one_side":                      {Kind: watch.OneSide, M: 8},
		"run_9_one_side":                      {Kind: watch.OneSide, M: 9},
		"2of3_beyond_2_current_point_in_zone": {Kind: watch.KOfM, K: 2, M: 3, Z: 2},
		"4of5_beyond_1_current_point_in_zone": {Kind: watch.KOfM, K: 4, M: 5, Z: 1},
		"trend_6_points":                      {Kind: watch.RisingOrFalling, M: 6},
		"trend_7_points":                      {Kind: watch.RisingOrFalling, M: 7},
		"alternating_14_points":               {Kind: watch.Alternating, M: 14},
		"15_within_1":                         {Kind: watch.Within, M: 15, Z: 1},
		"8_beyond_1_any_side":                 {Kind: watch.Outside, M: 8, Z: 1},
	}
	for _, c := range ref.Cases {
		for name, rule := range names {
			want, ok := c.Points[name]
			if !ok {
				t.Fatalf("%s has no list %q", c.Name, name)
			}
			got := []int{}
			r := compile(t, rule)
			var s watch.State
			for i, z := range c.Z {
				if r.Step(&s, watch.Point{Z: z, X: z}).Any() {
					got = append(got, i+1)
				}
			}
			if !slices.Equal(got, want) {
				t.Errorf("%s, %s: fired at %v, want %v", c.Name, rule, got, want)
			}
		}
	}
}

func compile(t testing.TB, rules ...watch.Rule) *watch.Rules {
	t.Helper()
	r, err := watch.Compile(rules)
	if err != nil {
		t.Fatal(err)
	}
	return r
}

// sign is the tie rule of the naive form: 0 within 1e-9.
func sign(d float64) int {
	switch {
	case d >= 1e-9:
		return 1
	case d <= -1e-9:
		return -1
	}
	return 0
}

// naive judges point i of a series by looking back over the whole window, as the
// rule is written down. It returns whether the rule holds and on which side.
func naive(rule watch.Rule, pts []watch.Point, i int) (bool, watch.Side) {
	side := func(s int) watch.Side { return map[int]watch.Side{-1: watch.Low, 0: watch.None, 1: watch.High}[s] }
	// zone is the side on which point j is beyond z, 0 when it is not.
	zone := func(j int, z float64) int {
		v := pts[j].Z
		if sign(math.Abs(v)-z) <= 0 {
			return 0
		}
		return sign(v)
	}
	step := func(j int) int { return sign(pts[j].X - pts[j-1].X) }
	first := i - rule.M + 1
	switch rule.Kind {
	case watch.Beyond:
		s := zone(i, rule.Z)
		return s != 0, side(s)
	case watch.KOfM:
		s, held := zone(i, rule.Z), 0
		for j := max(first, 0); j <= i; j++ {
			if zone(j, rule.Z) == s {
				held++
			}
		}
		if s == 0 || held < rule.K {
			return false, watch.None
		}
		return true, side(s)
	}
	if first < 0 {
		return false, watch.None
	}
	switch rule.Kind {
	case watch.OneSide:
		s := sign(pts[i].Z)
		for j := first; j <= i; j++ {
			if s == 0 || sign(pts[j].Z) != s {
				return false, watch.None
			}
		}
		return true, side(s)
	case watch.RisingOrFalling:
		s := step(i)
		for j := first + 1; j <= i; j++ {
			if s == 0 || step(j) != s {
				return false, watch.None
			}
		}
		return true, side(s)
	case watch.Alternating:
		for j := first + 1; j <= i; j++ {
			if step(j) == 0 || j > first+1 && step(j) != -step(j-1) {
				return false, watch.None
			}
		}
	case watch.Within:
		for j := first; j <= i; j++ {
			if sign(rule.Z-math.Abs(pts[j].Z)) <= 0 {
				return false, watch.None
			}
		}
	case watch.Outside:
		for j := first; j <= i; j++ {
			if zone(j, rule.Z) == 0 {
				return false, watch.None
			}
		}
	}
	return true, watch.None
}

// series draws points of a kind that provokes ties and long runs.
func series(rng *rand.Rand, kind, n int) []watch.Point {
	pts := make([]watch.Point, n)
	level, at := 0.0, 0.0
	for i := range pts {
		var z float64
		switch kind {
		case 0: // normal
			z = rng.NormFloat64()
		case 1: // a coarse grid: points on the centre, on zone edges, equal neighbours
			z = math.Round(rng.NormFloat64()*2) / 2
		case 2: // on the grid but for less than a tie
			z = math.Round(rng.NormFloat64()*2)/2 + (rng.Float64()-0.5)*1.8e-9
		case 3: // slow drift with plateaus
			if rng.IntN(12) == 0 {
				level = float64(rng.IntN(7)-3) / 2
			}
			at += level / 4
			if math.Abs(at) > 4 {
				at = -at / 2
			}
			z = at
		case 4: // saw: long alternations, now and then a slip
			z = float64(1-2*(i%2)) * (0.5 + rng.Float64())
			if rng.IntN(20) == 0 {
				z = -z
			}
		case 5: // hugging, then nothing but far points
			z = rng.NormFloat64() / 3
			if i/40%2 == 1 {
				z = float64(1-2*rng.IntN(2)) * (1 + math.Abs(rng.NormFloat64()))
			}
		case 6: // shifted by one and a half
			z = rng.NormFloat64() + 1.5
		}
		x := z
		if rng.IntN(4) == 0 {
			x = z * 0.7 // a subgroup of another size: z and the statistic part ways
		}
		pts[i] = watch.Point{Z: z, X: x}
	}
	return pts
}

const seriesKinds = 7

// ruleZoo holds every kind with the usual and with awkward arguments.
func ruleZoo() []watch.Rule {
	zoo := append(watch.Nelson(), watch.WesternElectric()...)
	zoo = append(zoo,
		watch.Rule{Kind: watch.Beyond, Z: 0.5},
		watch.Rule{Kind: watch.OneSide, M: 2}, watch.Rule{Kind: watch.OneSide, M: 63},
		watch.Rule{Kind: watch.RisingOrFalling, M: 2}, watch.Rule{Kind: watch.RisingOrFalling, M: 3},
		watch.Rule{Kind: watch.RisingOrFalling, M: 63},
		watch.Rule{Kind: watch.Alternating, M: 3}, watch.Rule{Kind: watch.Alternating, M: 4},
		watch.Rule{Kind: watch.Alternating, M: 63},
		watch.Rule{Kind: watch.Within, M: 2, Z: 0.5}, watch.Rule{Kind: watch.Within, M: 63, Z: 2},
		watch.Rule{Kind: watch.Outside, M: 2, Z: 0.5}, watch.Rule{Kind: watch.Outside, M: 63, Z: 0.5},
		watch.Rule{Kind: watch.KOfM, K: 1, M: 1, Z: 1}, watch.Rule{Kind: watch.KOfM, K: 3, M: 3, Z: 0.5},
		watch.Rule{Kind: watch.KOfM, K: 1, M: 4, Z: 1}, watch.Rule{Kind: watch.KOfM, K: 3, M: 9, Z: 1.5},
		watch.Rule{Kind: watch.KOfM, K: 6, M: 10, Z: 0.5}, watch.Rule{Kind: watch.KOfM, K: 12, M: 31, Z: 0.5},
		watch.Rule{Kind: watch.KOfM, K: 40, M: 63, Z: 0.5}, watch.Rule{Kind: watch.KOfM, K: 63, M: 63, Z: 0.5},
	)
	return zoo
}

func TestRegistersEqualNaiveWindows(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(1, 2))
	fired := map[watch.Kind]int{}
	for rules := range slices.Chunk(ruleZoo(), watch.MaxRules) {
		r := compile(t, rules...)
		for round := range 10 * seriesKinds {
			pts := series(rng, round%seriesKinds, 400)
			var s watch.State
			for i, p := range pts {
				f := r.Step(&s, p)
				for j, rule := range rules {
					want, side := naive(rule, pts, i)
					if f.Has(j) != want || f.Side(j) != side {
						t.Fatalf("series of kind %d, point %d, %s: fired %v on %v, naive window says %v on %v",
							round%seriesKinds, i, rule, f.Has(j), f.Side(j), want, side)
					}
					if want {
						fired[rule.Kind]++
					}
				}
			}
		}
	}
	for _, k := range []watch.Kind{watch.Beyond, watch.KOfM, watch.OneSide, watch.RisingOrFalling,
		watch.Alternating, watch.Within, watch.Outside} {
		if fired[k] < 50 {
			t.Errorf("%s fired %d times only: the series do not try it", k, fired[k])
		}
	}
}

func TestMirroredPointsMirrorSides(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(3, 4))
	for rules := range slices.Chunk(ruleZoo(), watch.MaxRules) {
		r := compile(t, rules...)
		for kind := range seriesKinds {
			var a, b watch.State
			for i, p := range series(rng, kind, 500) {
				f, g := r.Step(&a, p), r.Step(&b, watch.Point{Z: -p.Z, X: -p.X})
				if f.Rules != g.Rules || f.High != g.Low || f.Low != g.High {
					t.Fatalf("kind %d, point %d: %+v mirrored is %+v", kind, i, f, g)
				}
			}
		}
	}
}

// minimal counts the classes of states that no future can tell apart, by
// refining the reachable states until the partition is stable (Moore).
func minimal(r *watch.Rules, alphabet []watch.Point) (reached, classes int) {
	type edge struct {
		to    int
		fired watch.Fired
	}
	index := map[watch.State]int{{}: 0}
	order := []watch.State{{}}
	var edges [][]edge
	for at := 0; at < len(order); at++ {
		var row []edge
		for _, p := range alphabet {
			next := order[at]
			f := r.Step(&next, p)
			to, ok := index[next]
			if !ok {
				to = len(order)
				index[next] = to
				order = append(order, next)
			}
			row = append(row, edge{to, f})
		}
		edges = append(edges, row)
	}
	class := make([]int, len(order))
	for n := 1; ; {
		ids := map[string]int{}
		next := make([]int, len(order))
		for at, row := range edges {
			key := fmt.Sprint(class[at])
			for _, e := range row {
				key += fmt.Sprint(";", class[e.to], e.fired)
			}
			id, ok := ids[key]
			if !ok {
				id = len(ids)
				ids[key] = id
			}
			next[at] = id
		}
		class = next
		if len(ids) == n {
			return len(order), n
		}
		n = len(ids)
	}
}

func TestStatesWithTheSameFutureAreEqual(t *testing.T) {
	t.Parallel()
	zones := func(z ...float64) []watch.Point {
		var ps []watch.Point
		for _, v := range z {
			ps = append(ps, watch.Point{Z: v, X: v}, watch.Point{Z: -v, X: -v})
		}
		return ps
	}
	sets := [][]watch.Rule{watch.WesternElectric()}
	for m := 1; m <= 8; m++ {
		for k := 1; k <= m; k++ {
			sets = append(sets, []watch.Rule{{Kind: watch.KOfM, K: k, M: m, Z: 1}})
		}
	}
	for m := 2; m <= 9; m++ {
		sets = append(sets, []watch.Rule{{Kind: watch.OneSide, M: m}},
			[]watch.Rule{{Kind: watch.Within, M: m, Z: 1}}, []watch.Rule{{Kind: watch.Outside, M: m, Z: 1}})
	}
	sets = append(sets, []watch.Rule{{Kind: watch.KOfM, K: 2, M: 3, Z: 2}, {Kind: watch.Within, M: 6, Z: 1}, {Kind: watch.OneSide, M: 5}})
	for _, rules := range sets {
		reached, classes := minimal(compile(t, rules...), zones(0, 0.5, 1.5, 2.5, 3.5))
		if reached != classes {
			t.Errorf("%v: %d states reached, %d can be told apart", rules, reached, classes)
		}
	}
	// Twelve bits and more go through the loop instead of the table.
	for _, rule := range []watch.Rule{{Kind: watch.KOfM, K: 3, M: 11, Z: 1}, {Kind: watch.KOfM, K: 2, M: 30, Z: 1}} {
		reached, classes := minimal(compile(t, rule), zones(0, 1.5))
		if reached != classes {
			t.Errorf("%v: %d states reached, %d can be told apart", rule, reached, classes)
		}
	}
}

func TestCompileBounds(t *testing.T) {
	t.Parallel()
	if _, err := watch.Compile(make([]watch.Rule, watch.MaxRules+1)); err == nil {
		t.Error("17 rules were accepted")
	}
	if _, err := watch.Compile([]watch.Rule{{Kind: watch.Beyond, Z: 3}, {Kind: watch.OneSide, M: 64}}); err == nil {
		t.Error("a window of 64 was accepted")
	}
	r := compile(t)
	var s watch.State
	if r.Step(&s, watch.Point{Z: 9, X: 9}).Any() || s != (watch.State{}) {
		t.Error("an empty set fired or remembered something")
	}
	r = compile(t, watch.Nelson()...)
	if r.Len() != 8 || r.Rule(7) != watch.Nelson()[7] {
		t.Error("the compiled set does not give its rules back in order")
	}
}

func TestNaNBreaksRunsAndKeepsStatesComparable(t *testing.T) {
	t.Parallel()
	r := compile(t, watch.Nelson()...)
	var s watch.State
	for range 20 {
		r.Step(&s, watch.Point{Z: 0.5, X: 0.5})
	}
	f := r.Step(&s, watch.Point{Z: math.NaN(), X: math.NaN()})
	if f.Any() || s != (watch.State{}) {
		t.Errorf("after NaN: fired %+v, state %+v; want nothing fired and nothing remembered", f, s)
	}
}
