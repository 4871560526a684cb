package chart

import (
	"sort"
	"time"
)

// Tick is a mark on the time axis: where a shift, a day or another stretch
// begins, in words.
type Tick struct {
	At    time.Time
	Label string
}

// Unit is the stretch of time a tick begins.
type Unit int

// Units from short to long.
const (
	Hour Unit = iota
	Day
	Week
	Month
	Year
)

// TickLabel words the beginning of a unit in English, 24-hour clock. A caller
// with another language passes its own function.
func TickLabel(t time.Time, u Unit) string {
	switch u {
	case Hour:
		return t.Format("15:04")
	case Day:
		return t.Format("Mon 2 Jan")
	case Week:
		return t.Format("2 Jan")
	case Month:
		return t.Format("Jan 2006")
	default:
		return t.Format("2006")
	}
}

// placedTick is a tick between two points of the axis: index is the first
// point at or after it.
type placedTick struct {
	index int
	label string
}

const tickRoom = 84.0 // px a tick and its label want

// timeTicks chooses the ticks. Shift beginnings are used where they fit; then
// hours, days, weeks, months or years, the finest that fits. The axis is by
// point, not by time, so that an idle weekend takes no room.
func timeTicks(at []time.Time, shifts []Tick, zone *time.Location, width float64, word func(time.Time, Unit) string) []placedTick {
	first, last := firstLast(at)
	if first.IsZero() || !last.After(first) {
		return nil
	}
	if zone == nil {
		zone = time.UTC
	}
	if word == nil {
		word = TickLabel
	}
	room := max(2, int(width/tickRoom))
	if t := beginnings(at, shifts); len(t) > 0 && len(t) <= room {
		return t
	}
	for _, step := range tickSteps {
		if last.Sub(first)/step.about > time.Duration(4*room) {
			continue // far too many, even with idle stretches between
		}
		var ticks []Tick
		for t := step.floor(first.In(zone)); !t.After(last); t = step.next(t) {
			if step.unit == Hour && t.Before(first) {
				continue // an hour that began before the chart does would be misread as its first point
			}
			ticks = append(ticks, Tick{t, word(t, step.unit)})
		}
		t := beginnings(at, ticks)
		if len(t) > room {
			continue
		}
		if step.unit == Hour {
			nameDays(at, t, zone, word)
		}
		return t
	}
	return nil
}

func firstLast(at []time.Time) (first, last time.Time) {
	for _, t := range at {
		if t.IsZero() {
			continue
		}
		if first.IsZero() {
			first = t
		}
		last = t
	}
	return first, last
}

// nameDays gives the first tick of each new day the day's name: after an idle
// night the tick at midnight covers no point.
func nameDays(at []time.Time, ticks []placedTick, zone *time.Location, word func(time.Time, Unit) string) {
	before := midnight(at[0].In(zone))
	for i := range ticks {
		day := midnight(at[ticks[i].index].In(zone))
		if !day.Equal(before) {
			ticks[i].label = word(day, Day)
		}
		before = day
	}
}

// beginnings puts each tick before the first point it covers and drops those that
// cover none: the first tick may lie before the first point.
func beginnings(at []time.Time, ticks []Tick) []placedTick {
	var out []placedTick
	for _, t := range ticks {
		i := sort.Search(len(at), func(i int) bool { return !at[i].Before(t.At) })
		if i == len(at) {
			break
		}
		if n := len(out); n > 0 && out[n-1].index == i {
			out[n-1].label = t.Label
			continue
		}
		out = append(out, placedTick{i, t.Label})
	}
	return out
}

type tickStep struct {
	unit  Unit
	about time.Duration
	floor func(time.Time) time.Time
	next  func(time.Time) time.Time
}

// Steps are walked on the wall clock, so that a day with a repeated or missing
// hour keeps its midnight.
var tickSteps = []tickStep{
	hours(1), hours(2), hours(4), hours(8), days(1), days(2), weeks(1), weeks(2),
	months(1), months(3), months(6), years(1), years(5), years(20),
}

func midnight(t time.Time) time.Time {
	return time.Date(t.Year(), t.Month(), t.Day(), 0, 0, 0, 0, t.Location())
}

func hours(n int) tickStep {
	return tickStep{Hour, time.Duration(n) * time.Hour,
		func(t time.Time) time.Time {
			return time.Date(t.Year(), t.Month(), t.Day(), t.Hour()/n*n, 0, 0, 0, t.Location())
		},
		func(t time.Time) time.Time {
			u := time.Date(t.Year(), t.Month(), t.Day(), t.Hour()/n*n+n, 0, 0, 0, t.Location())
			if !u.After(t) { // the repeated hour of autumn
				u = t.Add(time.Duration(n) * time.Hour)
			}
			return u
		}}
}

func days(n int) tickStep {
	return tickStep{Day, time.Duration(n) * 24 * time.Hour, midnight,
		func(t time.Time) time.Time { return midnight(t.AddDate(0, 0, n)) }}
}

func weeks(n int) tickStep {
	return tickStep{Week, time.Duration(n) * 7 * 24 * time.Hour,
		func(t time.Time) time.Time { return midnight(t.AddDate(0, 0, -(int(t.Weekday())+6)%7)) },
		func(t time.Time) time.Time { return midnight(t.AddDate(0, 0, 7*n)) }}
}

func months(n int) tickStep {
	return tickStep{Month, time.Duration(n) * 30 * 24 * time.Hour,
		func(t time.Time) time.Time {
			m := (int(t.Month())-1)/n*n + 1
			return time.Date(t.Year(), time.Month(m), 1, 0, 0, 0, 0, t.Location())
		},
		func(t time.Time) time.Time {
			return time.Date(t.Year(), t.Month()+time.Month(n), 1, 0, 0, 0, 0, t.Location())
		}}
}

func years(n int) tickStep {
	return tickStep{Year, time.Duration(n) * 365 * 24 * time.Hour,
		func(t time.Time) time.Time { return time.Date(t.Year()/n*n, 1, 1, 0, 0, 0, 0, t.Location()) },
		func(t time.Time) time.Time { return time.Date(t.Year()+n, 1, 1, 0, 0, 0, 0, t.Location()) }}
}
