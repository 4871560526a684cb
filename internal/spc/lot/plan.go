package lot

import (
	"math"

	"holdfast/internal/spc/dist"
	"holdfast/internal/spc/special"
)

// Plan is a single sampling plan: accept the lot when at most C nonconforming units are
// found among N.
type Plan struct{ N, C int }

// AcceptsFound reports whether the plan accepts lots in which nonconforming units were
// found, as every plan with an acceptance number above zero does.
func (p Plan) AcceptsFound() bool { return p.C > 0 }

// Inspection is how lots are inspected.
type Inspection struct {
	Plan  Plan
	Model Model
	// Lot is the number of units in a lot; 0 stands for an endless one. The
	// hypergeometric model needs it.
	Lot    int
	Errors Errors
}

func (i Inspection) check() error {
	if err := scope(i.Model, i.Lot, i.Errors); err != nil {
		return err
	}
	switch {
	case i.Plan.N < 1 || i.Plan.N > MaxSample:
		return invalid("the sample must be 1 to %d units, got %d", MaxSample, i.Plan.N)
	case i.Plan.C < 0 || i.Plan.C >= i.Plan.N:
		return invalid("the acceptance number must be 0 to %d, one below the sample, got %d", i.Plan.N-1, i.Plan.C)
	case i.Lot > 0 && i.Plan.N > i.Lot:
		return invalid("a sample of %d cannot be drawn from a lot of %d", i.Plan.N, i.Lot)
	case i.Model == Hypergeometric && !i.Errors.none() && i.Plan.N > MaxErrorSample:
		return invalid("with inspection error the hypergeometric model takes samples up to %d, got %d", MaxErrorSample, i.Plan.N)
	}
	return nil
}

// scope checks what all plans share.
func scope(m Model, lot int, e Errors) error {
	switch m {
	case Binomial, Poisson:
	case Hypergeometric:
		if lot == 0 {
			return invalid("the hypergeometric model needs the number of units in a lot")
		}
	default:
		return invalid("there is no model %q", m)
	}
	if lot < 0 || lot > MaxLot {
		return invalid("a lot must hold 1 to %d units, got %d", MaxLot, lot)
	}
	return e.check()
}

// Accept returns the probability that a lot with the fraction p nonconforming is
// accepted.
//
// Inspection error turns p into the apparent fraction for the binomial and Poisson
// models. In the hypergeometric model each unit of the sample is judged rightly or
// wrongly on its own: the sum over the nonconforming units that the sample may hold.
//
// Source: Montgomery, Introduction to Statistical Quality Control, chapter 15.
func (i Inspection) Accept(p float64) (float64, error) {
	if err := i.check(); err != nil {
		return math.NaN(), err
	}
	if err := fractionOK("the fraction nonconforming", p); err != nil {
		return math.NaN(), err
	}
	return i.accept(p)
}

// accept is Accept without checks.
func (i Inspection) accept(p float64) (float64, error) {
	switch i.Model {
	case Binomial:
		return dist.BinomialCDF(i.Plan.C, i.Plan.N, i.Errors.Apparent(p))
	case Poisson:
		return dist.PoissonCDF(i.Plan.C, float64(i.Plan.N)*i.Errors.Apparent(p))
	}
	bad := nonconforming(i.Lot, p)
	if i.Errors.none() {
		return dist.HypergeometricCDF(i.Plan.C, i.Lot, bad, i.Plan.N)
	}
	return i.acceptWithError(bad)
}

// acceptWithError sums over the nonconforming units d in the sample: of them those not
// missed are found, and of the n-d others some are rejected falsely.
func (i Inspection) acceptWithError(bad int) (float64, error) {
	n, c := i.Plan.N, i.Plan.C
	share := float64(bad) / float64(i.Lot)
	low, high := around(float64(n)*share, float64(n)*share*(1-share), n)
	hit, e1 := 1-i.Errors.Miss, i.Errors.FalseReject
	total := 0.0
	atMost := make([]float64, c+1) // probability of at most so many false rejects
	for d := max(low, n+bad-i.Lot); d <= min(high, bad); d++ {
		weight, err := dist.HypergeometricPMF(d, i.Lot, bad, n)
		if err != nil {
			return math.NaN(), err
		}
		if weight < 1e-18 {
			continue
		}
		sum := 0.0
		for j := range atMost {
			if j <= n-d {
				sum += special.BinomialPMF(float64(j), float64(n-d), e1, 1-e1)
			}
			atMost[j] = math.Min(1, sum)
		}
		from, to := around(float64(d)*hit, float64(d)*hit*i.Errors.Miss, d)
		for k := from; k <= min(to, c); k++ {
			total += weight * special.BinomialPMF(float64(k), float64(d), hit, i.Errors.Miss) * atMost[c-k]
		}
	}
	return math.Min(1, total), nil
}

// around bounds where a count of at most n with this mean and variance has probability
// that matters.
func around(mean, variance float64, n int) (low, high int) {
	reach := 10*math.Sqrt(variance) + 20
	return int(math.Max(0, mean-reach)), int(math.Min(float64(n), mean+reach))
}

// AOQ returns the average outgoing quality at a fraction p: what reaches the customer
// when rejected lots are screened and nonconforming units replaced by good ones,
// p Pa (N-n)/N, or p Pa for an endless lot. Screening itself is taken to be free of
// error.
//
// Source: Montgomery, Introduction to Statistical Quality Control, section 15.2.
func (i Inspection) AOQ(p float64) (float64, error) {
	pa, err := i.Accept(p)
	return p * pa * i.left(), err
}

// left is the share of a lot that is not inspected when it is accepted.
func (i Inspection) left() float64 {
	if i.Lot == 0 {
		return 1
	}
	return float64(i.Lot-i.Plan.N) / float64(i.Lot)
}

// ATI returns the average total inspection of a lot at a fraction p, n + (1-Pa)(N-n);
// it needs the size of the lot.
func (i Inspection) ATI(p float64) (float64, error) {
	pa, err := i.Accept(p)
	if err != nil {
		return math.NaN(), err
	}
	if i.Lot == 0 {
		return math.NaN(), invalid("the total inspection of an endless lot does not exist: give the number of units in a lot")
	}
	return i.ati(pa), nil
}

func (i Inspection) ati(pa float64) float64 {
	return float64(i.Plan.N) + (1-pa)*float64(i.Lot-i.Plan.N)
}

// AOQL returns the largest average outgoing quality over all fractions and the
// fraction at which it is reached.
func (i Inspection) AOQL() (aoql, at float64, err error) {
	if err := i.check(); err != nil {
		return math.NaN(), math.NaN(), err
	}
	return i.aoql()
}

// aoql searches p·Pa(p), which has one peak: both factors are log-concave in p.
func (i Inspection) aoql() (aoql, at float64, err error) {
	var failed error
	value := func(p float64) float64 {
		pa, err := i.accept(p)
		if err != nil {
			failed = err
		}
		return p * pa
	}
	if i.Model == Hypergeometric {
		at = peakWhole(i.Lot, func(d int) float64 { return value(float64(d) / float64(i.Lot)) })
	} else {
		at = peak(value)
	}
	if failed != nil {
		return math.NaN(), math.NaN(), failed
	}
	return value(at) * i.left(), at, nil
}

const golden = 0.6180339887498949

// peak finds the maximum of a function with one peak on 0 to 1 by golden sections. The
// peak may be very near zero, so the search runs over ln p.
func peak(f func(float64) float64) float64 {
	low, high := math.Log(1e-12), 0.0
	g := func(u float64) float64 { return f(math.Exp(u)) }
	a, b := high-golden*(high-low), low+golden*(high-low)
	fa, fb := g(a), g(b)
	// Far above the peak both values may be 0: the peak is then below.
	for high-low > 1e-9 {
		if fa >= fb {
			high, b, fb = b, a, fa
			a = high - golden*(high-low)
			fa = g(a)
		} else {
			low, a, fa = a, b, fb
			b = low + golden*(high-low)
			fb = g(b)
		}
	}
	best := math.Exp((low + high) / 2)
	if f(1) > f(best) {
		return 1
	}
	return best
}

// peakWhole is peak over d of n, d = 0..n.
func peakWhole(n int, f func(d int) float64) float64 {
	low, high := 0, n
	for high-low > 3 {
		third := (high - low) / 3
		a, b := low+third, high-third
		if f(a) >= f(b) {
			high = b
		} else {
			low = a
		}
	}
	best := low
	for d := low + 1; d <= high; d++ {
		if f(d) > f(best) {
			best = d
		}
	}
	return float64(best) / float64(n)
}
