package limits

import (
	"math"

	"holdfast/internal/spc/special"
)

// ThreeWayStandard is what a revision of a three-way chart freezes: batch means are
// charted as individuals with limits from their own moving range, because they vary
// more than the spread within batches explains; the spread within is charted beside.
type ThreeWayStandard struct {
	Means  Standard // of the batch means, Chart Individuals
	Within Standard // Chart XBarR or XBarS; only its dispersion is charted
}

// EstimateThreeWay computes the standard from batches; within is XBarR or XBarS, and
// the estimators are the charts' defaults. Batches should be of equal size, since a
// mean of fewer readings varies more.
//
// Source: Wheeler and Chambers, Understanding Statistical Process Control (1992),
// chapter 9 (between and within).
func EstimateThreeWay(within Chart, batches []Subgroup) (ThreeWayStandard, error) {
	if within != XBarR && within != XBarS {
		return ThreeWayStandard{}, invalid("the spread within is charted by range or standard deviation, not on %q", within)
	}
	inside, err := Estimate(within, "", batches)
	if err != nil {
		return ThreeWayStandard{}, err
	}
	means, err := Estimate(Individuals, MRBar, batchMeans(batches))
	if err != nil {
		return ThreeWayStandard{}, err
	}
	return ThreeWayStandard{
		Means:  Standard{Chart: Individuals, Center: means.Center, Sigma: means.Sigma},
		Within: Standard{Chart: within, Center: means.Center, Sigma: inside.Sigma},
	}, nil
}

// batchMeans sees each batch as one reading.
func batchMeans(batches []Subgroup) []Subgroup {
	out := make([]Subgroup, len(batches))
	for i, b := range batches {
		out[i] = Subgroup{N: 1, Location: b.Location, Break: b.Break}
	}
	return out
}

// Bands returns the limits of the batch mean, of the moving range of batch means, and
// of the spread within a batch of n readings (absent for one reading).
func (s ThreeWayStandard) Bands(n int) (mean, movingRange, within Band, err error) {
	mean, movingRange, err = s.Means.Bands(1)
	if err != nil {
		return absent, absent, absent, err
	}
	_, within, err = s.Within.Bands(n)
	if err != nil {
		return absent, absent, absent, err
	}
	return mean, movingRange, within, nil
}

// BetweenTest is the F test of the spread between batches against the spread within.
type BetweenTest struct {
	F, P          float64
	DF1, DF2      float64
	SigmaBetween  float64 // s.d. of the true batch means; 0 when within explains it all
	WithinPerMean float64 // standard error of a batch mean by the spread within, mean size
}

// CompareBetween tells whether batch means vary more than the spread within explains: the
// evidence on which a three-way chart is offered. It needs two batches and spread
// within.
//
// Source: one-way analysis of variance; NIST/SEMATECH e-Handbook 7.4.3.3.
func CompareBetween(batches []Subgroup) (BetweenTest, error) {
	if len(batches) < 2 {
		return BetweenTest{}, invalid("at least two batches are needed, got %d", len(batches))
	}
	n, sum, squares2 := 0.0, 0.0, 0.0
	origin := batches[0].Location
	for i, b := range batches {
		if err := b.check(XBarS, i); err != nil {
			return BetweenTest{}, err
		}
		w := float64(b.N)
		n += w
		squares2 += w * w
		sum += w * (b.Location - origin)
	}
	grand := sum / n
	between, within := 0.0, 0.0
	for _, b := range batches {
		d := b.Location - origin - grand
		between += float64(b.N) * d * d
		within += float64(b.N-1) * b.SD * b.SD
	}
	m := float64(len(batches))
	t := BetweenTest{DF1: m - 1, DF2: n - m}
	if t.DF2 < 1 {
		return BetweenTest{}, invalid("no batch has two readings or more: there is no spread within")
	}
	if within <= 0 {
		return BetweenTest{}, ErrZeroSpread
	}
	msb, msw := between/t.DF1, within/t.DF2
	t.F = msb / msw
	if !finite(t.F) || !finite(between) {
		return BetweenTest{}, invalid("the batches are too far apart to compute with")
	}
	_, t.P = special.Beta(t.DF1/2, t.DF2/2, t.DF1*t.F/(t.DF1*t.F+t.DF2), t.DF2/(t.DF1*t.F+t.DF2))
	// Mean size as the expected mean squares weigh it.
	size := (n - squares2/n) / (m - 1)
	t.SigmaBetween = math.Sqrt(math.Max(0, (msb-msw)/size))
	t.WithinPerMean = math.Sqrt(msw / size)
	return t, nil
}
