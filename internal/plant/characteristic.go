package plant

import (
	"time"

	"github.com/google/uuid"

	"holdfast/internal/spc/limits"
)

// Characteristic is something that is measured on the parts of a machine.
type Characteristic struct {
	ID        uuid.UUID
	StationID uuid.UUID
	MachineID uuid.UUID
	PartID    uuid.UUID // of one part, or
	Family    string    // of a family of parts, or of any part when both are empty
	Name      string
	Position  int
	Retired   bool
}

// Setup is one version of how a characteristic is measured, specified, sampled and
// charted.
type Setup struct {
	Version     int
	Unit        string
	Decimals    int
	Target      *Decimal
	Lower       *Decimal // specification limits, either or both
	Upper       *Decimal
	Worse       Side // the direction that is worse, if only one is
	Chart       limits.Chart
	Size        int // nominal subgroup size
	Plan        SamplingPlan
	ControlPlan ControlPlan
	GaugeID     uuid.UUID
	MadeAt      time.Time
}

// SamplingPlan says when samples fall due. Any of the three may be set together.
type SamplingPlan struct {
	EveryMinutes int        `json:"every_minutes,omitempty"` // elapsed while the machine runs
	EveryParts   int        `json:"every_parts,omitempty"`   // made since the last sample
	Events       []Occasion `json:"events,omitempty"`
	GraceMinutes int        `json:"grace_minutes,omitempty"` // before unknown, where it is not time-based; 0 is an hour
}

// Occasion is why a sample is taken.
type Occasion string

const (
	ByTime          Occasion = "time"
	ByParts         Occasion = "parts"
	StartUp         Occasion = "start-up"
	Changeover      Occasion = "changeover"
	ToolChange      Occasion = "tool change"
	AfterAdjustment Occasion = "after an adjustment"
	FirstPiece      Occasion = "first piece"
	LastPiece       Occasion = "last piece"
	Unplanned       Occasion = ""
)

// ControlPlan holds what a control plan says of a characteristic.
type ControlPlan struct {
	Operation       string `json:"operation,omitempty"`
	Drawing         string `json:"drawing,omitempty"`
	DrawingRevision string `json:"drawing_revision,omitempty"`
	Plan            string `json:"plan,omitempty"`          // control-plan reference
	RiskAnalysis    string `json:"risk_analysis,omitempty"` // risk-analysis reference
	SpecialMark     string `json:"special_mark,omitempty"`
	Method          string `json:"method,omitempty"`
}

// Side is a direction.
type Side string

const (
	Neither Side = ""
	High    Side = "high"
	Low     Side = "low"
	Both    Side = "both"
)

// Validate says what in the set-up cannot be, in words for who made it.
func (s Setup) Validate() error {
	switch {
	case s.Unit == "":
		return Invalidf("unit", "A characteristic needs a unit.")
	case s.Decimals < 0 || s.Decimals > MaxDecimals:
		return Invalidf("decimals", "Between 0 and %d decimals can be measured.", MaxDecimals)
	case s.Size < 1 || s.Size > 25:
		return Invalidf("size", "A subgroup has between 1 and 25 parts.")
	case s.Lower != nil && s.Upper != nil && s.Lower.Compare(*s.Upper) >= 0:
		return Invalidf("upper", "The upper specification limit must lie above the lower one.")
	case s.Worse != Neither && s.Worse != High && s.Worse != Low:
		return Invalidf("worse", "The worse direction is high, low or neither.")
	case s.Plan.EveryMinutes < 0 || s.Plan.EveryParts < 0 || s.Plan.GraceMinutes < 0:
		return Invalidf("plan", "An interval cannot be negative.")
	}
	for _, d := range []*Decimal{s.Target, s.Lower, s.Upper} {
		if d != nil {
			if _, err := d.In(s.Decimals); err != nil {
				return err
			}
		}
	}
	switch s.Chart {
	case limits.Individuals:
		if s.Size != 1 {
			return Invalidf("size", "A chart of single readings has one part a subgroup.")
		}
	case limits.XBarR, limits.XBarS:
		if s.Size < 2 {
			return Invalidf("size", "A chart of averages needs at least 2 parts a subgroup.")
		}
	default:
		return Invalidf("chart", "There is no chart named %q here.", string(s.Chart))
	}
	return nil
}

// NeedsNewLimits reports whether limits frozen under old mean nothing under s, so
// that the characteristic is learning until a revision for s is frozen.
func (s Setup) NeedsNewLimits(old Setup) bool {
	return s.Unit != old.Unit || s.Decimals != old.Decimals || s.Chart != old.Chart || s.Size != old.Size
}

// Outside reports on which side of the specification a reading lies, Neither when
// within; a reading exactly on a limit is within.
func (s Setup) Outside(units int64, decimals int) Side {
	v := Decimal{Units: units, Decimals: decimals}
	switch {
	case s.Upper != nil && v.Compare(*s.Upper) > 0:
		return High
	case s.Lower != nil && v.Compare(*s.Lower) < 0:
		return Low
	}
	return Neither
}

// MeanDecimals is how many decimals a mean or limit is written with: one more than
// the readings have, as is common practice.
func (s Setup) MeanDecimals() int {
	if s.Chart == limits.Individuals {
		return s.Decimals
	}
	return s.Decimals + 1
}

// LimitDecimals is how many decimals limits and centre lines are written with.
func (s Setup) LimitDecimals() int { return s.Decimals + 1 }
