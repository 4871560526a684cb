package changepoint_test

import (
	_ "embed"
	"encoding/json"
	"errors"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"holdfast/internal/spc/changepoint"
)

// The reference series were evaluated exhaustively outside this code by the
// formula of Samuel, Pignatiello and Calvin (1998), Quality Engineering 10; the
// series of case D is recalled from Montgomery, Introduction to Statistical
// Quality Control, chapter on CUSUM and EWMA charts.
//
//go:embed testdata/changepoint.json
var referenceJSON []byte

type knownMean struct {
	T          int
	Before     int       `json:"tau_hat_last_in_control"` // counted from 1
	Profile    []float64 `json:"profile"`
	MeanAfter  float64   `json:"mean_after"`
	Likelihood float64   `json:"loglik_ratio"`
	RateAfter  float64   `json:"rate_after"`
	PAfter     float64   `json:"p_after"`
}

type referenceCase struct {
	Name         string
	X            []float64
	Mu0          float64
	Sigma        *float64
	Counts, D    []float64
	C0, P0, N    float64
	KnownMean    *knownMean `json:"known_mean"`
	Signal45     *knownMean `json:"known_mean_signal_at_45"`
	Signal29     *knownMean `json:"known_mean_signal_at_29"`
	KnownRate    *knownMean `json:"known_rate"`
	KnownP       *knownMean `json:"known_p"`
	VarianceOnly *struct {
		Before   int     `json:"tau_hat"`
		Ratio    float64 `json:"lr"`
		SDBefore float64 `json:"sd_before"`
		SDAfter  float64 `json:"sd_after"`
	} `json:"variance_only_mean_0_known"`
}

func reference(t *testing.T) []referenceCase {
	t.Helper()
	var file struct{ Cases []referenceCase }
	if err := json.Unmarshal(referenceJSON, &file); err != nil {
		t.Fatal(err)
	}
	return file.Cases
}

func near(got, want, tol float64) bool {
	return math.Abs(got-want) <= tol*math.Max(1, math.Abs(want))
}

func TestLocationReference(t *testing.T) {
	t.Parallel()
	checked := 0
	for _, c := range reference(t) {
		for _, k := range []*knownMean{c.KnownMean, c.Signal45, c.Signal29} {
			if k == nil {
				continue
			}
			checked++
			sigma := 1.0
			if c.Sigma != nil {
				sigma = *c.Sigma
			}
			e, err := changepoint.Location(c.X[:k.T], nil, c.Mu0, sigma)
			if err != nil {
				t.Fatal(err)
			}
			// The file counts from 1 and does not divide by sigma².
			want := k.Profile[k.Before] / (sigma * sigma)
			if e.After != k.Before-1 || !near(e.Level, k.MeanAfter, 1e-9) || !near(e.Statistic, want, 1e-9) {
				t.Errorf("%s, signal at %d: %+v; want after %d, level %g, statistic %g",
					c.Name, k.T, e, k.Before-1, k.MeanAfter, want)
			}
			var likely []int
			for i, p := range k.Profile {
				if (slices.Max(k.Profile)-p)/(sigma*sigma) <= 7.35 {
					likely = append(likely, i-1)
				}
			}
			if !slices.Equal(e.Likely, likely) {
				t.Errorf("%s: likely %v, want %v", c.Name, e.Likely, likely)
			}
			if se := sigma / math.Sqrt(float64(k.T-k.Before)); !near(e.SizeSE, se, 1e-12) {
				t.Errorf("%s: standard error %g, want %g", c.Name, e.SizeSE, se)
			}
		}
	}
	if checked != 5 {
		t.Errorf("%d reference stretches checked, want 5", checked)
	}
}

func TestCountsReference(t *testing.T) {
	t.Parallel()
	checked := 0
	for _, c := range reference(t) {
		var e changepoint.Estimate
		var err error
		var k *knownMean
		var level, known float64
		switch {
		case c.KnownRate != nil:
			k, level, known = c.KnownRate, c.KnownRate.RateAfter, c.C0
			e, err = changepoint.Poisson(c.Counts, nil, c.C0)
		case c.KnownP != nil:
			k, level, known = c.KnownP, c.KnownP.PAfter, c.P0
			e, err = changepoint.Binomial(c.D, slices.Repeat([]float64{c.N}, len(c.D)), c.P0)
		default:
			continue
		}
		checked++
		// The file gives the log likelihood ratio, the statistic is twice that.
		if err != nil || e.After != k.Before-1 || !near(e.Level, level, 1e-9) ||
			!near(e.Size, level-known, 1e-9) || !near(e.Statistic, 2*k.Likelihood, 1e-9) {
			t.Errorf("%s: %+v, %v; want %+v", c.Name, e, err, *k)
		}
	}
	if checked != 2 {
		t.Errorf("%d count series checked, want 2", checked)
	}
}

// With the spread before the change taken as known, the estimate must find the
// change of case C and its spread after.
func TestDispersionReference(t *testing.T) {
	t.Parallel()
	checked := 0
	for _, c := range reference(t) {
		if c.VarianceOnly == nil {
			continue
		}
		checked++
		squares, ones := make([]float64, len(c.X)), make([]int, len(c.X))
		for i, x := range c.X {
			squares[i], ones[i] = x*x, 1
		}
		e, err := changepoint.Dispersion(squares, ones, c.VarianceOnly.SDBefore, 0)
		if err != nil || e.After != c.VarianceOnly.Before-1 || !near(e.Level, c.VarianceOnly.SDAfter, 1e-9) {
			t.Errorf("%s: %+v, %v; want after %d, sd %g", c.Name, e, err,
				c.VarianceOnly.Before-1, c.VarianceOnly.SDAfter)
		}
		nu := float64(len(c.X) - c.VarianceOnly.Before)
		r := c.VarianceOnly.SDAfter / c.VarianceOnly.SDBefore
		if want := nu * (r*r - 1 - 2*math.Log(r)); !near(e.Statistic, want, 1e-9) {
			t.Errorf("%s: statistic %g, want %g", c.Name, e.Statistic, want)
		}
	}
	if checked != 1 {
		t.Errorf("%d dispersion series checked, want 1", checked)
	}
}

// bruteForce evaluates every moment of change afresh from a likelihood written
// out observation by observation.
func bruteForce(m int, statistic func(first int) float64) (after int, likely []int, best float64) {
	values := make([]float64, m)
	for i := range values {
		values[i] = statistic(i)
	}
	best = slices.Max(values)
	for i, v := range values {
		if best-v <= changepoint.LikelyCut {
			likely = append(likely, i-1)
		}
	}
	return slices.Index(values, best) - 1, likely, best
}

func TestBruteForceAgrees(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(7, 11))
	agree := func(kind string, m int, e changepoint.Estimate, err error, statistic func(int) float64) {
		t.Helper()
		after, likely, best := bruteForce(m, statistic)
		if err != nil || e.After != after || !slices.Equal(e.Likely, likely) || !near(e.Statistic, best, 1e-9) {
			t.Errorf("%s: %+v, %v; brute force %d %v %g", kind, e, err, after, likely, best)
		}
	}
	for range 200 {
		m := 1 + rng.IntN(60)
		from := rng.IntN(m)
		x, vars := make([]float64, m), make([]float64, m)
		poisson, binomial, units := make([]float64, m), make([]float64, m), make([]float64, m)
		sizes, df := make([]int, m), make([]int, m)
		for i := range m {
			shift := 0.0
			if i >= from {
				shift = 0.8
			}
			sizes[i], df[i] = 1+rng.IntN(6), 1+rng.IntN(5)
			units[i] = float64(20 + rng.IntN(200))
			x[i] = 10 + 0.5*(shift+rng.NormFloat64())
			vars[i] = 0.25 * math.Exp(shift+rng.NormFloat64())
			for range int(units[i]) {
				if rng.Float64() < 0.03*(1+shift) {
					binomial[i]++
				}
			}
			poisson[i] = binomial[i]
		}

		e, err := changepoint.Location(x, sizes, 10, 0.5)
		agree("location", m, e, err, func(first int) float64 {
			var w, mean float64
			for i := first; i < m; i++ {
				w += float64(sizes[i])
				mean += float64(sizes[i]) * x[i]
			}
			mean /= w
			// Twice the log likelihood ratio of normal means, term by term.
			var lr float64
			for i := first; i < m; i++ {
				lr += float64(sizes[i]) * ((x[i]-10)*(x[i]-10) - (x[i]-mean)*(x[i]-mean)) / 0.25
			}
			return lr
		})

		e, err = changepoint.Dispersion(vars, df, 0.5, 0)
		agree("dispersion", m, e, err, func(first int) float64 {
			var nu, ss float64
			for i := first; i < m; i++ {
				nu += float64(df[i])
				ss += float64(df[i]) * vars[i]
			}
			var lr float64
			for i := first; i < m; i++ {
				d := float64(df[i])
				lr += d*vars[i]/0.25 + d*math.Log(0.25) - d*vars[i]/(ss/nu) - d*math.Log(ss/nu)
			}
			return lr
		})

		xlog := func(k, p float64) float64 {
			if k == 0 {
				return 0
			}
			return k * math.Log(p)
		}
		e, err = changepoint.Poisson(poisson, units, 0.03)
		agree("poisson", m, e, err, func(first int) float64 {
			var d, s float64
			for i := first; i < m; i++ {
				d += poisson[i]
				s += units[i]
			}
			var lr float64
			for i := first; i < m; i++ {
				lr += 2 * (xlog(poisson[i], d/s*units[i]) - d/s*units[i] -
					xlog(poisson[i], 0.03*units[i]) + 0.03*units[i])
			}
			return lr
		})

		e, err = changepoint.Binomial(binomial, units, 0.03)
		agree("binomial", m, e, err, func(first int) float64 {
			var d, s float64
			for i := first; i < m; i++ {
				d += binomial[i]
				s += units[i]
			}
			var lr float64
			for i := first; i < m; i++ {
				lr += 2 * (xlog(binomial[i], d/s) + xlog(units[i]-binomial[i], 1-d/s) -
					xlog(binomial[i], 0.03) - xlog(units[i]-binomial[i], 0.97))
			}
			return lr
		})
	}
}

func TestEarliestOfEqualMaxima(t *testing.T) {
	t.Parallel()
	// (2+0+0+2)²/4 = 2² : the first and the last moment are equally likely,
	// which rounding must not hide at another centre and scale.
	for _, s := range []struct{ center, sigma float64 }{{0, 1}, {10, 0.1}, {-3.3, 0.7}, {1e6, 0.01}} {
		x := []float64{s.center + 2*s.sigma, s.center, s.center, s.center + 2*s.sigma}
		e, err := changepoint.Location(x, nil, s.center, s.sigma)
		if err != nil || e.After != -1 {
			t.Errorf("center %g, sigma %g: after %d, %v; want -1", s.center, s.sigma, e.After, err)
		}
	}
}

func TestShiftScaleAndMirrorIdentities(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(3, 1))
	x, moved, mirrored := make([]float64, 40), make([]float64, 40), make([]float64, 40)
	for i := range x {
		x[i] = rng.NormFloat64()
		if i > 25 {
			x[i]++
		}
		moved[i], mirrored[i] = 100+4*x[i], -x[i]
	}
	a, _ := changepoint.Location(x, nil, 0, 1)
	b, _ := changepoint.Location(moved, nil, 100, 4)
	c, _ := changepoint.Location(mirrored, nil, 0, 1)
	if a.After != b.After || !near(4*a.Size, b.Size, 1e-12) || !near(a.Statistic, b.Statistic, 1e-12) {
		t.Errorf("moved and scaled: %+v and %+v", a, b)
	}
	if a.After != c.After || a.Size != -c.Size || !slices.Equal(a.Likely, c.Likely) {
		t.Errorf("mirrored: %+v and %+v", a, c)
	}
	// Equal sizes weigh like no sizes with the sigma of a mean.
	d, _ := changepoint.Location(x, slices.Repeat([]int{4}, len(x)), 0, 2)
	if a.After != d.After || !near(a.Statistic, d.Statistic, 1e-12) || !near(a.SizeSE, d.SizeSE, 1e-12) {
		t.Errorf("equal sizes: %+v and %+v", a, d)
	}
}

func TestDispersionWithReadingsAllEqual(t *testing.T) {
	t.Parallel()
	vars := []float64{1, 1, 1, 1, 0, 0, 0, 0}
	df := slices.Repeat([]int{2}, len(vars))
	e, err := changepoint.Dispersion(vars, df, 1, 0.1)
	if err != nil || e.After != 3 {
		t.Errorf("known resolution: %+v, %v; want after 3", e, err)
	}
	if e, err = changepoint.Dispersion(vars, df, 1, 0); err != nil || e.After > 3 {
		t.Errorf("unknown resolution: %+v, %v", e, err)
	}
	if _, err = changepoint.Dispersion(vars[4:], df[4:], 1, 0); !errors.Is(err, changepoint.ErrInput) {
		t.Errorf("no spread at all: error %v", err)
	}
	// Subgroups of one carry no spread and are passed over.
	e, err = changepoint.Dispersion([]float64{1, 1, 9, 0, 9}, []int{4, 4, 4, 0, 4}, 1, 0)
	if err != nil || e.After != 1 || slices.Contains(e.Likely, 2) || !near(e.Size, 3, 1e-12) {
		t.Errorf("subgroup of one: %+v, %v", e, err)
	}
}

func TestChangepointRefusesBadInput(t *testing.T) {
	t.Parallel()
	nan, one := math.NaN(), []float64{1}
	for name, call := range map[string]func() (changepoint.Estimate, error){
		"empty":    func() (changepoint.Estimate, error) { return changepoint.Location(nil, nil, 0, 1) },
		"sigma":    func() (changepoint.Estimate, error) { return changepoint.Location(one, nil, 0, 0) },
		"center":   func() (changepoint.Estimate, error) { return changepoint.Location(one, nil, nan, 1) },
		"mean 0":   func() (changepoint.Estimate, error) { return changepoint.Location([]float64{nan}, nil, 0, 1) },
		"sizes":    func() (changepoint.Estimate, error) { return changepoint.Location(one, []int{1, 2}, 0, 1) },
		"size 0":   func() (changepoint.Estimate, error) { return changepoint.Location(one, []int{0}, 0, 1) },
		"far":      func() (changepoint.Estimate, error) { return changepoint.Location(one, nil, 0, 1e-300) },
		"count 0":  func() (changepoint.Estimate, error) { return changepoint.Poisson([]float64{1.5}, nil, 1) },
		"above":    func() (changepoint.Estimate, error) { return changepoint.Poisson(one, nil, 0) },
		"between":  func() (changepoint.Estimate, error) { return changepoint.Binomial(one, nil, 1) },
		"larger":   func() (changepoint.Estimate, error) { return changepoint.Binomial([]float64{3}, one, 0.5) },
		"whole":    func() (changepoint.Estimate, error) { return changepoint.Binomial(one, []float64{1.5}, 0.5) },
		"negative": func() (changepoint.Estimate, error) { return changepoint.Dispersion([]float64{-1}, []int{1}, 1, 0) },
		"degrees":  func() (changepoint.Estimate, error) { return changepoint.Dispersion(one, []int{-1}, 1, 0) },
		"resolution": func() (changepoint.Estimate, error) {
			return changepoint.Dispersion(one, []int{1}, 1, nan)
		},
	} {
		_, err := call()
		if !errors.Is(err, changepoint.ErrInput) || !strings.Contains(err.Error(), name) {
			t.Errorf("%s: error %v", name, err)
		}
	}
}
