package watch_test

import (
	"errors"
	"math"
	"math/rand/v2"
	"testing"

	"holdfast/internal/spc/limits"
	"holdfast/internal/spc/watch"
)

// kind is a standard of one of the further kinds of chart, with a process that tries
// it and a judge that looks back over the whole history.
type kind struct {
	name     string
	standard watch.Standard
	draw     func(rng *rand.Rand, n int) []watch.Subgroup
	slow     func(t *testing.T, s watch.Standard, hist []watch.Subgroup) []watch.Judged
}

// shortRules is one rule of each kind, with windows so short that a few hundred points
// try them all.
func shortRules() []watch.Rule {
	return []watch.Rule{
		{Kind: watch.Beyond, Z: 2},
		{Kind: watch.KOfM, K: 2, M: 3, Z: 1},
		{Kind: watch.OneSide, M: 4},
		{Kind: watch.RisingOrFalling, M: 4},
		{Kind: watch.Alternating, M: 5},
		{Kind: watch.Within, M: 3, Z: 1},
		{Kind: watch.Outside, M: 2, Z: 1},
	}
}

// kinds lists every model in every form it has.
func kinds() []kind {
	rules := shortRules()
	full := func(m watch.Model) watch.Standard {
		return watch.Standard{
			Model: m, LocationRules: rules, DispersionRules: rules,
			EWMA: &watch.EWMA{Lambda: 0.2, L: 2.9}, CUSUM: &watch.CUSUM{K: 0.5, H: 5, HeadStart: 0.5},
		}
	}
	alone := func(m watch.Model) watch.Standard { return watch.Standard{Model: m, LocationRules: rules} }
	batches := func(c limits.Chart) watch.Standard {
		s := full(watch.ThreeWay{ThreeWayStandard: limits.ThreeWayStandard{
			Means:  limits.Standard{Chart: limits.Individuals, Center: 12.5, Sigma: 0.005},
			Within: limits.Standard{Chart: c, Center: 12.5, Sigma: 0.004},
		}})
		s.ThirdRules = rules
		return s
	}
	list := []kind{
		{"deviation", full(watch.ShortRun{Standard: limits.Standard{Chart: limits.XBarR, Center: 0.0005, Sigma: 0.004}}), drawParts(limits.XBarR), slowShortRun},
		{"deviation of individuals", full(watch.ShortRun{Standard: limits.Standard{Chart: limits.Individuals, Sigma: 0.004}}), drawParts(limits.Individuals), slowShortRun},
		{"standardised", full(watch.ShortRun{Standard: limits.StandardisedUnit(limits.XBarS), Standardised: true}), drawParts(limits.XBarS), slowShortRun},
		{"trend", full(watch.Trend{TrendStandard: limits.TrendStandard{Chart: limits.XBarR, Intercept: 12.5, Slope: 0.0002, Sigma: 0.004}}), drawWear(limits.XBarR), slowTrend},
		{"trend of individuals", full(watch.Trend{TrendStandard: limits.TrendStandard{Chart: limits.Individuals, Intercept: 12.5, Slope: 0.0002, Sigma: 0.004}}), drawWear(limits.Individuals), slowTrend},
		{"three-way, range", batches(limits.XBarR), drawBatches, slowBatches},
		{"three-way, s.d.", batches(limits.XBarS), drawBatches, slowBatches},
		{"group", watch.Standard{
			Model:         watch.Group{Standard: limits.Standard{Chart: limits.XBarR, Center: 12.5, Sigma: 0.004}, Streams: 6, Run: 3},
			LocationRules: rules, DispersionRules: rules,
		}, drawStreams(6), slowStreams},
		{"group of individuals", alone(watch.Group{Standard: limits.Standard{Chart: limits.Individuals, Center: 12.5, Sigma: 0.004}, Streams: 3, Run: 2}), drawStreams(3), slowStreams},
		{"g", alone(watch.Rare{RareStandard: limits.RareStandard{Chart: limits.G, Center: 40}}), drawRare, slowRare},
		{"g, exact", alone(watch.Rare{RareStandard: limits.RareStandard{Chart: limits.G, Center: 40, Probability: true, Tail: 0.03}}), drawRare, slowRare},
		{"t", alone(watch.Rare{RareStandard: limits.RareStandard{Chart: limits.T, Center: 2.5, Sigma: 0.7}}), drawRare, slowRare},
		{"t of instants", alone(watch.Rare{RareStandard: limits.RareStandard{Chart: limits.T, Center: 2.5, Sigma: 0.7}, Instants: true}), drawInstants, slowRare},
		{"T-squared", alone(watch.TSquared{TSquaredStandard: threeOfAPart()}), drawVectors, slowTSquared},
	}
	for _, c := range []limits.CountStandard{
		{Chart: limits.P, Center: 0.1}, {Chart: limits.NP, Center: 10, Size: 100}, {Chart: limits.C, Center: 12}, {Chart: limits.U, Center: 0.12},
		{Chart: limits.LaneyP, Center: 0.1, Between: 1.4}, {Chart: limits.LaneyU, Center: 0.12, Between: 0.9},
		{Chart: limits.P, Center: 0.1, Probability: true}, {Chart: limits.NP, Center: 10, Size: 100, Probability: true},
		{Chart: limits.C, Center: 12, Probability: true, Multiple: 2}, {Chart: limits.U, Center: 0.12, Probability: true},
	} {
		name := string(c.Chart)
		if c.Probability {
			name += ", exact"
		}
		list = append(list, kind{name, alone(watch.Counts{CountStandard: c}), drawCounts, slowCounts})
	}
	return list
}

// reading draws what a subgroup reduces to, on a grid so that ties occur.
func reading(rng *rand.Rand, chart limits.Chart, size int, center, sigma float64) watch.Subgroup {
	readings := make([]float64, size)
	for k := range readings {
		readings[k] = math.Round((center+sigma*rng.NormFloat64())*500) / 500
	}
	s, err := limits.NewSubgroup(chart, readings)
	if err != nil {
		panic(err)
	}
	return watch.Subgroup{N: s.N, Mean: s.Location, Range: s.Range, SD: s.SD}
}

// sizeOf is now and then another subgroup size, one reading included.
func sizeOf(rng *rand.Rand, chart limits.Chart) int {
	if chart == limits.Individuals {
		return 1
	}
	return []int{5, 5, 5, 4, 1, 2}[rng.IntN(6)]
}

func drawParts(chart limits.Chart) func(*rand.Rand, int) []watch.Subgroup {
	return func(rng *rand.Rand, n int) []watch.Subgroup {
		out := make([]watch.Subgroup, n)
		for i := range out {
			part := i / 7 % 3
			target, sigma := []float64{10, 12.5, 31}[part], []float64{0.004, 0.002, 0.006}[part]
			shift := 0.0
			if i > n/2 {
				shift = sigma
			}
			out[i] = reading(rng, chart, sizeOf(rng, chart), target+shift, sigma)
			out[i].Target, out[i].Sigma = target, sigma
		}
		return out
	}
}

func drawWear(chart limits.Chart) func(*rand.Rand, int) []watch.Subgroup {
	return func(rng *rand.Rand, n int) []watch.Subgroup {
		out := make([]watch.Subgroup, n)
		wear := 0.0
		for i := range out {
			shift := 0.0
			if i > n/2 {
				shift = 0.004
			}
			out[i] = reading(rng, chart, sizeOf(rng, chart), 12.5+0.0002*wear+shift, 0.004)
			out[i].Wear = wear
			if wear += float64(rng.IntN(5)); wear > 150 {
				wear = float64(rng.IntN(3))
			}
		}
		return out
	}
}

func drawBatches(rng *rand.Rand, n int) []watch.Subgroup {
	out := make([]watch.Subgroup, n)
	for i := range out {
		level, sigma := 12.5+0.005*rng.NormFloat64(), 0.004
		if i > n/2 {
			sigma = 0.006
		}
		out[i] = reading(rng, limits.XBarR, sizeOf(rng, limits.XBarR), level, sigma)
	}
	return out
}

func drawStreams(streams int) func(*rand.Rand, int) []watch.Subgroup {
	return func(rng *rand.Rand, n int) []watch.Subgroup {
		out := make([]watch.Subgroup, n)
		for i := range out {
			size := 1
			if streams == 6 {
				size = 1 + rng.IntN(3)
			}
			for k := range streams {
				shift := 0.0
				if i > n/2 && k == 1 {
					shift = 0.006
				}
				g := reading(rng, limits.XBarR, size, 12.5+shift, 0.004)
				out[i].Streams = append(out[i].Streams, limits.Subgroup{N: g.N, Location: g.Mean, Range: g.Range, SD: g.SD})
			}
		}
		return out
	}
}

func drawCounts(rng *rand.Rand, n int) []watch.Subgroup {
	out := make([]watch.Subgroup, n)
	for i := range out {
		size := []int{100, 100, 80, 120, 250}[rng.IntN(5)]
		rate := 0.1
		if i > n/2 {
			rate = 0.14
		}
		// The first hundred alone serve np and c, where sizes do not vary.
		if size = []int{100, size}[i/50%2]; i/50%2 == 1 && i%3 == 0 {
			size = 100
		}
		for range size {
			if rng.Float64() < rate {
				out[i].Count++
			}
		}
		out[i].Size = float64(size)
	}
	return out
}

func drawRare(rng *rand.Rand, n int) []watch.Subgroup {
	out := make([]watch.Subgroup, n)
	for i := range out {
		mean := 40.0
		if i > n/2 {
			mean = 12
		}
		out[i].Mean = math.Floor(mean * rng.ExpFloat64())
	}
	return out
}

func drawInstants(rng *rand.Rand, n int) []watch.Subgroup {
	out := drawRare(rng, n)
	at := 1000.0
	for i := range out {
		at += out[i].Mean
		out[i].Mean = at
	}
	return out
}

// threeOfAPart is the standard of three characteristics, the first two of which move
// together.
func threeOfAPart() limits.TSquaredStandard {
	s, err := limits.TSquaredStandard{
		Mean:       []float64{10, 50, 7},
		Covariance: [][]float64{{1, 3.6, 0}, {3.6, 16, 0.01}, {0, 0.01, 0.01}},
		M:          60, Alpha: 0.01,
	}.Prepare()
	if err != nil {
		panic(err)
	}
	return s
}

func drawVectors(rng *rand.Rand, n int) []watch.Subgroup {
	out := make([]watch.Subgroup, n)
	for i := range out {
		a, b, c := rng.NormFloat64(), rng.NormFloat64(), rng.NormFloat64()
		if i > n/2 {
			b += 2
		}
		out[i].Values = []float64{10 + a, 50 + 4*(0.9*a+math.Sqrt(0.19)*b), 7 + 0.1*c}
	}
	return out
}

func TestEveryKindEqualsLookingBackOverEverything(t *testing.T) {
	t.Parallel()
	for _, k := range kinds() {
		t.Run(k.name, func(t *testing.T) {
			t.Parallel()
			j := judgeOf(t, k.standard)
			hist := k.draw(rand.New(rand.NewPCG(81, 82)), 400)
			var m, again watch.Memory
			var into watch.Judged
			seen := map[string]int{}
			for i, want := range k.slow(t, k.standard, hist) {
				before := m
				got := j.Step(&m, hist[i])
				if want.Err != nil {
					if !errors.Is(got.Err, watch.ErrSubgroup) || m != before {
						t.Fatalf("subgroup %d: %+v, want it refused and the memory left alone", i, got)
					}
					if got.Err = nil; got != (watch.Judged{}) {
						t.Fatalf("subgroup %d: refused, yet judged as %+v", i, got)
					}
					continue
				}
				if err := sameJudged(got, want); err != nil {
					t.Fatalf("subgroup %d: %v", i, err)
				}
				if j.StepInto(&again, &hist[i], &into); into != got || again != m {
					t.Fatalf("subgroup %d: StepInto gave %+v, Step %+v", i, into, got)
				}
				if want := want.Location.Fired.Any() || want.Dispersion.Fired.Any() || want.Third.Fired.Any() ||
					want.EWMA.Out|want.CUSUM.Out|want.Streams.Run != watch.None; got.Any() != want {
					t.Fatalf("subgroup %d: anything fired %v, want %v", i, got.Any(), want)
				}
				seen["location"] |= int(got.Location.Fired.Rules)
				seen["dispersion"] |= int(got.Dispersion.Fired.Rules)
				seen["third"] |= int(got.Third.Fired.Rules)
				seen["run"] |= int(got.Streams.Run)
				seen["accumulated"] |= int(got.EWMA.Out & got.CUSUM.Out)
			}
			if m.Points == 0 || m.Points != again.Points {
				t.Errorf("points %d and %d", m.Points, again.Points)
			}
			s := k.standard
			group, _ := s.Model.(watch.Group)
			if seen["location"] != 1<<len(s.LocationRules)-1 {
				t.Errorf("of the location rules only %b fired: the history does not try them all", seen["location"])
			}
			for what, expected := range map[string]bool{
				"dispersion": s.DispersionRules != nil, "third": s.ThirdRules != nil || group.Run > 0,
				"run": group.Run > 0, "accumulated": s.EWMA != nil,
			} {
				if (seen[what] > 0) != expected {
					t.Errorf("%s fired as %b, want any: %v", what, seen[what], expected)
				}
			}
		})
	}
}

// At any point the fold of any kind may be put away as bytes and taken up again.
func TestRestoredMemoryOfEveryKindGoesOnAlike(t *testing.T) {
	t.Parallel()
	for _, k := range kinds() {
		rules := append(shortRules(), watch.Rule{Kind: watch.KOfM, K: 3, M: 8, Z: 1}, watch.Rule{Kind: watch.KOfM, K: 20, M: 63, Z: 0.5})
		k.standard.LocationRules = rules
		j := judgeOf(t, k.standard)
		var m watch.Memory
		versions := map[byte]bool{}
		for i, g := range k.draw(rand.New(rand.NewPCG(83, 84)), 300) {
			raw, err := m.MarshalBinary()
			if err != nil {
				t.Fatal(err)
			}
			versions[raw[0]] = true
			var back watch.Memory
			if err := back.UnmarshalBinary(raw); err != nil || back != m {
				t.Fatalf("%s, before subgroup %d: %v, restored %+v, want %+v", k.name, i, err, back, m)
			}
			want := j.Step(&m, g)
			got := j.Step(&back, g)
			if want.Err == nil && got != want || (want.Err == nil) != (got.Err == nil) || back != m {
				t.Fatalf("%s, subgroup %d: %+v after restoring, want %+v", k.name, i, got, want)
			}
		}
		// What charts with two panels remember is spelled as it ever was.
		further := false
		switch k.standard.Model.(type) {
		case watch.Trend, watch.ThreeWay, watch.Group:
			further = true
		}
		if !versions[1] || versions[2] != further || len(versions) > 2 {
			t.Errorf("%s: wrote versions %v", k.name, versions)
		}
	}
}

// Folds that differ in an old sample meet again, and from there on agree.
func TestFoldsOfEveryKindMeetAgain(t *testing.T) {
	t.Parallel()
	for _, k := range kinds() {
		k.standard.EWMA = nil // an EWMA forgets only in the limit
		j := judgeOf(t, k.standard)
		hist := k.draw(rand.New(rand.NewPCG(85, 86)), 400)
		var a, b watch.Memory
		met := 0
		for i := range hist {
			da := j.Step(&a, hist[i])
			var db watch.Judged
			if i != 10 { // voided
				db = j.Step(&b, hist[i])
			}
			if met > 0 && da.Err == nil && da != db {
				t.Fatalf("%s: same future after subgroup %d, different at %d", k.name, met, i)
			}
			if met == 0 && i > 10 && a.SameFuture(b) {
				met = i
			}
		}
		if met == 0 || met > 120 {
			t.Errorf("%s: the folds met after subgroup %d, want soon", k.name, met)
		}
	}
}

// An answer that another judge has filled is overwritten whole.
func TestStepIntoAnAnswerOfAnotherKind(t *testing.T) {
	t.Parallel()
	plain := judgeOf(t, fullStandard(limits.XBarR, watch.Nelson()))
	g := watch.Subgroup{N: 5, Mean: 12.51, Range: 0.01}
	var fresh watch.Memory
	want := plain.Step(&fresh, g)
	for _, k := range kinds() {
		var out watch.Judged
		var m, n watch.Memory
		judgeOf(t, k.standard).StepInto(&m, &k.draw(rand.New(rand.NewPCG(89, 90)), 1)[0], &out)
		if plain.StepInto(&n, &g, &out); out != want {
			t.Errorf("after %s: %+v, want %+v", k.name, out, want)
		}
	}
}

// What is remembered of the same stream's run is as much as matters and no more.
func TestLongRunsOfAStreamHaveOneFuture(t *testing.T) {
	t.Parallel()
	k := kindNamed(t, "group")
	k.standard.LocationRules, k.standard.DispersionRules = nil, nil
	j := judgeOf(t, k.standard) // a run of three
	round := func(high int) watch.Subgroup {
		s := watch.Subgroup{Streams: make([]limits.Subgroup, 6)}
		for i := range s.Streams {
			s.Streams[i] = limits.Subgroup{N: 2, Location: 12.5}
		}
		s.Streams[high].Location = 12.502
		return s
	}
	var long, short watch.Memory
	for i := range 100 {
		d := j.Step(&long, round(4))
		if want := i >= 2; d.Err != nil || d.Any() != want || (d.Streams.Run == watch.High) != want {
			t.Fatalf("round %d: %+v", i+1, d)
		}
	}
	j.Step(&short, round(4))
	if long.SameFuture(short) {
		t.Error("one round and a hundred have the same future")
	}
	j.Step(&short, round(4))
	if !long.SameFuture(short) {
		t.Errorf("two rounds and a hundred differ: %+v, %+v", short, long)
	}
	raw, err := long.MarshalBinary()
	if err != nil {
		t.Fatal(err)
	}
	var back watch.Memory
	if err := back.UnmarshalBinary(raw); err != nil || back != long {
		t.Errorf("restored %+v, %v", back, err)
	}
	if d := j.Step(&long, round(1)); d.Any() {
		t.Errorf("another stream: %+v", d)
	}
}

// FuzzKinds judges anything at all on every kind of chart: no panic, no NaN or
// infinity without an error but for absent limits, and the memory survives its bytes.
func FuzzKinds(f *testing.F) {
	for i := range kinds() {
		f.Add([]byte("Kestrel Row, axle seat diameter, six spindles, a few hundred hubs"), uint8(i))
	}
	all := kinds()
	judges := make([]*watch.Judge, len(all))
	for i, k := range all {
		judges[i] = judgeOf(f, k.standard)
	}
	f.Fuzz(func(t *testing.T, data []byte, which uint8) {
		at := int(which) % len(all)
		j, hist := judges[at], all[at].draw(rand.New(rand.NewPCG(uint64(which), 1)), len(data[:min(len(data), 60)]))
		var m watch.Memory
		for i := range hist {
			g := &hist[i]
			v := math.Float64frombits(uint64(data[i])<<56 | uint64(data[len(data)-1-i])<<48)
			switch data[i] % 16 { // spoil one part of some
			case 0:
				g.Mean = v
			case 1:
				g.Range, g.SD = v, v
			case 2:
				g.N = int(int8(data[i/2]))
			case 3:
				g.Count = int(int8(data[i/2])) * 1000
			case 4:
				g.Size = v
			case 5:
				g.Target, g.Wear = v, v
			case 6:
				g.Sigma = v
			case 7:
				for k := range g.Values {
					g.Values[k] = v
				}
				for k := range g.Streams {
					g.Streams[k].Location = v
				}
			case 8:
				g.Values, g.Streams = g.Values[:len(g.Values)/2], g.Streams[:len(g.Streams)/2]
			}
			before := m
			d := j.Step(&m, *g)
			if d.Err != nil {
				if !errors.Is(d.Err, watch.ErrSubgroup) || m != before {
					t.Fatalf("%s, point %d: %v, memory changed %v", all[at].name, i, d.Err, m != before)
				}
				continue
			}
			for _, p := range []watch.Plotted{d.Location, d.Dispersion, d.Third} {
				for _, v := range []float64{p.Value, p.Z, p.Band.Center, p.Band.Below, p.Band.Above, d.EWMA.Value, d.EWMA.Upper, d.CUSUM.High, d.CUSUM.Low} {
					if math.IsNaN(v) || math.IsInf(v, 0) {
						t.Fatalf("%s, point %d: %+v", all[at].name, i, d)
					}
				}
				if math.IsNaN(p.Band.Lower) || math.IsNaN(p.Band.Upper) || p.Band.Lower > p.Band.Upper {
					t.Fatalf("%s, point %d: limits %+v", all[at].name, i, p.Band)
				}
			}
			raw, err := m.MarshalBinary()
			if err != nil {
				t.Fatal(err)
			}
			var back watch.Memory
			if err := back.UnmarshalBinary(raw); err != nil || back != m {
				t.Fatalf("%s, point %d: restored %+v, %v; want %+v", all[at].name, i, back, err, m)
			}
		}
	})
}
