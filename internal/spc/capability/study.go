package capability

import (
	"math"

	"holdfast/internal/spc/limits"
	"holdfast/internal/spc/sample"
)

// Subgroup holds the readings of one subgroup in the order they were taken.
type Subgroup struct {
	Readings []float64
	// Break marks a subgroup after a gap or a boundary: no moving range reaches
	// back across it.
	Break bool
}

// Singles makes subgroups of one from readings that follow each other.
func Singles(values []float64) []Subgroup {
	out := make([]Subgroup, len(values))
	for i := range values {
		out[i].Readings = values[i : i+1]
	}
	return out
}

// Options of a Study; the zero value has the defaults.
type Options struct {
	Confidence float64 // of all intervals and bounds; 0 means 0.95
	// Estimator of sigma within; "" means the pooled one, and the mean moving range
	// when every subgroup is a single reading.
	Estimator limits.Estimator
}

// Index is a capability index with how well it is known.
type Index struct {
	Value float64
	// Interval is two-sided: by chi-square for Cp and Pp, by Bissell's
	// approximation for Cpk and Ppk.
	Interval Interval
	// LowerBound is one-sided: by chi-square for Cp and Pp, by the noncentral t for
	// Cpk and Ppk (exact for a one-sided specification, safe for a two-sided one).
	LowerBound float64
}

// Study is the result of comparing readings with a specification.
type Study struct {
	N, Subgroups              int
	Mean                      float64
	SigmaWithin, SigmaOverall float64 // of a reading
	DFWithin                  float64 // degrees of freedom of SigmaWithin
	Cp, Cpk, Pp, Ppk          *Index
	Cpm                       *float64
	Expected                  PPM // normal, from Mean and SigmaOverall
	Observed                  PPM // readings strictly outside
}

// Assess computes the indices of readings in subgroups.
//
//	Cp  = (U-L)/6σ_w           Pp  = (U-L)/6s
//	Cpk = min(U-X̄, X̄-L)/3σ_w   Ppk = min(U-X̄, X̄-L)/3s
//	Cpm = (U-L)/(6 √(s² + (X̄-T)²))
//
// σ_w is the sigma within by the estimator, s the s.d. of all readings with divisor
// N-1. With one limit there are Cpk and Ppk of that side only. The degrees of freedom
// of the intervals are N-1 for s and the estimator's own for σ_w. No index says
// anything about a process that is not stable.
//
// It fails without a limit, for fewer than two readings, when nothing varies, and
// when the estimator does not fit the subgroups.
//
// Source: Montgomery, Introduction to Statistical Quality Control, chapter 8; Cpm:
// Chan, Cheng and Spiring, Journal of Quality Technology 20 (1988), 162-175.
func Assess(subgroups []Subgroup, spec Specification, opt Options) (Study, error) {
	if err := spec.check(); err != nil {
		return Study{}, err
	}
	if opt.Confidence == 0 {
		opt.Confidence = 0.95
	}
	if err := confidenceOK(opt.Confidence); err != nil {
		return Study{}, err
	}
	x, singles := flatten(subgroups)
	if err := readings(x, 2); err != nil {
		return Study{}, err
	}
	within, err := estimateWithin(subgroups, opt.Estimator, singles)
	if err != nil {
		return Study{}, err
	}
	s := Study{N: len(x), Subgroups: len(subgroups), SigmaWithin: within.Sigma, DFWithin: within.DF}
	if s.Mean, err = sample.Mean(x); err != nil {
		return Study{}, err
	}
	if s.SigmaOverall, err = sample.SD(x); err != nil {
		return Study{}, err
	}
	if s.SigmaOverall == 0 {
		return Study{}, invalid("the readings differ by too little to compute with")
	}
	if s.Cp, s.Cpk, err = s.indices(spec, s.SigmaWithin, s.DFWithin, opt.Confidence); err != nil {
		return Study{}, err
	}
	if s.Pp, s.Ppk, err = s.indices(spec, s.SigmaOverall, float64(s.N-1), opt.Confidence); err != nil {
		return Study{}, err
	}
	if spec.Lower != nil && spec.Upper != nil && spec.Target != nil {
		off := math.Hypot(s.SigmaOverall, s.Mean-*spec.Target)
		s.Cpm = some((*spec.Upper - *spec.Lower) / (6 * off))
		if !finite(*s.Cpm) {
			return Study{}, invalid("the specification is too far from the readings to compute with")
		}
	}
	if s.Expected, err = NormalPPM(s.Mean, s.SigmaOverall, spec); err != nil {
		return Study{}, err
	}
	s.Observed = spec.observed(x)
	return s, nil
}

// indices computes the pair of indices on one sigma.
func (s Study) indices(spec Specification, sigma, nu, confidence float64) (c, ck *Index, err error) {
	var lower, upper *float64
	if spec.Lower != nil {
		lower = some((s.Mean - *spec.Lower) / sigma / 3)
	}
	if spec.Upper != nil {
		upper = some((*spec.Upper - s.Mean) / sigma / 3)
	}
	value := *nearest(lower, upper)
	approximate, _, err := CpkBounds(value, s.N, nu, confidence)
	if err != nil {
		return nil, nil, err
	}
	exact, err := exactAt(value, s.N, nu, confidence, confidence)
	if err != nil {
		return nil, nil, err
	}
	ck = &Index{value, approximate.Interval, exact}
	if lower == nil || upper == nil {
		return nil, ck, nil
	}
	both := (*spec.Upper - *spec.Lower) / sigma / 6
	b, err := CpBounds(both, nu, confidence)
	if err != nil {
		return nil, nil, err
	}
	return &Index{both, b.Interval, b.LowerBound}, ck, nil
}

func flatten(subgroups []Subgroup) (x []float64, singles bool) {
	total := 0
	singles = true
	for _, g := range subgroups {
		total += len(g.Readings)
		singles = singles && len(g.Readings) == 1
	}
	x = make([]float64, 0, total)
	for _, g := range subgroups {
		x = append(x, g.Readings...)
	}
	return x, singles
}

func estimateWithin(subgroups []Subgroup, e limits.Estimator, singles bool) (limits.Estimated, error) {
	if e == "" {
		e = limits.Pooled
		if singles {
			e = limits.MRBar
		}
	}
	var chart limits.Chart
	switch e {
	case limits.RBar:
		chart = limits.XBarR
	case limits.SBar, limits.Pooled:
		chart = limits.XBarS
	case limits.MRBar, limits.MedianMR:
		chart = limits.Individuals
	default:
		return limits.Estimated{}, invalid("there is no estimator %q of sigma", e)
	}
	reduced := make([]limits.Subgroup, len(subgroups))
	for i, g := range subgroups {
		r, err := limits.NewSubgroup(chart, g.Readings)
		if err != nil {
			return limits.Estimated{}, invalid("subgroup %d: %w", i+1, err)
		}
		r.Break = g.Break
		reduced[i] = r
	}
	return limits.Estimate(chart, e, reduced)
}
