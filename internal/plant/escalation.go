package plant

import (
	"time"

	"github.com/google/uuid"
)

// Step is a stage of an escalation: what is done to find somebody for something that
// nobody takes. Steps fire in their order, each once.
type Step int

const (
	OnBoard       Step = 1 // marked on the board, at the top of what needs a person
	ToSupervisors Step = 2 // a notice on every page that a supervisor has open
	ByMessage     Step = 3 // webhooks and mail
)

// Steps lists the steps in their order.
var Steps = [...]Step{OnBoard, ToSupervisors, ByMessage}

// CallKind is what sort of thing calls for somebody.
type CallKind string

const (
	LookCalls  CallKind = "look"
	HoldCalls  CallKind = "hold"
	RoundCalls CallKind = "round" // a round that was promised and not taken
)

// StepTimes is after how many minutes without anybody each step fires; 0: never.
type StepTimes struct {
	Board       int `json:"board"`
	Supervisors int `json:"supervisors"`
	Message     int `json:"message"`
}

// After returns when a step fires, counted from the beginning, and false for never.
func (t StepTimes) After(s Step) (time.Duration, bool) {
	minutes := 0
	switch s {
	case OnBoard:
		minutes = t.Board
	case ToSupervisors:
		minutes = t.Supervisors
	case ByMessage:
		minutes = t.Message
	}
	return time.Duration(minutes) * time.Minute, minutes > 0
}

// EscalationPlan is the times of the steps for each sort of call.
type EscalationPlan struct {
	Look  StepTimes `json:"look"`
	Hold  StepTimes `json:"hold"`
	Round StepTimes `json:"round"` // counted from when the round was due
}

// DefaultEscalation is the plan of a plant that has set none. The times are a beginning
// to be changed, not a rule of any standard.
var DefaultEscalation = EscalationPlan{
	Look:  StepTimes{Board: 10, Supervisors: 20, Message: 45},
	Hold:  StepTimes{Board: 5, Supervisors: 10, Message: 20},
	Round: StepTimes{Board: 20, Supervisors: 40, Message: 90},
}

// Times are the times for one sort of call.
func (p EscalationPlan) Times(k CallKind) StepTimes {
	switch k {
	case HoldCalls:
		return p.Hold
	case RoundCalls:
		return p.Round
	}
	return p.Look
}

// FiredStep is a step that was fired.
type FiredStep struct {
	Turn int
	Step Step
	At   time.Time
}

// Escalation is how far the program has gone to find somebody for one thing. The zero
// value is that of something on which nothing was fired and which was never quieted.
type Escalation struct {
	Fired []FiredStep // in order, of all turns
	Turn  int         // how often it was quieted: each quiet begins the steps anew
	Quiet Quiet       // the newest; the zero value: it was never quieted
}

// Reached is the furthest step of the present turn, 0 for none, and when it fired.
func (e Escalation) Reached() (Step, time.Time) {
	var step Step
	var at time.Time
	for _, f := range e.Fired {
		if f.Turn == e.Turn && f.Step > step {
			step, at = f.Step, f.At
		}
	}
	return step, at
}

// Due lists the steps that are due and were not fired. None comes before one that is
// still to be fired, and none is skipped: what was missed while no server ran is made up.
func (e Escalation) Due(times StepTimes, from, now time.Time) []Step {
	reached, _ := e.Reached()
	var out []Step
	for _, s := range Steps {
		after, on := times.After(s)
		if on && s > reached && !now.Before(from.Add(after)) {
			out = append(out, s)
		}
	}
	return out
}

// Next is the step that comes next and when, false when none comes.
func (e Escalation) Next(times StepTimes, from time.Time) (Step, time.Time, bool) {
	reached, _ := e.Reached()
	for _, s := range Steps {
		if after, on := times.After(s); on && s > reached {
			return s, from.Add(after), true
		}
	}
	return 0, time.Time{}, false
}

// OverdueRound is a round that was promised and not taken, named by the sample that is
// missing: that of Characteristic after the one taken at After. It escalates like a
// matter and ends when that sample is taken or no longer asked for.
type OverdueRound struct {
	ID             uuid.UUID
	Station        uuid.UUID
	Characteristic uuid.UUID
	After          time.Time // zero: there was no sample at all
	DueAt          time.Time
	FoundAt        time.Time
	Escalation     Escalation
}

// missing reports whether the sample that the round is named by is still missing.
func (o OverdueRound) missing(s *StationState) bool {
	for i := range s.Characteristics {
		if c := &s.Characteristics[i]; c.ID == o.Characteristic {
			return c.Overdue() && c.LastTaken.Equal(o.After)
		}
	}
	return false
}

// Overdue reports whether a promised sample was not taken in time, whatever else is
// open.
func (c CharacteristicState) Overdue() bool {
	switch c.Condition() {
	case IsLate, IsUnknown:
		return true
	case IsHold, IsLook:
		return c.Due.State >= Late
	}
	return false
}

// OverdueNow is the round of the station that is overdue, as it stands on record or as it
// would be found now; false when none is. What was due longest names it, and while it is
// open no other is found: whoever comes for one takes all.
func (s *StationState) OverdueNow(now time.Time) (OverdueRound, bool) {
	if s.Missed != nil && s.Missed.missing(s) {
		return *s.Missed, true
	}
	var first *CharacteristicState
	for i := range s.Characteristics {
		if c := &s.Characteristics[i]; c.Overdue() && (first == nil || c.Due.At.Before(first.Due.At)) {
			first = c
		}
	}
	if first == nil {
		return OverdueRound{}, false
	}
	return OverdueRound{Station: s.ID, Characteristic: first.ID, After: first.LastTaken, DueAt: CutTime(first.Due.At), FoundAt: now}, true
}

// CallKind is what the matter calls as.
func (m Matter) CallKind() CallKind {
	if m.Kind() == Hold {
		return HoldCalls
	}
	return LookCalls
}

// Calls reports whether the matter calls for somebody: it is open, nobody has taken it,
// and something of it stands.
func (m Matter) Calls() bool { return m.Open() && m.TakenAt.IsZero() && !m.AllWithdrawn() }

// EscalatesFrom is when the steps of a matter count from: its opening, or the end of the
// quiet that was kept last. It is false while the matter does not escalate.
func (m Matter) EscalatesFrom(e Escalation, now time.Time) (time.Time, bool) {
	if !m.Calls() {
		return time.Time{}, false
	}
	from := m.OpenedAt
	if e.Quiet.Set() {
		if from = e.Quiet.End(m); now.Before(from) {
			return from, false
		}
	}
	return from, true
}

// Call is a step that is due, with what it is about.
type Call struct {
	Step           Step
	Kind           CallKind
	Turn           int
	Since          time.Time // opened, or due
	Matter         *Matter   // nil: an overdue round
	Overdue        *OverdueRound
	Station        Station
	Line           Line
	Characteristic CharacteristicState // the one concerned
}

// Stands is since when it is what it is called for: a round since it was due, a Hold since
// product is in doubt. Steps count from Since.
func (c Call) Stands() time.Time {
	if c.Matter != nil {
		return c.Matter.KindSince()
	}
	return c.Since
}

// CallsDue lists the steps that are due at the stations, oldest thing first within each.
func CallsDue(states []StationState, now time.Time) []Call {
	var out []Call
	for i := range states {
		s := &states[i]
		for j := range s.Characteristics {
			c := &s.Characteristics[j]
			if c.Matter == nil {
				continue
			}
			from, on := c.Matter.EscalatesFrom(c.Escalation, now)
			if !on {
				continue
			}
			kind := c.Matter.CallKind()
			for _, step := range c.Escalation.Due(s.EscalationPlan.Times(kind), from, now) {
				out = append(out, Call{Step: step, Kind: kind, Turn: c.Escalation.Turn, Since: c.Matter.OpenedAt,
					Matter: c.Matter, Station: s.Station, Line: s.Line, Characteristic: *c})
			}
		}
		o := s.Missed
		if o == nil || !o.missing(s) {
			continue
		}
		for _, step := range o.Escalation.Due(s.EscalationPlan.Round, o.DueAt, now) {
			out = append(out, Call{Step: step, Kind: RoundCalls, Turn: o.Escalation.Turn, Since: o.DueAt,
				Overdue: o, Station: s.Station, Line: s.Line, Characteristic: *s.characteristic(o.Characteristic)})
		}
	}
	return out
}

func (s *StationState) characteristic(id uuid.UUID) *CharacteristicState {
	for i := range s.Characteristics {
		if s.Characteristics[i].ID == id {
			return &s.Characteristics[i]
		}
	}
	return nil
}
