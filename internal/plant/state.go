package plant

import (
	"time"

	"github.com/google/uuid"
)

// Point is one subgroup as charts show it: its current version, its statistics and
// what was found in it.
type Point struct {
	Characteristic uuid.UUID
	Subgroup       uuid.UUID
	Round          uuid.UUID
	Version        int
	TakenAt        time.Time
	RecordedAt     time.Time
	Setup          int // version it was taken under
	Stats          Statistics
	Readings       []int64
	Streams        []uuid.UUID // empty, or one a reading
	Outside        int         // readings outside specification
	Part           uuid.UUID
	Lot            string
	Person         uuid.UUID
	PersonName     string
	ShortReason    string
	Reason         string // of the correction, when Version > 1
	Voided         bool
	Signals        []Signal // standing and withdrawn
}

// Standing lists the point's signals that stand.
func (p Point) Standing() []Signal {
	var out []Signal
	for _, s := range p.Signals {
		if !s.Withdrawn {
			out = append(out, s)
		}
	}
	return out
}

// CharacteristicState is all that a surface needs to show one characteristic now.
type CharacteristicState struct {
	Characteristic
	Setup     Setup
	Revision  *Revision // in force now; nil: learning
	Segment   Segment   // that the newest subgroup lies in
	Version   int64     // grows with every change
	Points    []Point   // newest last, at most as many as were asked for
	Collected int       // subgroups since learning began, when learning
	Matter    *Matter   // open
	LastTaken time.Time
	LastDue   time.Time
	Due       Due
	Machine   MachineNow
	Beside    bool // other machines stand at its station, so that its own is to be named

	Gauge     *GaugeNow     // that it is measured with; nil: none is named
	Reach     *Reach        // of the open matter; nil: none, or not found yet
	Contained []Containment // still open, the oldest first

	Escalation  Escalation    // of the open matter
	ReadAt      time.Time     // the instant of all this
	Rules       OwnerSettings // by which its owner is found
	Standing    Standing
	Acceptance  Acceptance   // the newest, whether or not it still holds
	Protections []Protection // that have not ended, oldest first

	OverduePlan *ReactionPlan // in force, while a round is overdue; nil: none

	Changes []Change // that concern it, since the first of Points, oldest first: what charts show of them
}

// Title is what the characteristic is called among all that is measured at its station:
// its name, with the machine where the station has several.
func (c CharacteristicState) Title() string {
	if !c.Beside || c.Machine.Name == "" {
		return c.Name
	}
	return c.Name + " (" + c.Machine.Name + ")"
}

// MachineNow is a machine with what it does at the moment.
type MachineNow struct {
	Machine
	State MachineState
	Known bool // false: its state was never recorded, and it counts as running
	Part  Part
	Log   MachineLog
}

// Running reports whether the machine runs.
func (m MachineNow) Running() bool { return !m.Known || m.State.Running }

// StationState is a station with all that happens there now.
type StationState struct {
	Station
	Line            Line
	Machines        []MachineNow
	Characteristics []CharacteristicState

	Missed         *OverdueRound  // open on record
	EscalationPlan EscalationPlan // in force here
	Aside          Asides
	Alarms         []time.Time // when matters were opened with an alarm in the last AlarmSpan, oldest first
}

// Version grows with every change at the station.
func (s StationState) Version() int64 {
	var sum int64
	for _, c := range s.Characteristics {
		sum += c.Version
	}
	return sum
}

// Condition is the one word that a surface shows for a characteristic.
type Condition string

const (
	CalmLeave  Condition = "leave"
	IsLearning Condition = "learning"
	IsStopped  Condition = "stopped"
	IsDue      Condition = "due"
	IsLate     Condition = "late"
	IsUnknown  Condition = "unknown"
	IsLook     Condition = "look"
	IsHold     Condition = "hold"
)

// NeedsPerson reports whether somebody must act.
func (c Condition) NeedsPerson() bool {
	switch c {
	case IsLate, IsUnknown, IsLook, IsHold:
		return true
	}
	return false
}

// Gravity orders conditions by how much they ask of people.
func (c Condition) Gravity() int {
	switch c {
	case IsHold:
		return 6
	case IsLook:
		return 5
	case IsUnknown:
		return 4
	case IsLate:
		return 3
	case IsDue:
		return 2
	case IsLearning:
		return 1
	}
	return 0
}

// Condition works out what the characteristic is in. An open matter comes before
// everything; a machine that stands still cannot be late.
func (c CharacteristicState) Condition() Condition {
	switch {
	case c.Matter != nil && c.Matter.Kind() == Hold:
		return IsHold
	case c.Matter != nil:
		return IsLook
	case !c.Machine.Running() && c.Due.State != DueNow && c.Due.State != Late:
		return IsStopped
	case c.Due.State == TooLate:
		return IsUnknown
	case c.Due.State == Late:
		return IsLate
	case c.Due.State == DueNow:
		return IsDue
	case c.Revision == nil:
		return IsLearning
	}
	return CalmLeave
}

// Since is from when on the condition holds, zero when that is not known.
func (c CharacteristicState) Since() time.Time {
	switch c.Condition() {
	case IsHold, IsLook:
		return c.Matter.KindSince()
	case IsStopped:
		return c.Machine.State.At
	case IsDue, IsLate, IsUnknown:
		return c.Due.At
	}
	return c.Segment.From
}

// Stretch says which part of a history is asked for. With Last set it is the newest
// so many subgroups (before To, when To is set); otherwise everything from From to To.
type Stretch struct {
	From, To time.Time
	Last     int
}

// History is a stretch of one characteristic's record with all that a chart of it
// shows.
type History struct {
	State     CharacteristicState
	Station   Station
	Line      Line
	Points    []Point // oldest first; voided ones are left out
	Course    Course  // boundaries within the stretch
	Revisions map[uuid.UUID]Revision
	Setups    map[int]Setup
	Changes   []Change
	Matters   []Matter // that touch the stretch
	Clipped   bool     // the stretch held more than may be shown
}

// RoundRecord is a round on the record with its subgroups as they stand now.
type RoundRecord struct {
	ID         uuid.UUID
	Station    uuid.UUID
	TakenAt    time.Time
	RecordedAt time.Time
	Person     uuid.UUID
	PersonName string
	Points     []Point
}
