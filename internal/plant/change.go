package plant

import (
	"crypto/sha256"
	"fmt"
	"time"

	"github.com/google/uuid"
)

// ChangeKind is what was done to the process.
type ChangeKind string

const (
	Adjustment  ChangeKind = "adjustment" // with a signed size
	ToolChanged ChangeKind = "tool"
	MaterialLot ChangeKind = "material"
	Maintenance ChangeKind = "maintenance"
	Setting     ChangeKind = "setting"
	ChangedOver ChangeKind = "changeover"
)

// ChangeKinds lists the kinds that a person picks from; a changeover comes from the
// machine's state.
var ChangeKinds = []ChangeKind{Adjustment, ToolChanged, MaterialLot, Maintenance, Setting}

// Change is something done to the process and recorded.
type Change struct {
	ID             uuid.UUID
	Station        uuid.UUID
	Machine        uuid.UUID
	Characteristic uuid.UUID // what an adjustment is meant to move
	Kind           ChangeKind
	Size           *Decimal // signed, in the unit; with a knob what the turn was expected to do, set when recorded
	Knob           uuid.UUID
	KnobVersion    int      // set when recorded
	KnobName       string   // for showing, read beside the change
	KnobUnit       string   // for showing
	Turned         *Decimal // signed, on the scale of the knob
	Moves          []Effect // all that a knob moves, set when recorded
	Note           string
	Prompted       bool // a matter was open on what it affects; a fact, set when recorded
	HappenedAt     time.Time
	RecordedAt     time.Time
	Person         uuid.UUID
	PersonName     string
}

// Check says what in the change cannot be.
func (c Change) Check(now time.Time) error {
	switch c.Kind {
	case Adjustment:
		if c.Characteristic == uuid.Nil {
			return Invalidf("characteristic", "Say what the adjustment is meant to move.")
		}
		size := c.Size
		if c.Knob != uuid.Nil {
			size = c.Turned
		}
		if size == nil || size.Units == 0 {
			return Invalidf("size", "Say how far it was adjusted, and which way.")
		}
	case ToolChanged, MaterialLot, Maintenance, Setting, ChangedOver:
		if c.Knob != uuid.Nil {
			return Invalidf("kind", "Turning something is an adjustment.")
		}
	default:
		return Invalidf("kind", "Say what was changed.")
	}
	if c.HappenedAt.After(now.Add(MaxAhead)) {
		return Invalidf("happened_at", "This cannot have happened in the future.")
	}
	if c.HappenedAt.Before(now.Add(-MaxBack)) {
		return Invalidf("happened_at", "This is more than 7 days back.")
	}
	return nil
}

// Digest tells a repeated send from another change under the same id. What a turn was
// expected to do is no part of it: that is set when it is recorded.
func (c Change) Digest() [32]byte {
	size := ""
	if c.Size != nil && c.Knob == uuid.Nil {
		size = c.Size.String()
	}
	b := fmt.Appendf(nil, "%s\x00%s\x00%s\x00%s\x00%s\x00%s",
		c.Machine, c.Characteristic, c.Kind, size, c.Note, CutTime(c.HappenedAt))
	if c.Knob != uuid.Nil && c.Turned != nil {
		b = fmt.Appendf(b, "\x00%s\x00%s", c.Knob, c.Turned)
	}
	return sha256.Sum256(b)
}

// Affects lists the characteristics that an adjustment moves; nil for what may move
// anything on its machine.
func (c Change) Affects() []uuid.UUID {
	if len(c.Moves) > 0 {
		out := make([]uuid.UUID, len(c.Moves))
		for i, e := range c.Moves {
			out[i] = e.Characteristic
		}
		return out
	}
	if c.Characteristic != uuid.Nil {
		return []uuid.UUID{c.Characteristic}
	}
	return nil
}

// EffectOn is what an adjustment was expected to add to a characteristic; false when it
// does not move it, and for what is no adjustment.
func (c Change) EffectOn(characteristic uuid.UUID) (Decimal, bool) {
	if c.Kind != Adjustment {
		return Decimal{}, false
	}
	for _, e := range c.Moves {
		if e.Characteristic == characteristic {
			return e.Size, true
		}
	}
	if len(c.Moves) == 0 && c.Characteristic == characteristic && c.Size != nil {
		return *c.Size, true
	}
	return Decimal{}, false
}

// MachineState is a row of a machine's log: from At on it runs or stands still, and
// runs this part and order or lot.
type MachineState struct {
	ID         uuid.UUID
	Machine    uuid.UUID
	At         time.Time
	Running    bool
	Part       uuid.UUID
	Lot        string
	Counter    *int64
	RecordedAt time.Time
	Person     uuid.UUID
}
