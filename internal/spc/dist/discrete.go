package dist

import (
	"fmt"
	"math"

	"holdfast/internal/spc/special"
)

// BinomialPMF returns P(X = k) for n ≥ 0 trials with probability p each; 0 where k
// is outside 0..n.
func BinomialPMF(k, n int, p float64) (float64, error) {
	if err := first(trials(n), fraction("the proportion", p)); err != nil {
		return math.NaN(), err
	}
	if k < 0 || k > n {
		return 0, nil
	}
	return special.BinomialPMF(float64(k), float64(n), p, 1-p), nil
}

// BinomialCDF returns P(X ≤ k) for n ≥ 0 trials with probability p each.
func BinomialCDF(k, n int, p float64) (float64, error) {
	lower, _, err := binomialTails(k, n, p)
	return lower, err
}

// BinomialSurvival returns P(X > k) for n ≥ 0 trials with probability p each.
func BinomialSurvival(k, n int, p float64) (float64, error) {
	_, upper, err := binomialTails(k, n, p)
	return upper, err
}

// binomialTails uses P(X > k) = I_p(k+1, n-k), Abramowitz and Stegun 26.5.24.
func binomialTails(k, n int, p float64) (lower, upper float64, err error) {
	if err := first(trials(n), fraction("the proportion", p)); err != nil {
		return math.NaN(), math.NaN(), err
	}
	switch {
	case k < 0:
		return 0, 1, nil
	case k >= n:
		return 1, 0, nil
	}
	upper, lower = special.Beta(float64(k)+1, float64(n-k), p, 1-p)
	return lower, upper, nil
}

func trials(n int) error {
	if n < 0 || n > MaxParameter {
		return fmt.Errorf("%w: the number of trials must be 0 to %g, got %d", ErrArgument, MaxParameter, n)
	}
	return nil
}

// PoissonPMF returns P(X = k) for the given mean ≥ 0; 0 for negative k.
func PoissonPMF(k int, mean float64) (float64, error) {
	if err := meanOK(mean); err != nil {
		return math.NaN(), err
	}
	if k < 0 {
		return 0, nil
	}
	return special.PoissonPMF(float64(k), mean), nil
}

// PoissonCDF returns P(X ≤ k) for the given mean ≥ 0.
func PoissonCDF(k int, mean float64) (float64, error) {
	lower, _, err := poissonTails(k, mean)
	return lower, err
}

// PoissonSurvival returns P(X > k) for the given mean ≥ 0.
func PoissonSurvival(k int, mean float64) (float64, error) {
	_, upper, err := poissonTails(k, mean)
	return upper, err
}

// poissonTails uses P(X > k) = P(k+1, mean), Abramowitz and Stegun 26.4.21.
func poissonTails(k int, mean float64) (lower, upper float64, err error) {
	if err := meanOK(mean); err != nil {
		return math.NaN(), math.NaN(), err
	}
	if k < 0 {
		return 0, 1, nil
	}
	upper, lower = special.Gamma(float64(k)+1, mean)
	return lower, upper, nil
}

func meanOK(mean float64) error {
	if !(mean >= 0 && mean <= MaxParameter) {
		return fmt.Errorf("%w: the mean must be 0 to %g, got %g", ErrArgument, MaxParameter, mean)
	}
	return nil
}

// HypergeometricPMF returns P(X = k), X the number of nonconforming units in a
// sample of n drawn without replacement from a lot of the given size holding
// marked nonconforming ones; 0 ≤ marked, n ≤ lot.
func HypergeometricPMF(k, lot, marked, n int) (float64, error) {
	h, err := newHypergeometric(lot, marked, n)
	if err != nil {
		return math.NaN(), err
	}
	return h.pmf(k), nil
}

// HypergeometricCDF returns P(X ≤ k); arguments as for HypergeometricPMF.
func HypergeometricCDF(k, lot, marked, n int) (float64, error) {
	h, err := newHypergeometric(lot, marked, n)
	if err != nil {
		return math.NaN(), err
	}
	lower, _ := h.tails(k)
	return lower, nil
}

// HypergeometricSurvival returns P(X > k); arguments as for HypergeometricPMF.
func HypergeometricSurvival(k, lot, marked, n int) (float64, error) {
	h, err := newHypergeometric(lot, marked, n)
	if err != nil {
		return math.NaN(), err
	}
	_, upper := h.tails(k)
	return upper, nil
}

type hypergeometric struct {
	lot, marked, n int
	least, most    int // where the probability is not 0
}

func newHypergeometric(lot, marked, n int) (hypergeometric, error) {
	switch {
	case lot < 1 || lot > MaxParameter:
		return hypergeometric{}, fmt.Errorf("%w: the lot must hold 1 to %g units, got %d", ErrArgument, MaxParameter, lot)
	case marked < 0 || marked > lot:
		return hypergeometric{}, fmt.Errorf("%w: a lot of %d cannot hold %d nonconforming units", ErrArgument, lot, marked)
	case n < 0 || n > lot:
		return hypergeometric{}, fmt.Errorf("%w: a sample of %d cannot be drawn from a lot of %d", ErrArgument, n, lot)
	}
	return hypergeometric{lot, marked, n, max(0, n+marked-lot), min(n, marked)}, nil
}

// pmf writes the probability as a quotient of three binomial ones, whose large
// factorials have already been divided out (Loader 2000).
func (h hypergeometric) pmf(k int) float64 {
	if k < h.least || k > h.most {
		return 0
	}
	if h.n == 0 || h.n == h.lot || h.marked == 0 || h.marked == h.lot {
		return 1
	}
	p := float64(h.n) / float64(h.lot)
	q := float64(h.lot-h.n) / float64(h.lot)
	return special.BinomialPMF(float64(k), float64(h.marked), p, q) *
		special.BinomialPMF(float64(h.n-k), float64(h.lot-h.marked), p, q) /
		special.BinomialPMF(float64(h.n), float64(h.lot), p, q)
}

// tails sums the shorter side from the point nearest the mode outwards, where
// terms fall; it stops once they no longer count.
func (h hypergeometric) tails(k int) (lower, upper float64) {
	switch {
	case k < h.least:
		return 0, 1
	case k >= h.most:
		return 1, 0
	}
	if float64(k)*float64(h.lot) <= float64(h.n)*float64(h.marked) {
		lower = math.Min(1, h.sum(k, -1))
		return lower, 1 - lower
	}
	upper = math.Min(1, h.sum(k+1, 1))
	return 1 - upper, upper
}

func (h hypergeometric) sum(from, step int) float64 {
	term := h.pmf(from)
	total := term
	for k := from; term > total*1e-18; {
		if step > 0 {
			term *= float64(h.marked-k) / float64(k+1) * (float64(h.n-k) / float64(h.lot-h.marked-h.n+k+1))
			k++
		} else {
			term *= float64(k) / float64(h.marked-k+1) * (float64(h.lot-h.marked-h.n+k) / float64(h.n-k+1))
			k--
		}
		if k < h.least || k > h.most {
			break
		}
		total += term
	}
	return total
}
