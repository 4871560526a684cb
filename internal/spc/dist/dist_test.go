package dist_test

import (
	"encoding/json"
	"errors"
	"math"
	"os"
	"testing"

	"gonum.org/v1/gonum/stat/distuv"

	"holdfast/internal/spc/dist"
)

func must(t testing.TB) func(float64, error) float64 {
	return func(x float64, err error) float64 {
		t.Helper()
		if err != nil {
			t.Fatal(err)
		}
		return x
	}
}

// near reports whether got is within a relative tolerance of want.
func near(got, want, tol float64) bool {
	return math.Abs(got-want) <= tol*math.Abs(want)
}

func TestPublishedValues(t *testing.T) {
	t.Parallel()
	v := must(t)
	const handbook = "NIST/SEMATECH e-Handbook of Statistical Methods"
	for _, tc := range []struct {
		name      string
		got       float64
		want, tol float64 // tol absolute
		source    string
	}{
		{"t 0.975, 9", v(dist.TQuantile(0.975, 9)), 2.262, 5e-4, handbook + " 7.2.2, printed to 3 places, critical value from memory"},
		{"t 0.975, 9", v(dist.TQuantile(0.975, 9)), 2.2621571627982, 2e-13, "25-digit quadrature of the density"},
		{"t 0.975, 194", v(dist.TQuantile(0.975, 194)), 1.97226753258, 5e-12, handbook + " 1.3.5.2, recomputed independently"},
		{"p of t 1.78176801043, 9", 2 * v(dist.TSurvival(1.78176801043, 9)), 0.108472908783, 2e-11, handbook + " 7.2.2, recomputed independently"},
		{"chi-square 0.95, 9", v(dist.ChiSquareQuantile(0.95, 9)), 16.92, 5e-3, handbook + " 7.2.3, printed to 2 places"},
		{"chi-square 0.95, 9", v(dist.ChiSquareQuantile(0.95, 9)), 16.9189776046, 5e-11, handbook + " 7.2.3, recomputed independently"},
		{"p of chi-square 17.564481, 9", v(dist.ChiSquareSurvival(17.564481, 9)), 0.0405760235757, 5e-13, handbook + " 7.2.3, recomputed independently"},
		{"p of F 9.59110703644, 2, 12", v(dist.FSurvival(9.59110703644, 2, 12)), 0.00324822260086, 2e-13, handbook + " 7.4.3.3, recomputed independently"},
		{"tolerance factor, n 43, 0.90, 0.99", v(dist.NoncentralTQuantile(0.99, 42, v(dist.NormalQuantile(0.9))*math.Sqrt(43))) / math.Sqrt(43), 1.87395360585, 5e-11, handbook + " 7.2.6.3, exact one-sided factor, recomputed independently"},
		{"normal 0.99865", v(dist.NormalUpperQuantile(0.00134989803163)), 3, 1e-10, "definition of the 3-sigma tail"},
		{"normal tail at 9", v(dist.NormalSurvival(9)), 1.1285884059538406e-19, 1e-32, "Abramowitz and Stegun table 26.2, from memory to full precision"},
		{"noncentral t, 9, 40, at 40", v(dist.NoncentralTCDF(40, 9, 40)), 0.4378, 5e-5, "independent integration, 4 places"},
	} {
		if !(math.Abs(tc.got-tc.want) <= tc.tol) {
			t.Errorf("%s = %.14g, want %.14g ± %g (%s)", tc.name, tc.got, tc.want, tc.tol, tc.source)
		}
	}
}

func TestClosedForms(t *testing.T) {
	t.Parallel()
	v := must(t)
	for _, x := range []float64{1e-9, 0.003, 0.4, 1, 2.5, 9, 40, 300} {
		for _, c := range []struct {
			name      string
			got, want float64
		}{
			{"Cauchy", v(dist.TSurvival(x, 1)), math.Atan2(1, x) / math.Pi},
			{"t with 2", v(dist.TSurvival(x, 2)), 1 / (2 + x*x + x*math.Sqrt(2+x*x))},
			{"exponential", v(dist.ChiSquareSurvival(x, 2)), math.Exp(-x / 2)},
			{"exponential, lower", v(dist.ChiSquareCDF(x, 2)), -math.Expm1(-x / 2)},
			{"chi-square 1", v(dist.ChiSquareSurvival(x, 1)), math.Erfc(math.Sqrt(x / 2))},
			{"chi-square 4", v(dist.ChiSquareSurvival(x, 4)), math.Exp(-x/2) * (1 + x/2)},
			{"F 2, 2", v(dist.FSurvival(x, 2, 2)), 1 / (1 + x)},
			{"F 2, 10", v(dist.FSurvival(x, 2, 10)), math.Pow(1+x/5, -5)},
			{"gamma, scale", v(dist.GammaSurvival(x, 1, 7)), math.Exp(-x / 7)},
			{"Poisson 0", v(dist.PoissonCDF(0, x)), math.Exp(-x)},
			{"Poisson above 0", v(dist.PoissonSurvival(0, x)), -math.Expm1(-x)},
		} {
			if !near(c.got, c.want, 2e-13) {
				t.Errorf("%s at %g = %.16g, want %.16g", c.name, x, c.got, c.want)
			}
		}
	}
	for _, p := range []float64{1e-12, 0.02, 0.5, 0.9} {
		for _, c := range []struct {
			name      string
			got, want float64
		}{
			{"no event in 40", v(dist.BinomialCDF(0, 40, p)), math.Exp(40 * math.Log1p(-p))},
			{"at least one in 40", v(dist.BinomialSurvival(0, 40, p)), -math.Expm1(40 * math.Log1p(-p))},
			{"beta 1, 5", v(dist.BetaCDF(p, 1, 5)), -math.Expm1(5 * math.Log1p(-p))},
			{"beta 3, 1", v(dist.BetaCDF(p, 3, 1)), p * p * p},
		} {
			if !near(c.got, c.want, 2e-13) {
				t.Errorf("%s, %g = %.16g, want %.16g", c.name, p, c.got, c.want)
			}
		}
	}
}

// Where a general-purpose library is sound, two implementations agree.
func TestAgainstGeneralPurposeLibrary(t *testing.T) {
	t.Parallel()
	v := must(t)
	for _, nu := range []float64{1, 3, 7.5, 30, 200} {
		for _, x := range []float64{0.1, 0.9, 2.2, 6} {
			for _, c := range []struct {
				name      string
				got, want float64
			}{
				{"t", v(dist.TCDF(-x, nu)), distuv.StudentsT{Mu: 0, Sigma: 1, Nu: nu}.CDF(-x)},
				{"chi-square", v(dist.ChiSquareCDF(x*nu, nu)), distuv.ChiSquared{K: nu}.CDF(x * nu)},
				{"F", v(dist.FCDF(x, nu, 11)), distuv.F{D1: nu, D2: 11}.CDF(x)},
				{"gamma", v(dist.GammaCDF(x*nu, nu, 1.5)), distuv.Gamma{Alpha: nu, Beta: 1 / 1.5}.CDF(x * nu)},
				{"beta", v(dist.BetaCDF(x/10, nu, 4)), distuv.Beta{Alpha: nu, Beta: 4}.CDF(x / 10)},
			} {
				if !near(c.got, c.want, 1e-10) {
					t.Errorf("%s(%g; %g) = %.14g, library %.14g", c.name, x, nu, c.got, c.want)
				}
			}
		}
	}
	for _, n := range []int{1, 12, 300} {
		for _, p := range []float64{0.01, 0.3, 0.95} {
			for k := 0; k < n; k += 1 + n/9 {
				want := distuv.Binomial{N: float64(n), P: p}
				if got := v(dist.BinomialCDF(k, n, p)); !near(got, want.CDF(float64(k)), 1e-9) && want.CDF(float64(k)) > 1e-12 {
					t.Errorf("BinomialCDF(%d, %d, %g) = %.14g, library %.14g", k, n, p, got, want.CDF(float64(k)))
				}
				if got := v(dist.BinomialPMF(k, n, p)); !near(got, want.Prob(float64(k)), 1e-9) {
					t.Errorf("BinomialPMF(%d, %d, %g) = %.14g, library %.14g", k, n, p, got, want.Prob(float64(k)))
				}
			}
		}
	}
}

func TestAcceptanceProbabilities(t *testing.T) {
	t.Parallel()
	v := must(t)
	var file struct {
		Cases []struct {
			C  int
			OC []struct {
				P, Binomial, Poisson float64
				// Absent where N·p is not whole.
				Hypergeometric *float64
				Defectives     *int `json:"defectives_in_lot"`
			}
		}
	}
	// Keys N (lot) and n (sample) differ in case only, so they are read by hand.
	raw, err := os.ReadFile("testdata/oc.json")
	if err != nil {
		t.Fatal(err)
	}
	var loose struct{ Cases []map[string]json.RawMessage }
	if err := errors.Join(json.Unmarshal(raw, &loose), json.Unmarshal(raw, &file)); err != nil {
		t.Fatal(err)
	}
	checked := 0
	for i, c := range file.Cases {
		var lot, n int
		if err := errors.Join(json.Unmarshal(loose.Cases[i]["N"], &lot), json.Unmarshal(loose.Cases[i]["n"], &n)); err != nil {
			t.Fatal(err)
		}
		for _, row := range c.OC {
			type model struct {
				name      string
				got, want float64
			}
			models := []model{
				{"binomial", v(dist.BinomialCDF(c.C, n, row.P)), row.Binomial},
				{"poisson", v(dist.PoissonCDF(c.C, float64(n)*row.P)), row.Poisson},
			}
			if row.Hypergeometric != nil && row.Defectives != nil {
				models = append(models, model{"hypergeometric", v(dist.HypergeometricCDF(c.C, lot, *row.Defectives, n)), *row.Hypergeometric})
			}
			for _, m := range models {
				checked++
				if !near(m.got, m.want, 1e-10) {
					t.Errorf("%s: N=%d n=%d c=%d p=%g: %.14g, want %.12g", m.name, lot, n, c.C, row.P, m.got, m.want)
				}
			}
		}
	}
	if checked != 203 {
		t.Errorf("%d probabilities checked, want 203", checked)
	}
}

// The binomial laws add up from their terms, and large sizes do not lose digits.
func TestDiscreteTailsAreSumsOfTerms(t *testing.T) {
	t.Parallel()
	v := must(t)
	sum := 0.0
	for k := 0; k <= 60; k++ {
		sum += v(dist.HypergeometricPMF(k, 500, 90, 60))
		lower, upper := v(dist.HypergeometricCDF(k, 500, 90, 60)), v(dist.HypergeometricSurvival(k, 500, 90, 60))
		if !near(lower, sum, 1e-12) || !near(upper, 1-sum, 1e-12) && upper > 1e-3 {
			t.Errorf("hypergeometric at %d: %g and %g, sum of terms %g", k, lower, upper, sum)
		}
	}
	// By symmetry of the roles of sample and marked units.
	a, b := v(dist.HypergeometricSurvival(40, 500, 90, 60)), v(dist.HypergeometricSurvival(40, 500, 60, 90))
	if !near(a, b, 1e-12) || a <= 0 || a > 1e-15 {
		t.Errorf("far tail of the hypergeometric: %g and %g", a, b)
	}
	for _, n := range []int{10, 1000, 1_000_000} {
		mean := n / 10
		tail := 0.0
		for k := mean + 1; k <= min(n, mean+4000); k++ {
			tail += v(dist.BinomialPMF(k, n, 0.1))
		}
		if got := v(dist.BinomialSurvival(mean, n, 0.1)); !near(got, tail, 2e-12) {
			t.Errorf("BinomialSurvival(%d, %d, 0.1) = %.15g, sum of terms %.15g", mean, n, got, tail)
		}
		tail = 0
		for k := mean + 1; k <= mean+4000; k++ {
			tail += v(dist.PoissonPMF(k, float64(mean)))
		}
		if got := v(dist.PoissonSurvival(mean, float64(mean))); !near(got, tail, 2e-12) {
			t.Errorf("PoissonSurvival(%d, %d) = %.15g, sum of terms %.15g", mean, mean, got, tail)
		}
	}
}

func TestQuantilesInvertTheirDistribution(t *testing.T) {
	t.Parallel()
	type law struct {
		name       string
		cdf, sf    func(float64) (float64, error)
		low, upper func(float64) (float64, error)
	}
	laws := []law{{"normal", dist.NormalCDF, dist.NormalSurvival, dist.NormalQuantile, dist.NormalUpperQuantile}}
	for _, nu := range []float64{0.5, 1, 2, 9, 99, 4999, 1e6} {
		laws = append(laws,
			law{"chi-square", func(x float64) (float64, error) { return dist.ChiSquareCDF(x, nu) },
				func(x float64) (float64, error) { return dist.ChiSquareSurvival(x, nu) },
				func(p float64) (float64, error) { return dist.ChiSquareQuantile(p, nu) },
				func(p float64) (float64, error) { return dist.ChiSquareUpperQuantile(p, nu) }},
			law{"t", func(x float64) (float64, error) { return dist.TCDF(x, nu) },
				func(x float64) (float64, error) { return dist.TSurvival(x, nu) },
				func(p float64) (float64, error) { return dist.TQuantile(p, nu) },
				func(p float64) (float64, error) { return dist.TUpperQuantile(p, nu) }},
			law{"F", func(x float64) (float64, error) { return dist.FCDF(x, nu, 12) },
				func(x float64) (float64, error) { return dist.FSurvival(x, nu, 12) },
				func(p float64) (float64, error) { return dist.FQuantile(p, nu, 12) },
				func(p float64) (float64, error) { return dist.FUpperQuantile(p, nu, 12) }},
			law{"beta", func(x float64) (float64, error) { return dist.BetaCDF(x, nu, 3) },
				func(x float64) (float64, error) { return dist.BetaSurvival(x, nu, 3) },
				func(p float64) (float64, error) { return dist.BetaQuantile(p, nu, 3) },
				func(p float64) (float64, error) { return dist.BetaUpperQuantile(p, nu, 3) }},
		)
	}
	v := must(t)
	for _, l := range laws {
		last := math.Inf(-1)
		for _, p := range []float64{1e-12, 1e-6, 0.00135, 0.05, 0.31, 0.5, 0.77, 0.975, 0.9999} {
			x := v(l.low(p))
			if x < last {
				t.Errorf("%s: quantile falls at %g", l.name, p)
			}
			last = x
			// A beta or an F close to its end loses what 1-x cannot hold.
			if back := v(l.cdf(x)); !near(back, p, 1e-9) && (l.name != "beta" || x < 0.999) {
				t.Errorf("%s: cdf(quantile(%g)) = %.15g", l.name, p, back)
			}
			if back := v(l.sf(v(l.upper(p)))); !near(back, p, 1e-9) && (l.name != "beta" || v(l.upper(p)) < 0.999) {
				t.Errorf("%s: survival(upperQuantile(%g)) = %.15g", l.name, p, back)
			}
		}
	}
}

func TestArgumentsAreChecked(t *testing.T) {
	t.Parallel()
	nan, inf := math.NaN(), math.Inf(1)
	for name, f := range map[string]func() (float64, error){
		"normal NaN":            func() (float64, error) { return dist.NormalCDF(nan) },
		"normal infinite":       func() (float64, error) { return dist.NormalSurvival(inf) },
		"quantile 0":            func() (float64, error) { return dist.NormalQuantile(0) },
		"quantile 1":            func() (float64, error) { return dist.NormalUpperQuantile(1) },
		"quantile NaN":          func() (float64, error) { return dist.TQuantile(nan, 3) },
		"no freedom":            func() (float64, error) { return dist.TCDF(1, 0) },
		"NaN freedom":           func() (float64, error) { return dist.ChiSquareCDF(1, nan) },
		"endless freedom":       func() (float64, error) { return dist.ChiSquareQuantile(0.5, inf) },
		"negative freedom":      func() (float64, error) { return dist.FCDF(1, 2, -1) },
		"F NaN":                 func() (float64, error) { return dist.FSurvival(nan, 2, 1) },
		"no scale":              func() (float64, error) { return dist.GammaCDF(1, 1, 0) },
		"beta shape":            func() (float64, error) { return dist.BetaQuantile(0.5, 0, 1) },
		"negative trials":       func() (float64, error) { return dist.BinomialCDF(0, -1, 0.5) },
		"proportion above 1":    func() (float64, error) { return dist.BinomialSurvival(0, 1, 1.5) },
		"proportion NaN":        func() (float64, error) { return dist.BinomialPMF(0, 1, nan) },
		"negative mean":         func() (float64, error) { return dist.PoissonCDF(0, -1) },
		"NaN mean":              func() (float64, error) { return dist.PoissonPMF(0, nan) },
		"empty lot":             func() (float64, error) { return dist.HypergeometricCDF(0, 0, 0, 0) },
		"too many marked":       func() (float64, error) { return dist.HypergeometricPMF(0, 5, 6, 1) },
		"sample above lot":      func() (float64, error) { return dist.HypergeometricSurvival(0, 5, 1, 6) },
		"noncentral freedom":    func() (float64, error) { return dist.NoncentralTCDF(1, 0.5, 1) },
		"noncentrality":         func() (float64, error) { return dist.NoncentralTCDF(1, 5, inf) },
		"noncentral t NaN":      func() (float64, error) { return dist.NoncentralTSurvival(nan, 5, 1) },
		"noncentral quantile 1": func() (float64, error) { return dist.NoncentralTQuantile(1, 5, 1) },
	} {
		x, err := f()
		if !errors.Is(err, dist.ErrArgument) || !math.IsNaN(x) {
			t.Errorf("%s: %g, %v; want NaN and ErrArgument", name, x, err)
		}
	}
}

// No argument makes a function panic, hang or return a probability that is not one.
func FuzzDistributions(f *testing.F) {
	f.Add(1.0, 3.0, 2.0, 0.1, 4)
	f.Add(-40.0, 9.0, 40.0, 1e-300, -1)
	f.Add(1e9, 1e9, 1e-9, 0.999999, 1<<40)
	f.Fuzz(func(t *testing.T, x, a, b, p float64, k int) {
		check := func(name string, got float64, err error) {
			if err == nil && !(got >= 0 && got <= 1) {
				t.Errorf("%s(%g, %g, %g, %g, %d) = %g", name, x, a, b, p, k, got)
			}
		}
		number := func(name string, got float64, err error) {
			if err == nil && (math.IsNaN(got) || math.IsInf(got, 0)) {
				t.Errorf("%s(%g, %g, %g, %g, %d) = %g without an error", name, x, a, b, p, k, got)
			}
		}
		for name, g := range map[string]func(float64, float64, float64) (float64, error){
			"F": dist.FCDF, "beta": dist.BetaCDF, "gamma": dist.GammaCDF, "noncentral t": dist.NoncentralTCDF,
		} {
			got, err := g(x, a, b)
			check(name, got, err)
		}
		for name, g := range map[string]func(float64, float64) (float64, error){"t": dist.TCDF, "chi-square": dist.ChiSquareSurvival} {
			got, err := g(x, a)
			check(name, got, err)
		}
		got, err := dist.BinomialCDF(k, int(math.Min(1e6, math.Abs(a))), p)
		check("binomial", got, err)
		got, err = dist.PoissonSurvival(k, a)
		check("poisson", got, err)
		got, err = dist.HypergeometricCDF(k%100, 200, int(math.Abs(b))%201, 50)
		check("hypergeometric", got, err)
		for name, g := range map[string]func(float64, float64, float64) (float64, error){
			"F": dist.FQuantile, "beta": dist.BetaUpperQuantile, "gamma": dist.GammaQuantile, "noncentral t": dist.NoncentralTQuantile,
		} {
			got, err := g(p, a, b)
			number(name+" quantile", got, err)
		}
		got, err = dist.TUpperQuantile(p, a)
		number("t quantile", got, err)
	})
}
