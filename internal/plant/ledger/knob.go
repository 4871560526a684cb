package ledger

import "github.com/google/uuid"

// Turn is what was turned for an adjustment, by how much on its own scale, and what that
// was expected to do.
type Turn struct {
	Knob    uuid.UUID `json:"knob"`
	Version int       `json:"version"`
	Turned  string    `json:"turned"`
	Moves   []Moved   `json:"moves"`
}

// Moved is the effect on one characteristic: of a turn, or of one unit of a scale.
type Moved struct {
	Characteristic uuid.UUID `json:"characteristic"`
	Size           string    `json:"size"`
}

// Knob is one version of an adjusting point of a machine.
type Knob struct {
	Knob    uuid.UUID  `json:"knob"`
	Version int        `json:"version"`
	Machine uuid.UUID  `json:"machine"`
	Name    string     `json:"name"`
	Unit    string     `json:"unit"`
	Step    string     `json:"step"`
	PerUnit []Moved    `json:"per_unit"`
	Retired bool       `json:"retired,omitempty"`
	Reason  string     `json:"reason"`
	At      Time       `json:"at"`
	Person  *uuid.UUID `json:"person,omitempty"`
}

// Kind is "knob".
func (Knob) Kind() string { return "knob" }
