package special_test

import (
	"math"
	"testing"

	"holdfast/internal/spc/special"
)

func near(got, want, tol float64) bool { return math.Abs(got-want) <= tol*math.Abs(want) }

// Values by a general-purpose arbitrary-precision library at 40 digits.
func TestIncompleteBeta(t *testing.T) {
	t.Parallel()
	for _, c := range []struct{ a, b, x, lower, upper float64 }{
		{4.5, 0.5, 0.3625, 0.0032136102306979006, 0.9967863897693021},
		{500000, 0.5, 0.999996, 0.045500101923122551, 0.95449989807687745},
		{0.5, 0.5, 1e-10, 6.3661977237819168e-6, 0.99999363380227622},
		{2, 3, 0.7, 0.9163, 0.083700000000000034},
		{1e6, 2e6, 0.3335, 0.72988243250368331, 0.27011756749631669},
		{150.5, 3, 0.9, 1.6889646110646708e-5, 0.99998311035388935},
		{30, 1000, 0.08, 0.99999999999754342, 2.4565770938525435e-12},
	} {
		lower, upper := special.Beta(c.a, c.b, c.x, 1-c.x)
		if !near(lower, c.lower, 2e-12) || !near(upper, c.upper, 2e-12) {
			t.Errorf("Beta(%g, %g, %g) = %.17g, %.17g; want %.17g, %.17g", c.a, c.b, c.x, lower, upper, c.lower, c.upper)
		}
	}
}

// Values by the same library.
func TestIncompleteGamma(t *testing.T) {
	t.Parallel()
	for _, c := range []struct{ a, x, p, q float64 }{
		{0.5, 0.1, 0.34527915398142298, 0.65472084601857702},
		{0.5, 40, 1, 3.7440973842028988e-19},
		{4.5, 9, 0.96482646053301521, 0.035173539466984794},
		{100, 60, 1.4815276326460468e-6, 0.99999851847236735},
		{100, 150, 0.99999407545966452, 5.9245403354839158e-6},
		{1e6, 1.001e6, 0.84134478636834029, 0.15865521363165971},
		{0.05, 1e-12, 0.25802521060936053, 0.74197478939063947},
		{0.1, 0.9, 0.97160690460097092, 0.02839309539902908},
		{2499.5, 2600, 0.97673310658902811, 0.023266893410971886},
	} {
		p, q := special.Gamma(c.a, c.x)
		if !near(p, c.p, 2e-12) || !near(q, c.q, 2e-12) {
			t.Errorf("Gamma(%g, %g) = %.17g, %.17g; want %.17g, %.17g", c.a, c.x, p, q, c.p, c.q)
		}
	}
}

// Values by the same library.
func TestNormalTails(t *testing.T) {
	t.Parallel()
	for _, c := range []struct{ z, cdf, log float64 }{
		{-100, 0, -5005.5242086942051},
		{-40, 0, -804.60844201375379},
		{-38, 2.8854283600687843e-316, -726.55721601882013},
		{-20, 2.7536241186062337e-89, -203.91715537109726},
		{-9, 1.1285884059538406e-19, -43.628149113332115},
		{-3, 0.0013498980316300945, -6.6077262215103495},
		{-0.1, 0.46017216272297102, -0.77615459273027333},
		{1.5, 0.93319279873114193, -0.069143455612233983},
	} {
		// Below 1e-308 numbers themselves have fewer digits.
		if got := special.NormalCDF(c.z); !near(got, c.cdf, 1e-13) && c.z > -38 {
			t.Errorf("Φ(%g) = %.17g, want %.17g", c.z, got, c.cdf)
		}
		lower, upper := special.LogNormalTails(c.z)
		mirrored, _ := special.LogNormalTails(-c.z)
		if !near(special.LogNormalCDF(c.z), c.log, 1e-13) || !near(lower, c.log, 1e-13) || upper != mirrored {
			t.Errorf("ln Φ(%g) = %.17g and %.17g, want %.17g", c.z, special.LogNormalCDF(c.z), lower, c.log)
		}
	}
	for _, p := range []float64{1e-300, 1e-20, 0.00135, 0.3, 0.5, 0.999} {
		z := special.NormalQuantile(p)
		if back := special.NormalCDF(z); !near(back, p, 1e-13*math.Max(1, z*z)) {
			t.Errorf("Φ(Φ⁻¹(%g)) = %g", p, back)
		}
	}
}

func TestQuadratureAndRoots(t *testing.T) {
	t.Parallel()
	for _, n := range []int{3, 16, 32} {
		x, w := special.GaussLegendre(n)
		sum, high := 0.0, 0.0
		for i := range x {
			sum += w[i]
			high += w[i] * math.Pow(x[i], float64(2*n-2))
		}
		// A rule of n points is exact up to degree 2n-1.
		if !near(sum, 2, 1e-14) || !near(high, 2/float64(2*n-1), 1e-13) {
			t.Errorf("n %d: weights add up to %.16g, x^%d to %.16g", n, sum, 2*n-2, high)
		}
	}
	if got := special.Panels(math.Exp, -1, 2, 2); !near(got, math.Exp(2)-math.Exp(-1), 1e-15) {
		t.Errorf("∫exp = %.17g", got)
	}
	if x, ok := special.Root(func(x float64) float64 { return math.Cos(x) - x }, 0, 1); !ok || !near(x, 0.7390851332151607, 1e-15) {
		t.Errorf("cos x = x at %.17g, %v", x, ok)
	}
	if x, ok := special.Root(math.Exp, 0, 1); ok {
		t.Errorf("exp has a root at %g", x)
	}
}

func TestOutsideTheDomain(t *testing.T) {
	t.Parallel()
	nan := math.NaN()
	p, q := special.Gamma(-1, 1)
	l, u := special.Beta(1, 1, nan, nan)
	x, y := special.BetaQuantile(1, 1, 2, false)
	for i, v := range []float64{p, q, l, u, x, y, special.GammaQuantile(1, 0, false), special.NormalQuantile(-1), special.NormalQuantile(nan)} {
		if !math.IsNaN(v) {
			t.Errorf("case %d: %g", i, v)
		}
	}
}
