package demo

import (
	"math"
	"math/rand/v2"
	"time"

	"holdfast/internal/plant"
)

// track is a characteristic with its process and what the simulation knows of it.
type track struct {
	measure
	plant.Characteristic
	setup   plant.Setup
	rng     *rand.Rand
	ended   []bool // faults that somebody has found, by index
	turned  []bool // faults that are here to stay and were adjusted for, by index
	knob    *plant.Knob
	offset  float64 // what adjusting has carried, in the unit
	taken   int     // subgroups so far
	frozen  int     // revisions so far
	last    []int64 // newest readings
	lastDue time.Time
	due     time.Time
}

func newTrack(m measure, c plant.Characteristic, setup plant.Setup, index int) *track {
	return &track{measure: m, Characteristic: c, setup: setup, ended: make([]bool, len(m.faults)), turned: make([]bool, len(m.faults)), rng: rand.New(rand.NewPCG(Seed, uint64(index)))}
}

// acting returns the faults that act at a time, days after the beginning.
func (t *track) acting(day float64) []int {
	var out []int
	for i, f := range t.faults {
		if day >= f.day && !t.ended[i] {
			out = append(out, i)
		}
	}
	return out
}

// sample draws a subgroup as it would be measured at this time.
func (t *track) sample(day float64) []int64 {
	mean, sigma := t.mean+t.offset, t.sigma
	for _, i := range t.acting(day) {
		f := t.faults[i]
		mean += (f.shift + f.drift*(day-f.day)) * t.sigma
		if f.widen > 0 {
			sigma *= f.widen
		}
	}
	mean += t.rng.NormFloat64() * t.wander * t.sigma
	scale := math.Pow10(t.setup.Decimals)
	out := make([]int64, t.setup.Size)
	for i := range out {
		v := mean + t.rng.NormFloat64()*sigma
		if t.setup.Lower == nil && v < 0 {
			v = -v // run-out and positions cannot be negative
		}
		out[i] = int64(math.Round(v * scale))
	}
	return out
}

// find ends the fault that has acted longest, if any, and says what it was.
func (t *track) find(day float64) (fault, bool) {
	for _, i := range t.acting(day) {
		if t.faults[i].open || t.turned[i] {
			continue
		}
		if t.faults[i].turn {
			t.turned[i] = true
		} else {
			t.ended[i] = true
		}
		return t.faults[i], true
	}
	return fault{}, false
}

// deviation is how far the last subgroup lay from target: what somebody corrects by who
// corrects fully after every sample, which makes things worse.
func (t *track) deviation() float64 {
	if t.setup.Target == nil || len(t.last) == 0 {
		return 0
	}
	return plant.Summarise(t.last, t.setup.Decimals).Mean() - t.setup.Target.Float()
}
