package plant

import (
	"time"

	"github.com/google/uuid"
)

// Matter is what is open on a characteristic after a signal or a Hold. Its opening
// and what people did are facts; its lines are derived.
type Matter struct {
	ID             uuid.UUID
	Station        uuid.UUID
	Characteristic uuid.UUID
	OpenedAt       time.Time // recorded
	OpenedTaken    time.Time // taken at of the subgroup that opened it
	OpenedSubgroup uuid.UUID
	Alarmed        bool
	TakenBy        uuid.UUID
	TakenByName    string
	TakenAt        time.Time
	Cause          string
	Action         string
	RestartAt      time.Time
	ClosedBy       uuid.UUID
	ClosedByName   string
	ClosedAt       time.Time
	Closing        Closing
	Version        int
	Lines          []MatterLine

	Kinds   []KindAdded // in the order in which they were added, the gravest first
	Plans   map[uuid.UUID]ReactionPlan
	Answers []StepAnswer // in the order in which they were given
	Fixes   []Fix        // in the order in which they were recorded
}

// MatterLine is one rule of a matter, from its first to its last firing.
type MatterLine struct {
	Firing
	First, Last time.Time // taken at
	Count       int
	FoundLate   bool
	Withdrawn   bool // none of its firings stands any more
}

// Closing is how a matter ended.
type Closing string

const (
	Fixed       Closing = "fixed"        // something was done: restart mark at the instant of the fix
	NothingDone Closing = "nothing done" // restart mark at the closing
	WithdrawnBy Closing = "withdrawn"    // no line stands any more
)

// Open reports whether the matter is open.
func (m Matter) Open() bool { return m.ClosedAt.IsZero() }

// Kind is the matter's gravity: that of its gravest standing line. A matter without
// a standing line waits to be closed as withdrawn and asks for a look meanwhile.
func (m Matter) Kind() Verdict {
	for _, l := range m.Lines {
		if !l.Withdrawn && l.Panel.HoldsProduct() {
			return Hold
		}
	}
	return Look
}

// KindSince is from when on the matter has its gravity: a matter that was opened for a look
// is a Hold only from the first standing line that puts the product in doubt.
func (m Matter) KindSince() time.Time {
	var first time.Time
	for _, l := range m.Lines {
		if !l.Withdrawn && l.Panel.HoldsProduct() && (first.IsZero() || l.First.Before(first)) {
			first = l.First
		}
	}
	if first.After(m.OpenedAt) {
		return first
	}
	return m.OpenedAt
}

// AllWithdrawn reports whether none of the lines stands any more.
func (m Matter) AllWithdrawn() bool {
	for _, l := range m.Lines {
		if !l.Withdrawn {
			return false
		}
	}
	return true
}

// OnlyGauge reports whether a gauge that failed its check is all that stands.
func (m Matter) OnlyGauge() bool {
	for _, l := range m.Lines {
		if !l.Withdrawn && l.Panel != GaugeCheck {
			return false
		}
	}
	return !m.AllWithdrawn()
}

// OnlyHold reports whether every standing line puts the product in doubt and none the
// process.
func (m Matter) OnlyHold() bool {
	for _, l := range m.Lines {
		if !l.Withdrawn && !l.Panel.HoldsProduct() {
			return false
		}
	}
	return true
}

// ClosingRequest is what a person says when closing a matter.
type ClosingRequest struct {
	Matter  uuid.UUID
	Version int // that the person saw
	Cause   string
	CauseID uuid.UUID
	Action  string    // empty: nothing was done
	FixedAt time.Time // instant of the fix; zero: now
	Person  uuid.UUID
}

// Resolve checks a closing and returns how the matter ends and where the restart mark
// goes (zero: none).
func (m Matter) Resolve(c ClosingRequest, now time.Time) (Closing, time.Time, error) {
	switch {
	case !m.Open():
		return "", time.Time{}, Conflictf("", "Somebody has closed this already.")
	case m.AllWithdrawn():
		return WithdrawnBy, time.Time{}, nil
	case c.Cause == "":
		return "", time.Time{}, Invalidf("cause", "Say what the cause was. \"Not found\" is an honest answer.")
	case c.Action == "" && m.OnlyHold():
		return NothingDone, time.Time{}, nil
	case c.Action == "":
		return NothingDone, now, nil
	case c.FixedAt.IsZero():
		return Fixed, now, nil
	case c.FixedAt.After(now):
		return "", time.Time{}, Invalidf("fixed_at", "The fix cannot lie in the future.")
	case c.FixedAt.Before(m.OpenedTaken):
		return "", time.Time{}, Invalidf("fixed_at", "The fix cannot lie before the signal.")
	case len(m.Fixes) > 0 && c.FixedAt.Before(m.Fixes[len(m.Fixes)-1].Since()):
		return "", time.Time{}, Invalidf("fixed_at", "The fix cannot lie before the one that did not hold.")
	}
	return Fixed, c.FixedAt, nil
}
