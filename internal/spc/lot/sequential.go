package lot

import "math"

// Sequential is an item by item plan: after n units with d nonconforming, accept when d
// ≤ Slope·n - H1, reject when d ≥ Slope·n + H2, else inspect one more.
type Sequential struct{ H1, H2, Slope float64 }

// NewSequential returns Wald's plan for two risks, 0 < p1 < p2 < 1. It keeps alpha/(1-
// beta) and beta/(1-alpha), and alpha + beta between them, exactly the risks asked for
// only nearly.
//
// Source: Wald, Sequential Analysis (1947), chapter 5.
func NewSequential(r Risks) (Sequential, error) {
	if err := r.check(); err != nil {
		return Sequential{}, err
	}
	if r.P1 == 0 || r.P2 == 1 {
		return Sequential{}, invalid("a sequential plan needs p1 above 0 and p2 below 1, got %g and %g", r.P1, r.P2)
	}
	good := math.Log1p(-r.P1) - math.Log1p(-r.P2)
	k := math.Log(r.P2) - math.Log(r.P1) + good
	s := Sequential{
		H1:    (math.Log1p(-r.Alpha) - math.Log(r.Beta)) / k,
		H2:    (math.Log1p(-r.Beta) - math.Log(r.Alpha)) / k,
		Slope: good / k,
	}
	for _, v := range []float64{s.H1, s.H2, s.Slope} {
		if !(v > 0) || math.IsInf(v, 0) {
			return Sequential{}, invalid("p1 = %g and p2 = %g are too near to tell apart", r.P1, r.P2)
		}
	}
	return s, nil
}

// Step is what a sequential plan allows after n units: nil where a decision is not
// possible yet.
type Step struct{ AcceptAtMost, RejectAtLeast *int }

// At returns the decision numbers after n units, 1 ≤ n ≤ MaxSample.
func (s Sequential) At(n int) (Step, error) {
	if n < 1 || n > MaxSample {
		return Step{}, invalid("the number of units must be 1 to %d, got %d", MaxSample, n)
	}
	if !(s.H1 > 0 && s.H2 > 0 && s.Slope > 0 && s.Slope < 1) || s.H1 > MaxLot || s.H2 > MaxLot {
		return Step{}, invalid("a sequential plan has intercepts above 0 and a slope between 0 and 1, got %g, %g and %g", s.H1, s.H2, s.Slope)
	}
	line := s.Slope * float64(n)
	var step Step
	if a := int(math.Floor(line - s.H1)); line >= s.H1 {
		step.AcceptAtMost = &a
	}
	if r := int(math.Ceil(line + s.H2)); r <= n {
		step.RejectAtLeast = &r
	}
	return step, nil
}
