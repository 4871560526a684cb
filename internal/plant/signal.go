package plant

import (
	"time"

	"github.com/google/uuid"

	"holdfast/internal/spc/watch"
)

// Panel is the part of a chart that a signal stands on.
type Panel string

const (
	Location   Panel = "location"
	Dispersion Panel = "dispersion"
	Reading    Panel = "reading"     // a single reading against its specification
	GaugeCheck Panel = "gauge check" // a check that the characteristic's gauge failed; a fact, never judged again
)

// HoldsProduct reports whether what stands on the panel puts the product itself in doubt,
// whatever the process does.
func (p Panel) HoldsProduct() bool { return p == Reading || p == GaugeCheck }

// OutsideSpecification is the rule key of a reading outside its specification.
const OutsideSpecification = "specification"

// GaugeFailed is the rule key of a gauge check that failed.
const GaugeFailed = "gauge-failed"

// Firing is one thing that a subgroup does: a rule holds, or a reading lies outside
// its specification. It is derived; Signal is the record of it.
type Firing struct {
	Panel Panel  `json:"panel"`
	Rule  string `json:"rule"` // RuleKey, or OutsideSpecification
	Side  Side   `json:"side"`
}

// Signal is a firing as the record keeps it.
type Signal struct {
	Firing
	Characteristic uuid.UUID
	TakenAt        time.Time
	Subgroup       uuid.UUID
	Revision       uuid.UUID
	Matter         uuid.UUID
	FoundLate      bool
	Withdrawn      bool
}

// Firings lists what a subgroup does: readings outside specification first, then the
// rules of the location and the dispersion panel in the revision's order.
func Firings(setup Setup, readings []int64, decimals int, rules Rules, j watch.Judged, judged bool) []Firing {
	var out []Firing
	if side := setup.OutsideSide(readings, decimals); side != Neither {
		out = append(out, Firing{Reading, OutsideSpecification, side})
	}
	if !judged {
		return out
	}
	out = appendFirings(out, Location, rules.Location, j.Location.Fired)
	if j.HasDispersion {
		out = appendFirings(out, Dispersion, rules.Dispersion, j.Dispersion.Fired)
	}
	return out
}

func appendFirings(out []Firing, panel Panel, rules []watch.Rule, fired watch.Fired) []Firing {
	if !fired.Any() {
		return out
	}
	for i, r := range rules {
		if fired.Has(i) {
			out = append(out, Firing{panel, RuleKey(r), sideOf(fired.Side(i))})
		}
	}
	return out
}

func sideOf(s watch.Side) Side {
	switch s {
	case watch.High:
		return High
	case watch.Low:
		return Low
	case watch.Both:
		return Both
	}
	return Neither
}

// OutsideSide reports on which side of the specification any of the readings lie.
func (s Setup) OutsideSide(readings []int64, decimals int) Side {
	side := Neither
	for _, v := range readings {
		switch o := s.Outside(v, decimals); {
		case o == Neither:
		case side == Neither:
			side = o
		case side != o:
			return Both
		}
	}
	return side
}

// CountOutside counts the readings outside specification.
func (s Setup) CountOutside(readings []int64, decimals int) int {
	n := 0
	for _, v := range readings {
		if s.Outside(v, decimals) != Neither {
			n++
		}
	}
	return n
}

// Better reports whether the firing is a change for the better: away from the worse
// direction where only one is worse, or less dispersion than before.
func (f Firing) Better(s Setup) bool {
	switch f.Panel {
	case Dispersion:
		return f.Side == Low
	case Location:
		return s.Worse == High && f.Side == Low || s.Worse == Low && f.Side == High
	}
	return false
}
