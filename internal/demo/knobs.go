package demo

import (
	"context"
	"fmt"
	"math"
	"time"

	"holdfast/internal/plant"
	"holdfast/internal/store"
)

// adjuster is an adjusting point of a machine of the works. It moves the characteristics
// named, by so much for each unit of its scale.
type adjuster struct {
	machine, name, unit string
	step                *plant.Decimal
	moves               map[string]*plant.Decimal
	reason              string
}

// adjusters are what can be turned at Kestrel Row.
var adjusters = []adjuster{
	{"Lathe 11", "X offset of turret 1", "mm", dec(1, 3), map[string]*plant.Decimal{"Axle seat diameter": dec(2, 0)}, "The offset is on the radius: setting sheet S-11"},
	{"Lathe 11", "Z offset of turret 1", "mm", dec(1, 2), map[string]*plant.Decimal{"Shoulder length": dec(-1, 0)}, "Setting sheet S-11"},
	{"Lathe 12", "X offset of turret 1", "mm", dec(1, 3), map[string]*plant.Decimal{"Axle seat diameter": dec(2, 0)}, "The offset is on the radius: setting sheet S-12"},
	{"Roller 3", "Roll gap screw", "notches", dec(1, 0), map[string]*plant.Decimal{"Pitch diameter": dec(-2, 3)}, "Measured over ten notches, both ways"},
	{"Lathe 21", "Boring bar offset", "mm", dec(1, 3), map[string]*plant.Decimal{"Bearing bore": dec(2, 0)}, "The offset is on the radius: setting sheet S-21"},
	{"Bath 2", "Bath current", "A", dec(5, 0), map[string]*plant.Decimal{"Coating thickness": dec(4, 2)}, "Measured at 120 A and 160 A"},
	{"Press 9", "Pressure valve", "bar", dec(1, 1), map[string]*plant.Decimal{"Bearing press force": dec(8, 2)}, "Piston area, and checked with the load cell"},
	{"Dispenser 4", "Dosing screw", "turns", dec(5, 2), map[string]*plant.Decimal{"Grease mass": dec(4, 1)}, "Weighed over ten doses at each of five settings"},
}

// knobs describes what can be turned on the machine of a place, and gives each track the
// point that moves it.
func (b *builder) knobs(ctx context.Context, st *store.Store, w *walker) error {
	for _, a := range adjusters {
		if a.machine != w.machine.Name {
			continue
		}
		k := plant.Knob{ID: id(), Machine: w.machine.ID, Name: a.name, Unit: a.unit, Step: *a.step, Reason: a.reason, MadeBy: b.people[plant.Engineer][0]}
		for _, t := range w.tracks {
			if gain := a.moves[t.measure.name]; gain != nil {
				k.Moves = append(k.Moves, plant.Gain{Characteristic: t.ID, PerUnit: *gain})
			}
		}
		k, err := st.SaveKnob(ctx, k)
		if err != nil {
			return fmt.Errorf("%s: %w", a.name, err)
		}
		for _, t := range w.tracks {
			if _, moves := k.GainOn(t.ID); moves {
				t.knob = &k
			}
		}
	}
	return nil
}

// turn has somebody turn the knob of a track by as many whole steps as come nearest to
// moving it by so much, and records it.
func (w *walker) turn(ctx context.Context, t *track, by float64, note string) error {
	gain, _ := t.knob.GainOn(t.ID)
	steps := int64(math.Round(by / (gain.Float() * t.knob.Step.Float())))
	if steps == 0 {
		return nil
	}
	turned := plant.Decimal{Units: steps * t.knob.Step.Units, Decimals: t.knob.Step.Decimals}
	t.offset += turned.Float() * gain.Float()
	return w.store.LogChange(ctx, plant.Change{
		ID: id(), Station: w.station.ID, Machine: w.machine.ID, Characteristic: t.ID, Kind: plant.Adjustment, Knob: t.knob.ID, Turned: &turned,
		Note: note, HappenedAt: w.at.Add(time.Second), Person: w.operator(),
	})
}

// followed reports whether somebody is looking into a matter of the track.
func (w *walker) followed(t *track) bool {
	for _, f := range w.follow {
		if f.track == t {
			return true
		}
	}
	return false
}

// overAdjusts is the share of the last deviation that is corrected in a spell.
const overAdjusts = 0.85

func (w *walker) overAdjust(ctx context.Context, t *track) error {
	return w.turn(ctx, t, -overAdjusts*t.deviation(), "")
}

// doneBy is which kind of change an action is, besides ending a matter: it stands on the
// charts of its machine.
var doneBy = map[string]plant.ChangeKind{
	"Insert changed": plant.ToolChanged, "Die pair changed": plant.ToolChanged, "Bush changed": plant.ToolChanged,
	"Lot of shells sorted": plant.MaterialLot, "Grease drum changed": plant.MaterialLot,
	"Nozzle cleaned": plant.Maintenance, "Collet cleaned": plant.Maintenance, "Collet cleaned, pressure set to 18 bar": plant.Maintenance, "Jaws cleaned": plant.Maintenance,
	"Heater fuse changed": plant.Maintenance, "Anvil tightened": plant.Maintenance, "Stop set and locked": plant.Setting, "Warm-up of ten parts agreed": plant.Setting,
}

// did records what was done about a fault as a change of the machine.
func (w *walker) did(ctx context.Context, f fault) error {
	kind, ok := doneBy[f.action]
	if !ok {
		return nil
	}
	return w.store.LogChange(ctx, plant.Change{ID: id(), Station: w.station.ID, Machine: w.machine.ID, Kind: kind, HappenedAt: w.at, Person: w.operator()})
}

// patience is how long somebody takes to the next thing about a matter. Who corrects after
// every sample has none for looking.
func (w *walker) patience(t *track, usual time.Duration) time.Duration {
	if w.inSpell(t) {
		return min(usual, w.minutes(1, 3))
	}
	return usual
}

func (w *walker) inSpell(t *track) bool {
	d := w.day()
	return d >= t.spell.from && d < t.spell.to
}
