package plant

import (
	"slices"
	"time"

	"github.com/google/uuid"
)

// ReachWindow is how many subgroups back a change is looked for.
const ReachWindow = 512

// ReachSince is why product is suspect from an instant on.
type ReachSince string

const (
	SinceChange    ReachSince = "change"     // a rule fired: from the last subgroup before the change may have begun
	SinceGoodRound ReachSince = "good round" // a reading is outside: from the last round with all within
	SinceGoodCheck ReachSince = "good check" // the gauge failed: from its last good check
)

// Reach is what is suspect because of a matter: what was made from From until Until, or
// until now. It is derived from the record and never stored as a fact.
type Reach struct {
	Matter  uuid.UUID
	Reasons []Suspicion // the earliest first; none: no product is suspect
	From    time.Time   // of the earliest; zero: from the very beginning
	Cut     bool        // it may have begun before From
	Streams []uuid.UUID // it is confined to; empty: all
	Until   time.Time   // zero: it still grows
	Ended   ReachEnd
	Log     MachineLog // what the machine did since From; set by who reads it
}

// ReachEnd is what ended the growth of a reach.
type ReachEnd string

const (
	StillGrowing ReachEnd = ""
	ByCorrection ReachEnd = "corrected" // a change to the process, and nothing was found after it
	ByFix        ReachEnd = "fixed"     // the restart mark of what put it right
	ByNewStart   ReachEnd = "restarted" // a changeover, or a restart mark with nothing done
	ByGoodCheck  ReachEnd = "checked"   // the gauge passed a check again
	ByClosing    ReachEnd = "closed"
)

// Suspicion is one reason why product is suspect.
type Suspicion struct {
	Since   ReachSince
	Panel   Panel     // that fired
	From    time.Time // zero: from the very beginning
	Cut     bool      // the window of subgroups was cut, or nothing good is on record: it may have begun before
	Start   bool      // From is where the process was started afresh
	Until   time.Time // of this reason alone, the gauge that is good again; zero: no end of its own
	Streams []uuid.UUID
	Change  *EstimatedChange
}

// EstimatedChange is when and how much the process most likely changed before a signal.
type EstimatedChange struct {
	Panel    Panel
	Subgroup uuid.UUID // whose firing it was estimated from
	Signal   time.Time // when that was taken
	Began    time.Time // the first subgroup after the most likely moment
	// Size is the mean since then less the centre, in the unit; for Dispersion the ratio
	// of the spread to that of the limits. It is biased away from zero, because only large
	// changes signal.
	Size float64
	SE   float64 // standard error of Size, given the moment
}

// ReachPoint is what finding a reach needs of a subgroup.
type ReachPoint struct {
	Subgroup uuid.UUID
	TakenAt  time.Time
	Setup    int
	Stats    Statistics
	Readings []int64
	Streams  []uuid.UUID // empty, or one a reading
	Outside  int
}

// ReachWindowOf is the stretch of subgroups behind one question, oldest first, the one
// that is asked about last.
type ReachWindowOf struct {
	Points []ReachPoint
	Cut    bool // there were more
}

// ReachEvidence is what a reach is found from.
type ReachEvidence struct {
	Matter     Matter
	Setups     map[int]Setup
	Location   ReachWindowOf // of the first standing firing on the panel, since the last boundary
	Dispersion ReachWindowOf
	Reading    ReachWindowOf // of the first standing reading outside, whatever the boundaries
	Segments   map[Panel]Segment
	Revisions  map[uuid.UUID]Revision
	Checks     []GaugeCheckRecord // of the gauges whose failure is a line: all since their last good one before it
	Changes    []Change           // to the machine since the matter opened, by happened-at
	Boundaries []Boundary         // after the matter opened
}

// FirstSuspect returns when the earliest firing was taken that stands on a panel and is no
// change for the better; zero where there is none.
func (m Matter) FirstSuspect(p Panel, s Setup) (first time.Time) {
	for _, l := range m.Lines {
		if !l.Withdrawn && l.Panel == p && !l.Better(s) && (first.IsZero() || l.First.Before(first)) {
			first = l.First
		}
	}
	return first
}

// lastStanding is when the newest standing firing was taken, or the opening.
func (m Matter) lastStanding() time.Time {
	last := m.OpenedTaken
	for _, l := range m.Lines {
		if !l.Withdrawn && l.Last.After(last) {
			last = l.Last
		}
	}
	return last
}

// HoldsSuspects reports whether the matter puts product in doubt: not when every standing
// line is a change for the better, and not when none stands.
func (m Matter) HoldsSuspects(s Setup) bool {
	return slices.ContainsFunc(m.Lines, func(l MatterLine) bool { return !l.Withdrawn && !l.Better(s) })
}

// ReachOf finds the reach of a matter.
//
// For a rule that fired it runs from the taken-at of the earliest likely last subgroup
// before the change (Samuel, Pignatiello and Calvin 1998; changepoint.LikelyCut), from the
// boundary when that is the beginning of the stretch, or from the window's first subgroup
// when it was cut; for a reading outside specification from the last round of that stream
// with all readings within; for a gauge that failed from its last good check. It ends
// where the process was corrected or started anew and nothing stands after it. A line that
// is a change for the better puts nothing in doubt.
func ReachOf(e ReachEvidence, setup Setup) Reach {
	r := Reach{Matter: e.Matter.ID}
	for _, panel := range [...]Panel{Location, Dispersion} {
		if !e.Matter.FirstSuspect(panel, setup).IsZero() {
			r.Reasons = append(r.Reasons, e.change(panel, setup))
		}
	}
	if !e.Matter.FirstSuspect(Reading, setup).IsZero() {
		r.Reasons = append(r.Reasons, e.goodRounds()...)
	}
	if first := e.Matter.FirstSuspect(GaugeCheck, setup); !first.IsZero() {
		r.Reasons = append(r.Reasons, e.goodCheck(first))
	}
	slices.SortStableFunc(r.Reasons, func(a, b Suspicion) int { return a.From.Compare(b.From) })
	if len(r.Reasons) == 0 {
		return r
	}
	r.From, r.Cut = r.Reasons[0].From, r.Reasons[0].Cut
	for _, s := range r.Reasons {
		r.Cut = r.Cut || s.Cut && s.From.Equal(r.From)
	}
	r.Streams = confined(r.Reasons)
	r.end(e)
	return r
}

// confined are the streams to which all reasons together are confined, none when one is
// not.
func confined(reasons []Suspicion) (out []uuid.UUID) {
	for _, s := range reasons {
		if len(s.Streams) == 0 {
			return nil
		}
		for _, id := range s.Streams {
			if !slices.Contains(out, id) {
				out = append(out, id)
			}
		}
	}
	return out
}

// end finds what ended the growth: the first correction or new start with nothing standing
// after it. With a gauge alone in doubt that is its next good check; a failed gauge is
// mended by no change to the process.
func (r *Reach) end(e ReachEvidence) {
	m := e.Matter
	gauge, process := time.Time{}, false
	for _, s := range r.Reasons {
		if s.Since == SinceGoodCheck {
			gauge = s.Until
			if gauge.IsZero() && m.Open() {
				return
			}
		} else {
			process = true
		}
	}
	until, how := time.Time{}, StillGrowing
	earlier := func(at time.Time, by ReachEnd) {
		if until.IsZero() || at.Before(until) {
			until, how = at, by
		}
	}
	if process {
		last := m.lastStanding()
		for _, c := range e.Changes {
			if !c.HappenedAt.Before(last) && c.HappenedAt.After(m.OpenedTaken) && c.corrects(m.Characteristic) {
				earlier(c.HappenedAt, ByCorrection)
			}
		}
		for _, b := range e.Boundaries {
			switch {
			case !b.At.After(last):
			case b.Kind == ByRestart:
				earlier(b.At, m.restartBy(b.At))
			case b.Kind == ByChangeover:
				earlier(b.At, ByNewStart)
			}
		}
	}
	if !gauge.IsZero() && (!process || !until.IsZero() && gauge.After(until)) {
		until, how = gauge, ByGoodCheck
	}
	if !m.Open() {
		if !m.RestartAt.IsZero() {
			earlier(m.RestartAt, m.restartBy(m.RestartAt))
		}
		earlier(m.ClosedAt, ByClosing)
	}
	r.Until, r.Ended = until, how
}

// restartBy is what the restart mark at an instant stands for: the matter was put right,
// or nothing was done and judging began afresh.
func (m Matter) restartBy(at time.Time) ReachEnd {
	nothing := m.Closing == NothingDone
	for _, f := range m.Fixes {
		if f.RestartAt.Equal(at) {
			nothing = f.Action == ""
		}
	}
	if nothing {
		return ByNewStart
	}
	return ByFix
}

// corrects reports whether the change may have put right what is wrong with a
// characteristic.
func (c Change) corrects(characteristic uuid.UUID) bool {
	return c.Kind != ChangedOver && (c.Characteristic == uuid.Nil || c.Characteristic == characteristic)
}
