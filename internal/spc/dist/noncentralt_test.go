package dist_test

import (
	"encoding/json"
	"math"
	"os"
	"testing"

	"holdfast/internal/spc/dist"
)

// otherWay integrates the noncentral t over the normal variable instead of the chi
// variable: for t > 0, P(T ≤ t) = Φ(-delta) + ∫ φ(z) P(X ≥ nu ((z+delta)/t)²) dz over
// z > -delta. It is slow and shares nothing with the function under test but the
// chi-square tail.
func otherWay(t testing.TB, x, nu, delta float64) float64 {
	v := must(t)
	const steps = 40000
	lo, hi := math.Max(-delta, -13), 13.0
	sum := v(dist.NormalCDF(-delta))
	h := (hi - lo) / steps
	for i := range steps {
		z := lo + h*(float64(i)+0.5)
		u := (z + delta) / x
		sum += h * math.Exp(-z*z/2) / math.Sqrt(2*math.Pi) * v(dist.ChiSquareSurvival(nu*u*u, nu))
	}
	return sum
}

func TestNoncentralTBySecondIntegral(t *testing.T) {
	t.Parallel()
	v := must(t)
	for _, c := range [][3]float64{
		{40, 9, 40}, {5, 4, 3}, {1.2, 30, 2.5}, {420, 4999, 424}, {430, 4999, 424}, {0.7, 1, 0.2}, {2, 2.5, -1}, {60, 24, 45},
	} {
		got, want := v(dist.NoncentralTCDF(c[0], c[1], c[2])), otherWay(t, c[0], c[1], c[2])
		if math.Abs(got-want) > 3e-8 {
			t.Errorf("noncentral t at %v = %.12f, second way %.12f", c, got, want)
		}
	}
}

func TestNoncentralTIdentities(t *testing.T) {
	t.Parallel()
	v := must(t)
	for _, nu := range []float64{1, 2, 7.5, 99, 4999, 1e6} {
		for _, x := range []float64{-30, -2, -0.1, 0, 0.4, 3, 17} {
			if got, want := v(dist.NoncentralTCDF(x, nu, 0)), v(dist.TCDF(x, nu)); !near(got, want, 1e-11) {
				t.Errorf("noncentrality 0, t %g, nu %g: %.16g, Student %.16g", x, nu, got, want)
			}
			for _, delta := range []float64{-8, 0.5, 40, 424} {
				lower, upper := v(dist.NoncentralTCDF(x, nu, delta)), v(dist.NoncentralTSurvival(x, nu, delta))
				if math.Abs(lower+upper-1) > 1e-11 {
					t.Errorf("t %g, nu %g, delta %g: tails add up to 1%+g", x, nu, delta, lower+upper-1)
				}
			}
		}
		// At t = 0 the denominator does not matter.
		if got, want := v(dist.NoncentralTCDF(0, nu, 6)), v(dist.NormalCDF(-6)); !near(got, want, 1e-11) {
			t.Errorf("t 0, nu %g: %.15g, want %.15g", nu, got, want)
		}
	}
	// With two degrees of freedom s² is exponential and the integral can be done by
	// parts: Φ(-δ) + r exp(-δ²/(2+t²)) Φ(δr), r = t/√(2+t²).
	for _, x := range []float64{0.5, 2, 10} {
		const delta = 1.0
		r := x / math.Sqrt(2+x*x)
		want := v(dist.NormalCDF(-delta)) + r*math.Exp(-delta*delta/(2+x*x))*v(dist.NormalCDF(delta*r))
		if got := v(dist.NoncentralTCDF(x, 2, delta)); !near(got, want, 1e-11) {
			t.Errorf("t %g, nu 2, delta 1: %.15g, closed form %.15g", x, got, want)
		}
	}
}

func TestNoncentralTQuantiles(t *testing.T) {
	t.Parallel()
	v := must(t)
	for _, c := range [][2]float64{{1, 2}, {9, 40}, {29, 17}, {499, -67}, {4999, 424}, {4999, 848}} {
		for _, p := range []float64{1e-8, 0.005, 0.05, 0.5, 0.95, 0.9999} {
			x := v(dist.NoncentralTQuantile(p, c[0], c[1]))
			if back := v(dist.NoncentralTCDF(x, c[0], c[1])); !near(back, p, 1e-10) {
				t.Errorf("nu %g, delta %g: cdf(quantile(%g)) = %.14g", c[0], c[1], p, back)
			}
			if delta := v(dist.NoncentralTNoncentrality(x, c[0], p)); math.Abs(delta-c[1]) > 1e-8*(1+math.Abs(c[1])) {
				t.Errorf("nu %g, p %g: noncentrality %.12g, want %g", c[0], p, delta, c[1])
			}
		}
	}
}

// The exact bounds of a one-sided capability index are noncentralities.
func TestExactIndexBounds(t *testing.T) {
	t.Parallel()
	raw, err := os.ReadFile("testdata/cpk_bounds.json")
	if err != nil {
		t.Fatal(err)
	}
	var file struct {
		Cases []struct {
			N                 int
			Index, Confidence float64
			Exact             struct {
				Lower, Upper float64
				TwoSided     [2]float64 `json:"two_sided"`
			} `json:"exact_one_sided_index"`
		}
	}
	if err := json.Unmarshal(raw, &file); err != nil || len(file.Cases) == 0 {
		t.Fatal(err, len(file.Cases))
	}
	v := must(t)
	for _, c := range file.Cases {
		root := 3 * math.Sqrt(float64(c.N))
		bound := func(p float64) float64 {
			return v(dist.NoncentralTNoncentrality(root*c.Index, float64(c.N-1), p)) / root
		}
		a := 1 - c.Confidence
		for _, b := range []struct {
			name      string
			got, want float64
		}{
			{"lower", bound(c.Confidence), c.Exact.Lower},
			{"upper", bound(a), c.Exact.Upper},
			{"two-sided lower", bound(1 - a/2), c.Exact.TwoSided[0]},
			{"two-sided upper", bound(a / 2), c.Exact.TwoSided[1]},
		} {
			if math.Abs(b.got-b.want) > 2e-10 {
				t.Errorf("n %d, index %g, %g: %s bound %.12f, want %.12f", c.N, c.Index, c.Confidence, b.name, b.got, b.want)
			}
		}
	}
}

func BenchmarkNoncentralTNoncentrality(b *testing.B) {
	for b.Loop() {
		if _, err := dist.NoncentralTNoncentrality(424, 4999, 0.95); err != nil {
			b.Fatal(err)
		}
	}
}
