package adjust_test

import (
	_ "embed"
	"encoding/json"
	"errors"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"holdfast/internal/spc/adjust"
	"holdfast/internal/spc/changepoint"
)

// Closed forms and worked rows from Deming, Out of the Crisis (1986), Box and
// Luceño, Statistical Control by Monitoring and Feedback Adjustment (1997), and
// Grubbs (1954), confirmed outside this code by simulation.
//
//go:embed testdata/adjust.json
var referenceJSON []byte

type workedSetup struct {
	Ratio float64 `json:"sigma2_over_setup_variance"`
	Rows  []struct {
		Measured   float64
		Adjustment float64
	}
}

type reference struct {
	Funnel struct {
		Cases []struct {
			Rule, T int
			Ratio   float64 `json:"variance_ratio"`
		}
		Lag1 struct{ Exact float64 } `json:"rule_2_lag1_autocorrelation"`
	}
	White struct {
		Cases []struct {
			G     float64
			Ratio float64 `json:"variance_ratio"`
		}
	} `json:"integral_white_noise"`
	IMA struct {
		Cases []struct {
			Theta, G float64
			Ratio    float64 `json:"variance_ratio"`
		}
	} `json:"integral_ima"`
	Grubbs struct {
		Variance []struct {
			Adjustments int
			Ratio       float64 `json:"offset_variance_over_sigma2"`
		} `json:"offset_variance"`
		Extended []struct {
			Setup       float64 `json:"sigma2_over_setup_variance"`
			Adjustments int
			Coefficient float64
			Ratio       float64 `json:"offset_variance_over_sigma2"`
		}
		Harmonic workedSetup `json:"worked_harmonic"`
		Worked   workedSetup `json:"worked_extended"`
	}
}

func load(t *testing.T) (r reference) {
	t.Helper()
	if err := json.Unmarshal(referenceJSON, &r); err != nil {
		t.Fatal(err)
	}
	return r
}

func near(got, want, tol float64) bool {
	return math.Abs(got-want) <= tol*math.Max(1, math.Abs(want))
}

func TestHarmonicReference(t *testing.T) {
	t.Parallel()
	g := load(t).Grubbs
	for _, w := range []workedSetup{g.Harmonic, g.Worked} {
		var y []float64
		for _, row := range w.Rows {
			y = append(y, row.Measured)
		}
		got, err := adjust.Harmonic(y, 0, w.Ratio)
		if err != nil || len(got) != 8 {
			t.Fatalf("%d adjustments, %v", len(got), err)
		}
		for i, row := range w.Rows {
			if !near(got[i], row.Adjustment, 1e-8) {
				t.Errorf("ratio %g, try %d: %.10g, want %.10g", w.Ratio, i+1, got[i], row.Adjustment)
			}
		}
	}
	for _, e := range g.Extended {
		y := make([]float64, e.Adjustments)
		y[e.Adjustments-1] = -3
		got, err := adjust.Harmonic(y, -2, e.Setup)
		if err != nil || !near(got[e.Adjustments-1], e.Coefficient, 1e-9) {
			t.Errorf("ratio %g, try %d: %v, %v, want %g", e.Setup, e.Adjustments, got, err, e.Coefficient)
		}
	}
}

// After n harmonic adjustments the offset has the variance sigma²/n, whatever
// the machine started at (Grubbs 1954).
func TestHarmonicOffsetVariance(t *testing.T) {
	t.Parallel()
	const runs = 20000
	for _, c := range load(t).Grubbs.Variance {
		rng := rand.New(rand.NewPCG(5, uint64(c.Adjustments)))
		var sum float64
		for range runs {
			offset, y := 25.0, []float64{}
			for range c.Adjustments {
				y = append(y, 100+offset+rng.NormFloat64())
				a, err := adjust.Harmonic(y, 100, 0)
				if err != nil {
					t.Fatal(err)
				}
				offset += a[len(a)-1]
			}
			sum += offset * offset
		}
		if se := c.Ratio * math.Sqrt(2.0/runs); math.Abs(sum/runs-c.Ratio) > 4*se {
			t.Errorf("%d adjustments: offset variance %.4f, want %.4f ± %.4f", c.Adjustments, sum/runs, c.Ratio, se)
		}
	}
}

func TestAdviceLeavesNoiseAlone(t *testing.T) {
	t.Parallel()
	for _, tc := range []struct {
		name   string
		means  []float64
		sizes  []int
		sigma  float64
		step   float64
		adjust float64
		low    float64
		high   float64
	}{
		// By hand: d ± 1.959964 sigma/sqrt(n).
		{"interval holds zero", []float64{10.1, 9.95}, nil, 0.1, 0.01, 0, 0.025 - 0.1385904, 0.025 + 0.1385904},
		{"clear offset", []float64{10.3, 10.24}, nil, 0.1, 0.05, -0.25, 0.27 - 0.1385904, 0.27 + 0.1385904},
		{"half a step goes away from zero", []float64{10.25}, nil, 0.1, 0.1, -0.3, 0.25 - 0.1959964, 0.25 + 0.1959964},
		{"half a step below", []float64{9.75}, nil, 0.1, 0.1, 0.3, -0.25 - 0.1959964, -0.25 + 0.1959964},
		{"less than half a step", []float64{10.25}, nil, 0.1, 1, 0, 0.25 - 0.1959964, 0.25 + 0.1959964},
		{"no step", []float64{10.25}, nil, 0.1, 0, -0.25, 0.25 - 0.1959964, 0.25 + 0.1959964},
		{"weighted", []float64{10.4, 10.0}, []int{3, 1}, 0.2, 0.1, -0.3, 0.3 - 0.1959964, 0.3 + 0.1959964},
	} {
		a, err := adjust.Advise(tc.means, tc.sizes, 10, tc.sigma, tc.step)
		if err != nil || !near(a.Adjust, tc.adjust, 1e-9) || !near(a.Low, tc.low, 1e-6) || !near(a.High, tc.high, 1e-6) {
			t.Errorf("%s: %+v, %v; want %+v", tc.name, a, err, tc)
		}
		if math.Signbit(a.Adjust) && a.Adjust == 0 {
			t.Errorf("%s: adjust is minus zero", tc.name)
		}
	}
}

func TestAdviceAtSignalUsesTheChangePoint(t *testing.T) {
	t.Parallel()
	means, sizes := []float64{0.2, -0.1, 0, 1.4, 1.9, 1.6}, []int{4, 4, 4, 4, 2, 4}
	e, err := changepoint.Location(means, sizes, 0, 1)
	if err != nil {
		t.Fatal(err)
	}
	a, err := adjust.AdviseAtSignal(means, sizes, 0, 1, 0.5, 0.1)
	if err != nil || e.After != 2 || !near(a.Offset, e.Level-0.5, 1e-12) ||
		!near(a.High-a.Low, 2*1.959963984540054*e.SizeSE, 1e-12) {
		t.Errorf("%+v, %v; change point %+v", a, err, e)
	}
}

func TestAdjustRefusesBadInput(t *testing.T) {
	t.Parallel()
	nan, one := math.NaN(), []float64{1}
	two := []float64{1, 2}
	review := func(y []float64, target float64, a []adjust.Adjustment, zero []int) error {
		_, err := adjust.Review(y, target, a, zero, 1)
		return err
	}
	advise := func(m []float64, n []int, target, sigma, step float64) error {
		_, err := adjust.Advise(m, n, target, sigma, step)
		return err
	}
	harmonic := func(y []float64, target, ratio float64) error {
		_, err := adjust.Harmonic(y, target, ratio)
		return err
	}
	ppk := func(s adjust.Stretch, c []float64, lo, up float64) error {
		_, _, err := adjust.Ppk(s, c, lo, up)
		return err
	}
	s := adjust.Stretch{Means: two, Variances: two, Sizes: []int{2, 2}}
	for name, err := range map[string]error{
		"another round":  advise(nil, nil, 0, 1, 0),
		"target":         advise(one, nil, nan, 1, 0),
		"sigma":          advise(one, nil, 0, 0, 0),
		"step":           advise(one, nil, 0, 1, -1),
		"sizes":          advise(one, []int{1, 2}, 0, 1, 0),
		"size 0":         advise(one, []int{0}, 0, 1, 0),
		"mean 0":         advise([]float64{nan}, nil, 0, 1, 0),
		"y is empty":     harmonic(nil, 0, 0),
		"ratio":          harmonic(one, 0, -1),
		"try 0":          harmonic([]float64{nan}, 0, 0),
		"at least 2":     review(one, 0, nil, nil),
		"value 1":        review([]float64{1, nan}, 0, nil, nil),
		"adjustment 0":   review(two, 0, []adjust.Adjustment{{Before: 3}}, nil),
		"zero point 0":   review(two, 0, nil, []int{-1}),
		"does not vary":  review([]float64{2, 2}, 0, nil, nil),
		"size of adj":    review(two, 0, []adjust.Adjustment{{Size: nan}}, nil),
		"one entry":      ppk(s, one, 0, 1),
		"specification":  ppk(s, two, 1, 1),
		"do not vary":    ppk(adjust.Stretch{Means: two, Variances: []float64{0, 0}, Sizes: []int{1, 1}}, two, 0, math.Inf(1)),
		"carried sum 0":  ppk(s, []float64{nan, 0}, 0, 1),
		"a lower or an ": ppk(s, two, math.Inf(-1), math.Inf(1)),
	} {
		if !errors.Is(err, adjust.ErrInput) || !strings.Contains(err.Error(), name) {
			t.Errorf("%s: error %v", name, err)
		}
	}
}

// The index put together from subgroup summaries must be the one of the single
// readings, as they are and with the carried sums taken off.
func TestPpkFromSummariesEqualsPpkOfReadings(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(8, 1))
	var s adjust.Stretch
	var carried, raw, undone []float64
	for i := range 30 {
		n := 1 + i%5
		u := float64(i%3) - 0.7
		var x []float64
		for range n {
			x = append(x, 50+rng.NormFloat64())
			raw, undone = append(raw, x[len(x)-1]), append(undone, x[len(x)-1]-u)
		}
		mean, ss := meanSquares(x)
		s.Means, s.Sizes = append(s.Means, mean), append(s.Sizes, n)
		s.Variances = append(s.Variances, ss/math.Max(1, float64(n-1)))
		carried = append(carried, u)
	}
	index := func(x []float64) float64 {
		mean, ss := meanSquares(x)
		return math.Min(55-mean, mean-46) / 3 / math.Sqrt(ss/float64(len(x)-1))
	}
	actual, without, err := adjust.Ppk(s, carried, 46, 55)
	if err != nil || !near(actual, index(raw), 1e-12) || !near(without, index(undone), 1e-12) {
		t.Errorf("%g and %g, %v; want %g and %g", actual, without, err, index(raw), index(undone))
	}
	one, _, err := adjust.Ppk(s, carried, math.Inf(-1), 55)
	if mean, ss := meanSquares(raw); err != nil || !near(one, (55-mean)/3/math.Sqrt(ss/float64(len(raw)-1)), 1e-12) {
		t.Errorf("upper side alone: %g, %v", one, err)
	}
}

func meanSquares(x []float64) (mean, ss float64) {
	for _, v := range x {
		mean += v / float64(len(x))
	}
	for _, v := range x {
		ss += (v - mean) * (v - mean)
	}
	return mean, ss
}

func FuzzAdjust(f *testing.F) {
	f.Add([]byte{1, 2, 3, 250}, 1.0, 0.5, -0.25, 2, 1)
	f.Add([]byte{7, 7}, 7.0, 0.0, 1e300, 1, 0)
	f.Fuzz(func(t *testing.T, data []byte, target, scale, size float64, before, zero int) {
		y := make([]float64, 0, 256)
		for _, b := range data[:min(len(data), 256)] {
			y = append(y, scale*float64(int(b)-128))
		}
		finite := func(vs ...float64) {
			t.Helper()
			for _, v := range vs {
				if math.IsNaN(v) || math.IsInf(v, 0) {
					t.Fatalf("not finite without an error: %v", vs)
				}
			}
		}
		if a, err := adjust.Advise(y, nil, target, scale, math.Abs(size)); err == nil {
			finite(a.Adjust, a.Offset, a.Low, a.High)
		}
		if a, err := adjust.AdviseAtSignal(y, nil, target, scale, target, 0); err == nil {
			finite(a.Adjust, a.Offset, a.Low, a.High)
		}
		if h, err := adjust.Harmonic(y, target, math.Abs(size)); err == nil {
			finite(h...)
		}
		a, err := adjust.Review(y, target, []adjust.Adjustment{
			{Before: before, Size: size}, {Before: 0, Size: -size, Prompted: true}, {Before: len(y), Size: size},
		}, []int{zero}, 1)
		if err == nil {
			finite(slices.Concat(a.Gains, a.Carried, []float64{a.Prompted, a.Unprompted, a.Ratio, a.Low, a.High, a.Lag1})...)
		}
	})
}
