package plant

import (
	"time"
)

// MachineLog is what a machine did, oldest first. The first row says what held at
// the start of the stretch that is looked at.
type MachineLog []MachineState

// At returns the state in force at t, and false when nothing is known of it.
func (l MachineLog) At(t time.Time) (MachineState, bool) {
	for i := len(l) - 1; i >= 0; i-- {
		if !l[i].At.After(t) {
			return l[i], true
		}
	}
	return MachineState{}, false
}

// Running is how long the machine ran between a and b. A machine that nothing is
// known of counts as running: a sample is rather asked for once too often.
func (l MachineLog) Running(a, b time.Time) time.Duration {
	var sum time.Duration
	l.stretches(a, b, func(from, to time.Time, s MachineState) bool {
		if s.Running {
			sum += to.Sub(from)
		}
		return true
	})
	return sum
}

// stretches calls f for each stretch of one state between a and b.
func (l MachineLog) stretches(a, b time.Time, f func(from, to time.Time, s MachineState) bool) {
	now, known := l.At(a)
	if !known {
		now = MachineState{Running: true}
	}
	at := a
	for _, s := range l {
		if !s.At.After(a) {
			continue
		}
		if !s.At.Before(b) {
			break
		}
		if !f(at, s.At, now) {
			return
		}
		at, now = s.At, s
	}
	if at.Before(b) {
		f(at, b, now)
	}
}

// After returns the instant at which the machine will have run for d since a, given
// what it did until now and that it goes on running. It returns false when it stands
// still now and has not run that long.
func (l MachineLog) After(a time.Time, d time.Duration, now time.Time) (time.Time, bool) {
	left, at, found := d, time.Time{}, false
	end := now
	if end.Before(a) {
		end = a
	}
	running := true
	if s, ok := l.At(end); ok {
		running = s.Running
	}
	l.stretches(a, end, func(from, to time.Time, s MachineState) bool {
		if !s.Running {
			return true
		}
		if run := to.Sub(from); run < left {
			left -= run
			return true
		}
		at, found = from.Add(left), true
		return false
	})
	if found {
		return at, true
	}
	if !running {
		return time.Time{}, false
	}
	return end.Add(left), true
}

// PartsMade counts what the machine made between a and b: the difference of counter
// readings where both ends have one, else running time at the machine's rate, and
// then about is true.
func (m Machine) PartsMade(l MachineLog, a, b time.Time) (parts float64, about bool) {
	var before, after *int64
	var afterAt time.Time
	for _, s := range l {
		if s.Counter == nil || s.At.After(b) {
			continue
		}
		if !s.At.After(a) {
			before = s.Counter
		} else {
			after, afterAt = s.Counter, s.At
		}
	}
	if before != nil && after != nil && *after >= *before {
		rest := l.Running(afterAt, b).Hours() * m.PartsPerHour
		return float64(*after-*before) + rest, rest > 0
	}
	return l.Running(a, b).Hours() * m.PartsPerHour, true
}

// DueState is how urgently a sample is asked for.
type DueState uint8

const (
	NotPlanned DueState = iota // no sampling plan
	Paused                     // the machine stands still
	Later
	DueNow
	Late    // a person must act
	TooLate // late by more than one whole interval, or the set grace: the state is unknown
)

// Due is when and why the next sample of a characteristic is asked for.
type Due struct {
	At       time.Time // zero when paused or not planned
	Occasion Occasion
	State    DueState
}

// LateBy is how late the sample is at now, zero when it is not.
func (d Due) LateBy(now time.Time) time.Duration {
	if d.State < DueNow || !now.After(d.At) {
		return 0
	}
	return now.Sub(d.At)
}

// Happening is something that may ask for a sample.
type Happening struct {
	At       time.Time
	Occasion Occasion
}

// Next works out what the plan asks for. last is the taken at of the newest sample
// and lastDue the due time that it answered (zero when none); since is when the plan
// came into force; the log must reach back to the earlier of the two.
func (p SamplingPlan) Next(last, lastDue, since time.Time, m Machine, l MachineLog, happenings []Happening, now time.Time) Due {
	best := Due{}
	offer := func(at time.Time, why Occasion) {
		if best.At.IsZero() || at.Before(best.At) {
			best.At, best.Occasion = at, why
		}
	}
	anchor := last
	if anchor.IsZero() {
		anchor = since
	}
	paused := false
	interval := time.Duration(p.EveryMinutes) * time.Minute
	if interval > 0 {
		// The promised times form a grid; a sample taken within half an interval of
		// its due time keeps the grid, one further off starts a new one.
		grid := anchor
		if !lastDue.IsZero() && lastDue.Sub(last).Abs() < interval/2 {
			grid = lastDue
		}
		if at, ok := l.After(grid, interval, now); ok {
			offer(at, ByTime)
		} else {
			paused = true
		}
	}
	if p.EveryParts > 0 && m.PartsPerHour > 0 {
		made, _ := m.PartsMade(l, anchor, now)
		hour := float64(time.Hour)
		left := (float64(p.EveryParts) - made) / m.PartsPerHour
		if s, ok := l.At(now); ok && !s.Running && left > 0 {
			paused = true
		} else {
			offer(now.Add(time.Duration(left*hour)), ByParts)
		}
	}
	for _, h := range happenings {
		if h.At.After(anchor) && !h.At.After(now) && p.asksFor(h.Occasion) {
			offer(h.At, h.Occasion)
		}
	}
	switch {
	case best.At.IsZero() && paused:
		best.State = Paused
	case best.At.IsZero():
		best.State = NotPlanned
	case now.Before(best.At):
		best.State = Later
	default:
		best.State = p.lateness(best, now)
	}
	return best
}

func (p SamplingPlan) asksFor(o Occasion) bool {
	for _, e := range p.Events {
		if e == o {
			return true
		}
	}
	return false
}

// whole is one whole interval of what asked for the sample: the set grace, or an hour,
// where it was not time.
func (p SamplingPlan) whole(o Occasion) time.Duration {
	if o == ByTime && p.EveryMinutes > 0 {
		return time.Duration(p.EveryMinutes) * time.Minute
	}
	if p.GraceMinutes > 0 {
		return time.Duration(p.GraceMinutes) * time.Minute
	}
	return time.Hour
}

// lateness grades a due time that has passed. The first tenth of an interval, at
// least one and at most ten minutes, is not called late yet.
func (p SamplingPlan) lateness(d Due, now time.Time) DueState {
	whole := p.whole(d.Occasion)
	grace := min(max(whole/10, time.Minute), 10*time.Minute)
	switch by := now.Sub(d.At); {
	case by > whole:
		return TooLate
	case by >= grace:
		return Late
	}
	return DueNow
}

// Happenings reads from a machine's log and the changes made to it what may ask for a
// sample.
func Happenings(l MachineLog, changes []Change) []Happening {
	var out []Happening
	for i := 1; i < len(l); i++ {
		before, s := l[i-1], l[i]
		if s.Part != before.Part {
			out = append(out, Happening{s.At, Changeover}, Happening{s.At, FirstPiece}, Happening{s.At, LastPiece})
			continue
		}
		switch {
		case s.Running && !before.Running:
			out = append(out, Happening{s.At, StartUp}, Happening{s.At, FirstPiece})
		case !s.Running && before.Running:
			out = append(out, Happening{s.At, LastPiece})
		}
	}
	for _, c := range changes {
		switch c.Kind {
		case ToolChanged:
			out = append(out, Happening{c.HappenedAt, ToolChange})
		case Adjustment:
			out = append(out, Happening{c.HappenedAt, AfterAdjustment})
		}
	}
	return out
}
