package capability_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"holdfast/internal/spc/capability"
)

// logDensity is the textbook density of each family, written out anew.
func logDensity(f capability.Family, p []float64, x float64) float64 {
	normal := func(x, m, s float64) float64 {
		return -(x-m)*(x-m)/(2*s*s) - math.Log(s) - math.Log(2*math.Pi)/2
	}
	switch f {
	case capability.Normal:
		return normal(x, p[0], p[1])
	case capability.Lognormal:
		return normal(math.Log(x), p[0], p[1]) - math.Log(x)
	case capability.Weibull:
		return math.Log(p[0]/p[1]) + (p[0]-1)*math.Log(x/p[1]) - math.Pow(x/p[1], p[0])
	case capability.Gamma:
		g, _ := math.Lgamma(p[0])
		return (p[0]-1)*math.Log(x) - x/p[1] - p[0]*math.Log(p[1]) - g
	case capability.FoldedNormal:
		return math.Log(math.Exp(normal(x, p[0], p[1])) + math.Exp(normal(x, -p[0], p[1])))
	}
	return math.Log(x) - 2*math.Log(p[0]) - x*x/(2*p[0]*p[0])
}

// draw makes n readings of a family.
func draw(rng *rand.Rand, f capability.Family, n int, a, b float64) []float64 {
	x := make([]float64, n)
	for i := range x {
		switch f {
		case capability.Normal:
			x[i] = a + b*rng.NormFloat64()
		case capability.Lognormal:
			x[i] = math.Exp(a + b*rng.NormFloat64())
		case capability.Weibull:
			x[i] = b * math.Pow(rng.ExpFloat64(), 1/a)
		case capability.Gamma: // whole shapes only: a sum of exponentials
			for range int(a) {
				x[i] += b * rng.ExpFloat64()
			}
		case capability.FoldedNormal:
			x[i] = math.Abs(a + b*rng.NormFloat64())
		case capability.Rayleigh:
			x[i] = a * math.Hypot(rng.NormFloat64(), rng.NormFloat64())
		}
	}
	return x
}

var trueLaws = []struct {
	family capability.Family
	a, b   float64
}{
	{capability.Normal, 10, 2},
	{capability.Lognormal, 1, 0.6},
	{capability.Lognormal, -3, 0.02},
	{capability.Weibull, 0.8, 3},
	{capability.Weibull, 3.6, 100},
	{capability.Gamma, 2, 5},
	{capability.Gamma, 40, 0.1},
	{capability.Gamma, 400, 0.1},
	{capability.FoldedNormal, 0, 1},
	{capability.FoldedNormal, 0.6, 1},
	{capability.FoldedNormal, 1.5, 1},
	{capability.FoldedNormal, 9, 1},
	{capability.Rayleigh, 2, 0},
}

// The likelihood must be the sum of textbook densities, and no parameter changed a
// little may raise it.
func TestFitsAreMaximaOfTheLikelihood(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(7, 1))
	for _, law := range trueLaws {
		x := draw(rng, law.family, 300, law.a, law.b)
		fits, _, err := capability.FitAll(x)
		if err != nil {
			t.Fatal(err)
		}
		for _, f := range fits {
			likelihood := func(p []float64) (sum float64) {
				for _, v := range x {
					sum += logDensity(f.Family, p, v)
				}
				return sum
			}
			var p []float64
			for _, q := range f.Parameters {
				p = append(p, q.Value)
			}
			top := likelihood(p)
			if math.Abs(top-f.LogLikelihood) > 1e-9*math.Max(1, math.Abs(top)) {
				t.Errorf("%s on %s(%g, %g): log likelihood %.12g, its densities add up to %.12g", f.Family, law.family, law.a, law.b, f.LogLikelihood, top)
			}
			k := float64(len(p))
			if want := 2*k - 2*top + 2*k*(k+1)/(300-k-1); math.Abs(f.AICc-want) > 1e-6 {
				t.Errorf("%s: AICc %g, want %g", f.Family, f.AICc, want)
			}
			for i := range p {
				for _, step := range []float64{-0.1, -1e-3, 1e-3, 0.1} {
					q := append([]float64(nil), p...)
					q[i] += step * math.Max(math.Abs(q[i]), 0.1)
					if f.Family == capability.FoldedNormal && q[0] < 0 {
						continue
					}
					if l := likelihood(q); l > top+1e-9*math.Abs(top) {
						t.Errorf("%s on %s(%g, %g): parameter %d moved by %g raises the likelihood from %.10g to %.10g", f.Family, law.family, law.a, law.b, i, step, top, l)
					}
				}
			}
		}
	}
}

// A² must be what the distribution's own tails give, also where the program sums the
// density from reading to reading; quantiles must invert the distribution.
func TestFitsAgreeWithTheirOwnTails(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(7, 2))
	for _, law := range trueLaws {
		x := draw(rng, law.family, 400, law.a, law.b)
		fits, _, err := capability.FitAll(x)
		if err != nil {
			t.Fatal(err)
		}
		sorted := sortedCopy(x)
		for _, f := range fits {
			total := 0.0
			for i, v := range sorted {
				lower, err := f.CDF(v)
				if err != nil {
					t.Fatal(err)
				}
				upper, err := f.Survival(sorted[len(x)-1-i])
				if err != nil {
					t.Fatal(err)
				}
				total += float64(2*i+1) * (math.Log(lower) + math.Log(upper))
			}
			want := -float64(len(x)) - total/float64(len(x))
			if math.Abs(f.AndersonDarling-want) > 1e-6*math.Max(1, want) && !math.IsInf(want, 0) {
				t.Errorf("%s on %s(%g, %g): A² %.9g, its tails give %.9g", f.Family, law.family, law.a, law.b, f.AndersonDarling, want)
			}
			for _, p := range []float64{1e-9, 0.00135, 0.3, 0.5, 0.9} {
				q, err := f.Quantile(p)
				if err != nil {
					t.Fatal(err)
				}
				if back, _ := f.CDF(q); !within(back, p, 1e-8) {
					t.Errorf("%s: cdf of the quantile at %g is %g", f.Family, p, back)
				}
				q, err = f.UpperQuantile(p)
				if err != nil {
					t.Fatal(err)
				}
				if back, _ := f.Survival(q); !within(back, p, 1e-8) {
					t.Errorf("%s: survival of the upper quantile at %g is %g", f.Family, p, back)
				}
			}
		}
	}
}

func TestFitFindsTheLawThatMadeTheReadings(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(7, 3))
	for _, law := range trueLaws {
		if law.family == capability.FoldedNormal && law.a > 5 || law.b == 0.02 || law.a == 400 || law.a == 3.6 {
			continue // as good as normal
		}
		fits, _, err := capability.FitAll(draw(rng, law.family, 20000, law.a, law.b))
		if err != nil {
			t.Fatal(err)
		}
		if fits[0].Family != law.family {
			// A Weibull of shape 2 and a Rayleigh are one law: its AICc may win by chance.
			if law.family != capability.Rayleigh || fits[0].Family != capability.Weibull {
				t.Errorf("%s(%g, %g) was taken for %s", law.family, law.a, law.b, fits[0].Family)
			}
		}
		for i, p := range fits[0].Parameters {
			want := []float64{law.a, law.b}[i]
			// The likelihood of a nearly half normal hardly tells its mean.
			if fits[0].Family == law.family && !(law.family == capability.FoldedNormal && law.a < 1) && math.Abs(p.Value-want) > 0.05*math.Max(want, 0.5) {
				t.Errorf("%s: %s %g, want about %g", law.family, p.Name, p.Value, want)
			}
		}
	}
}

// Readings in another unit move the scale of a fit and nothing else.
func TestFitsFollowTheUnit(t *testing.T) {
	t.Parallel()
	x := draw(rand.New(rand.NewPCG(7, 4)), capability.Gamma, 200, 3, 1)
	for _, unit := range []float64{1e-150, 1e-3, 1e6, 1e140} {
		y := make([]float64, len(x))
		for i, v := range x {
			y[i] = unit * v
		}
		for _, family := range capability.Families() {
			a, err := capability.FitFamily(family, x)
			if err != nil {
				t.Fatal(err)
			}
			b, err := capability.FitFamily(family, y)
			if err != nil {
				t.Fatalf("%s in units of %g: %v", family, unit, err)
			}
			if d := a.LogLikelihood - 200*math.Log(unit) - b.LogLikelihood; math.Abs(d) > 1e-7 || math.Abs(a.AndersonDarling-b.AndersonDarling) > 1e-8 {
				t.Errorf("%s in units of %g: likelihood off by %g, A² %g and %g", family, unit, d, a.AndersonDarling, b.AndersonDarling)
			}
			spec := capability.Specification{Lower: at(0.1), Upper: at(12)}
			scaled := capability.Specification{Lower: at(0.1 * unit), Upper: at(12 * unit)}
			p, err := a.Percentile(spec)
			if err != nil {
				t.Fatal(err)
			}
			q, err := b.Percentile(scaled)
			if err != nil {
				t.Fatal(err)
			}
			same(t, string(family)+" Ppk", q.Ppk, p.Ppk, 1e-8)
			same(t, string(family)+" Pp", q.Pp, p.Pp, 1e-8)
		}
	}
}

// The profile likelihood written out as in Box and Cox, searched on a fine grid.
func TestBoxCoxByBruteForce(t *testing.T) {
	t.Parallel()
	for name, x := range dataSets(t) {
		b, err := capability.FitBoxCox(x)
		if err != nil {
			t.Fatal(err)
		}
		sum := 0.0
		for _, v := range x {
			sum += math.Log(v)
		}
		n := float64(len(x))
		best, top := 0.0, math.Inf(-1)
		for i := -5001; i < 5000; i += 2 {
			l := float64(i) / 1000
			mean, square := 0.0, 0.0
			for _, v := range x {
				mean += (math.Pow(v, l) - 1) / l / n
			}
			for _, v := range x {
				d := (math.Pow(v, l)-1)/l - mean
				square += d * d / n
			}
			if v := -n/2*math.Log(square) + (l-1)*sum; v > top {
				best, top = l, v
			}
		}
		if math.Abs(best-b.Lambda) > 2e-3 || top > b.LogLikelihood+1e-6 || top < b.LogLikelihood-1e-3 {
			t.Errorf("%s: λ %g with %g, the grid finds %g with %g", name, b.Lambda, b.LogLikelihood, best, top)
		}
	}
}

// The logarithm of a lognormal is normal, so near λ = 0 both roads to Ppk meet.
func TestBoxCoxIndicesOfLognormalReadings(t *testing.T) {
	t.Parallel()
	x := dataSets(t)["lognormal_points"]
	b, err := capability.FitBoxCox(x)
	if err != nil {
		t.Fatal(err)
	}
	spec := capability.Specification{Lower: at(0.5), Upper: at(11)}
	pp, ppk, err := b.Indices(x, spec)
	if err != nil {
		t.Fatal(err)
	}
	var mean, square float64
	for _, v := range x {
		mean += math.Log(v) / 60
	}
	for _, v := range x {
		square += (math.Log(v) - mean) * (math.Log(v) - mean) / 59
	}
	s := math.Sqrt(square)
	if !within(*pp, math.Log(22)/(6*s), 1e-4) || !within(*ppk, (math.Log(11)-mean)/(3*s), 1e-4) {
		t.Errorf("Pp %g, Ppk %g", *pp, *ppk)
	}
	onlyLower, ppk, err := b.Indices(x, capability.Specification{Lower: at(-1), Upper: at(11)})
	if err != nil || onlyLower != nil || ppk == nil {
		t.Errorf("a limit below zero: %v %v %v", onlyLower, ppk, err)
	}
	if _, _, err := b.Indices(x, capability.Specification{Lower: at(0)}); err == nil {
		t.Error("no limit that can be passed, and no error")
	}
}

// Mirrored readings with mirrored limits have the same indices, sides swapped; shift
// and unit change nothing.
func TestIndicesAreOfTheProcessNotOfItsUnit(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(7, 5))
	x := draw(rng, capability.Normal, 60, 5, 1)
	base, err := capability.Assess(capability.Singles(x), capability.Specification{Lower: at(1), Upper: at(8), Target: at(5)}, capability.Options{})
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct{ scale, shift float64 }{{-1, 0}, {25.4, 0}, {1, 1000}, {-0.001, 3}} {
		y := make([]float64, len(x))
		for i, v := range x {
			y[i] = c.scale*v + c.shift
		}
		low, high, target := c.scale*1+c.shift, c.scale*8+c.shift, c.scale*5+c.shift
		if low > high {
			low, high = high, low
		}
		s, err := capability.Assess(capability.Singles(y), capability.Specification{Lower: &low, Upper: &high, Target: &target}, capability.Options{})
		if err != nil {
			t.Fatal(err)
		}
		for _, v := range []struct{ got, want float64 }{
			{s.Cp.Value, base.Cp.Value}, {s.Cpk.Value, base.Cpk.Value}, {s.Pp.Value, base.Pp.Value},
			{s.Ppk.Value, base.Ppk.Value}, {*s.Cpm, *base.Cpm}, {s.Cpk.LowerBound, base.Cpk.LowerBound},
			{*s.Expected.Below + *s.Expected.Above, *base.Expected.Below + *base.Expected.Above},
		} {
			if !within(v.got, v.want, 1e-9) {
				t.Errorf("scale %g, shift %g: %g, want %g", c.scale, c.shift, v.got, v.want)
			}
		}
	}
}

// With one limit there are Cpk and Ppk of that side, nothing else.
func TestOneSidedSpecification(t *testing.T) {
	t.Parallel()
	s, err := capability.Assess(piston(t), capability.Specification{Upper: at(74.05), Target: at(74)}, capability.Options{})
	if err != nil {
		t.Fatal(err)
	}
	if s.Cp != nil || s.Pp != nil || s.Cpm != nil || s.Expected.Below != nil || s.Observed.Below != nil {
		t.Errorf("figures of a side that does not exist: %+v", s)
	}
	if s.Ppk == nil || !within(s.Ppk.Value, 1.59573071141, 1e-10) || s.Cpk == nil {
		t.Errorf("Ppk %+v", s.Ppk)
	}
	// On a limit is inside.
	on, err := capability.Assess(capability.Singles([]float64{1, 2, 3, 4}), capability.Specification{Lower: at(1), Upper: at(3.5)}, capability.Options{})
	if err != nil || *on.Observed.Below != 0 || *on.Observed.Above != 250000 {
		t.Errorf("observed %v, %v", on.Observed, err)
	}
}

// The handbook's approximations (NIST/SEMATECH e-Handbook, section 7.2.6.3; printed
// figures quoted from a document that cites the section) beside the exact factors.
func TestToleranceFactorsBesideApproximations(t *testing.T) {
	t.Parallel()
	one, err := capability.OneSidedToleranceFactor(43, 0.9, 0.99)
	if err != nil {
		t.Fatal(err)
	}
	// Natrella: k = (z_p + √(z_p² - ab))/a.
	zp, zg := 1.2815515655446004, 2.3263478740408408
	a := 1 - zg*zg/(2*42)
	b := zp*zp - zg*zg/43
	natrella := (zp + math.Sqrt(zp*zp-a*b)) / a
	if math.Abs(natrella-1.8752) > 5e-5 || math.Abs(natrella-one) > 2e-3 {
		t.Errorf("Natrella %g, exact %g", natrella, one)
	}
	two, err := capability.TwoSidedToleranceFactor(43, 0.9, 0.99)
	if err != nil || math.Abs(two-2.2173) > 6e-3 {
		t.Errorf("two-sided %g, %v; Howe 2.2173", two, err)
	}
}

func TestRequirement(t *testing.T) {
	t.Parallel()
	full := capability.Evidence{Stable: true, Readings: 100, Subgroups: 25, GaugeKnown: true}
	if m := (capability.Requirement{}).Missing(full); len(m) != 0 {
		t.Errorf("nothing is missing, got %v", m)
	}
	m := (capability.Requirement{}).Missing(capability.Evidence{Readings: 99, Subgroups: 24})
	want := []capability.Shortfall{
		{Lack: capability.NotStable},
		{Lack: capability.TooFewReadings, Got: 99, Need: 100},
		{Lack: capability.TooFewSubgroups, Got: 24, Need: 25},
		{Lack: capability.GaugeUnknown},
	}
	if len(m) != len(want) {
		t.Fatalf("got %v", m)
	}
	for i := range want {
		if m[i] != want[i] {
			t.Errorf("%d: %v, want %v", i, m[i], want[i])
		}
	}
	if m := (capability.Requirement{Readings: 50, Subgroups: 10}).Missing(capability.Evidence{Stable: true, GaugeKnown: true, Readings: 50, Subgroups: 10}); len(m) != 0 {
		t.Errorf("a plant may set its own: %v", m)
	}
}
