package plant

import (
	"math"
	"time"

	"holdfast/internal/spc/capability"
)

// Confidence is that of the bound by which a figure is judged.
const Confidence = 0.95

// Figure is the capability of the moment: Ppk of the newest subgroups under the limits in
// force, without those between a signal and its fix. The zero value is no figure.
type Figure struct {
	Readings  int       `json:"readings"`
	Subgroups int       `json:"subgroups"`
	From      time.Time `json:"from,omitzero"` // taken at of the oldest subgroup in it
	Mean      float64   `json:"mean"`
	SD        float64   `json:"sd"` // overall, divisor N-1
	Ppk       float64   `json:"ppk"`
	Bound     float64   `json:"bound"` // lower, one-sided, at Confidence
	Grade     Grade     `json:"grade"`
}

// Computed reports whether there is a figure.
func (f Figure) Computed() bool { return f.Grade != Ungraded }

// spec is the specification as the statistics take it.
func (s Setup) spec() capability.Specification {
	at := func(d *Decimal) *float64 {
		if d == nil {
			return nil
		}
		v := d.Float()
		return &v
	}
	return capability.Specification{Lower: at(s.Lower), Upper: at(s.Upper), Target: at(s.Target)}
}

// compute pools the subgroups. The mean is exact; the squares are taken about it, so that
// nothing cancels. Decimals do not change under one revision.
func (f *Figure) compute(window []Statistics, setup Setup, o OwnerSettings, g *grader) {
	f.Subgroups = len(window)
	if len(window) == 0 {
		return
	}
	var sum int64
	for _, s := range window {
		f.Readings += s.N
		sum += s.Sum
	}
	unit := float64(pow10[window[0].Decimals])
	f.Mean = float64(sum) / (float64(f.Readings) * unit)
	var squares float64
	for _, s := range window {
		d := s.Mean() - f.Mean
		squares += float64(s.N-1)*s.SD*s.SD + float64(s.N)*d*d
	}
	if f.Readings < 2 {
		return
	}
	f.SD = math.Sqrt(squares / float64(f.Readings-1))
	var err error
	if f.Ppk, err = capability.Ppk(f.Readings, f.Mean, f.SD, setup.spec()); err != nil {
		f.Ppk = 0
		return // the readings do not vary
	}
	f.Grade = g.grade(f.Ppk, f.Readings, o)
}

// bound computes the bound, which costs more than all the rest.
func (f *Figure) bound() {
	if !f.Computed() {
		return
	}
	// It was within what can be computed when the figure was graded.
	f.Bound, _ = capability.PpkLowerBound(f.Ppk, f.Readings, Confidence)
}

// grader grades many figures of one course. The bound grows with the value and with the
// number of readings, so most grades follow from those that were computed before.
type grader struct{ known []graded }

type graded struct {
	least    float64
	value    float64
	readings int
	reached  bool
}

// grade is Ungraded for a figure beyond any real process, which nobody may claim.
func (g *grader) grade(value float64, readings int, o OwnerSettings) Grade {
	for _, step := range []struct {
		least float64
		grade Grade
	}{{o.Capable, AtCapable}, {o.Accepted, AtAccepted}} {
		switch reached, err := g.reaches(value, readings, step.least); {
		case err != nil:
			return Ungraded
		case reached:
			return step.grade
		}
	}
	return BelowAll
}

// reaches reports whether the bound is at least so much.
func (g *grader) reaches(value float64, readings int, least float64) (bool, error) {
	if value < least {
		return false, nil // the bound lies below the value
	}
	for _, k := range g.known {
		switch {
		case k.least != least:
		case k.reached && value >= k.value && readings >= k.readings && value < 100:
			return true, nil
		case !k.reached && value <= k.value && readings <= k.readings:
			return false, nil
		}
	}
	bound, err := capability.PpkLowerBound(value, readings, Confidence)
	if err != nil {
		return false, err
	}
	g.known = append(g.known, graded{least, value, readings, bound >= least})
	return bound >= least, nil
}
