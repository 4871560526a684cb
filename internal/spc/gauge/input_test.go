package gauge_test

import (
	"encoding/binary"
	"errors"
	"math"
	"strings"
	"testing"

	"holdfast/internal/spc/gauge"
	"holdfast/internal/spc/sample"
)

func TestWrongInputIsNamed(t *testing.T) {
	t.Parallel()
	cross := func(m [][][]float64, o gauge.Options) error {
		_, err := gauge.Cross(m, o)
		return err
	}
	ok := [][][]float64{{{1, 2}, {2, 3}}, {{3, 4}, {4, 4}}}
	bias := func(x []float64, reference float64, tolerance *float64) error {
		_, err := gauge.MeasureBias(x, reference, tolerance)
		return err
	}
	line := func(r []float64, m [][]float64) error {
		_, err := gauge.MeasureLinearity(r, m)
		return err
	}
	agree := func(r ...[]string) error {
		_, err := gauge.Agree(r)
		return err
	}
	table := func(r ...[]int) error {
		_, err := gauge.CohenTable(r)
		return err
	}
	_, oneLevel := gauge.Levels([][]float64{{1, 2}})
	_, single := gauge.Levels([][]float64{{1}, {2}})
	_, quick := gauge.QuickRange([][]float64{{1, 1}, {2, 2}})
	_, errorsOf := gauge.InspectionErrors([]bool{true}, nil)
	_, oneAppraiser := gauge.CrossByRange([][][]float64{{{1, 2}}, {{2, 3}}}, nil)
	for _, c := range []struct {
		err   error
		words string
	}{
		{cross(ok[:1], gauge.Options{}), "two parts"},
		{cross([][][]float64{{{1}, {2}}, {{3}, {4}}}, gauge.Options{}), "at least twice"},
		{cross([][][]float64{{{1, 2}, {2, 3}}, {{3, 4}}}, gauge.Options{}), "part 2 has 1"},
		{cross([][][]float64{{{1, 2}, {2, 3}}, {{3, 4}, {4}}}, gauge.Options{}), "1 times for appraiser 2 and part 2"},
		{cross([][][]float64{{{1, 2}, {2, 3}}, {{3, math.NaN()}, {4, 5}}}, gauge.Options{}), "reading 2 of appraiser 1 on part 2"},
		{cross([][][]float64{{{1, 1}, {1, 1}}, {{1, 1}, {1, 1}}}, gauge.Options{}), "all readings are equal"},
		{cross([][][]float64{{{1, 1}, {1, 1}}, {{2, 2}, {2, 2}}}, gauge.Options{}), "too coarsely"},
		{cross(ok, gauge.Options{Tolerance: at(0)}), "tolerance must be above zero"},
		{cross(ok, gauge.Options{PoolAbove: at(2)}), "from 0 to 1"},
		{oneAppraiser, "two appraisers"},
		{bias([]float64{1, 1}, 1, nil), "too coarsely"},
		{bias([]float64{1, 2}, math.Inf(1), nil), "reference value"},
		{bias([]float64{1, 2}, 1, at(-1)), "tolerance"},
		{line([]float64{1}, nil), "1 reference values and 0 sets"},
		{line([]float64{1, 1}, [][]float64{{1, 2}, {3}}), "two different reference values"},
		{line([]float64{1, 2}, [][]float64{{1, 1}, {2}}), "same for every reading"},
		{line([]float64{1, 2}, [][]float64{{1, 1}, {}}), "master 2 (number 2) has no readings"},
		{line([]float64{1, 2}, [][]float64{{1}, {2}}), "at least three readings"},
		{agree(), "no items"},
		{agree([]string{"a"}), "two raters"},
		{agree([]string{"a", "b"}, []string{"a"}), "item 2 has 1"},
		{agree([]string{"a", "a"}, []string{"a", "a"}), "every rating is the same"},
		{table([]int{1}), "2 to 1000 rows"},
		{table([]int{1, 2}, []int{3}), "square"},
		{table([]int{1, -2}, []int{3, 4}), "got -2 in row 1, column 2"},
		{table([]int{0, 0}, []int{0, 0}), "empty"},
		{table([]int{5, 0}, []int{0, 0}), "every rating is the same"},
		{oneLevel, "two levels"},
		{single, "no level has two readings"},
		{quick, "too coarsely"},
		{errorsOf, "1 judgements of 0 items"},
	} {
		if c.err == nil || !errors.Is(c.err, gauge.ErrInput) || !strings.Contains(c.err.Error(), c.words) {
			t.Errorf("got %v, want words %q", c.err, c.words)
		}
	}
	if err := bias([]float64{1}, 1, nil); !errors.Is(err, sample.ErrTooFew) {
		t.Errorf("one reading: %v", err)
	}
}

// Two raters with the same single label between them say nothing about each other,
// while the third makes the study as a whole speak.
func TestPairWithOneLabelHasNoKappa(t *testing.T) {
	t.Parallel()
	a, err := gauge.Agree([][]string{{"ok", "ok", "ok"}, {"ok", "ok", "bad"}})
	if err != nil || a.Cohen[0][1] != nil || a.Cohen[0][2] == nil || *a.Cohen[0][2] != 0 {
		t.Errorf("%+v, %v", a, err)
	}
}

func FuzzGauge(f *testing.F) {
	seed := func(x ...float64) (b []byte) {
		for _, v := range x {
			b = binary.LittleEndian.AppendUint64(b, math.Float64bits(v))
		}
		return b
	}
	f.Add(seed(1, 2, 3, 4, 5, 6, 7, 9), 2, 2, 0.25, 10.0)
	f.Add(seed(1e140, -1e140, 1, 1, 1, 1, 1, 1+1e-15), 2, 1, 0.0, 1e-300)
	f.Add(seed(0, 0, 0, 0, 1e-300, 0, 0, 0), 1, 2, 1.0, 1e300)
	f.Fuzz(func(t *testing.T, data []byte, appraisers, trials int, pool, tolerance float64) {
		var x []float64
		for ; len(data) >= 8 && len(x) < 300; data = data[8:] {
			x = append(x, math.Float64frombits(binary.LittleEndian.Uint64(data)))
		}
		appraisers, trials = min(max(appraisers, 1), 5), min(max(trials, 1), 6)
		var m [][][]float64
		rest := x
		for len(rest) >= appraisers*trials {
			var part [][]float64
			for range appraisers {
				part = append(part, rest[:trials])
				rest = rest[trials:]
			}
			m = append(m, part)
		}
		finite := func(values ...float64) {
			t.Helper()
			for _, v := range values {
				if math.IsNaN(v) || math.IsInf(v, 0) {
					t.Fatalf("not finite without an error: %v", values)
				}
			}
		}
		parts := func(c gauge.Components) {
			t.Helper()
			finite(c.Repeatability, c.Appraiser, c.Interaction, c.Reproducibility, c.Gauge, c.Part, c.Total)
		}
		if c, err := gauge.Cross(m, gauge.Options{Tolerance: &tolerance, PoolAbove: &pool}); err == nil {
			parts(c.Variance)
			parts(c.OfTotal)
			parts(*c.OfTolerance)
			for _, r := range c.Table {
				finite(r.SS)
				for _, v := range []*float64{r.MS, r.F, r.P} {
					if v != nil {
						finite(*v)
					}
				}
			}
			if c.Categories < 1 {
				t.Fatalf("%d categories", c.Categories)
			}
		}
		if r, err := gauge.CrossByRange(m, &tolerance); err == nil {
			parts(r.OfTotal)
			parts(*r.OfTolerance)
			finite(r.Equipment, r.AppraiserSD, r.Gauge, r.PartSD, r.TotalSD, r.CategoriesUncut)
		}
		if b, err := gauge.MeasureBias(x, pool, &tolerance); err == nil {
			finite(b.Bias, b.SD, b.T, b.P, b.Low, b.High, *b.Cg, *b.Cgk)
		}
		var reference []float64
		var sets [][]float64
		for i, part := range m {
			reference = append(reference, float64(i%3)*pool)
			sets = append(sets, part[0])
		}
		if l, err := gauge.MeasureLinearity(reference, sets); err == nil {
			finite(l.Slope, l.Intercept, l.ResidualSD, l.RSquared, l.PSlope, l.PIntercept)
		}
		if o, err := gauge.Levels(sets); err == nil {
			finite(o.RSquared, o.WithinSD, o.BetweenVariance)
		}
		if r, err := gauge.QuickRange(sets); err == nil {
			finite(r.MeanRange, r.Gauge)
		}
	})
}

// Ten parts, three appraisers, three trials.
func BenchmarkCross(b *testing.B) {
	s, _ := studies(b)
	m := crossed(s.Data, "A", "B", "C")
	for b.Loop() {
		if _, err := gauge.Cross(m, gauge.Options{}); err != nil {
			b.Fatal(err)
		}
	}
}
