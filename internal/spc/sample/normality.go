package sample

import (
	"fmt"
	"math"
	"slices"

	"holdfast/internal/spc/special"
)

// Normality is the result of an Anderson-Darling test.
type Normality struct {
	A2       float64 // the statistic, mean and standard deviation estimated
	Adjusted float64 // A2 (1 + 0.75/n + 2.25/n²)
	P        float64 // probability of a statistic at least this large from a normal law
}

// AndersonDarling tests whether at least three readings, not all equal, come from a
// normal law whose mean and standard deviation (divisor n-1) are estimated from
// them:
//
//	A² = -n - (1/n) Σ (2i-1) (ln Φ(z_i) + ln(1-Φ(z_{n+1-i}))), z sorted
//
// The p value is the published approximation in pieces, made for 8 readings and
// more; for fewer it is rough. It does not change x.
//
// Source: D'Agostino and Stephens, Goodness-of-Fit Techniques (1986), table 4.9.
func AndersonDarling(x []float64) (Normality, error) {
	if err := Check(x, 3); err != nil {
		return Normality{}, err
	}
	if constant(x) {
		return Normality{}, fmt.Errorf("normality: %w", ErrZeroSpread)
	}
	m := moments(x)
	n := len(x)
	sd := math.Sqrt(m.square / float64(n-1))
	z := make([]float64, n)
	for i, v := range x {
		z[i] = (v - m.mean) / sd
	}
	slices.Sort(z)
	if math.IsNaN(z[0]) || math.IsInf(z[0], 0) || math.IsInf(z[n-1], 0) || sd == 0 {
		return Normality{}, overflow()
	}
	total := 0.0
	for i, v := range z {
		lower, upper := special.LogNormalTails(v)
		total += float64(2*i+1)*lower + float64(2*(n-i)-1)*upper
	}
	size := float64(n)
	a2 := -size - total/size
	adjusted := a2 * (1 + 0.75/size + 2.25/(size*size))
	return Normality{A2: a2, Adjusted: adjusted, P: andersonDarlingP(adjusted)}, nil
}

func andersonDarlingP(a float64) float64 {
	switch {
	case a >= 0.6:
		// The parabola turns up again at 153, where p is below 1e-180.
		a = math.Min(a, 153)
		return math.Exp(1.2937 - 5.709*a + 0.0186*a*a)
	case a > 0.34:
		return math.Exp(0.9177 - 4.279*a - 1.38*a*a)
	case a > 0.2:
		return -math.Expm1(-8.318 + 42.796*a - 59.938*a*a)
	}
	return -math.Expm1(-13.436 + 101.14*a - 223.73*a*a)
}
