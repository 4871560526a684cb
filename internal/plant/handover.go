package plant

import (
	"cmp"
	"crypto/sha256"
	"slices"
	"time"

	"github.com/google/uuid"
)

// ShiftSpan is one shift of one day: from when to when.
type ShiftSpan struct {
	Shift
	From, To time.Time
}

// Over reports whether the shift has ended.
func (s ShiftSpan) Over(now time.Time) bool { return !now.Before(s.To) }

// SpanAt is the shift that t falls into, with both its ends.
func (p Plant) SpanAt(t time.Time) ShiftSpan {
	shift, from := p.ShiftAt(t)
	// The next shift begins within a day; an hour more or less at a change of the clocks.
	to := from
	for _, ahead := range append(starts(p, from, 0), starts(p, from, 1)...) {
		if ahead.After(from) && (to.Equal(from) || ahead.Before(to)) {
			to = ahead
		}
	}
	return ShiftSpan{shift, from, to}
}

// starts are the instants at which shifts begin on the day of t, or so many days later.
func starts(p Plant, t time.Time, days int) []time.Time {
	local := t.In(p.Location)
	list := p.Shifts
	if len(list) == 0 {
		list = []Shift{{}}
	}
	out := make([]time.Time, len(list))
	for i, s := range list {
		h, m := int(s.Starts/time.Hour), int(s.Starts%time.Hour/time.Minute)
		out[i] = time.Date(local.Year(), local.Month(), local.Day()+days, h, m, 0, 0, p.Location)
	}
	return out
}

// ShiftSummary is what one shift hands over to the next on one line. What happened in it
// is of the record as it is known now: a sample that came late is in it.
type ShiftSummary struct {
	Line     Line
	Span     ShiftSpan
	Until    time.Time // To, or now while the shift runs
	Stations []StationKept

	Matters     []MatterOfShift // that were open at some time of it, the oldest first
	Contained   []Containment   // still kept aside at Until
	Corrections []CorrectionOfShift
	Changes     []ChangeOfShift
	Gauges      []GaugeOfShift // whose check was overdue at Until
	Notes       []ShiftNote    // not cleared by its beginning
	Readers     []ShiftReader
}

// GaugeOfShift is a gauge whose check is overdue, at one station.
type GaugeOfShift struct {
	Station Station
	First   uuid.UUID // that is measured with it there
	Gauge   GaugeNow  // its name, and the day on which the check was due
}

// StationKept is how the sampling plans of a station were kept.
type StationKept struct {
	Station Station
	Kept
}

// MatterOfShift is a matter with where it is.
type MatterOfShift struct {
	Matter
	StationName, Name string
	Setup             Setup
	Quiet             Quiet // the newest that was kept when the summary ends; the zero value: none was
}

// At is the matter as it stood at an instant: what people did later is left out. Its lines
// are judgements and stay as they are judged now.
func (m Matter) At(t time.Time) Matter {
	later := func(at time.Time) bool { return !at.Before(t) }
	if later(m.TakenAt) {
		m.TakenBy, m.TakenByName, m.TakenAt = uuid.Nil, "", time.Time{}
	}
	if later(m.ClosedAt) {
		m.ClosedAt = time.Time{}
	}
	m.Answers = slices.DeleteFunc(slices.Clone(m.Answers), func(a StepAnswer) bool { return later(a.At) })
	m.Fixes = slices.DeleteFunc(slices.Clone(m.Fixes), func(f Fix) bool { return later(f.At) })
	for i := range m.Fixes {
		f := &m.Fixes[i]
		if later(f.ConfirmedAt) {
			f.ConfirmedAt = time.Time{}
		}
		if later(f.SignalAt) {
			f.SignalAt = time.Time{}
		}
		if f.Word != nil && later(f.Word.At) {
			f.Word = nil
		}
	}
	return m
}

// QuietUntil is until when nobody is called about it at an instant; zero: it is not quiet.
func (m MatterOfShift) QuietUntil(t time.Time) time.Time {
	until, on := m.At(t).EscalatesFrom(Escalation{Quiet: m.Quiet}, t)
	if on || !m.Quiet.Set() || !t.Before(until) {
		return time.Time{}
	}
	return until
}

// Age is how long it had been open when the summary ends, or until it was closed.
func (m MatterOfShift) Age(until time.Time) time.Duration {
	if !m.ClosedAt.IsZero() && m.ClosedAt.Before(until) {
		until = m.ClosedAt
	}
	return until.Sub(m.OpenedAt)
}

// OpenAt reports whether it was open at t.
func (m Matter) OpenAt(t time.Time) bool {
	return !m.OpenedAt.After(t) && (m.ClosedAt.IsZero() || m.ClosedAt.After(t))
}

// CorrectionOfShift is a corrected or voided subgroup that took a signal back.
type CorrectionOfShift struct {
	StationName, Name string
	Characteristic    uuid.UUID
	TakenAt           time.Time
	RecordedAt        time.Time
	Voided            bool
	Reason            string
	Withdrew          []Firing
}

// ChangeOfShift is a change with where it was made.
type ChangeOfShift struct {
	Change
	StationName, MachineName, Name string
	Unit                           string
}

// ShiftNote is what one shift writes down for those that follow. It is carried until
// somebody clears it.
type ShiftNote struct {
	ID          uuid.UUID
	Line        uuid.UUID
	Text        string
	WrittenAt   time.Time
	WrittenBy   string
	ClearedAt   time.Time // zero: carried on
	ClearedBy   string
	WrittenByID uuid.UUID
}

// MaxNote is the most characters that a note may hold.
const MaxNote = 500

// Digest tells a repeated send from another note under the same id.
func (n ShiftNote) Digest() [32]byte {
	return sha256.Sum256([]byte(n.Line.String() + "\x00" + n.Text))
}

// ShiftReader is somebody who confirmed having read a summary.
type ShiftReader struct {
	Name string
	At   time.Time
}

// Kept is how the plans of all stations were kept together.
func (s ShiftSummary) Kept() (k Kept) {
	for _, st := range s.Stations {
		k = k.Add(st.Kept)
	}
	return k
}

// Counts are the matters of the shift in numbers.
func (s ShiftSummary) Counts() (opened, taken, closed, open int) {
	within := func(t time.Time) bool { return !t.IsZero() && !t.Before(s.Span.From) && t.Before(s.Until) }
	for _, m := range s.Matters {
		if within(m.OpenedAt) {
			opened++
		}
		if within(m.TakenAt) {
			taken++
		}
		if within(m.ClosedAt) {
			closed++
		}
		if m.OpenAt(s.Until) {
			open++
		}
	}
	return opened, taken, closed, open
}

// StillOpen are the matters that the shift hands over.
func (s ShiftSummary) StillOpen() []MatterOfShift { return s.matters(true) }

// Ended are those that were closed before the summary ends.
func (s ShiftSummary) Ended() []MatterOfShift { return s.matters(false) }

func (s ShiftSummary) matters(open bool) (out []MatterOfShift) {
	for _, m := range s.Matters {
		if m.OpenAt(s.Until) == open {
			out = append(out, m)
		}
	}
	return out
}

// CauseShare is one cause among the matters that were closed in a stretch.
type CauseShare struct {
	Cause string
	Count int
	Out   time.Duration // out of control because of it: from the signal to the fix
}

// Pareto gathers closed matters by their causes, the one with the most first. Time out of
// control runs from the taking of the subgroup that opened the matter to the instant of
// the fix, or to the closing where nothing was done. What was withdrawn had no cause.
func Pareto(closed []Matter, byTime bool) []CauseShare {
	place := map[string]int{}
	var out []CauseShare
	for _, m := range closed {
		if m.Closing == WithdrawnBy || m.Cause == "" {
			continue
		}
		i, known := place[m.Cause]
		if !known {
			i = len(out)
			place[m.Cause] = i
			out = append(out, CauseShare{Cause: m.Cause})
		}
		end := m.RestartAt
		if end.IsZero() {
			end = m.ClosedAt
		}
		out[i].Count++
		out[i].Out += max(end.Sub(m.OpenedTaken), 0)
	}
	slices.SortFunc(out, func(a, b CauseShare) int {
		first, second := cmp.Compare(b.Count, a.Count), cmp.Compare(b.Out, a.Out)
		if byTime {
			first, second = second, first
		}
		return cmp.Or(first, second, cmp.Compare(a.Cause, b.Cause))
	})
	return out
}

// DailyRoot is the one hash over all heads of the ledger on a day of the plant, to be kept
// outside the box.
type DailyRoot struct {
	Day    string // of the plant, 2006-01-02
	At     time.Time
	Chains int
	Root   [32]byte
}
