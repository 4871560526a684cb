package lot

import (
	"fmt"
	"math"
	"sort"
)

// Risks are two points of an operating characteristic: lots with a fraction P1 are
// good and may be rejected with at most the probability Alpha, lots with a fraction P2
// are bad and may be accepted with at most the probability Beta.
type Risks struct{ P1, Alpha, P2, Beta float64 }

func (r Risks) check() error {
	if err := fractionOK("p1", r.P1); err != nil {
		return err
	}
	if err := fractionOK("p2", r.P2); err != nil {
		return err
	}
	if !(r.P1 < r.P2) {
		return invalid("p1 = %g must be below p2 = %g", r.P1, r.P2)
	}
	for _, v := range []struct {
		name string
		risk float64
	}{{"alpha", r.Alpha}, {"beta", r.Beta}} {
		if !(v.risk > 0 && v.risk < 1) {
			return invalid("%s must lie between 0 and 1, got %g", v.name, v.risk)
		}
	}
	if r.Alpha+r.Beta >= 1 {
		return invalid("alpha %g and beta %g add up to 1 or more: no plan has to tell good lots from bad", r.Alpha, r.Beta)
	}
	return nil
}

// Found is a plan with the risks it reaches.
type Found struct {
	Plan        Plan
	Alpha, Beta float64
}

// Smallest returns the plan with the least sample for which some acceptance number
// keeps both risks, and of these the least acceptance number. With inspection error
// the plan keeps them for the true fractions. Samples up to MaxSample (or the lot) are
// searched; ErrNoPlan when none will do.
//
// For a given acceptance number the risk beta bounds the sample from below; for a
// given sample the risk alpha bounds the acceptance number from below. Taking turns
// skips only what cannot do and stops at the least of both.
//
// Source: the taking of turns follows Guenther, Journal of Quality Technology 1 (1969)
// (from memory).
func Smallest(r Risks, m Model, lot int, e Errors) (Found, error) {
	if err := r.check(); err != nil {
		return Found{}, err
	}
	if err := scope(m, lot, e); err != nil {
		return Found{}, err
	}
	s := search{Inspection: Inspection{Model: m, Lot: lot, Errors: e}, most: MaxSample}
	if m == Hypergeometric {
		if nonconforming(lot, r.P1) == nonconforming(lot, r.P2) {
			return Found{}, fmt.Errorf("%w: a lot of %d holds %d nonconforming units at both p1 and p2", ErrNoPlan, lot, nonconforming(lot, r.P1))
		}
		if !e.none() {
			s.most = MaxErrorSample
		}
	}
	if lot > 0 {
		s.most = min(s.most, lot)
	}
	p := Plan{N: 1}
	for {
		n, ok := s.leastSample(p.C, max(p.N, p.C+1), r.P2, r.Beta)
		if !ok {
			return Found{}, s.none()
		}
		c, ok := s.leastNumber(n, p.C, r.P1, 1-r.Alpha)
		if !ok {
			// Not even n-1 will do: the number must be n or more, in a larger sample.
			c = n
		}
		if c == p.C {
			p.N = n
			break
		}
		p = Plan{n, c}
	}
	if s.failed != nil {
		return Found{}, s.failed
	}
	return Found{p, 1 - s.at(p, r.P1), s.at(p, r.P2)}, nil
}

// search evaluates plans under one inspection.
type search struct {
	Inspection
	most   int // largest sample
	failed error
}

func (s *search) none() error {
	if s.failed != nil {
		return s.failed
	}
	return fmt.Errorf("%w: no sample up to %d keeps both risks", ErrNoPlan, s.most)
}

func (s *search) at(p Plan, fraction float64) float64 {
	s.Plan = p
	pa, err := s.accept(fraction)
	if err != nil {
		s.failed = err
	}
	return pa
}

// leastSample finds the least n from `from` on with an acceptance of at most risk; it
// falls with n.
func (s *search) leastSample(c, from int, fraction, risk float64) (int, bool) {
	return least(from, s.most, func(n int) bool { return s.at(Plan{n, c}, fraction) <= risk })
}

// leastNumber finds the least c from `from` on with an acceptance of at least pa; it
// rises with c.
func (s *search) leastNumber(n, from int, fraction, pa float64) (int, bool) {
	return least(from, n-1, func(c int) bool { return s.at(Plan{n, c}, fraction) >= pa })
}

// least finds the least value from..most for which a condition that stays true once it
// is true holds, by doubling steps and then halving.
func least(from, most int, ok func(int) bool) (int, bool) {
	if from > most {
		return 0, false
	}
	if ok(from) {
		return from, true
	}
	low := from
	for step := 1; ; step *= 2 {
		high := min(low+step, most)
		if ok(high) {
			return low + 1 + sort.Search(high-low-1, func(k int) bool { return ok(low + 1 + k) }), true
		}
		if high == most {
			return 0, false
		}
		low = high
	}
}

// Rectifying is a plan for lots that are screened when rejected.
type Rectifying struct {
	Plan Plan
	ATI  float64 // average total inspection at the process average
	// AOQL of the plan, and the probability of accepting a lot at the LTPD when one
	// was given.
	AOQL   float64
	AtLTPD *float64
}

// LeastForLTPD returns the plan of least average total inspection at the process
// average that accepts lots at the LTPD with at most the probability beta (0.1 is
// usual). The lot must have a size. Screening every lot is the bound: ErrNoPlan when no
// plan inspects less.
//
// Source: Dodge and Romig, Sampling Inspection Tables (1959): the idea; the plans are
// computed.
func LeastForLTPD(ltpd, beta, processAverage float64, m Model, lot int, e Errors) (Rectifying, error) {
	if err := fractionOK("the LTPD", ltpd); err != nil {
		return Rectifying{}, err
	}
	if !(beta > 0 && beta < 1) {
		return Rectifying{}, invalid("beta must lie between 0 and 1, got %g", beta)
	}
	if !(processAverage < ltpd) {
		return Rectifying{}, invalid("the process average %g must be below the LTPD %g", processAverage, ltpd)
	}
	r, err := leastInspection(processAverage, m, lot, e, func(s *search, c, from int) (int, bool) {
		return s.leastSample(c, from, ltpd, beta)
	})
	if err != nil {
		return Rectifying{}, err
	}
	i := Inspection{Plan: r.Plan, Model: m, Lot: lot, Errors: e}
	pa, err := i.Accept(ltpd)
	r.AtLTPD = &pa
	return r, err
}

// LeastForAOQL returns the plan of least average total inspection at the process
// average whose AOQL is at most the given one. Conditions are those of LeastForLTPD.
//
// Source: as LeastForLTPD.
func LeastForAOQL(aoql, processAverage float64, m Model, lot int, e Errors) (Rectifying, error) {
	if !(aoql > 0 && aoql < 1) {
		return Rectifying{}, invalid("the AOQL must lie between 0 and 1, got %g", aoql)
	}
	return leastInspection(processAverage, m, lot, e, func(s *search, c, from int) (int, bool) {
		return least(from, s.most, func(n int) bool {
			s.Plan = Plan{n, c}
			limit, _, err := s.aoql()
			if err != nil {
				s.failed = err
			}
			return limit <= aoql
		})
	})
}

// leastInspection tries acceptance numbers upwards; for each the least sample that
// protects is the cheapest. It stops once the sample alone costs more than the best
// plan in all.
func leastInspection(average float64, m Model, lot int, e Errors, protects func(s *search, c, from int) (int, bool)) (Rectifying, error) {
	if err := fractionOK("the process average", average); err != nil {
		return Rectifying{}, err
	}
	if err := scope(m, lot, e); err != nil {
		return Rectifying{}, err
	}
	if lot == 0 {
		return Rectifying{}, invalid("the total inspection of an endless lot does not exist: give the number of units in a lot")
	}
	if lot > MaxSample {
		return Rectifying{}, invalid("plans of least inspection are searched for lots up to %d units, got %d", MaxSample, lot)
	}
	if m == Hypergeometric && !e.none() {
		return Rectifying{}, invalid("inspection error in a plan of least inspection is taken through the binomial or the Poisson model only")
	}
	s := &search{Inspection: Inspection{Model: m, Lot: lot, Errors: e}, most: lot - 1}
	best := Rectifying{ATI: float64(lot)}
	for c, n := 0, 1; ; c++ {
		var ok bool
		n, ok = protects(s, c, max(n, c+1))
		if s.failed != nil {
			return Rectifying{}, s.failed
		}
		if !ok || float64(n) >= best.ATI {
			break
		}
		pa := s.at(Plan{n, c}, average)
		if total := s.ati(pa); total < best.ATI {
			best.Plan, best.ATI = s.Plan, total
		}
	}
	if best.Plan.N == 0 {
		return Rectifying{}, fmt.Errorf("%w: no plan inspects less than screening every lot of %d", ErrNoPlan, lot)
	}
	s.Plan = best.Plan
	var err error
	best.AOQL, _, err = s.aoql()
	if math.IsNaN(best.ATI) {
		return Rectifying{}, s.none()
	}
	return best, err
}
