package runlength_test

import (
	"testing"

	"holdfast/internal/spc/limits"
	"holdfast/internal/spc/runlength"
	"holdfast/internal/spc/watch"
)

// BenchmarkRunLengthZones is the exact run length of the four zone rules; at most
// 50 ms are allowed.
func BenchmarkRunLengthZones(b *testing.B) {
	for b.Loop() {
		if _, err := runlength.Rules(watch.WesternElectric(), []float64{0}, runlength.Options{}); err != nil {
			b.Fatal(err)
		}
	}
}

// BenchmarkRunLengthAllZones has every zone rule in use, windows up to 15; at
// most 1 s is allowed.
func BenchmarkRunLengthAllZones(b *testing.B) {
	rules := append(watch.WesternElectric(),
		watch.Rule{Kind: watch.OneSide, M: 9}, watch.Rule{Kind: watch.Within, M: 15, Z: 1}, watch.Rule{Kind: watch.Outside, M: 8, Z: 1})
	for b.Loop() {
		if _, err := runlength.Rules(rules, []float64{0}, runlength.Options{}); err != nil {
			b.Fatal(err)
		}
	}
}

// BenchmarkRunLengthSimulated has Nelson's eight rules to a standard error of
// 1 %; at most 2 s on two cores are allowed.
func BenchmarkRunLengthSimulated(b *testing.B) {
	for b.Loop() {
		if _, err := runlength.Rules(watch.Nelson(), []float64{0}, runlength.Options{Seed: 1}); err != nil {
			b.Fatal(err)
		}
	}
}

// BenchmarkPairOfIndividuals prices individuals with moving ranges.
func BenchmarkPairOfIndividuals(b *testing.B) {
	s := pair(limits.Individuals, watch.WesternElectric(), beyond3)
	for b.Loop() {
		if _, err := runlength.Standard(s, 1, runlength.Change{}, runlength.Options{Seed: 1}); err != nil {
			b.Fatal(err)
		}
	}
}

func BenchmarkEWMA(b *testing.B) {
	for b.Loop() {
		if _, err := runlength.EWMA(watch.EWMA{Lambda: 0.1, L: 2.7}, "", []float64{0}); err != nil {
			b.Fatal(err)
		}
	}
}

func BenchmarkCUSUM(b *testing.B) {
	for b.Loop() {
		if _, err := runlength.CUSUM(watch.CUSUM{K: 0.5, H: 5, HeadStart: 0.5}, []float64{0}); err != nil {
			b.Fatal(err)
		}
	}
}

func BenchmarkEstimatedPooled(b *testing.B) {
	for b.Loop() {
		if _, err := runlength.Estimated(25, 5, runlength.PooledSD, runlength.Options{}); err != nil {
			b.Fatal(err)
		}
	}
}

func BenchmarkEstimatedRange(b *testing.B) {
	for b.Loop() {
		if _, err := runlength.Estimated(25, 5, runlength.MeanRange, runlength.Options{Seed: 1}); err != nil {
			b.Fatal(err)
		}
	}
}
