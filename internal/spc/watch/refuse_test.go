package watch_test

import (
	"errors"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"holdfast/internal/spc/limits"
	"holdfast/internal/spc/watch"
)

// kindNamed is one of the kinds.
func kindNamed(t testing.TB, name string) kind {
	t.Helper()
	all := kinds()
	i := slices.IndexFunc(all, func(k kind) bool { return k.name == name })
	if i < 0 {
		t.Fatalf("no kind %q", name)
	}
	return all[i]
}

func TestWrongSubgroupsOfEveryKindAreRefused(t *testing.T) {
	t.Parallel()
	nan, inf := math.NaN(), math.Inf(1)
	stream := limits.Subgroup{N: 2, Location: 12.5, Range: 0.01}
	streams := func(last limits.Subgroup, n int) watch.Subgroup {
		return watch.Subgroup{Streams: append(slices.Repeat([]limits.Subgroup{stream}, n-1), last)}
	}
	for name, wrong := range map[string][]watch.Subgroup{
		"deviation": {{N: 5, Mean: 12.5, Target: nan}, {N: 5, Mean: nan}, {N: 5, Mean: 12.5, Target: 12.5, Range: -1}, {N: 0}, {N: 5, Mean: 1e308, Target: -1e308}},
		"standardised": {{N: 5, Mean: 12.5, Target: 12.5, SD: 0.01}, {N: 5, Mean: 12.5, Target: 12.5, Sigma: -1}, {N: 5, Mean: 12.5, Target: 12.5, Sigma: nan},
			{N: 5, Mean: 12.5, Target: 12.5, Sigma: 0.004, SD: nan}, {N: 5, Mean: 12.5, Target: 1, Sigma: 1e-300}},
		"trend":                {{N: 5, Mean: 12.5, Wear: -1}, {N: 5, Mean: 12.5, Wear: nan}, {N: 5, Mean: nan, Wear: 1e3}, {N: 5, Mean: inf}, {N: 5, Mean: 12.5, Wear: 1e16}},
		"three-way, range":     {{N: 0, Mean: 12.5}, {N: 5, Mean: nan}, {N: 5, Mean: 12.5, Range: nan}, {N: 5, Mean: 12.5, Range: -1}, {N: 2000, Mean: 12.5}},
		"three-way, s.d.":      {{N: 5, Mean: 12.5, SD: inf}, {N: 5, Mean: 1e200, SD: 0.1}},
		"group":                {{}, streams(stream, 5), streams(stream, 7), streams(limits.Subgroup{N: 3, Location: 12.5}, 6), streams(limits.Subgroup{N: 2, Location: nan}, 6), streams(limits.Subgroup{N: 2, Location: 1e200}, 6), streams(limits.Subgroup{N: 2, Location: 12.5, Range: -1}, 6), streams(limits.Subgroup{N: 2, Location: 12.5, Range: 1e200}, 6)},
		"p":                    {{Count: -1, Size: 50}, {Count: 5}, {Count: 51, Size: 50}, {Count: 5, Size: 50.5}, {Count: 5, Size: nan}, {Count: 5, Size: inf}},
		"np":                   {{Count: 5, Size: 99}, {Count: 101, Size: 100}, {Count: 5}},
		"c":                    {{Count: -1}, {Count: math.MaxInt}},
		"u, exact":             {{Count: 1, Size: 0}, {Count: 1, Size: -2}, {Count: 1, Size: 1e10}},
		"g":                    {{Mean: -1}, {Mean: 1.5}, {Mean: nan}, {Mean: inf}},
		"t":                    {{Mean: -1}, {Mean: nan}},
		"t of instants":        {{Mean: 1}, {Mean: nan}, {Mean: 1e200}},
		"T-squared":            {{}, {Values: []float64{10, 50}}, {Values: []float64{10, 50, 7, 1}}, {Values: []float64{10, nan, 7}}, {Values: []float64{10, 50, 1e140}}, {Values: []float64{10, inf, 7}}},
		"group of individuals": {streams(stream, 3)},
	} {
		k := kindNamed(t, name)
		j := judgeOf(t, k.standard)
		var m watch.Memory
		for _, g := range k.draw(rand.New(rand.NewPCG(87, 88)), 50) {
			if d := j.Step(&m, g); d.Err != nil {
				t.Fatal(name, d.Err)
			}
		}
		for _, g := range wrong {
			before := m
			d := j.Step(&m, g)
			if !errors.Is(d.Err, watch.ErrSubgroup) || m != before {
				t.Errorf("%s %+v: error %v, memory changed %v", name, g, d.Err, m != before)
			}
			if d.Err = nil; d != (watch.Judged{}) {
				t.Errorf("%s %+v: refused, yet judged as %+v", name, g, d)
			}
		}
	}
}

func TestNewJudgeRefusesModelsThatCannotJudge(t *testing.T) {
	t.Parallel()
	plain := limits.Standard{Chart: limits.XBarR, Center: 12.5, Sigma: 0.004}
	beyond := []watch.Rule{{Kind: watch.Beyond, Z: 3}}
	model := func(m watch.Model) watch.Standard { return watch.Standard{Model: m} }
	way := func(means, within limits.Standard) watch.Standard {
		return model(watch.ThreeWay{ThreeWayStandard: limits.ThreeWayStandard{Means: means, Within: within}})
	}
	individuals := limits.Standard{Chart: limits.Individuals, Center: 12.5, Sigma: 0.005}
	counts := watch.Counts{CountStandard: limits.CountStandard{Chart: limits.P, Center: 0.1}}
	for name, s := range map[string]watch.Standard{
		"two standards":           {Standard: plain, Model: counts},
		"np without size":         model(watch.Counts{CountStandard: limits.CountStandard{Chart: limits.NP, Center: 10}}),
		"counts on a mean chart":  model(watch.Counts{CountStandard: limits.CountStandard{Chart: limits.XBarR, Center: 10}}),
		"no rate":                 model(watch.Counts{CountStandard: limits.CountStandard{Chart: limits.P}}),
		"exact Laney":             model(watch.Counts{CountStandard: limits.CountStandard{Chart: limits.LaneyP, Center: 0.1, Between: 1, Probability: true}}),
		"rare without centre":     model(watch.Rare{RareStandard: limits.RareStandard{Chart: limits.G}}),
		"instants of units":       model(watch.Rare{RareStandard: limits.RareStandard{Chart: limits.G, Center: 4}, Instants: true}),
		"T-squared of nothing":    model(watch.TSquared{}),
		"one stream":              model(watch.Group{Standard: plain, Streams: 1}),
		"65 streams":              model(watch.Group{Standard: plain, Streams: 65}),
		"a run of one":            model(watch.Group{Standard: plain, Streams: 4, Run: 1}),
		"a run of 64":             model(watch.Group{Standard: plain, Streams: 4, Run: 64}),
		"means as means":          way(plain, plain),
		"within by moving range":  way(individuals, individuals),
		"within without sigma":    way(individuals, limits.Standard{Chart: limits.XBarR}),
		"trend without sigma":     model(watch.Trend{TrendStandard: limits.TrendStandard{Chart: limits.XBarR}}),
		"trend without slope":     model(watch.Trend{TrendStandard: limits.TrendStandard{Chart: limits.XBarR, Sigma: 1, Slope: math.NaN()}}),
		"short run of counts":     model(watch.ShortRun{Standard: limits.Standard{Chart: limits.P, Sigma: 1}}),
		"EWMA of counts":          {Model: counts, EWMA: &watch.EWMA{Lambda: 0.2, L: 3}},
		"CUSUM of streams":        {Model: watch.Group{Standard: plain, Streams: 4}, CUSUM: &watch.CUSUM{K: 0.5, H: 5}},
		"spread of counts":        {Model: counts, DispersionRules: beyond},
		"third of readings":       {Standard: plain, ThirdRules: beyond},
		"third of a group":        {Model: watch.Group{Standard: plain, Streams: 4}, ThirdRules: beyond},
		"moving range of streams": {Model: watch.Group{Standard: individuals, Streams: 4}, DispersionRules: beyond},
	} {
		if j, err := watch.NewJudge(s); err == nil || j != nil {
			t.Errorf("%s was accepted", name)
		}
	}
	for _, k := range kinds() {
		j := judgeOf(t, k.standard)
		if j.LocationRules().Len() != len(k.standard.LocationRules) || j.DispersionRules().Len() != len(k.standard.DispersionRules) {
			t.Errorf("%s: the rules are not as given", k.name)
		}
		want := len(k.standard.ThirdRules)
		if _, ok := k.standard.Model.(watch.Group); ok {
			want = len(k.standard.LocationRules)
		}
		if j.ThirdRules().Len() != want {
			t.Errorf("%s: %d rules on the third chart, want %d", k.name, j.ThirdRules().Len(), want)
		}
	}
}

// More sizes than are kept cost time but neither memory nor truth.
func TestSizesBeyondThoseKept(t *testing.T) {
	s := limits.CountStandard{Chart: limits.P, Center: 0.1, Probability: true}
	j := judgeOf(t, watch.Standard{Model: watch.Counts{CountStandard: s}})
	var m watch.Memory
	for round := range 2 {
		for size := 100; size < 1200; size++ {
			d := j.Step(&m, watch.Subgroup{Count: 12, Size: float64(size)})
			want, err := s.Band(float64(size))
			if err != nil || d.Err != nil || d.Location.Band != want {
				t.Fatalf("round %d, size %d: %+v, want %+v, %v", round, size, d, want, err)
			}
		}
	}
	if n := testing.AllocsPerRun(200, func() { j.Step(&m, watch.Subgroup{Count: 12, Size: 1199}) }); n != 0 {
		t.Errorf("a size that is not kept allocates %g times", n)
	}
}

func TestStepOfEveryKindAllocatesNothing(t *testing.T) {
	for _, k := range kinds() {
		j := judgeOf(t, k.standard)
		hist := k.draw(rand.New(rand.NewPCG(63, 64)), 256)
		var m watch.Memory
		for _, g := range hist {
			j.Step(&m, g)
		}
		if k.name == "t of instants" {
			m = watch.Memory{} // the history begins anew
		}
		i := 0
		if n := testing.AllocsPerRun(255, func() {
			g := hist[i%256]
			if g.Size == 100 || !isNP(k) { // a refusal may allocate
				j.Step(&m, g)
			}
			i++
		}); n != 0 {
			t.Errorf("%s: a step allocates %g times", k.name, n)
		}
	}
}

func isNP(k kind) bool {
	c, ok := k.standard.Model.(watch.Counts)
	return ok && c.Chart == limits.NP
}
