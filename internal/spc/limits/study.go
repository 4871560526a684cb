package limits

import (
	"errors"
	"math"

	"holdfast/internal/spc/sample"
)

// Thresholds of the warnings of a limit study.
const (
	EnoughSubgroups = 20   // common practice
	DistinctRanges  = 5    // fewer distinct ranges within limits: gauge too coarse
	NormalityLevel  = 0.05 // of the test of normality for individuals
)

// StudyInput is the history a limit study looks at.
type StudyInput struct {
	Chart       Chart
	Estimator   Estimator // empty: the chart's default
	Multiple    float64   // 0: DefaultMultiple
	Probability bool      // as in Standard
	Subgroups   []Subgroup
	// Excluded are indices into Subgroups, from 0, that a person left out with a
	// cause. A moving range does not cross them.
	Excluded []int
}

// Study is what phase 1 finds: trial limits, the points beyond them, and what
// speaks against freezing them. Nothing is excluded automatically.
type Study struct {
	Standard  Standard
	Estimated Estimated
	// Indices into the input, ascending, of the subgroups used that are beyond the
	// trial limits. Dispersion is to be settled first: while it has points here,
	// the limits of the location rest on a sigma that is in doubt.
	BeyondDispersion, BeyondLocation []int
	Warnings                         []Warning
}

// Warning is one reason to doubt trial limits; the concrete types carry the numbers.
type Warning interface{ warning() }

// FewSubgroups: limits from so few subgroups are uncertain.
type FewSubgroups struct{ Have, Want int }

// ZeroSpread: the readings do not vary within subgroups, so there are no limits.
type ZeroSpread struct{}

// CoarseGauge: the ranges within their limits take too few distinct values; the
// gauge or the rounding is too coarse for this spread.
type CoarseGauge struct{ Distinct, Want int }

// Autocorrelated: neighbouring locations depend on each other; |Lag1| is beyond
// Limit = 1.96/√m.
type Autocorrelated struct{ Lag1, Limit float64 }

// NotNormal: readings charted one by one do not look normal at the given level.
type NotNormal struct {
	Test  sample.Normality
	Level float64
}

func (FewSubgroups) warning()   {}
func (ZeroSpread) warning()     {}
func (CoarseGauge) warning()    {}
func (Autocorrelated) warning() {}
func (NotNormal) warning()      {}

// RunStudy computes trial limits from the subgroups that are not excluded. With
// zero spread it returns a Study that holds that warning and no standard; other
// input without an answer is an error.
//
// Source: Montgomery, Introduction to Statistical Quality Control, section 6.2
// (phase 1); Wheeler and Lyday, Evaluating the Measurement Process (1989), for the
// coarse gauge; NIST/SEMATECH e-Handbook 1.3.5.12 for the limit of the lag-1
// correlation.
func RunStudy(in StudyInput) (Study, error) {
	used, index, err := in.used()
	if err != nil {
		return Study{}, err
	}
	var study Study
	study.Estimated, err = Estimate(in.Chart, in.Estimator, used)
	if errors.Is(err, ErrZeroSpread) {
		study.Warnings = append(study.Warnings, ZeroSpread{})
		return study, nil
	}
	if err != nil {
		return Study{}, err
	}
	study.Standard = Standard{
		Chart: in.Chart, Center: study.Estimated.Center, Sigma: study.Estimated.Sigma,
		Multiple: in.Multiple, Probability: in.Probability,
	}
	if study.Standard.Multiple == 0 {
		study.Standard.Multiple = DefaultMultiple
	}
	distinct := distinctValues{tolerance: Tie * study.Standard.Sigma}
	ranges := 0
	table, err := study.Standard.Table()
	if err != nil {
		return Study{}, err
	}
	for i, s := range used {
		location, dispersion, err := table.Bands(s.N)
		if err != nil {
			return Study{}, err
		}
		var before *Subgroup
		if i > 0 {
			before = &used[i-1]
		}
		if d, ok := in.Chart.DispersionPoint(before, s); ok {
			if dispersion.Outside(d) != 0 {
				study.BeyondDispersion = append(study.BeyondDispersion, index[i])
			} else {
				ranges++
				if in.Chart != Individuals {
					d = s.Range
				}
				distinct.add(d)
			}
		}
		if location.Outside(s.Location) != 0 {
			study.BeyondLocation = append(study.BeyondLocation, index[i])
		}
	}
	if len(used) < EnoughSubgroups {
		study.Warnings = append(study.Warnings, FewSubgroups{len(used), EnoughSubgroups})
	}
	// With fewer ranges than that nothing can be said.
	if ranges >= DistinctRanges && distinct.n < DistinctRanges {
		study.Warnings = append(study.Warnings, CoarseGauge{distinct.n, DistinctRanges})
	}
	if lag, ok := lag1(used); ok {
		if limit := 1.96 / math.Sqrt(float64(len(used))); math.Abs(lag) > limit {
			study.Warnings = append(study.Warnings, Autocorrelated{lag, limit})
		}
	}
	if in.Chart == Individuals && len(used) >= 8 {
		if err := study.testNormality(used); err != nil {
			return Study{}, err
		}
	}
	return study, nil
}

// used copies the subgroups that are not excluded, marks a Break after each gap, and
// says where each came from.
func (in StudyInput) used() (used []Subgroup, index []int, err error) {
	out := make([]bool, len(in.Subgroups))
	for _, i := range in.Excluded {
		if i < 0 || i >= len(in.Subgroups) {
			return nil, nil, invalid("excluded subgroup %d does not exist among %d", i+1, len(in.Subgroups))
		}
		out[i] = true
	}
	used = make([]Subgroup, 0, len(in.Subgroups))
	index = make([]int, 0, len(in.Subgroups))
	gap := false
	for i, s := range in.Subgroups {
		if out[i] {
			// A boundary on an excluded subgroup still separates its neighbours.
			gap = true
			continue
		}
		s.Break = s.Break || gap
		gap = false
		used = append(used, s)
		index = append(index, i)
	}
	return used, index, nil
}

func (s *Study) testNormality(used []Subgroup) error {
	x := make([]float64, len(used))
	for i, u := range used {
		x[i] = u.Location
	}
	test, err := sample.AndersonDarling(x)
	if err != nil {
		return err
	}
	if test.P < NormalityLevel {
		s.Warnings = append(s.Warnings, NotNormal{test, NormalityLevel})
	}
	return nil
}

// lag1 is the lag-1 correlation of the locations; pairs across a Break do not
// count. It does not exist for equal locations.
func lag1(used []Subgroup) (float64, bool) {
	if len(used) < 3 {
		return 0, false
	}
	origin := used[0].Location
	mean := 0.0
	for _, s := range used {
		mean += s.Location - origin
	}
	mean /= float64(len(used))
	products, squares, last := 0.0, 0.0, 0.0
	for i, s := range used {
		d := s.Location - origin - mean
		squares += d * d
		if i > 0 && !s.Break {
			products += last * d
		}
		last = d
	}
	r := products / squares
	return r, squares > 0 && finite(r)
}

// distinctValues counts different values up to DistinctRanges and then stops, so
// that a long history costs no sorting.
type distinctValues struct {
	tolerance float64
	seen      [DistinctRanges]float64
	n         int
}

func (d *distinctValues) add(x float64) {
	if d.n == DistinctRanges {
		return
	}
	for _, v := range d.seen[:d.n] {
		if math.Abs(v-x) <= d.tolerance {
			return
		}
	}
	d.seen[d.n] = x
	d.n++
}
