package admin

import (
	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// step is one step of the first run. What is done is read from the plant itself, so the
// run can be left at any time and goes on where it stands, whoever takes it up.
type step struct {
	Name   stepName
	Title  string
	Done   bool
	Answer string // what was done, in a few words
	Back   string // where what was done is seen and changed, "" for who may not
}

type stepName string

const (
	stepPlant    stepName = "plant"
	stepEngineer stepName = "engineer"
	stepFloor    stepName = "floor"
	stepMeasure  stepName = "measure"
	stepLimits   stepName = "limits"
	stepOperator stepName = "operator"
	stepRound    stepName = "round"
)

// first are what the first run is about: the first of each kind that is in use.
type first struct {
	station        plant.Station
	machine        plant.Machine
	characteristic plant.Described
}

func firstOf(o plant.Outline) first {
	var f first
	for _, c := range o.Characteristics {
		if !c.Retired && f.characteristic.ID == uuid.Nil {
			f.characteristic = c
			f.machine, f.station = o.Machine(c.MachineID), o.Station(c.StationID)
		}
	}
	for _, m := range o.Machines {
		if !m.Retired && f.machine.ID == uuid.Nil {
			f.machine, f.station = m, o.Station(m.StationID)
		}
	}
	return f
}

// stepsOf says where the first run stands.
func stepsOf(f ui.Frame, o plant.Outline) []step {
	w, at := f.Words, firstOf(o)
	s := []step{{Name: stepPlant, Done: !o.Plant.ConfirmedAt.IsZero() || o.Plant.Demo, Answer: o.Plant.Name},
		{Name: stepEngineer, Done: o.People.Engineer},
		{Name: stepFloor, Done: at.machine.ID != uuid.Nil, Answer: at.machine.Name},
		{Name: stepMeasure, Done: at.characteristic.ID != uuid.Nil, Answer: at.characteristic.Name},
		// Learning is an answer as well: whoever takes rounds without limits has given it.
		{Name: stepLimits, Done: at.characteristic.Revision > 0 || at.characteristic.ID != uuid.Nil && o.Rounds},
		{Name: stepOperator, Done: o.People.RoundTaker},
		{Name: stepRound, Done: o.Rounds}}
	switch {
	case at.characteristic.Given:
		s[4].Answer = w.T("setup.limits-given", at.characteristic.Revision)
	case at.characteristic.Revision > 0:
		s[4].Answer = w.T("setup.limits-revision", at.characteristic.Revision)
	case s[4].Done:
		s[4].Answer = w.T("setup.limits-learning")
	}
	for i := range s {
		s[i].Title = w.T("setup.step." + string(s[i].Name))
		if s[i].Done {
			s[i].Back = backTo(f.Person, s[i].Name, at)
		} else {
			s[i].Answer = ""
		}
	}
	return s
}

// backTo is the page of what a finished step was about.
func backTo(p plant.Person, of stepName, at first) string {
	switch {
	case of == stepPlant:
		return plantAddress
	case of == stepFloor:
		return floorAddress
	case (of == stepEngineer || of == stepOperator) && p.May(plant.Manage):
		return peopleAddress
	case (of == stepMeasure || of == stepLimits) && p.May(plant.SetLimits):
		return measureAt(at.characteristic.ID, "")
	case of == stepRound && p.May(plant.TakeRounds) && at.station.ID != uuid.Nil:
		return "/station/" + at.station.ID.String()
	}
	return ""
}

// current is the first step that is not done; all of them when everything is.
func current(steps []step) int {
	for i, s := range steps {
		if !s.Done {
			return i
		}
	}
	return len(steps)
}
