package plant

import (
	"time"

	"github.com/google/uuid"
)

// Quiet is a matter kept quiet until a stated time: it does not escalate meanwhile, and
// stays open. It ends by itself, and early when the matter turns graver.
type Quiet struct {
	ID         uuid.UUID
	Matter     uuid.UUID
	Kind       Verdict // of the matter then
	At         time.Time
	Until      time.Time // At itself: it ends the quiet before it
	Reason     string
	Person     uuid.UUID
	PersonName string
}

// Set reports whether there is one at all.
func (q Quiet) Set() bool { return !q.At.IsZero() }

// End is when the quiet of a matter ends or has ended: at its stated time, or with the
// first line that is graver than what was quieted.
func (q Quiet) End(m Matter) time.Time {
	end := q.Until
	if m.Kind().gravity() <= q.Kind.gravity() {
		return end
	}
	for _, l := range m.Lines {
		if l.Withdrawn || l.verdict().gravity() <= q.Kind.gravity() {
			continue
		}
		at := l.First
		if at.Before(q.At) {
			at = q.At // taken before, known since
		}
		if at.Before(end) {
			end = at
		}
	}
	return end
}

// verdict is what a line alone would say.
func (l MatterLine) verdict() Verdict { return VerdictOf([]Firing{l.Firing}, false) }

// LeastQuiet is the shortest quiet that can be asked for.
const LeastQuiet = 5 * time.Minute

// QuietRequest is what a supervisor says to quiet a matter.
type QuietRequest struct {
	ID      uuid.UUID // made by the page, so that a form sent twice counts once
	Matter  uuid.UUID
	Version int       // that the person saw
	Until   time.Time // zero: end the quiet that is kept now
	Reason  string
	Person  uuid.UUID
}

// Quieten checks a request and returns the quiet that it makes. e is how it stands.
func (m Matter) Quieten(r QuietRequest, e Escalation, longest time.Duration, now time.Time) (Quiet, error) {
	q := Quiet{ID: r.ID, Matter: m.ID, Kind: m.Kind(), At: now, Until: CutTime(r.Until), Reason: r.Reason, Person: r.Person}
	kept := e.Quiet.Set() && now.Before(e.Quiet.End(m))
	switch {
	case !m.TakenAt.IsZero():
		return q, Conflictf("", "Somebody has taken this meanwhile. Nothing calls any more.")
	case r.Until.IsZero() && !kept:
		return q, Conflictf("", "This is not quiet any more.")
	case r.Until.IsZero():
		q.Until = now
		return q, nil
	case r.Reason == "":
		return q, Invalidf("reason", "Say why it is kept quiet. Whoever comes next reads it.")
	case q.Until.Before(now.Add(LeastQuiet)):
		return q, Invalidf("until", "Choose a time at least five minutes from now.")
	case q.Until.After(now.Add(longest)):
		return q, Invalidf("until", "A matter may be kept quiet for at most %d minutes. Choose an earlier time.", int(longest/time.Minute))
	}
	return q, nil
}
