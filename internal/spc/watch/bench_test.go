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
	var pass, rules, everything time.Duration
	fired := 0
	replay := func(j *watch.Judge) time.Duration {
		start := time.Now()
		var m watch.Memory
		var d watch.Judged
		for at := 0; at < len(readings); at += 5 {
			j.StepInto(&m, summed(readings[at:at+5]), &d)
			if d.Any() {
				fired++
			}
		}
		return time.Since(start)
	}
	b.ReportAllocs()
	for b.Loop() {
		start := time.Now()
		_, v := stat.MeanVariance(floats, nil)
		pass += time.Since(start)
		if !(v > 0) {
			b.Fatal("no variance")
		}
		rules += replay(plain)
		everything += replay(full)
	}
	if fired == 0 {
		b.Fatal("no rule ever fired: nothing was judged")
	}
	each := func(d time.Duration) float64 { return float64(d) / float64(b.N) / subgroups }
	b.ReportMetric(each(pass), "ns/pass-subgroup")
	b.ReportMetric(each(rules), "ns/rules-subgroup")
	b.ReportMetric(float64(rules)/float64(pass), "rules/pass")
	b.ReportMetric(float64(everything)/float64(pass), "rules+ewma+cusum/pass")
}
