package plant

import (
	"slices"
	"time"

	"github.com/google/uuid"
)

// OpenCall is something that nobody has taken, with how far it has gone.
type OpenCall struct {
	Call       // Step is the furthest that was fired, 0 for none
	Escalation Escalation
	FiredAt    time.Time // of that step
	Next       Step      // 0: none comes, or it is quiet
	NextAt     time.Time
	QuietUntil time.Time // zero: it is not quiet
}

// Calling reports whether supervisors are being called about it.
func (o OpenCall) Calling() bool { return o.Step >= ToSupervisors && o.QuietUntil.IsZero() }

// Waits reports whether it waits for somebody now. This is what is counted, wherever calls
// are: what is kept quiet is listed apart.
func (o OpenCall) Waits() bool { return o.QuietUntil.IsZero() }

// Waiting counts what waits for somebody now.
func Waiting(open []OpenCall) (n int) {
	for _, o := range open {
		if o.Waits() {
			n++
		}
	}
	return n
}

// OpenCalls lists what nobody has taken at the stations, oldest first.
func OpenCalls(states []StationState, now time.Time) []OpenCall {
	var out []OpenCall
	for i := range states {
		s := &states[i]
		for j := range s.Characteristics {
			if o, ok := openMatter(s, &s.Characteristics[j], now); ok {
				out = append(out, o)
			}
		}
		if missed, ok := s.OverdueNow(now); ok {
			o := OpenCall{Escalation: missed.Escalation, Call: Call{Kind: RoundCalls, Since: missed.DueAt, Overdue: &missed,
				Station: s.Station, Line: s.Line, Characteristic: *s.characteristic(missed.Characteristic)}}
			o.Step, o.FiredAt = missed.Escalation.Reached()
			o.Next, o.NextAt, _ = missed.Escalation.Next(s.EscalationPlan.Round, missed.DueAt)
			out = append(out, o)
		}
	}
	slices.SortStableFunc(out, func(a, b OpenCall) int { return a.Since.Compare(b.Since) })
	return out
}

func openMatter(s *StationState, c *CharacteristicState, now time.Time) (OpenCall, bool) {
	m := c.Matter
	if m == nil || !m.Calls() {
		return OpenCall{}, false
	}
	o := OpenCall{Escalation: c.Escalation, Call: Call{Kind: m.CallKind(), Turn: c.Escalation.Turn, Since: m.OpenedAt, Matter: m,
		Station: s.Station, Line: s.Line, Characteristic: *c}}
	from, on := m.EscalatesFrom(c.Escalation, now)
	if !on {
		o.QuietUntil = from
		return o, true
	}
	o.Step, o.FiredAt = c.Escalation.Reached()
	o.Next, o.NextAt, _ = c.Escalation.Next(s.EscalationPlan.Times(o.Kind), from)
	return o, true
}

// SentCall is a call that went to people, on record.
type SentCall struct {
	Step             Step
	Kind             CallKind
	At               time.Time
	Station          string
	StationID        uuid.UUID
	Characteristic   string
	CharacteristicID uuid.UUID
	Matter           uuid.UUID // zero: an overdue round
	Since            time.Time
	TakenBy          string
	TakenAt          time.Time
	EndedAt          time.Time // closed, or the round was taken
	Messages         []SentMessage
}

// SentMessage is what became of one message of a call.
type SentMessage struct {
	Target             string
	Delivered, GivenUp bool
}
