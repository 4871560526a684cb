package demo

import (
	"context"
	"fmt"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/store"
)

// planned is a reaction plan of the works. Family and characteristic are empty for the
// plant's own; characteristic is "station/name".
type planned struct {
	family, characteristic string
	kinds                  []plant.MatterKind
	steps                  []plant.PlanStep
	confirm, verify        bool
}

func do(says string) plant.PlanStep { return plant.PlanStep{Says: says, Kind: plant.StepDone} }

func stop(says string) plant.PlanStep { return plant.PlanStep{Says: says, Kind: plant.StepStop} }

func ask(says, ifNot string) plant.PlanStep {
	return plant.PlanStep{Says: says, Kind: plant.StepYesNo, IfNot: ifNot}
}

func askNot(says, ifSo string) plant.PlanStep {
	return plant.PlanStep{Says: says, Kind: plant.StepYesNo, ExpectNo: true, IfNot: ifSo}
}

func value(says, unit string, lower, upper *plant.Decimal, ifNot string) plant.PlanStep {
	return plant.PlanStep{Says: says, Kind: plant.StepValue, Unit: unit, Lower: lower, Upper: upper, IfNot: ifNot}
}

// reactionPlans are few: the plant's own cover everything, a family says what its
// machines need, and three characteristics have one of their own.
var reactionPlans = []planned{
	{kinds: []plant.MatterKind{plant.MatterUp, plant.MatterDown, plant.MatterPattern, plant.MatterDispersion}, steps: []plant.PlanStep{
		ask("Does the record show what the gauge showed?", "It was a slip of typing: correct the round. A part that is measured again goes on record as a round of its own."),
		askNot("Was anything changed since the last round: tool, lot, setting, person?", "Write down what was changed under Log a change."),
		do("Look at the machine: noise, coolant, chips, clamping."),
	}},
	{kinds: []plant.MatterKind{plant.MatterReading}, confirm: true, verify: true, steps: []plant.PlanStep{
		stop("Stop the machine at the end of the part."),
		ask("Does the record show what the gauge showed?", "It was a slip of typing: correct the round. A part that is measured again goes on record as a round of its own."),
		do("Put a red tag on all that this page says to keep aside, and set it aside."),
	}},
	{kinds: []plant.MatterKind{plant.MatterGauge}, verify: true, steps: []plant.PlanStep{
		do("Take the gauge out of use and put it in the blocked drawer."),
		do("Fetch the spare gauge and check it against the master."),
		do("Call the gauge room."),
	}},
	{kinds: []plant.MatterKind{plant.MatterOverdue}, steps: []plant.PlanStep{
		do("Take the round now, before anything else at this machine."),
		do("If you cannot leave what you are doing, call the next station."),
	}},
	{family: "turning", kinds: []plant.MatterKind{plant.MatterUp, plant.MatterDown}, confirm: true, steps: []plant.PlanStep{
		ask("Is the insert whole: no chipped or worn corner?", "Change the insert and set the corrector to zero."),
		value("Read the collet pressure.", "bar", dec(17, 0), dec(19, 0), "Set it to 18 bar and look for a leak."),
		ask("Is the collet free of swarf?", "Clean the collet and blow it out."),
		askNot("Was a new bar put in since the last round?", "Let ten parts run warm before you measure."),
	}},
	{family: "turning", kinds: []plant.MatterKind{plant.MatterDispersion}, confirm: true, steps: []plant.PlanStep{
		ask("Is the collet free of swarf?", "Clean the collet and blow it out."),
		value("Read the collet pressure.", "bar", dec(17, 0), dec(19, 0), "Set it to 18 bar and look for a leak."),
		ask("Do both jaws of the gauge close without light between them?", "Clean the gauge and check it against the master."),
	}},
	{family: "drilling", kinds: []plant.MatterKind{plant.MatterUp, plant.MatterDispersion}, confirm: true, steps: []plant.PlanStep{
		ask("Is the drill bush tight and round?", "Change the bush."),
		do("Clean the pin gauge and check it against the master."),
		value("Read the clamping pressure.", "bar", dec(55, 1), nil, "Call maintenance: below that the shell moves."),
	}},
	{characteristic: "Press/Bearing press force", kinds: []plant.MatterKind{plant.MatterUp, plant.MatterDown}, confirm: true, verify: true, steps: []plant.PlanStep{
		ask("Does the load cell read zero with nothing on it?", "Set it to zero and press five more hubs."),
		value("Measure the bearing seat of three shells. What is the smallest?", "mm", dec(27984, 3), dec(28004, 3), "Set the lot of shells aside and call the supervisor."),
		ask("Is the ram greased and straight?", "Grease it. If it leans, call maintenance."),
		do("Look at ten pressed bearings for marks on the seat."),
	}},
	{characteristic: "Greasing/Grease mass", kinds: []plant.MatterKind{plant.MatterUp, plant.MatterDown}, confirm: true, steps: []plant.PlanStep{
		do("Leave the dispenser knob where it is."),
		ask("Is the nozzle clean?", "Clean the nozzle and throw the first five shots away."),
		value("Read the temperature of the grease drum.", "°C", dec(18, 0), dec(26, 0), "Wait until it is within. Grease that is cold or warm doses differently."),
		askNot("Is there air in the line?", "Bleed it until no bubble comes."),
	}},
}

// plans writes the reaction plans of the works.
func (b *builder) plans(ctx context.Context, st *store.Store, by uuid.UUID) error {
	byName := map[string]uuid.UUID{}
	for _, w := range b.walkers {
		for _, t := range w.tracks {
			byName[w.place.name+"/"+t.measure.name] = t.Characteristic.ID
		}
	}
	for _, pl := range reactionPlans {
		scope := plant.PlanScope{Family: pl.family}
		if pl.characteristic != "" {
			if scope.Characteristic = byName[pl.characteristic]; scope.Characteristic == uuid.Nil {
				return fmt.Errorf("plan for %s: there is no such characteristic", pl.characteristic)
			}
		}
		for _, kind := range pl.kinds {
			if _, err := st.SavePlan(ctx, plant.ReactionPlan{Scope: scope, Kind: kind, Steps: pl.steps, Confirm: pl.confirm, Verify: pl.verify, Person: by}); err != nil {
				return fmt.Errorf("plan for %s: %w", kind, err)
			}
		}
	}
	return nil
}
