package limits_test

import (
	"errors"
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/gonum/stat/distuv"

	"holdfast/internal/spc/limits"
)

// correlated draws three characteristics of which the first two move together.
func correlated(rng *rand.Rand, m int) [][]float64 {
	x := make([][]float64, m)
	for i := range x {
		a, b, c := rng.NormFloat64(), rng.NormFloat64(), rng.NormFloat64()
		x[i] = []float64{10 + a, 50 + 4*(0.9*a+math.Sqrt(0.19)*b), 7 + 0.1*c}
	}
	return x
}

func TestTSquaredIdentities(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(12, 1))
	x := correlated(rng, 40)
	s, err := limits.EstimateTSquared(x)
	if err != nil {
		t.Fatal(err)
	}
	// Second way: the inverse by a general-purpose library.
	flat := make([]float64, 0, 9)
	for _, row := range s.Covariance {
		flat = append(flat, row...)
	}
	var inverse mat.Dense
	if err := inverse.Inverse(mat.NewDense(3, 3, flat)); err != nil {
		t.Fatal(err)
	}
	total := 0.0
	for _, row := range x {
		got, err := s.Statistic(row)
		if err != nil {
			t.Fatal(err)
		}
		want := 0.0
		for j := range row {
			for k := range row {
				want += (row[j] - s.Mean[j]) * inverse.At(j, k) * (row[k] - s.Mean[k])
			}
		}
		if math.Abs(got-want) > 1e-9*(1+want) {
			t.Errorf("T² = %.12g, by inversion %.12g", got, want)
		}
		total += got
	}
	// Over the observations themselves T² adds up to p(m-1).
	if math.Abs(total-3*39) > 1e-9 {
		t.Errorf("sum of T² = %.12g, want 117", total)
	}
	// Changing units changes nothing.
	scaled := make([][]float64, len(x))
	for i, row := range x {
		scaled[i] = []float64{1000 * row[0], -row[1], row[2] + 99}
	}
	s2, err := limits.EstimateTSquared(scaled)
	if err != nil {
		t.Fatal(err)
	}
	a, err1 := s.Statistic(x[7])
	b, err2 := s2.Statistic(scaled[7])
	if err := errors.Join(err1, err2); err != nil || math.Abs(a-b) > 1e-9*a {
		t.Errorf("T² %.12g in one unit, %.12g in another, %v", a, b, err)
	}
}

// Limits by a general-purpose library's beta and F quantiles, and the false-alarm
// rate they promise, by simulation with a fixed seed.
func TestTSquaredLimits(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(12, 2))
	const m, p, alpha = 30, 3, 0.05
	first, later, runs := 0, 0, 1500
	for range runs {
		x := correlated(rng, m)
		s, err := limits.EstimateTSquared(x)
		if err != nil {
			t.Fatal(err)
		}
		s.Alpha = alpha
		one, two, err := s.Limits()
		if err != nil {
			t.Fatal(err)
		}
		want1 := float64((m-1)*(m-1)) / m * distuv.Beta{Alpha: p / 2.0, Beta: (m - p - 1) / 2.0}.Quantile(1-alpha)
		want2 := p * float64((m+1)*(m-1)) / float64(m*(m-p)) * distuv.F{D1: p, D2: m - p}.Quantile(1-alpha)
		if math.Abs(one/want1-1) > 1e-8 || math.Abs(two/want2-1) > 1e-8 {
			t.Fatalf("limits %.10g, %.10g; want %.10g, %.10g", one, two, want1, want2)
		}
		t1, err1 := s.Statistic(x[0])
		t2, err2 := s.Statistic(correlated(rng, 1)[0])
		if err := errors.Join(err1, err2); err != nil {
			t.Fatal(err)
		}
		if t1 > one {
			first++
		}
		if t2 > two {
			later++
		}
	}
	// 75 expected, four standard errors are 34.
	if first < 41 || first > 109 || later < 41 || later > 109 {
		t.Errorf("%d and %d of %d beyond", first, later, runs)
	}
}

// A part whose characteristics are each ordinary but do not go together: only the
// conditional terms of the pair are beyond their limits.
func TestSharesFindABrokenRelation(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(12, 3))
	s, err := limits.EstimateTSquared(correlated(rng, 200))
	if err != nil {
		t.Fatal(err)
	}
	x := []float64{11.8, 50 - 4*1.8, 7}
	total, err := s.Statistic(x)
	if err != nil {
		t.Fatal(err)
	}
	shares, err := s.Shares(x)
	if err != nil {
		t.Fatal(err)
	}
	for j, share := range shares {
		if share.Unconditional > share.UnconditionalLimit {
			t.Errorf("characteristic %d alone: %+v", j, share)
		}
		if beyond := share.Conditional > share.ConditionalLimit; beyond != (j < 2) {
			t.Errorf("characteristic %d given the others: %+v", j, share)
		}
	}
	// For a pair T² = T1² + T2|1²: dropping the third leaves the pair's decomposition.
	pair, err := limits.TSquaredStandard{Mean: s.Mean[:2], Covariance: [][]float64{s.Covariance[0][:2], s.Covariance[1][:2]}, M: 200}.Prepare()
	if err != nil {
		t.Fatal(err)
	}
	whole, err1 := pair.Statistic(x[:2])
	parts, err2 := pair.Shares(x[:2])
	if err := errors.Join(err1, err2); err != nil || math.Abs(parts[0].Unconditional+parts[1].Conditional-whole) > 1e-9*whole ||
		math.Abs(parts[1].Unconditional+parts[0].Conditional-whole) > 1e-9*whole || whole > total+1e-9 {
		t.Errorf("%+v of %g, %v", parts, whole, err)
	}
}

func TestTSquaredThatDoesNotExist(t *testing.T) {
	t.Parallel()
	good := correlated(rand.New(rand.NewPCG(1, 1)), 10)
	tied := make([][]float64, 10)
	for i := range tied {
		tied[i] = []float64{good[i][0], good[i][1], good[i][0] + good[i][1]}
	}
	for name, x := range map[string][][]float64{
		"none": nil, "one characteristic": {{1}, {2}, {3}}, "too few": good[:4], "ragged": {{1, 2}, {1}, {2, 3}, {4, 5}},
		"NaN": {{1, 2}, {2, math.NaN()}, {3, 1}, {4, 4}}, "one determines another": tied, "constant": {{1, 2}, {1, 3}, {1, 4}, {1, 6}},
	} {
		if _, err := limits.EstimateTSquared(x); !errors.Is(err, limits.ErrInput) {
			t.Errorf("%s: %v", name, err)
		}
	}
	if _, err := (limits.TSquaredStandard{}).Statistic([]float64{1, 2}); !errors.Is(err, limits.ErrInput) {
		t.Errorf("unprepared: %v", err)
	}
	if _, err := (limits.TSquaredStandard{Mean: []float64{0, 0}, Covariance: [][]float64{{1, 2}, {3, 1}}, M: 9}).Prepare(); !errors.Is(err, limits.ErrInput) {
		t.Errorf("not symmetric: %v", err)
	}
}

func FuzzTSquared(f *testing.F) {
	f.Add(1.0, 2.0, 3.0, 5.0, 7.0, 11.0)
	f.Fuzz(func(t *testing.T, a, b, c, d, e, g float64) {
		s, err := limits.EstimateTSquared([][]float64{{a, b}, {c, d}, {e, g}, {a, d}, {c, g}})
		if err != nil {
			return
		}
		v, err := s.Statistic([]float64{e, b})
		if err == nil && (math.IsNaN(v) || math.IsInf(v, 0) || v < 0) {
			t.Errorf("T² = %g", v)
		}
		if shares, err := s.Shares([]float64{e, b}); err == nil {
			for _, x := range shares {
				if math.IsNaN(x.Conditional) || math.IsNaN(x.Unconditional) {
					t.Errorf("%+v", shares)
				}
			}
		}
	})
}

// The band for later observations by a general-purpose library's F quantiles; in
// control half of the later observations lie below its centre and one in 1/alpha above
// its limit.
func TestTSquaredBand(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(14, 3))
	above, beyond, rounds := 0, 0, 3000
	for range rounds {
		s, err := limits.EstimateTSquared(correlated(rng, 25))
		if err != nil {
			t.Fatal(err)
		}
		s.Alpha = 0.05
		b, err := s.Band()
		if err != nil {
			t.Fatal(err)
		}
		f := distuv.F{D1: 3, D2: 22}
		scale := 3.0 * 26 * 24 / (25 * 22)
		if math.Abs(b.Center-scale*f.Quantile(0.5)) > 1e-9 || math.Abs(b.Upper-scale*f.Quantile(0.95)) > 1e-9 || b.HasLower() ||
			math.Abs(b.Z(b.Upper)-3) > 1e-12 || b.Below != math.Sqrt(6) {
			t.Fatalf("%+v", b)
		}
		for _, x := range correlated(rng, 4) {
			v, err := s.Statistic(x)
			if err != nil {
				t.Fatal(err)
			}
			if v > b.Center {
				above++
			}
			if b.Outside(v) > 0 {
				beyond++
			}
		}
	}
	// Four observations share a standard: allow for that with twice the binomial s.d.
	n := float64(4 * rounds)
	if math.Abs(float64(above)/n-0.5) > 6*math.Sqrt(0.25/n) || math.Abs(float64(beyond)/n-0.05) > 6*math.Sqrt(0.05*0.95/n) {
		t.Errorf("%d of %g above the centre, %d beyond the limit", above, n, beyond)
	}
	if _, err := (limits.TSquaredStandard{}).Band(); !errors.Is(err, limits.ErrInput) {
		t.Errorf("not prepared: %v", err)
	}
}

func TestTSquaredStatisticAllocatesNothing(t *testing.T) {
	x := correlated(rand.New(rand.NewPCG(14, 4)), 25)
	s, err := limits.EstimateTSquared(x)
	if err != nil {
		t.Fatal(err)
	}
	if n := testing.AllocsPerRun(100, func() { _, err = s.Statistic(x[3]) }); n != 0 || err != nil {
		t.Errorf("a value of T² allocates %g times, %v", n, err)
	}
}
