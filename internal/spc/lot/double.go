package lot

import "holdfast/internal/spc/dist"

// DoublePlan is a double sampling plan: with d1 nonconforming among the first N1, accept
// when d1 ≤ C1, reject when d1 ≥ R1; otherwise draw N2 more and accept when d1 + d2 ≤
// C2.
type DoublePlan struct{ N1, C1, R1, N2, C2 int }

// MaxDoubleNumber is the largest rejection number R1 of a double plan.
const MaxDoubleNumber = 10_000

// DoubleCurve is a double plan at one fraction nonconforming.
type DoubleCurve struct {
	AcceptFirst, RejectFirst float64 // on the first sample
	AcceptSecond             float64 // on the second
	Accept                   float64 // in all
	ASN                      float64 // average sample number, both samples inspected in full
	// ASNCurtailed stops the second sample as soon as rejection is certain; the first
	// is always inspected in full, since it tells the process average.
	ASNCurtailed float64
}

// DoubleInspection is how lots are inspected by a double plan.
type DoubleInspection struct {
	Plan   DoublePlan
	Model  Model
	Lot    int // 0 stands for an endless lot
	Errors Errors
}

func (i DoubleInspection) check() error {
	if err := scope(i.Model, i.Lot, i.Errors); err != nil {
		return err
	}
	p := i.Plan
	switch {
	case p.N1 < 1 || p.N2 < 1 || p.N1 > MaxSample || p.N2 > MaxSample:
		return invalid("both samples must be 1 to %d units, got %d and %d", MaxSample, p.N1, p.N2)
	case p.C1 < 0:
		return invalid("the first acceptance number must be 0 or above, got %d", p.C1)
	case p.R1 <= p.C1:
		return invalid("the first rejection number %d must be above the first acceptance number %d", p.R1, p.C1)
	case p.R1 > MaxDoubleNumber:
		return invalid("the first rejection number must be at most %d, got %d", MaxDoubleNumber, p.R1)
	case p.C2 < p.C1 || p.C2 > MaxSample:
		return invalid("the second acceptance number %d must be at least the first, %d", p.C2, p.C1)
	case i.Lot > 0 && p.N1+p.N2 > i.Lot:
		return invalid("samples of %d and %d cannot be drawn from a lot of %d", p.N1, p.N2, i.Lot)
	case i.Model == Hypergeometric && !i.Errors.none():
		return invalid("inspection error in a double plan is taken through the binomial or the Poisson model only")
	}
	return nil
}

// At evaluates the plan at a fraction p. In the hypergeometric model the second sample
// comes from what the first has left.
//
// Source: Montgomery, Introduction to Statistical Quality Control, section 15.3.
func (i DoubleInspection) At(p float64) (DoubleCurve, error) {
	if err := i.check(); err != nil {
		return DoubleCurve{}, err
	}
	if err := fractionOK("the fraction nonconforming", p); err != nil {
		return DoubleCurve{}, err
	}
	plan := i.Plan
	var failed error
	keep := func(v float64, err error) float64 {
		if err != nil {
			failed = err
		}
		return v
	}
	l := i.laws(p)
	c := DoubleCurve{
		AcceptFirst: keep(l.cdf(plan.C1)),
		RejectFirst: keep(l.survival(plan.R1 - 1)),
	}
	again := 0.0 // probability of a second sample
	inspected := 0.0
	for d := plan.C1 + 1; d < plan.R1; d++ {
		weight := keep(l.pmf(d))
		if weight == 0 {
			continue
		}
		again += weight
		left := plan.C2 - d
		if left < 0 {
			// Rejection is certain: nothing of the second sample is inspected when
			// curtailed, and nothing can be accepted.
			continue
		}
		accept, units := l.second(d, left, keep)
		c.AcceptSecond += weight * accept
		inspected += weight * units
	}
	c.Accept = c.AcceptFirst + c.AcceptSecond
	c.ASN = float64(plan.N1) + float64(plan.N2)*again
	c.ASNCurtailed = float64(plan.N1) + inspected
	return c, failed
}

// laws are the distributions of the two samples at one fraction.
type laws struct {
	cdf, survival, pmf func(d int) (float64, error)
	// second returns the probability of at most `left` more after d in the first
	// sample, and the mean number inspected until one too many is found.
	second func(d, left int, keep func(float64, error) float64) (accept, units float64)
}

func (i DoubleInspection) laws(p float64) laws {
	n1, n2 := i.Plan.N1, i.Plan.N2
	size := float64(n2)
	seen := i.Errors.Apparent(p)
	switch i.Model {
	case Binomial:
		return laws{
			func(d int) (float64, error) { return dist.BinomialCDF(d, n1, seen) },
			func(d int) (float64, error) { return dist.BinomialSurvival(d, n1, seen) },
			func(d int) (float64, error) { return dist.BinomialPMF(d, n1, seen) },
			// Of the waiting time T for the r-th: t P(T = t) = (r/p) P(T' = t+1), T' the
			// wait for the (r+1)-th.
			func(_, left int, keep func(float64, error) float64) (float64, float64) {
				accept := keep(dist.BinomialCDF(left, n2, seen))
				beyond := keep(dist.BinomialSurvival(left+1, n2+1, seen))
				return accept, size*accept + wait(float64(left+1)/seen, beyond)
			},
		}
	case Poisson:
		mean := float64(n1) * seen
		return laws{
			func(d int) (float64, error) { return dist.PoissonCDF(d, mean) },
			func(d int) (float64, error) { return dist.PoissonSurvival(d, mean) },
			func(d int) (float64, error) { return dist.PoissonPMF(d, mean) },
			func(_, left int, keep func(float64, error) float64) (float64, float64) {
				accept := keep(dist.PoissonCDF(left, size*seen))
				beyond := keep(dist.PoissonSurvival(left+1, size*seen))
				return accept, size*accept + wait(float64(left+1)/seen, beyond)
			},
		}
	}
	bad := nonconforming(i.Lot, p)
	rest := i.Lot - n1
	return laws{
		func(d int) (float64, error) { return dist.HypergeometricCDF(d, i.Lot, bad, n1) },
		func(d int) (float64, error) { return dist.HypergeometricSurvival(d, i.Lot, bad, n1) },
		func(d int) (float64, error) { return dist.HypergeometricPMF(d, i.Lot, bad, n1) },
		func(d, left int, keep func(float64, error) float64) (float64, float64) {
			accept := keep(dist.HypergeometricCDF(left, rest, bad-d, n2))
			beyond := keep(dist.HypergeometricSurvival(left+1, rest+1, bad-d+1, n2+1))
			return accept, size*accept + wait(float64(left+1)*float64(rest+1)/float64(bad-d+1), beyond)
		},
	}
}

// wait multiplies a mean wait, perhaps endless, by the probability that it ends.
func wait(mean, probability float64) float64 {
	if probability == 0 {
		return 0
	}
	return mean * probability
}
