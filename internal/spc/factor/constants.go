package factor

import (
	"errors"
	"fmt"
	"math"
	"sync"

	"holdfast/internal/spc/special"
)

// MaxSize is the largest subgroup for which the range and the median are
// integrated. C4 and the distribution of S have no such bound.
const MaxSize = 1000

var (
	// ErrSubgroupSize marks a subgroup size outside the stated domain.
	ErrSubgroupSize = errors.New("subgroup size out of range")
	// ErrArgument marks a probability, width or count outside its domain.
	ErrArgument = errors.New("argument out of range")
)

func checkSize(what string, n int) error {
	if n < 2 {
		return fmt.Errorf("%w: %s needs n ≥ 2, got %d", ErrSubgroupSize, what, n)
	}
	if n > MaxSize {
		return fmt.Errorf("%w: %s is computed up to n = %d, got %d", ErrSubgroupSize, what, MaxSize, n)
	}
	return nil
}

// constants are the figures of one subgroup size. Each group is computed at most
// once, when it is first asked for.
type constants struct {
	moments  sync.Once
	d2, d3   float64
	medianW  sync.Once
	median   float64
	medianSE sync.Once
	se       float64
}

var known [MaxSize + 1]constants

// D2 returns d2, the mean of the relative range W = R/σ of n independent normal
// readings, 2 ≤ n ≤ MaxSize:
//
//	d2(n) = ∫ 1 - Φ(x)^n - (1-Φ(x))^n dx
//
// Outside the domain it returns NaN and ErrSubgroupSize.
//
// Source: Tippett, Biometrika 17 (1925), 364-387.
func D2(n int) (float64, error) {
	if err := checkSize("d2", n); err != nil {
		return math.NaN(), err
	}
	return moments(n).d2, nil
}

// D3 returns d3, the standard deviation of the relative range of n independent
// normal readings, 2 ≤ n ≤ MaxSize: d3² = 2 ∫ w P(W > w) dw - d2².
// Outside the domain it returns NaN and ErrSubgroupSize.
//
// Source: Tippett, Biometrika 17 (1925), 364-387.
func D3(n int) (float64, error) {
	if err := checkSize("d3", n); err != nil {
		return math.NaN(), err
	}
	return moments(n).d3, nil
}

func moments(n int) *constants {
	c := &known[n]
	c.moments.Do(func() {
		g := newRangeGrid(n)
		mean, square := 0.0, 0.0
		for i, x := range g.x {
			// 1 - Φ^n - Q^n; by symmetry both halves of the line give the same.
			mean += -math.Expm1(float64(n)*special.LogNormalCDF(x)) - math.Exp(float64(n)*math.Log(g.q[i]))
		}
		c.d2 = mean * g.h
		// Beyond w = 20 less than n² · 1e-45 is left.
		square = 2 * special.Panels(func(w float64) float64 { return w * g.survival(w) }, 0, 20, 6)
		c.d3 = math.Sqrt(square - c.d2*c.d2)
	})
	return c
}

// MedianRange returns the median of the relative range of n independent normal
// readings, 2 ≤ n ≤ MaxSize. For n = 2 it is √2·Φ⁻¹(3/4) = 0.953873,
// the divisor of a median moving range. Outside the domain it returns NaN and
// ErrSubgroupSize.
func MedianRange(n int) (float64, error) {
	if err := checkSize("the median of the relative range", n); err != nil {
		return math.NaN(), err
	}
	c := &known[n]
	c.medianW.Do(func() { c.median = newRangeGrid(n).quantile(0.5) })
	return c.median, nil
}

// C4 returns c4, the factor that removes the bias of the sample standard
// deviation: for n independent normal readings with standard deviation σ and S
// computed with divisor n-1, E[S] = c4·σ. It is in (0, 1), for any n ≥ 2.
//
//	c4(n) = √(2/(n-1)) · Γ(n/2) / Γ((n-1)/2)
//
// For n < 2 it returns NaN and ErrSubgroupSize.
//
// Source: ISO 7870-2, annex; Montgomery, Introduction to Statistical Quality
// Control, appendix VI.
func C4(n int) (float64, error) {
	if n < 2 {
		return math.NaN(), fmt.Errorf("%w: c4 needs n ≥ 2, got %d", ErrSubgroupSize, n)
	}
	return math.Exp(logC4(float64(n - 1))), nil
}

// C5 returns √(1-c4²), the standard deviation of S/σ for n readings, without the
// cancellation that 1-c4² suffers at large n. For n < 2 it returns NaN and
// ErrSubgroupSize.
func C5(n int) (float64, error) {
	if n < 2 {
		return math.NaN(), fmt.Errorf("%w: the standard deviation of S needs n ≥ 2, got %d", ErrSubgroupSize, n)
	}
	return math.Sqrt(-math.Expm1(2 * logC4(float64(n-1)))), nil
}

// logC4 is ln c4 for nu > 0 degrees of freedom, not necessarily whole. With
// z = nu/2, c4 = Γ(z+1/2)/(√z Γ(z)); its logarithm has an asymptotic series in
// odd powers of 1/z (from Stirling's series), exact to the last bit from z = 20
// on. Smaller z are lifted there by the recurrence of Γ.
func logC4(nu float64) float64 {
	z := nu / 2
	product := 1.0
	for y := z; y < 20; y++ {
		product *= y / (y + 0.5)
		z = y + 1
	}
	u := 1 / (z * z)
	l := -(1.0/8 - u*(1.0/192-u*(1.0/640-u*(17.0/14336-u*(31.0/18432-u*691.0/180224))))) / z
	if product == 1 {
		return l
	}
	return l + math.Log(product*math.Sqrt(z/(nu/2)))
}

// MedianSE returns the standard error, in units of σ, of the median of n
// independent normal readings, 1 ≤ n ≤ MaxSize; for even n the median is the mean
// of the middle two. It is integrated from the joint density of the middle
// order statistics, not approximated by √(π/2n). Outside the domain it returns
// NaN and ErrSubgroupSize.
//
// Source: David and Nagaraja, Order Statistics (2003), chapter 2.
func MedianSE(n int) (float64, error) {
	if n == 1 {
		return 1, nil
	}
	if err := checkSize("the standard error of the median", n); err != nil {
		return math.NaN(), err
	}
	c := &known[n]
	c.medianSE.Do(func() { c.se = math.Sqrt(medianVariance(n)) })
	return c.se, nil
}

// medianVariance integrates m² against the density of the median m. Densities
// are left unnormalised and divided out, so no factorial is needed.
func medianVariance(n int) float64 {
	// The density of m is close to normal with variance π/2n and falls faster
	// outside; 16 steps a standard deviation and 10 of them are ample.
	h := math.Sqrt(math.Pi/2/float64(n)) / 8
	power := float64((n - 1) / 2)
	density := func(m float64) float64 {
		if n%2 == 1 {
			return math.Exp(-m*m/2 + power*(special.LogNormalCDF(m)+special.LogNormalCDF(-m)+2*math.Ln2))
		}
		// Half the gap d between the middle two, given their midpoint m.
		within := func(d float64) float64 {
			return math.Exp(-m*m - d*d + power*(special.LogNormalCDF(m-d)+special.LogNormalCDF(-m-d)+2*math.Ln2))
		}
		reach := math.Min(7, 25/(power+1))
		return special.Panels(within, 0, reach, 3)
	}
	mass, square := density(0)/2, 0.0
	for i := 1; i <= 96; i++ {
		m := h * float64(i)
		f := density(m)
		mass += f
		square += f * m * m
	}
	return square / mass
}
