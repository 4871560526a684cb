package limits

import (
	"errors"
	"math"
	"slices"

	"holdfast/internal/spc/factor"
)

// Estimator names a way to estimate the sigma of a reading from within subgroups.
type Estimator string

const (
	RBar     Estimator = "rbar"      // mean range over d2
	SBar     Estimator = "sbar"      // mean standard deviation over c4
	Pooled   Estimator = "pooled"    // root of the pooled variance over c4
	MRBar    Estimator = "mrbar"     // mean moving range of two over d2(2)
	MedianMR Estimator = "median-mr" // median moving range of two over 0.9539
)

// ErrZeroSpread marks history in which nothing varies: it gives no sigma.
var ErrZeroSpread = errors.New("the readings do not vary within subgroups")

// DefaultEstimator is the estimator that a chart has unless another is chosen.
func (c Chart) DefaultEstimator() Estimator {
	switch c {
	case XBarS:
		return SBar
	case Individuals:
		return MRBar
	}
	return RBar
}

// Allows reports whether the estimator can be used on the chart.
func (c Chart) Allows(e Estimator) bool {
	switch e {
	case RBar, SBar, Pooled:
		return c.Readings() && c != Individuals
	case MRBar, MedianMR:
		return c == Individuals
	}
	return false
}

// Estimated is a standard estimated from history, with how well it is known.
type Estimated struct {
	Center   float64 // in the readings' unit
	CenterSE float64 // standard error of Center
	Sigma    float64 // of a single reading
	// DF are the degrees of freedom of Sigma: those at which a pooled variance
	// would have the same relative error.
	DF        float64
	Subgroups int // that carried spread: moving ranges for individuals
	Readings  int
}

// Estimate computes centre and sigma of subgroups on a chart of readings; an empty
// estimator means the chart's default.
//
// The centre is the mean of all readings, for charts of medians the mean of the
// subgroup medians. Sigma, for subgroups that may differ in size:
//
//	rbar       Σ (d2 R/d3²) / Σ (d2²/d3²)
//	sbar       Σ (c4 S/(1-c4²)) / Σ (c4²/(1-c4²))
//	pooled     √(Σ (n-1) S² / ν) / c4(ν+1), ν = Σ (n-1)
//	mrbar      mean moving range / d2(2)
//	median-mr  median moving range / 0.953873
//
// which for equal sizes are R̄/d2 and S̄/c4. Subgroups of one count for the centre
// only. Moving ranges do not cross a Break. ErrZeroSpread when sigma would be 0.
//
// Source: Burr, Journal of Quality Technology 1 (1969), 163-167, for the weights;
// Montgomery, Introduction to Statistical Quality Control, chapter 6.
func Estimate(chart Chart, estimator Estimator, subgroups []Subgroup) (Estimated, error) {
	if estimator == "" {
		estimator = chart.DefaultEstimator()
	}
	if !chart.Readings() {
		return Estimated{}, invalid("chart %q is not one of subgroups of readings", chart)
	}
	if !chart.Allows(estimator) {
		return Estimated{}, invalid("estimator %q cannot be used on chart %q", estimator, chart)
	}
	if len(subgroups) == 0 {
		return Estimated{}, invalid("there are no subgroups to estimate from")
	}
	for i, s := range subgroups {
		if err := s.check(chart, i); err != nil {
			return Estimated{}, err
		}
	}
	var e Estimated
	var err error
	if chart == Individuals {
		e, err = movingRangeSigma(estimator, subgroups)
	} else {
		e, err = withinSigma(estimator, subgroups)
	}
	if err != nil {
		return Estimated{}, err
	}
	if !finite(e.Sigma) {
		return Estimated{}, invalid("the readings are too far apart to compute with")
	}
	if e.Sigma <= 0 {
		return Estimated{}, ErrZeroSpread
	}
	if err := e.center(chart, subgroups); err != nil {
		return Estimated{}, err
	}
	return e, nil
}

// center fills in the centre and its standard error.
func (e *Estimated) center(chart Chart, subgroups []Subgroup) error {
	// About the first location, so that a large common part costs no digits.
	origin := subgroups[0].Location
	sum, weight := 0.0, 0.0
	variance := 0.0 // of sum, in units of σ²
	for _, s := range subgroups {
		e.Readings += s.N
		w := float64(s.N)
		if chart == MedianR {
			se, err := factor.MedianSE(s.N)
			if err != nil {
				return err
			}
			w = 1
			variance += se * se
		} else {
			variance += w
		}
		sum += w * (s.Location - origin)
		weight += w
	}
	e.Center = origin + sum/weight
	e.CenterSE = e.Sigma * math.Sqrt(variance) / weight
	if !finite(e.Center) || !finite(e.CenterSE) {
		return invalid("the readings are too large to compute with")
	}
	return nil
}

// unbiasing holds, for one size, the mean and the standard deviation of the measure
// of spread when σ = 1.
type unbiasing struct{ mean, sd float64 }

func withinSigma(estimator Estimator, subgroups []Subgroup) (Estimated, error) {
	var e Estimated
	var known [factor.MaxSize + 1]unbiasing
	chart := XBarR
	if estimator == SBar {
		chart = XBarS
	}
	squares, nu := 0.0, 0.0
	above, below := 0.0, 0.0
	for _, s := range subgroups {
		if s.N < 2 {
			continue
		}
		e.Subgroups++
		if estimator == Pooled {
			squares += float64(s.N-1) * s.SD * s.SD
			nu += float64(s.N - 1)
			continue
		}
		u := &known[s.N]
		if u.mean == 0 {
			var err error
			if u.mean, u.sd, err = chart.relativeDispersion(s.N); err != nil {
				return e, err
			}
		}
		spread := s.Range
		if estimator == SBar {
			spread = s.SD
		}
		w := u.mean / (u.sd * u.sd)
		above += w * spread
		below += w * u.mean
	}
	if e.Subgroups == 0 {
		return e, invalid("no subgroup has two readings or more: there is no spread within to estimate sigma from")
	}
	if estimator == Pooled {
		c4, err := factor.C4Nu(nu)
		if err != nil {
			return e, err
		}
		e.Sigma, e.DF = math.Sqrt(squares/nu)/c4, nu
		return e, nil
	}
	e.Sigma = above / below
	// The weights give the estimate the variance 1/Σ(mean²/sd²).
	df, err := factor.EffectiveDF(1 / math.Sqrt(below))
	e.DF = df
	return e, err
}

func movingRangeSigma(estimator Estimator, subgroups []Subgroup) (Estimated, error) {
	ranges := make([]float64, 0, len(subgroups))
	neighbours := 0
	last := false // whether the subgroup before had a moving range
	for i := range subgroups {
		var before *Subgroup
		if i > 0 {
			before = &subgroups[i-1]
		}
		r, ok := Individuals.DispersionPoint(before, subgroups[i])
		if ok {
			ranges = append(ranges, r)
			if last {
				neighbours++
			}
		}
		last = ok
	}
	e := Estimated{Subgroups: len(ranges)}
	if len(ranges) == 0 {
		return e, invalid("no two readings follow each other without a gap: there is no moving range")
	}
	if estimator == MedianMR {
		slices.Sort(ranges)
		m := len(ranges)
		median := ranges[m/2]
		if m%2 == 0 {
			median = ranges[m/2-1]/2 + ranges[m/2]/2
		}
		f, err := factor.MedianRange(2)
		if err != nil {
			return e, err
		}
		e.Sigma = median / f
		e.DF, err = factor.EffectiveDFMedianMovingRange(m, neighbours)
		return e, err
	}
	total := 0.0
	for _, r := range ranges {
		total += r
	}
	d2, err := factor.D2(2)
	if err != nil {
		return e, err
	}
	e.Sigma = total / float64(len(ranges)) / d2
	e.DF, err = factor.EffectiveDFMovingRange(len(ranges), neighbours)
	return e, err
}
