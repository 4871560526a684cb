package plant

import (
	"math"
	"slices"
	"time"

	"github.com/google/uuid"
)

// Suspect is a reach as of an instant: how much was made.
type Suspect struct {
	Parts int
	Known bool // false: the machine's rate, or what it did so far back, is not on record
	About bool // from running time and rate, or shared evenly among streams, and then to two figures
}

// Suspects counts what the reach holds at now, by the machine's log. part confines it to
// the running time of one part; uuid.Nil is any. machine is the machine as it is set up.
func (r Reach) Suspects(m Machine, part uuid.UUID, now time.Time) Suspect {
	if len(r.Reasons) == 0 {
		return Suspect{Known: true}
	}
	to := now
	if !r.Until.IsZero() && r.Until.Before(now) {
		to = r.Until
	}
	log := r.Log.of(part)
	switch {
	case r.From.IsZero(), len(log) > 0 && log[0].At.After(r.From):
		return Suspect{} // what the machine did then is not known
	}
	made, about := m.PartsMade(log, r.From, to)
	if about && m.PartsPerHour <= 0 {
		return Suspect{}
	}
	if n := len(m.Streams); n > 0 && len(r.Streams) > 0 && len(r.Streams) < n {
		made, about = made*float64(len(r.Streams))/float64(n), true
	}
	if !about {
		return Suspect{Parts: int(math.Round(made)), Known: true}
	}
	return Suspect{Parts: twoFigures(made), Known: true, About: true}
}

// twoFigures rounds a number of parts that is not known exactly.
func twoFigures(parts float64) int {
	step := math.Pow(10, math.Max(0, math.Floor(math.Log10(math.Max(parts, 1)))-1))
	return int(math.Round(parts/step) * step)
}

// of is the log with the stretches of other parts standing still, so that running time
// counts one part alone. Counter readings count every part, so they go as soon as there
// was another.
func (l MachineLog) of(part uuid.UUID) MachineLog {
	other := func(s MachineState) bool { return s.Part != uuid.Nil && s.Part != part }
	if part == uuid.Nil || !slices.ContainsFunc(l, other) {
		return l
	}
	out := slices.Clone(l)
	for i := range out {
		out[i].Running = out[i].Running && !other(out[i])
		out[i].Counter = nil
	}
	return out
}
