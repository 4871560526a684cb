package limits

import "math"

// Deviation turns a subgroup of one part of a family into deviations from that
// part's target, so that parts made in short runs share one chart: the spread stays,
// the location becomes location - target. The family has one sigma; centre and sigma
// come from Estimate over such subgroups.
//
// Source: Montgomery, Introduction to Statistical Quality Control, section 10.1
// (deviations from nominal).
func (s Subgroup) Deviation(target float64) (Subgroup, error) {
	if !finite(target) {
		return Subgroup{}, invalid("the target must be a finite number, got %g", target)
	}
	s.Location -= target
	if !finite(s.Location) {
		return Subgroup{}, invalid("location and target are too far apart to compute with")
	}
	return s, nil
}

// Standardised does the same where parts differ in spread: (location - target)/sigma
// and the spread over sigma, with the sigma of a reading of that part. Such subgroups
// are judged by StandardisedUnit.
func (s Subgroup) Standardised(target, sigma float64) (Subgroup, error) {
	if !(sigma > 0) || math.IsInf(sigma, 1) {
		return Subgroup{}, invalid("the part's sigma must be above zero, got %g", sigma)
	}
	d, err := s.Deviation(target)
	if err != nil {
		return Subgroup{}, err
	}
	d.Location /= sigma
	d.Range /= sigma
	d.SD /= sigma
	if !finite(d.Location) || !finite(d.Range) || !finite(d.SD) {
		return Subgroup{}, invalid("the part's sigma of %g is too small for these readings", sigma)
	}
	return d, nil
}

// StandardisedUnit is the standard of standardised subgroups: centre 0, sigma 1.
func StandardisedUnit(chart Chart) Standard { return Standard{Chart: chart, Sigma: 1} }
