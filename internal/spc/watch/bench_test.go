package watch_test

import (
	"math/rand/v2"
	"testing"
	"time"

	"gonum.org/v1/gonum/stat"

	"holdfast/internal/spc/limits"
	"holdfast/internal/spc/watch"
)

// everyKind is one rule of each kind.
func everyKind() []watch.Rule {
	return []watch.Rule{
		{Kind: watch.Beyond, Z: 3},
		{Kind: watch.KOfM, K: 2, M: 3, Z: 2},
		{Kind: watch.OneSide, M: 9},
		{Kind: watch.RisingOrFalling, M: 6},
		{Kind: watch.Alternating, M: 14},
		{Kind: watch.Within, M: 15, Z: 1},
		{Kind: watch.Outside, M: 8, Z: 1},
	}
}

func judgeOf(t testing.TB, s watch.Standard) *watch.Judge {
	t.Helper()
	j, err := watch.NewJudge(s)
	if err != nil {
		t.Fatal(err)
	}
	return j
}

func fullStandard(chart limits.Chart, rules []watch.Rule) watch.Standard {
	return watch.Standard{
		Standard:      limits.Standard{Chart: chart, Center: 12.5, Sigma: 0.004},
		LocationRules: rules, DispersionRules: rules,
		EWMA: &watch.EWMA{Lambda: 0.2, L: 2.9}, CUSUM: &watch.CUSUM{K: 0.5, H: 5, HeadStart: 0.5},
	}
}

// integers draws subgroups of five as the store keeps them: in the last decimal of
// the characteristic, here a thousandth.
func integers(n int) []int64 {
	rng := rand.New(rand.NewPCG(5, 6))
	out := make([]int64, n)
	for i := range out {
		out[i] = 12500 + int64(rng.NormFloat64()*4)
	}
	return out
}

// summed computes mean and range of five integer readings; both are exact until
// the one division.
func summed(five []int64) watch.Subgroup {
	sum, least, most := five[0], five[0], five[0]
	for _, v := range five[1:] {
		sum += v
		least, most = min(least, v), max(most, v)
	}
	return watch.Subgroup{N: len(five), Mean: float64(sum) / float64(1000*len(five)), Range: float64(most-least) / 1000}
}

// BenchmarkJudge judges one point by every rule kind, EWMA and CUSUM. "point" is
// one chart, through the Judge and all; "pair" adds the dispersion chart with
// every rule kind of its own.
func BenchmarkJudge(b *testing.B) {
	var subgroups [4096]watch.Subgroup
	readings := integers(5 * len(subgroups))
	for i := range subgroups {
		subgroups[i] = summed(readings[5*i : 5*i+5])
	}
	run := func(name string, s watch.Standard) {
		b.Run(name, func(b *testing.B) {
			j := judgeOf(b, s)
			var m watch.Memory
			fired, i := 0, 0
			b.ReportAllocs()
			for b.Loop() {
				d := j.Step(&m, subgroups[i&4095])
				i++
				if d.Any() {
					fired++
				}
			}
			if fired == 0 && b.N > 1e5 {
				b.Fatal("no rule ever fired: nothing was judged")
			}
		})
	}
	single := fullStandard(limits.XBarR, everyKind())
	single.DispersionRules = nil
	run("point", single)
	run("pair", fullStandard(limits.XBarR, everyKind()))
}

// BenchmarkJudgeKinds judges one subgroup of each further kind of chart, with every
// rule kind on each of its panels, and EWMA and CUSUM where the kind has them.
func BenchmarkJudgeKinds(b *testing.B) {
	for _, k := range kinds() {
		if isNP(k) { // its limits are those of p at one size
			continue
		}
		b.Run(k.name, func(b *testing.B) {
			hist := k.draw(rand.New(rand.NewPCG(7, 8)), 1024)
			j := judgeOf(b, k.standard)
			var m watch.Memory
			fired, i := 0, 0
			b.ReportAllocs()
			for b.Loop() {
				if i%len(hist) == 0 { // instants begin anew
					m = watch.Memory{}
				}
				d := j.Step(&m, hist[i%len(hist)])
				i++
				if d.Err != nil {
					b.Fatal(d.Err)
				}
				if d.Any() {
					fired++
				}
			}
			if fired == 0 && b.N > 1e5 {
				b.Fatal("no rule ever fired: nothing was judged")
			}
		})
	}
}

// BenchmarkReplay replays 1,000,000 subgroups of five integer readings with all
// rules on both charts, beside one stat.MeanVariance pass over the same readings.
func BenchmarkReplay(b *testing.B) {
	const subgroups = 1_000_000
	readings := integers(5 * subgroups)
	floats := make([]float64, len(readings))
	for i, v := range readings {
		floats[i] = float64(v) / 1000
	}
	s := fullStandard(limits.XBarR, watch.Nelson())
	s.EWMA, s.CUSUM = nil, nil
	plain := judgeOf(b, s)
	full := judgeOf(b, fullStandard(limits.XBarR, watch.Nelson()))
	// The shortest of all rounds counts, for a replay stretch by stretch: on a busy
	// machine the others tell of the neighbours.
	const stretches = 200
	type times [stretches]time.Duration
	pass, rules, everything := time.Hour, times{}, times{}
	fired := 0
	replay := func(j *watch.Judge, best *times) {
		var m watch.Memory
		var d watch.Judged
		for i := range best {
			start := time.Now()
			stretch := readings[i*len(readings)/stretches : (i+1)*len(readings)/stretches]
			for at := 0; at < len(stretch); at += 5 {
				s := summed(stretch[at : at+5])
				j.StepInto(&m, &s, &d)
				if d.Any() {
					fired++
				}
			}
			if took := time.Since(start); best[i] == 0 || took < best[i] {
				best[i] = took
			}
		}
		if m.Points != subgroups {
			b.Fatalf("judged %d subgroups", m.Points)
		}
	}
	b.ReportAllocs()
	for b.Loop() {
		for range 4 { // a pass cannot be cut in stretches, so it gets more tries
			start := time.Now()
			_, v := stat.MeanVariance(floats, nil)
			pass = min(pass, time.Since(start))
			if !(v > 0) {
				b.Fatal("no variance")
			}
		}
		replay(plain, &rules)
		replay(full, &everything)
	}
	if fired == 0 {
		b.Fatal("no rule ever fired: nothing was judged")
	}
	b.ReportMetric(float64(pass)/subgroups, "ns/pass-subgroup")
	sum := func(best times) (total float64) {
		for _, d := range best {
			total += float64(d)
		}
		return total
	}
	b.ReportMetric(sum(rules)/subgroups, "ns/rules-subgroup")
	b.ReportMetric(sum(rules)/float64(pass), "rules/pass")
	b.ReportMetric(sum(everything)/float64(pass), "rules+ewma+cusum/pass")
}
