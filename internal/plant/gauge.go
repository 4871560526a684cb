package plant

import (
	"crypto/sha256"
	"fmt"
	"slices"
	"time"

	"github.com/google/uuid"
)

// GaugeCheckRecord is one check of a gauge against its master, a fact.
type GaugeCheckRecord struct {
	ID         uuid.UUID
	Gauge      uuid.UUID
	At         time.Time
	Good       bool
	Master     *Decimal // what the master is
	Reading    *Decimal // what the gauge said of it
	Note       string
	NextCheck  time.Time // a day; zero: by the gauge's interval
	RecordedAt time.Time
	Person     uuid.UUID
	PersonName string
}

// Clean is the check with its text and times as they are kept.
func (c GaugeCheckRecord) Clean() GaugeCheckRecord {
	c.Note, c.At = CleanText(c.Note), CutTime(c.At)
	return c
}

// Check says what in the record cannot be.
func (c GaugeCheckRecord) Check(now time.Time) error {
	switch {
	case c.At.After(now.Add(MaxAhead)):
		return Invalidf("at", "This cannot have happened in the future.")
	case c.At.Before(now.Add(-MaxBack)):
		return Invalidf("at", "This is more than 7 days back.")
	case len([]rune(c.Note)) > 300:
		return Invalidf("note", "Please use at most %d characters here.", 300)
	case !c.Good && c.Note == "" && (c.Master == nil || c.Reading == nil):
		return Invalidf("note", "Say what was wrong with the gauge, or type both numbers.")
	case c.Good && !c.NextCheck.IsZero() && !c.NextCheck.After(c.At):
		return Invalidf("next", "The next check lies after this one.")
	}
	return nil
}

// Digest tells a repeated send from another check under the same id.
func (c GaugeCheckRecord) Digest() [32]byte {
	text := func(d *Decimal) string {
		if d == nil {
			return ""
		}
		return d.String()
	}
	return sha256.Sum256(fmt.Appendf(nil, "%s\x00%s\x00%t\x00%s\x00%s\x00%s\x00%s",
		c.Gauge, CutTime(c.At), c.Good, text(c.Master), text(c.Reading), c.Note, day(c.NextCheck)))
}

func day(t time.Time) string {
	if t.IsZero() {
		return ""
	}
	return t.Format(time.DateOnly)
}

// GaugeNow is a gauge with how far it can be trusted at the moment.
type GaugeNow struct {
	Gauge
	LastCheck   time.Time // zero: never
	LastGood    time.Time
	FailedSince time.Time // the first failed check since the last good one; zero: none
}

// Failed reports whether the gauge failed and was not good since.
func (g GaugeNow) Failed() bool { return !g.FailedSince.IsZero() }

// Overdue reports whether the day of the next check is over, in the plant's zone.
func (g GaugeNow) Overdue(now time.Time, zone *time.Location) bool {
	return !g.NextCheck.IsZero() && g.NextCheck.Format(time.DateOnly) < now.In(zone).Format(time.DateOnly)
}

// OverdueSince is when the day of the next check was over, in the plant's zone.
func (g GaugeNow) OverdueSince(zone *time.Location) time.Time {
	y, m, d := g.NextCheck.Date()
	return time.Date(y, m, d+1, 0, 0, 0, 0, zone)
}

// GaugeOverdue is a gauge whose check is overdue, with what is measured with it at one
// station.
type GaugeOverdue struct {
	GaugeNow
	Of    []string
	First uuid.UUID // the first characteristic of those
}

// OverdueGauges lists the gauges of a station whose check is overdue, the oldest first.
// One that failed is not among them: its matters are open.
func (s StationState) OverdueGauges(now time.Time, zone *time.Location) []GaugeOverdue {
	var out []GaugeOverdue
	for _, c := range s.Characteristics {
		if c.Gauge == nil || c.Gauge.Failed() || !c.Gauge.Overdue(now, zone) {
			continue
		}
		i := slices.IndexFunc(out, func(g GaugeOverdue) bool { return g.ID == c.Gauge.ID })
		if i < 0 {
			i, out = len(out), append(out, GaugeOverdue{GaugeNow: *c.Gauge, First: c.ID})
		}
		out[i].Of = append(out[i].Of, c.Title())
	}
	slices.SortStableFunc(out, func(a, b GaugeOverdue) int { return a.NextCheck.Compare(b.NextCheck) })
	return out
}

// NextAfter is the day of the check after a good one: as the person said, else by the
// gauge's interval, else none.
func (g Gauge) NextAfter(c GaugeCheckRecord, zone *time.Location) time.Time {
	switch {
	case !c.NextCheck.IsZero():
		return c.NextCheck
	case g.CheckDays > 0:
		y, m, d := c.At.In(zone).Date()
		return time.Date(y, m, d+g.CheckDays, 0, 0, 0, 0, time.UTC)
	}
	return time.Time{}
}

// GaugeUse is a gauge with what is measured with it.
type GaugeUse struct {
	GaugeNow
	Characteristics []Characteristic
	Stations        []Station // where that is, each once
}
