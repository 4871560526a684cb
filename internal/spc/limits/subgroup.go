package limits

import (
	"math"

	"holdfast/internal/spc/factor"
	"holdfast/internal/spc/sample"
)

// Subgroup is what the charts of readings need of one subgroup; the readings
// themselves are not kept.
type Subgroup struct {
	N int
	// Location is the mean, or the median on a chart of medians, or the reading
	// itself on a chart of individuals.
	Location float64
	Range    float64 // largest minus smallest; 0 for one reading
	SD       float64 // divisor N-1; 0 for one reading
	// Break marks a subgroup that follows a gap or a boundary: no moving range
	// reaches back across it.
	Break bool
}

// NewSubgroup reduces readings to what the chart plots. It needs at least one
// finite reading, exactly one for individuals.
func NewSubgroup(chart Chart, readings []float64) (Subgroup, error) {
	if !chart.Readings() {
		return Subgroup{}, invalid("chart %q is not one of subgroups of readings", chart)
	}
	if chart == Individuals && len(readings) != 1 {
		return Subgroup{}, invalid("a chart of individuals takes one reading at a time, got %d", len(readings))
	}
	location := sample.Mean
	if chart == MedianR {
		location = sample.Median
	}
	s := Subgroup{N: len(readings)}
	var err error
	if s.Location, err = location(readings); err != nil {
		return Subgroup{}, err
	}
	if s.Range, err = sample.Range(readings); err != nil {
		return Subgroup{}, err
	}
	if len(readings) > 1 {
		if s.SD, err = sample.SD(readings); err != nil {
			return Subgroup{}, err
		}
	}
	return s, nil
}

func (s Subgroup) check(chart Chart, index int) error {
	switch {
	case s.N < 1 || s.N > factor.MaxSize:
		return invalid("subgroup %d must have 1 to %d readings, got %d", index+1, factor.MaxSize, s.N)
	case chart == Individuals && s.N != 1:
		return invalid("a chart of individuals takes one reading at a time, subgroup %d has %d", index+1, s.N)
	case !finite(s.Location) || math.Abs(s.Location) > 1e300:
		return invalid("the location of subgroup %d is not a usable number: %g", index+1, s.Location)
	case !(s.Range >= 0 && s.Range <= 1e300) || !(s.SD >= 0 && s.SD <= 1e150):
		return invalid("the spread of subgroup %d is not a usable number: range %g, s.d. %g", index+1, s.Range, s.SD)
	}
	return nil
}

// DispersionPoint returns what the lower chart of a pair plots for subgroup s, and
// whether it has a point at all: the range, the standard deviation, or the moving
// range from the subgroup before, which is nil for the first. A subgroup of one has
// no range, and no moving range crosses a Break.
func (c Chart) DispersionPoint(before *Subgroup, s Subgroup) (float64, bool) {
	switch {
	case c == Individuals:
		if before == nil || s.Break {
			return 0, false
		}
		return math.Abs(s.Location - before.Location), true
	case s.N < 2:
		return 0, false
	case c == XBarS:
		return s.SD, true
	}
	return s.Range, true
}
