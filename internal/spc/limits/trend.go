package limits

import "math"

// TrendStandard is what a revision of a chart with tool wear freezes: the centre is a
// line over the wear since the last tool change, and starts again at each change.
type TrendStandard struct {
	Chart     Chart   // XBarR, XBarS, MedianR or Individuals
	Intercept float64 // location right after a tool change
	Slope     float64 // location per unit of wear (parts made, hours, subgroups)
	SlopeSE   float64 // standard error of Slope, 0 where it was given
	Sigma     float64 // of a reading about the line
	Multiple  float64 // 0: DefaultMultiple
}

// EstimateTrend fits one straight line by least squares, weighted by the number of
// readings (equally on a chart of medians), to the locations over wear, which counts
// from 0 at each tool change. Sigma comes from the spread within subgroups by the
// estimator, for individuals from the moving range of what the line leaves; a Break
// marks the first subgroup after a tool change. At least three subgroups at two
// different values of wear are needed.
//
// Source: Montgomery, Introduction to Statistical Quality Control, section 10.7
// (trended control charts); Mandel, Journal of Quality Technology 1 (1969), 1-9.
func EstimateTrend(chart Chart, estimator Estimator, subgroups []Subgroup, wear []float64) (TrendStandard, error) {
	s := TrendStandard{Chart: chart}
	if len(subgroups) != len(wear) {
		return s, invalid("there are %d subgroups and %d values of wear", len(subgroups), len(wear))
	}
	if len(subgroups) < 3 {
		return s, invalid("a line needs at least three subgroups, got %d", len(subgroups))
	}
	weight := func(u Subgroup) float64 {
		if chart == MedianR {
			return 1
		}
		return float64(u.N)
	}
	total, meanT, meanY := 0.0, 0.0, 0.0
	for i, u := range subgroups {
		if err := u.check(chart, i); err != nil {
			return s, err
		}
		if err := CheckWear(wear[i]); err != nil {
			return s, invalid("subgroup %d: %v", i+1, err)
		}
		w := weight(u)
		total += w
		meanT += w / total * (wear[i] - meanT)
		meanY += w / total * (u.Location - meanY)
	}
	tt, ty := 0.0, 0.0
	for i, u := range subgroups {
		d := wear[i] - meanT
		tt += weight(u) * d * d
		ty += weight(u) * d * (u.Location - meanY)
	}
	if !(tt > 0) {
		return s, invalid("all subgroups have the same wear: there is no line to fit")
	}
	s.Slope = ty / tt
	s.Intercept = meanY - s.Slope*meanT
	left := make([]Subgroup, len(subgroups))
	copy(left, subgroups)
	squares := 0.0
	for i := range left {
		left[i].Location -= s.Intercept + s.Slope*wear[i]
		squares += weight(left[i]) * left[i].Location * left[i].Location
	}
	e, err := Estimate(chart, estimator, left)
	if err != nil {
		return TrendStandard{Chart: chart}, err
	}
	s.Sigma = e.Sigma
	s.SlopeSE = math.Sqrt(squares / float64(len(subgroups)-2) / tt)
	if err := s.check(); err != nil {
		return TrendStandard{Chart: chart}, err
	}
	return s, nil
}

// CheckWear says what is wrong with a wear, or nil: it counts up from 0 at a tool
// change, to at most 1e15.
func CheckWear(wear float64) error {
	if !(wear >= 0 && wear <= 1e15) {
		return invalid("the wear must be 0 to 1e15, got %g", wear)
	}
	return nil
}

func (s TrendStandard) check() error {
	if !finite(s.Slope) || !finite(s.Intercept) || !finite(s.SlopeSE) {
		return invalid("the line must have a finite slope and start, got %g and %g", s.Slope, s.Intercept)
	}
	return Standard{Chart: s.Chart, Center: s.Intercept, Sigma: s.Sigma, Multiple: s.Multiple}.Check()
}

// Line returns the centre at the given wear.
func (s TrendStandard) Line(wear float64) float64 { return s.Intercept + float64(s.Slope*wear) }

// Bands returns the limits about the line at the given wear for a subgroup of n.
func (s TrendStandard) Bands(wear float64, n int) (location, dispersion Band, err error) {
	if err := s.check(); err != nil {
		return absent, absent, err
	}
	if err := CheckWear(wear); err != nil {
		return absent, absent, err
	}
	at := Standard{Chart: s.Chart, Center: s.Line(wear), Sigma: s.Sigma, Multiple: s.Multiple}
	return at.Bands(n)
}

// ChangeAt returns the wear at which the fitted line has come so near the
// specification limit it drifts towards that Cpk of the remaining margin,
// |limit - line|/3σ, has fallen to cpk: the latest moment to change the tool. A nil
// limit is absent. ok is false when the line never gets there: no slope, or no limit
// on the side it drifts to. A wear of 0 says that even a new tool starts there.
func (s TrendStandard) ChangeAt(lower, upper *float64, cpk float64) (wear float64, ok bool, err error) {
	if err := s.check(); err != nil {
		return 0, false, err
	}
	if !(cpk >= 0 && cpk <= 100) {
		return 0, false, invalid("the index to keep must be 0 to 100, got %g", cpk)
	}
	toward := upper
	margin := 3 * s.Sigma * cpk
	if s.Slope < 0 {
		toward, margin = lower, -margin
	}
	if toward == nil || s.Slope == 0 {
		return 0, false, nil
	}
	if !finite(*toward) {
		return 0, false, invalid("a specification limit must be a finite number, got %g", *toward)
	}
	wear = math.Max(0, (*toward-margin-s.Intercept)/s.Slope)
	if !finite(wear) {
		return 0, false, nil
	}
	return wear, true, nil
}
