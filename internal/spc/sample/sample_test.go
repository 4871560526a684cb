package sample_test

import (
	"encoding/csv"
	"encoding/json"
	"errors"
	"math"
	"math/rand/v2"
	"os"
	"slices"
	"strconv"
	"testing"

	"holdfast/internal/spc/sample"
)

func column(t *testing.T, name string) []float64 {
	t.Helper()
	f, err := os.Open("testdata/" + name + ".csv")
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	var x []float64
	for _, r := range rows[1:] {
		x = append(x, parse(t, r[0]))
	}
	return x
}

func parse(t *testing.T, s string) float64 {
	t.Helper()
	v, err := strconv.ParseFloat(s, 64)
	if err != nil {
		t.Fatal(err)
	}
	return v
}

// digits is the log relative error, the number of significant digits that agree.
func digits(got, want float64) float64 {
	if got == want {
		return 16
	}
	if want == 0 {
		return -math.Log10(math.Abs(got))
	}
	return -math.Log10(math.Abs(got-want) / math.Abs(want))
}

// NIST Statistical Reference Datasets, univariate summary statistics: certified to
// 15 digits. NumAcc3 and NumAcc4 lose one digit in the reading of their decimals.
func TestCertifiedSummaries(t *testing.T) {
	t.Parallel()
	f, err := os.Open("testdata/certified.csv")
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil || len(rows) != 10 {
		t.Fatal(len(rows), err)
	}
	for _, r := range rows[1:] {
		x := column(t, r[0])
		s, err := sample.Summarize(x)
		if err != nil {
			t.Fatal(err)
		}
		if n := int(parse(t, r[1])); s.N != n {
			t.Errorf("%s: n = %d, want %d", r[0], s.N, n)
		}
		need := 9.0
		if r[0] == "NumAcc3" || r[0] == "NumAcc4" {
			need = 8
		}
		for _, c := range []struct {
			name      string
			got, want float64
		}{
			{"mean", s.Mean, parse(t, r[2])},
			{"sd", s.SD, parse(t, r[3])},
			{"lag-1 correlation", s.Lag1, parse(t, r[4])},
			{"mean moving range", s.MeanMovingRange, parse(t, r[8])},
		} {
			if d := digits(c.got, c.want); d < need {
				t.Errorf("%s: %s = %.17g, certified %.15g: %.1f digits", r[0], c.name, c.got, c.want, d)
			}
		}
		var a sample.Accumulator
		for _, v := range x {
			a.Add(v)
		}
		mean, err1 := a.Mean()
		sd, err2 := a.SD()
		if err := errors.Join(err1, err2); err != nil || digits(mean, parse(t, r[2])) < need || digits(sd, parse(t, r[3])) < need-0.3 {
			t.Errorf("%s: one at a time %.17g, %.17g, %v", r[0], mean, sd, err)
		}
	}
}

func TestNormalityAgainstIndependentValues(t *testing.T) {
	t.Parallel()
	raw, err := os.ReadFile("testdata/normality.json")
	if err != nil {
		t.Fatal(err)
	}
	var file struct {
		Cases []struct {
			Data                      string
			X                         []float64
			A2, Adjusted, P, Skewness float64
		}
	}
	if err := json.Unmarshal(raw, &file); err != nil || len(file.Cases) != 7 {
		t.Fatal(err, len(file.Cases))
	}
	for _, c := range file.Cases {
		r, err := sample.AndersonDarling(c.X)
		if err != nil {
			t.Fatal(err)
		}
		skew, err := sample.Skewness(c.X)
		if err != nil {
			t.Fatal(err)
		}
		for _, v := range []struct {
			name      string
			got, want float64
		}{{"A2", r.A2, c.A2}, {"adjusted", r.Adjusted, c.Adjusted}, {"p", r.P, c.P}, {"skewness", skew, c.Skewness}} {
			if math.Abs(v.got-v.want) > 1e-9*math.Max(1e-3, math.Abs(v.want)) {
				t.Errorf("%s: %s = %.12g, want %.12g", c.Data, v.name, v.got, v.want)
			}
		}
	}
}

// Under normality the p value is below 0.05 in about one sample of twenty.
func TestNormalityHoldsItsLevel(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(7, 1))
	rejected := 0
	x := make([]float64, 40)
	const runs = 4000
	for range runs {
		for i := range x {
			x[i] = 12.5 + 0.003*rng.NormFloat64()
		}
		r, err := sample.AndersonDarling(x)
		if err != nil {
			t.Fatal(err)
		}
		if r.P < 0.05 {
			rejected++
		}
	}
	// Four standard errors of 200 expected.
	if rejected < 145 || rejected > 255 {
		t.Errorf("%d of %d normal samples rejected at 5%%", rejected, runs)
	}
	for i := range x {
		x[i] = math.Exp(rng.NormFloat64())
	}
	if r, err := sample.AndersonDarling(x); err != nil || r.P > 1e-3 {
		t.Errorf("a lognormal sample has p = %g, %v", r.P, err)
	}
}

func TestSmallExamples(t *testing.T) {
	t.Parallel()
	s, err := sample.Summarize([]float64{4, 1, 3, 2})
	want := sample.Summary{
		N: 4, Mean: 2.5, SD: math.Sqrt(5.0 / 3), Min: 1, Median: 2.5, Max: 4,
		MeanMovingRange: 2, MedianMovingRange: 2,
		// Deviations 1.5, -1.5, 0.5, -0.5: products -2.25 - 0.75 - 0.25 over 5.
		Lag1: -3.25 / 5,
	}
	if err != nil || s != want {
		t.Errorf("%+v, %v; want %+v", s, err, want)
	}
	s, err = sample.Summarize([]float64{7, 7, 7})
	if err != nil || !s.Constant || s.SD != 0 || s.Lag1 != 0 || s.Skewness != 0 {
		t.Errorf("equal readings: %+v, %v", s, err)
	}
}

func TestShiftScaleAndOrder(t *testing.T) {
	t.Parallel()
	x := column(t, "Lew")
	base, err := sample.Summarize(x)
	if err != nil {
		t.Fatal(err)
	}
	moved := make([]float64, len(x))
	for i, v := range x {
		moved[i] = 1e6 - 4*v // exact
	}
	s, err := sample.Summarize(moved)
	if err != nil || s.SD != 4*base.SD || s.Mean != 1e6-4*base.Mean || s.MedianMovingRange != 4*base.MedianMovingRange ||
		math.Abs(s.Lag1-base.Lag1) > 1e-12 || math.Abs(s.Skewness+base.Skewness) > 1e-12 {
		t.Errorf("shifted and mirrored: %+v, %v; base %+v", s, err, base)
	}
	before := slices.Clone(x)
	slices.Sort(moved)
	sorted, err := sample.Summarize(moved)
	if err != nil || sorted.Median != s.Median || math.Abs(sorted.SD-s.SD) > 1e-9 {
		t.Errorf("order matters where it must not: %+v, %v", sorted, err)
	}
	if _, err := sample.AndersonDarling(x); err != nil || !slices.Equal(x, before) {
		t.Error("the readings were changed")
	}
}

func TestMergedAccumulators(t *testing.T) {
	t.Parallel()
	x := column(t, "Michelso")
	var all, a, b sample.Accumulator
	for i, v := range x {
		all.Add(v)
		if i < 37 {
			a.Add(v)
		} else {
			b.Add(v)
		}
	}
	a.Merge(b)
	a.Merge(sample.Accumulator{})
	if a.N() != all.N() || digits(a.SumOfSquares(), all.SumOfSquares()) < 12 {
		t.Errorf("merged %d, %.17g; together %d, %.17g", a.N(), a.SumOfSquares(), all.N(), all.SumOfSquares())
	}
}

func TestInputIsChecked(t *testing.T) {
	t.Parallel()
	for name, tc := range map[string]struct {
		err  error
		call func() error
	}{
		"no reading": {sample.ErrTooFew, func() error { _, err := sample.Mean(nil); return err }},
		"one":        {sample.ErrTooFew, func() error { _, err := sample.SD([]float64{1}); return err }},
		"NaN":        {sample.ErrNotFinite, func() error { _, err := sample.Summarize([]float64{1, math.NaN()}); return err }},
		"infinite":   {sample.ErrNotFinite, func() error { _, err := sample.Median([]float64{math.Inf(1)}); return err }},
		"huge": {sample.ErrNotFinite, func() error {
			_, err := sample.SD([]float64{-math.MaxFloat64, math.MaxFloat64})
			return err
		}},
		"huge range":  {sample.ErrNotFinite, func() error { _, err := sample.MovingRanges([]float64{-1.7e308, 1.7e308}); return err }},
		"equal, lag":  {sample.ErrZeroSpread, func() error { _, err := sample.Lag1([]float64{2, 2}); return err }},
		"equal, test": {sample.ErrZeroSpread, func() error { _, err := sample.AndersonDarling([]float64{2, 2, 2}); return err }},
		"equal, skew": {sample.ErrZeroSpread, func() error { _, err := sample.Skewness([]float64{2, 2, 2}); return err }},
		"empty sums":  {sample.ErrTooFew, func() error { var a sample.Accumulator; _, err := a.SD(); return err }},
		"empty range": {sample.ErrTooFew, func() error { _, err := sample.Range(nil); return err }},
	} {
		if err := tc.call(); !errors.Is(err, tc.err) {
			t.Errorf("%s: %v, want %v", name, err, tc.err)
		}
	}
}

// Readings of any kind give finite figures or an error.
func FuzzSummarize(f *testing.F) {
	f.Add([]byte{1, 2, 3, 4, 5, 6, 7, 8, 8, 7, 6, 5, 4, 3, 2, 1})
	f.Fuzz(func(t *testing.T, raw []byte) {
		var x []float64
		for len(raw) >= 8 && len(x) < 64 {
			bits := uint64(0)
			for _, b := range raw[:8] {
				bits = bits<<8 | uint64(b)
			}
			x = append(x, math.Float64frombits(bits))
			raw = raw[8:]
		}
		s, err := sample.Summarize(x)
		figures := []float64{s.Mean, s.SD, s.Min, s.Median, s.Max, s.MeanMovingRange, s.MedianMovingRange, s.Lag1, s.Skewness}
		if r, e := sample.AndersonDarling(x); e == nil {
			figures = append(figures, r.A2, r.Adjusted, r.P)
			if r.P < 0 || r.P > 1 {
				t.Errorf("p = %g of %v", r.P, x)
			}
		}
		if err == nil && (s.Median < s.Min || s.Median > s.Max || s.SD < 0) {
			t.Errorf("%v: %+v", x, s)
		}
		for _, v := range figures {
			if math.IsNaN(v) || math.IsInf(v, 0) {
				t.Errorf("%v: %+v, %v", x, s, err)
			}
		}
	})
}

func BenchmarkSummarize(b *testing.B) {
	rng := rand.New(rand.NewPCG(1, 2))
	x := make([]float64, 100_000)
	for i := range x {
		x[i] = rng.NormFloat64()
	}
	for b.Loop() {
		if _, err := sample.Summarize(x); err != nil {
			b.Fatal(err)
		}
	}
}
