package plant

import "time"

// Sample is when a subgroup was taken, and the due time that its round answered (zero
// when none).
type Sample struct {
	At, Due time.Time
}

// Kept is how a sampling plan was kept over a stretch. Promised is Good + Late + Open +
// Missed.
type Kept struct {
	Promised int
	Good     int // taken when promised
	Late     int // taken, but a person had to be called
	Open     int // late at the end of the stretch, and could still be taken then
	Missed   int // never taken
	Besides  int // taken though nothing was due: no promise, and no fault
}

// Add returns both together.
func (k Kept) Add(o Kept) Kept {
	return Kept{k.Promised + o.Promised, k.Good + o.Good, k.Late + o.Late, k.Open + o.Open, k.Missed + o.Missed, k.Besides + o.Besides}
}

// Ended is what it came to once the stretch is over: what was still open then was missed.
func (k Kept) Ended() Kept {
	k.Missed, k.Open = k.Missed+k.Open, 0
	return k
}

// Taken is how many samples were taken in all.
func (k Kept) Taken() int { return k.Good + k.Late + k.Besides }

// keeping is what a promise is looked at with.
type keeping struct {
	plan       SamplingPlan
	machine    Machine
	log        MachineLog
	happenings []Happening
	since      time.Time
}

// Keep counts how the plan was kept between from and to. before is the newest sample taken
// before from (zero when none), samples are those from from to to in the order in which
// they were taken. since is when the plan came into force. The log must reach back to the
// earlier of before and since. What fell due before from belongs to the stretch before.
//
// A sample answers the due time before it when it comes less than one whole interval after it,
// and the due time after it when it comes less than half an interval early; between two
// due times without a sample the earlier one was missed.
func (p SamplingPlan) Keep(from, to time.Time, before Sample, samples []Sample, since time.Time, m Machine, l MachineLog, happenings []Happening) Kept {
	k := keeping{p, m, l, happenings, since}
	var out Kept
	last := before
	for i := 0; ; {
		horizon, have := to, i < len(samples)
		if have {
			horizon = samples[i].At
		}
		due := k.next(last, horizon)
		passed := !due.At.IsZero() && !due.At.After(horizon) && (have || due.At.Before(to))
		counts := !due.At.Before(from)
		switch {
		case passed && have && horizon.Sub(due.At) < p.whole(due.Occasion):
			late := p.lateness(due, horizon) >= Late
			switch {
			case !counts:
				out.Besides++
			case late:
				out.Promised, out.Late = out.Promised+1, out.Late+1
			default:
				out.Promised, out.Good = out.Promised+1, out.Good+1
			}
			last = samples[i]
			i++
		case passed:
			// Nothing is missed while it may still be taken in time.
			if !have && p.lateness(due, to) < Late {
				return out
			}
			// A sample that comes within the whole interval would still answer it.
			if !have && to.Sub(due.At) < p.whole(due.Occasion) {
				if counts {
					out.Promised, out.Open = out.Promised+1, out.Open+1
				}
				return out
			}
			if counts {
				out.Promised, out.Missed = out.Promised+1, out.Missed+1
			}
			last = Sample{due.At, due.At}
		case !have:
			return out
		default:
			if !due.At.IsZero() && due.At.Sub(horizon) < p.whole(due.Occasion)/2 && due.Occasion == ByTime {
				out.Promised, out.Good = out.Promised+1, out.Good+1
			} else {
				out.Besides++
			}
			last = samples[i]
			i++
		}
	}
}

func (k keeping) next(last Sample, horizon time.Time) Due {
	return k.plan.Next(last.At, last.Due, k.since, k.machine, k.log, k.happenings, horizon)
}
