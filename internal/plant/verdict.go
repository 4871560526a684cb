package plant

import (
	"time"

	"github.com/google/uuid"
)

// Verdict is what the product tells the operator about a round.
type Verdict string

const (
	Leave    Verdict = "leave"    // no signal, nothing outside, nothing open: do not touch the process
	Learning Verdict = "learning" // no frozen limits yet: only the specification is checked
	Look     Verdict = "look"     // a run rule fired: find the special cause
	Hold     Verdict = "hold"     // a reading is outside specification: keep the product aside
)

func (v Verdict) gravity() int {
	switch v {
	case Hold:
		return 3
	case Look:
		return 2
	case Learning:
		return 1
	}
	return 0
}

// Graver returns the graver of two verdicts.
func (v Verdict) Graver(o Verdict) Verdict {
	if o.gravity() > v.gravity() {
		return o
	}
	return v
}

// VerdictOf is the verdict on firings alone.
func VerdictOf(firings []Firing, learning bool) Verdict {
	v := Leave
	if learning {
		v = Learning
	}
	for _, f := range firings {
		if f.Panel.HoldsProduct() {
			v = v.Graver(Hold)
		} else {
			v = v.Graver(Look)
		}
	}
	return v
}

// Answer is what the sender of a round is told. It is kept as told.
type Answer struct {
	Round   uuid.UUID    `json:"round"`
	Station uuid.UUID    `json:"station"`
	TakenAt time.Time    `json:"taken_at"`
	Verdict Verdict      `json:"verdict"` // the gravest of the parts
	Parts   []PartAnswer `json:"parts"`
}

// PartAnswer is the answer about one characteristic of a round.
type PartAnswer struct {
	Characteristic uuid.UUID `json:"characteristic"`
	Subgroup       uuid.UUID `json:"subgroup"`
	Verdict        Verdict   `json:"verdict"`
	Firings        []Firing  `json:"firings,omitempty"` // of this round
	Matter         uuid.UUID `json:"matter,omitzero"`   // open after this round
	Opened         bool      `json:"opened,omitempty"`  // by this round
	StillOpen      bool      `json:"still_open,omitempty"`
	Late           bool      `json:"late,omitempty"` // it came after later rounds: found late
}

// Decide is the verdict on one characteristic of a round. With a matter open from
// before the verdict stays the graver of what the round says and what the matter's
// standing lines say; quiet alone does not close it.
func Decide(firings []Firing, learning bool, openFromBefore bool, openGravity Verdict) (v Verdict, stillOpen bool) {
	v = VerdictOf(firings, learning)
	if !openFromBefore {
		return v, false
	}
	if openGravity != Hold {
		openGravity = Look
	}
	return v.Graver(openGravity), len(firings) == 0
}
