package demo

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
)

// gaugeWorn is a fault of a gauge and not of the process: no chart shows it, and the
// weekly check against the master finds it late.
const gaugeWorn = "Gauge pin worn"

// never is the day of a fault that shows otherwise, and wornFrom the one from which the
// gauge is worn.
const never, wornFrom = Days + 1, 51

// checkEvery is how often a gauge is checked.
const checkEvery = 7

// heldBack is the place at which a visitor finds product that is still to be decided
// about although its matter was closed days ago.
const heldBack = "Drilling 1"

// unstated is the place at which nobody has stated yet what was put aside, and notChecked
// the one whose gauge is overdue, when the history ends.
const unstated, notChecked = "Turning 1", "Greasing"

// care is what a walker keeps for gauges and product. It draws by itself, so that the
// history of the process does not depend on it.
type care struct {
	rng     *rand.Rand
	checked map[uuid.UUID]float64 // day of the newest check, by characteristic
}

func newCare(index int) *care {
	return &care{rand.New(rand.NewPCG(Seed, uint64(5000+index))), map[uuid.UUID]float64{}}
}

// somebody is an operator.
func (w *walker) somebody() uuid.UUID {
	ops := w.b.people[plant.Operator]
	return ops[w.care.rng.IntN(len(ops))]
}

// atShiftStart is what is done before the work begins: gauges are checked, and somebody
// states what became of the product in doubt.
func (w *walker) atShiftStart(ctx context.Context) error {
	if err := w.checkGauges(ctx); err != nil {
		return fmt.Errorf("gauge check: %w", err)
	}
	if err := w.stateProduct(ctx); err != nil {
		return fmt.Errorf("product in doubt: %w", err)
	}
	return nil
}

func (w *walker) checkGauges(ctx context.Context) error {
	for i, t := range w.tracks {
		if last, ok := w.care.checked[t.ID]; ok && w.day()-last < checkEvery || !ok && w.day() < float64(i) || w.place.name == notChecked && w.day() > Days-9 {
			continue
		}
		w.care.checked[t.ID] = w.day()
		c := plant.GaugeCheckRecord{ID: id(), Gauge: t.setup.GaugeID, Good: true, Person: w.somebody()}
		if m := t.setup.Target; m != nil {
			c.Master, c.Reading = m, m
		}
		if !w.wornOut(t) {
			if err := w.store.CheckGauge(ctx, c); err != nil {
				return err
			}
			continue
		}
		c.Good, c.Note = false, "Pin worn: it reads 0.004 mm low"
		c.Master, c.Reading = dec(60, 3), dec(56, 3)
		if err := w.store.CheckGauge(ctx, c); err != nil {
			return err
		}
		st, err := w.store.StationState(ctx, w.station.ID, 1)
		if err != nil {
			return err
		}
		for _, s := range st.Characteristics {
			if s.ID == t.ID && s.Matter != nil {
				w.follow = append(w.follow, followUp{at: w.at.Add(5 * time.Minute), matter: s.Matter.ID, track: t})
			}
		}
		w.at = w.at.Add(40 * time.Minute)
		good := plant.GaugeCheckRecord{ID: id(), Gauge: c.Gauge, Good: true, Master: c.Master, Reading: dec(60, 3), Note: "New pin", Person: c.Person}
		if err := w.store.CheckGauge(ctx, good); err != nil {
			return err
		}
	}
	return nil
}

// wornOut reports whether the gauge of a track has worn out since its last check; from
// then on that is what somebody finds.
func (w *walker) wornOut(t *track) bool {
	for i, f := range t.faults {
		if f.cause == gaugeWorn && f.day == never && w.day() >= wornFrom {
			t.faults = slices.Clone(t.faults)
			t.faults[i].day = w.day()
			return true
		}
	}
	return false
}

// stateProduct states what was put aside because of each matter, and of what belongs to
// closed ones what became of it.
func (w *walker) stateProduct(ctx context.Context) error {
	all, err := w.store.Contained(ctx, time.Time{})
	if err != nil {
		return err
	}
	var here []plant.Containment
	var matters []uuid.UUID
	for _, c := range all {
		if c.Station.ID == w.station.ID {
			here, matters = append(here, c), append(matters, c.Matter)
		}
	}
	if len(here) == 0 {
		return nil
	}
	found, err := w.store.Reaches(ctx, matters...)
	if err != nil {
		return err
	}
	for _, c := range here {
		if err := w.stateOne(ctx, c, found[c.Matter]); err != nil {
			return err
		}
	}
	return nil
}

func (w *walker) stateOne(ctx context.Context, c plant.Containment, found plant.Contained) error {
	supervisor := w.b.people[plant.Supervisor][0]
	say := func(step plant.ContainmentStep, quantity int, note string, who uuid.UUID) error {
		e := plant.ContainmentEntry{ID: id(), Containment: c.ID, Step: step, Quantity: quantity, Note: note, Person: who}
		if step == plant.KeptAside {
			e.Place, e.Tag = "Red rack, "+w.machine.Name, fmt.Sprintf("R-%04d", 100+w.care.rng.IntN(900))
		}
		return w.store.StateProduct(ctx, e)
	}
	kept := c.Kept()
	if !c.Stated() {
		// People count what is there: near to what the machine's log says, and never the same.
		kept = int(math.Round(float64(found.Suspect.Parts) * (0.9 + 0.12*w.care.rng.Float64())))
		if kept == 0 {
			return say(plant.NothingToKeep, 0, "The change was for the better, or nothing had left the machine", supervisor)
		}
		if err := say(plant.KeptAside, kept, "", w.somebody()); err != nil {
			return err
		}
	}
	if c.MatterClosed.IsZero() || c.Stated() && c.Left() == 0 {
		return nil
	}
	left := kept - c.Disposed()
	if w.place.name == heldBack && w.day() > 54 && kept < 3500 {
		if c.Disposed() == 0 {
			return say(plant.Released, kept/3, "Each measured on the second gauge", supervisor)
		}
		return nil // the others wait for a decision
	}
	scrap := min(left, w.care.rng.IntN(5))
	if scrap > 0 {
		if err := say(plant.Scrapped, scrap, "", supervisor); err != nil {
			return err
		}
	}
	if left == scrap {
		return nil
	}
	return say(plant.Released, left-scrap, "Each measured, all within specification", supervisor)
}
