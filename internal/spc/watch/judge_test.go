package watch_test

import (
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"sync"
	"testing"

	"holdfast/internal/spc/limits"
	"holdfast/internal/spc/watch"
)

var charts = []limits.Chart{limits.XBarR, limits.XBarS, limits.MedianR, limits.Individuals}

// history draws subgroups for a chart: unequal sizes, now and then a single
// reading, a shift in the middle, and on a coarse grid so that ties occur.
func history(rng *rand.Rand, chart limits.Chart, n int) []watch.Subgroup {
	out := make([]watch.Subgroup, n)
	for i := range out {
		size := 1
		if chart != limits.Individuals {
			size = []int{5, 5, 5, 4, 1, 31, 2}[rng.IntN(7)]
		}
		shift := 0.0
		if i > n/2 {
			shift = 0.003
		}
		sum, least, most, squares := 0.0, math.Inf(1), math.Inf(-1), 0.0
		readings := make([]float64, size)
		for k := range readings {
			v := math.Round((12.5+shift+0.004*rng.NormFloat64())*500) / 500
			readings[k] = v
			sum += v
			least, most = min(least, v), max(most, v)
		}
		mean := sum / float64(size)
		for _, v := range readings {
			squares += (v - mean) * (v - mean)
		}
		out[i] = watch.Subgroup{N: size, Mean: mean, Range: most - least}
		if size > 1 {
			out[i].SD = math.Sqrt(squares / float64(size-1))
		}
	}
	return out
}

// slow judges a whole history by looking back over all of it: limits by package
// limits, rules by the naive windows, EWMA and CUSUM by their definitions.
func slow(t *testing.T, s watch.Standard, hist []watch.Subgroup) []watch.Judged {
	t.Helper()
	var out []watch.Judged
	bands := map[int][2]limits.Band{}
	var location, dispersion []watch.Point
	ewma, variance := 0.0, 0.0
	high := s.CUSUM.HeadStart * s.CUSUM.H
	low := high
	beyond := func(d float64) watch.Side {
		if d >= 1e-9 {
			return watch.High
		}
		return watch.None
	}
	for i, g := range hist {
		if _, ok := bands[g.N]; !ok {
			loc, disp, err := s.Bands(g.N)
			if err != nil {
				t.Fatal(err)
			}
			bands[g.N] = [2]limits.Band{loc, disp}
		}
		loc, disp := bands[g.N][0], bands[g.N][1]
		var d watch.Judged
		d.Location = watch.Plotted{Value: g.Mean, Band: loc, Z: loc.Z(g.Mean)}
		location = append(location, watch.Point{Z: d.Location.Z, X: g.Mean / s.Sigma})
		d.Location.Fired = holds(s.LocationRules, location)
		spread, has := g.Range, disp.Exists()
		switch s.Chart {
		case limits.XBarS:
			spread = g.SD
		case limits.Individuals:
			if has = i > 0; has {
				spread = math.Abs(g.Mean - hist[i-1].Mean)
			}
		}
		if d.HasDispersion = has; has {
			d.Dispersion = watch.Plotted{Value: spread, Band: disp, Z: disp.Z(spread)}
			dispersion = append(dispersion, watch.Point{Z: d.Dispersion.Z, X: spread / s.Sigma})
			d.Dispersion.Fired = holds(s.DispersionRules, dispersion)
		}
		l := s.EWMA.Lambda
		ewma = l*g.Mean + (1-l)*ewma
		if i == 0 {
			ewma = l*g.Mean + (1-l)*s.Center
		}
		variance = l*l*loc.Above*loc.Above + (1-l)*(1-l)*variance
		half := s.EWMA.L * math.Sqrt(variance)
		d.EWMA = watch.Average{Value: ewma, Lower: s.Center - half, Upper: s.Center + half}
		d.EWMA.Out = beyond((ewma-d.EWMA.Upper)/s.Sigma) | beyond((d.EWMA.Lower-ewma)/s.Sigma)<<1
		high = math.Max(0, high+d.Location.Z-s.CUSUM.K)
		low = math.Max(0, low-d.Location.Z-s.CUSUM.K)
		d.CUSUM = watch.Sums{High: high, Low: low, Out: beyond(high-s.CUSUM.H) | beyond(low-s.CUSUM.H)<<1}
		out = append(out, d)
	}
	return out
}

func sameJudged(a, b watch.Judged) error {
	tight := func(x, y float64) bool { return x == y || math.Abs(x-y) <= 1e-9*(1+math.Abs(x)) }
	near := func(x, y limits.Band) bool {
		return x == y || tight(x.Center, y.Center) && tight(x.Lower, y.Lower) && tight(x.Upper, y.Upper) && tight(x.Below, y.Below) && tight(x.Above, y.Above)
	}
	plotted := func(x, y watch.Plotted) bool {
		return x.Fired == y.Fired && near(x.Band, y.Band) && tight(x.Value, y.Value) && tight(x.Z, y.Z)
	}
	switch {
	case a.Err != nil || b.Err != nil:
		return fmt.Errorf("errors %v and %v", a.Err, b.Err)
	case !plotted(a.Location, b.Location):
		return fmt.Errorf("location %+v and %+v", a.Location, b.Location)
	case a.HasDispersion != b.HasDispersion || !plotted(a.Dispersion, b.Dispersion):
		return fmt.Errorf("dispersion %+v and %+v", a.Dispersion, b.Dispersion)
	case a.HasThird != b.HasThird || !plotted(a.Third, b.Third):
		return fmt.Errorf("third %+v and %+v", a.Third, b.Third)
	case a.Streams != b.Streams:
		return fmt.Errorf("streams %+v and %+v", a.Streams, b.Streams)
	case a.EWMA.Out != b.EWMA.Out || !tight(a.EWMA.Value, b.EWMA.Value) || !tight(a.EWMA.Lower, b.EWMA.Lower) || !tight(a.EWMA.Upper, b.EWMA.Upper):
		return fmt.Errorf("EWMA %+v and %+v", a.EWMA, b.EWMA)
	case a.CUSUM.Out != b.CUSUM.Out || !tight(a.CUSUM.High, b.CUSUM.High) || !tight(a.CUSUM.Low, b.CUSUM.Low):
		return fmt.Errorf("CUSUM %+v and %+v", a.CUSUM, b.CUSUM)
	}
	return nil
}

func TestJudgeEqualsLookingBackOverEverything(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(21, 22))
	for _, chart := range charts {
		for _, probability := range []bool{false, true} {
			s := fullStandard(chart, watch.Nelson())
			s.Probability = probability
			j := judgeOf(t, s)
			hist := history(rng, chart, 400)
			var m watch.Memory
			var into watch.Judged
			var again watch.Memory
			location, dispersion, ewma, cusum, skipped := 0, 0, 0, 0, 0
			for i, want := range slow(t, s, hist) {
				got := j.Step(&m, hist[i])
				if err := sameJudged(got, want); err != nil {
					t.Fatalf("%s, subgroup %d: %v", chart, i, err)
				}
				if j.StepInto(&again, &hist[i], &into); into != got || again != m {
					t.Fatalf("%s, subgroup %d: StepInto gave %+v, Step %+v", chart, i, into, got)
				}
				location += int(got.Location.Fired.Rules)
				dispersion += int(got.Dispersion.Fired.Rules)
				ewma += int(got.EWMA.Out)
				cusum += int(got.CUSUM.Out)
				if !got.HasDispersion {
					skipped++
				}
			}
			if m.Points != 400 || location == 0 || dispersion == 0 || ewma == 0 || cusum == 0 || skipped == 0 {
				t.Errorf("%s: the history does not try everything: points %d, fired %d, %d, %d, %d, skipped %d",
					chart, m.Points, location, dispersion, ewma, cusum, skipped)
			}
		}
	}
}

// At any point the fold may be put away as bytes and taken up again.
func TestRestoredMemoryGoesOnAlike(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(31, 32))
	for _, chart := range charts {
		rules := append(watch.Nelson(), watch.Rule{Kind: watch.KOfM, K: 3, M: 8, Z: 1}, watch.Rule{Kind: watch.KOfM, K: 20, M: 63, Z: 0.5})
		j := judgeOf(t, fullStandard(chart, rules))
		var m watch.Memory
		for i, g := range history(rng, chart, 600) {
			raw, err := m.MarshalBinary()
			if err != nil {
				t.Fatal(err)
			}
			var back watch.Memory
			if err := back.UnmarshalBinary(raw); err != nil || back != m {
				t.Fatalf("%s, before subgroup %d: %v, restored %+v, want %+v", chart, i, err, back, m)
			}
			want := j.Step(&m, g)
			if got := j.Step(&back, g); got != want || back != m {
				t.Fatalf("%s, subgroup %d: %+v after restoring, want %+v", chart, i, got, want)
			}
		}
	}
}

// Two folds that differ in an old sample meet again, and from there on agree.
func TestFoldsMeetAgainAfterACorrection(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(41, 42))
	for _, chart := range charts {
		s := fullStandard(chart, watch.Nelson())
		s.EWMA = nil // an EWMA forgets only in the limit
		j := judgeOf(t, s)
		hist := history(rng, chart, 500)
		corrected := append([]watch.Subgroup(nil), hist...)
		corrected[10].Mean += 0.008
		voided := append(append([]watch.Subgroup(nil), hist[:10]...), hist[11:]...)
		var a, b, c watch.Memory
		met, metVoided := 0, 0
		for i := range hist {
			da, db := j.Step(&a, hist[i]), j.Step(&b, corrected[i])
			if met == 0 && i > 10 && a == b {
				met = i
			}
			if met > 0 && i > met && da != db {
				t.Fatalf("%s: equal after subgroup %d, different at %d", chart, met, i)
			}
			if i > 10 {
				dc := j.Step(&c, voided[i-1])
				if metVoided > 0 && da != dc {
					t.Fatalf("%s: same future after subgroup %d, different at %d", chart, metVoided, i)
				}
				if metVoided == 0 && a.SameFuture(c) {
					metVoided = i
				}
			} else if i < 10 {
				j.Step(&c, voided[i])
			}
		}
		if met == 0 || met > 120 || metVoided == 0 || metVoided > 120 {
			t.Errorf("%s: the folds met after subgroup %d when corrected, %d when voided; want soon", chart, met, metVoided)
		}
	}
}

func TestMirroredHistoryMirrorsTheLocation(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(51, 52))
	s := fullStandard(limits.XBarR, watch.Nelson())
	s.Center = 0
	j := judgeOf(t, s)
	swap := func(side watch.Side) watch.Side { return side&watch.High<<1 | side&watch.Low>>1 }
	var a, b watch.Memory
	for i, g := range history(rng, limits.XBarR, 300) {
		g.Mean -= 12.5
		other := g
		other.Mean = -g.Mean
		f, h := j.Step(&a, g), j.Step(&b, other)
		if f.Location.Fired.High != h.Location.Fired.Low || f.Location.Fired.Low != h.Location.Fired.High ||
			f.Location.Z != -h.Location.Z || f.Dispersion != h.Dispersion ||
			f.EWMA.Out != swap(h.EWMA.Out) || f.CUSUM.Out != swap(h.CUSUM.Out) || f.CUSUM.High != h.CUSUM.Low {
			t.Fatalf("subgroup %d: %+v mirrored is %+v", i, f, h)
		}
	}
}

func TestWrongSubgroupsAreRefusedAndLeaveTheMemoryAlone(t *testing.T) {
	t.Parallel()
	nan, inf := math.NaN(), math.Inf(1)
	for _, tc := range []struct {
		chart limits.Chart
		sub   watch.Subgroup
	}{
		{limits.XBarR, watch.Subgroup{N: 0, Mean: 12.5}},
		{limits.XBarR, watch.Subgroup{N: -1, Mean: 12.5}},
		{limits.XBarR, watch.Subgroup{N: math.MinInt, Mean: 12.5}},
		{limits.XBarR, watch.Subgroup{N: math.MaxInt, Mean: 12.5}},
		{limits.XBarR, watch.Subgroup{N: 5, Mean: nan}},
		{limits.XBarR, watch.Subgroup{N: 5, Mean: inf}},
		{limits.XBarR, watch.Subgroup{N: 5, Mean: 1e300}},
		{limits.XBarR, watch.Subgroup{N: 5, Mean: 12.5, Range: nan}},
		{limits.XBarR, watch.Subgroup{N: 5, Mean: 12.5, Range: -1}},
		{limits.XBarR, watch.Subgroup{N: 5, Mean: 12.5, Range: inf}},
		{limits.XBarS, watch.Subgroup{N: 5, Mean: 12.5, SD: nan}},
		{limits.Individuals, watch.Subgroup{N: 2, Mean: 12.5}},
		{limits.Individuals, watch.Subgroup{N: 1, Mean: -inf}},
	} {
		j := judgeOf(t, fullStandard(tc.chart, watch.Nelson()))
		var m watch.Memory
		for range 3 {
			good := watch.Subgroup{N: 5, Mean: 12.501, Range: 0.009, SD: 0.004}
			if tc.chart == limits.Individuals {
				good.N = 1
			}
			if d := j.Step(&m, good); d.Err != nil {
				t.Fatal(d.Err)
			}
		}
		before := m
		d := j.Step(&m, tc.sub)
		if !errors.Is(d.Err, watch.ErrSubgroup) || m != before {
			t.Errorf("%s %+v: error %v, memory changed %v", tc.chart, tc.sub, d.Err, m != before)
		}
		if d.Err = nil; d != (watch.Judged{}) {
			t.Errorf("%s %+v: refused, yet judged as %+v", tc.chart, tc.sub, d)
		}
	}
	// What the chart does not plot is not looked at.
	j := judgeOf(t, fullStandard(limits.XBarR, nil))
	var m watch.Memory
	if d := j.Step(&m, watch.Subgroup{N: 5, Mean: 12.5, Range: 0.01, SD: nan}); d.Err != nil {
		t.Errorf("a range chart minds the standard deviation: %v", d.Err)
	}
	if d := j.Step(&m, watch.Subgroup{N: 1, Mean: 12.5}); d.Err != nil || d.HasDispersion {
		t.Errorf("a subgroup of one: %+v", d)
	}
}

func TestNewJudgeRefusesWhatCannotJudge(t *testing.T) {
	t.Parallel()
	for name, spoil := range map[string]func(*watch.Standard){
		"chart":           func(s *watch.Standard) { s.Chart = "p" },
		"sigma":           func(s *watch.Standard) { s.Sigma = 0 },
		"tiny sigma":      func(s *watch.Standard) { s.Sigma = 5e-324 },
		"centre":          func(s *watch.Standard) { s.Center = math.NaN() },
		"multiple":        func(s *watch.Standard) { s.Multiple = -1 },
		"location rule":   func(s *watch.Standard) { s.LocationRules = []watch.Rule{{Kind: watch.OneSide, M: 64}} },
		"dispersion rule": func(s *watch.Standard) { s.DispersionRules = make([]watch.Rule, 17) },
		"EWMA":            func(s *watch.Standard) { s.EWMA = &watch.EWMA{Lambda: 2, L: 3} },
		"CUSUM":           func(s *watch.Standard) { s.CUSUM = &watch.CUSUM{K: -1, H: 5} },
	} {
		s := fullStandard(limits.XBarR, watch.Nelson())
		spoil(&s)
		if j, err := watch.NewJudge(s); err == nil || j != nil {
			t.Errorf("a wrong %s was accepted", name)
		}
	}
}

func TestJudgeIsSafeForManyFoldsAtOnce(t *testing.T) {
	t.Parallel()
	j := judgeOf(t, fullStandard(limits.XBarR, watch.Nelson()))
	results := make([]watch.Memory, 4)
	var wg sync.WaitGroup
	for i := range results {
		wg.Go(func() {
			for n := 1; n <= 80; n++ { // sizes above 25 are made on the way
				if d := j.Step(&results[i], watch.Subgroup{N: n, Mean: 12.5, Range: 0.01}); d.Err != nil {
					t.Error(d.Err)
				}
			}
		})
	}
	wg.Wait()
	for _, m := range results[1:] {
		if m != results[0] {
			t.Fatal("folds of the same history differ")
		}
	}
}

func TestStepAllocatesNothing(t *testing.T) {
	j := judgeOf(t, fullStandard(limits.XBarR, ruleZoo()[:watch.MaxRules]))
	var m watch.Memory
	hist := history(rand.New(rand.NewPCG(61, 62)), limits.XBarR, 256)
	for _, g := range hist {
		j.Step(&m, g)
	}
	i, fired := 0, 0
	if n := testing.AllocsPerRun(1000, func() {
		if d := j.Step(&m, hist[i%256]); d.Any() {
			fired++
		}
		i++
	}); n != 0 {
		t.Errorf("a step allocates %g times", n)
	}
	if fired == 0 {
		t.Error("nothing ever fired")
	}
}
