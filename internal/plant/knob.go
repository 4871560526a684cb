package plant

import (
	"bytes"
	"slices"
	"time"

	"github.com/google/uuid"
)

// Knob is an adjusting point of a machine, one version of it: something that can be
// turned, by how little, and what one unit of its scale does to the characteristics it
// moves.
type Knob struct {
	ID       uuid.UUID
	Version  int // from 1
	Machine  uuid.UUID
	Name     string
	Unit     string  // of its scale, which need not be that of a characteristic
	Step     Decimal // the smallest move of it, above zero; turns are written with its decimals
	Moves    []Gain  // at least one
	Retired  bool    // not offered any more
	Reason   string  // for this version
	MadeAt   time.Time
	MadeBy   uuid.UUID
	MadeName string // for showing, read beside the knob
}

// Gain is what one unit of a knob's scale adds to a characteristic, in the unit of the
// characteristic: negative where turning up makes it smaller.
type Gain struct {
	Characteristic uuid.UUID `json:"characteristic"`
	PerUnit        Decimal   `json:"per_unit"`
}

// Effect is what an adjustment was expected to add to a characteristic, fixed when it
// was recorded.
type Effect struct {
	Characteristic uuid.UUID `json:"characteristic"`
	Size           Decimal   `json:"size"`
}

// Bounds of what a person types about a knob.
const (
	mostKnobName   = 60
	mostKnobUnit   = 20
	mostKnobReason = 300
	mostMoves      = 20
)

// Clean brings the text of the knob into the form in which it is kept, its gains into
// the order of their characteristics, and says what in it cannot be.
func (k *Knob) Clean() error {
	var err error
	if k.Name, err = CleanTextWithin("name", k.Name, mostKnobName); err != nil {
		return err
	}
	if k.Unit, err = CleanTextWithin("unit", k.Unit, mostKnobUnit); err != nil {
		return err
	}
	if k.Reason, err = CleanTextWithin("reason", k.Reason, mostKnobReason); err != nil {
		return err
	}
	switch {
	case k.Name == "":
		return Invalidf("name", "Say what is turned, as people at the machine call it.")
	case k.Unit == "":
		return Invalidf("unit", "Say in what its scale is marked.")
	case k.Step.Units <= 0:
		return Invalidf("step", "The smallest step must be above zero.")
	case k.Reason == "":
		return Invalidf("reason", "Say where these figures come from, or why they change.")
	case len(k.Moves) == 0:
		return Invalidf("moves", "Say what it moves, and by how much.")
	case len(k.Moves) > mostMoves:
		return Invalidf("moves", "It can move at most %d characteristics.", mostMoves)
	}
	k.Moves = slices.Clone(k.Moves)
	slices.SortFunc(k.Moves, func(a, b Gain) int { return bytes.Compare(a.Characteristic[:], b.Characteristic[:]) })
	for i, g := range k.Moves {
		if i > 0 && g.Characteristic == k.Moves[i-1].Characteristic {
			return Invalidf("moves", "One characteristic is there twice.")
		}
		if g.PerUnit.Units == 0 {
			return Invalidf("moves", "A characteristic that it does not move is left empty.")
		}
		if _, ok := g.PerUnit.Times(k.Step); !ok {
			return Invalidf("moves", "One step times the effect needs more than %d decimals. Round the effect.", MaxDecimals)
		}
	}
	return nil
}

// GainOn returns what one unit of the scale adds to a characteristic.
func (k Knob) GainOn(characteristic uuid.UUID) (Decimal, bool) {
	for _, g := range k.Moves {
		if g.Characteristic == characteristic {
			return g.PerUnit, true
		}
	}
	return Decimal{}, false
}

// Effects is what a turn of the knob is expected to do to each characteristic it moves.
func (k Knob) Effects(turned Decimal) ([]Effect, error) {
	out := make([]Effect, len(k.Moves))
	for i, g := range k.Moves {
		size, ok := g.PerUnit.Times(turned)
		if !ok {
			return nil, Invalidf("size", "This is too large, or has too many decimals, to say what it does.")
		}
		out[i] = Effect{g.Characteristic, size}
	}
	return out, nil
}

// SameContent reports whether two versions say the same of the knob.
func (k Knob) SameContent(o Knob) bool {
	return k.Name == o.Name && k.Unit == o.Unit && k.Step == o.Step && k.Retired == o.Retired && slices.Equal(k.Moves, o.Moves)
}

// Times is the exact product, with as many decimals as both have together less trailing
// zeros; false when that is more than MaxDecimals or the number is too large.
func (d Decimal) Times(o Decimal) (Decimal, bool) {
	if o.Units != 0 && (abs(d.Units) > maxUnits/abs(o.Units)) {
		return Decimal{}, false
	}
	p := Decimal{Units: d.Units * o.Units, Decimals: d.Decimals + o.Decimals}
	for p.Decimals > MaxDecimals && p.Units%10 == 0 {
		p.Units, p.Decimals = p.Units/10, p.Decimals-1
	}
	return p, p.Decimals <= MaxDecimals
}

func abs(v int64) int64 {
	if v < 0 {
		return -v
	}
	return v
}

// Trimmed is the same number without trailing zeros behind at least so many decimals.
func (d Decimal) Trimmed(least int) Decimal {
	for d.Decimals > least && d.Units%10 == 0 {
		d.Units, d.Decimals = d.Units/10, d.Decimals-1
	}
	return d
}
