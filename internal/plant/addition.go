package plant

import (
	"time"

	"github.com/google/uuid"
)

// Addition is what a description would add to a plant, each list in the order in which
// it stands on the floor. What it refers to is in it, or in the plant already.
type Addition struct {
	Lines           []Line
	Stations        []Station
	Machines        []Machine
	Parts           []Part
	Gauges          []Gauge
	Characteristics []Described
	Shifts          []Shift // the calendar of a plant that has none
}

// Empty reports whether there is nothing to add.
func (a Addition) Empty() bool { return a.Count() == 0 }

// Count is how many things it adds.
func (a Addition) Count() int {
	return len(a.Lines) + len(a.Stations) + len(a.Machines) + len(a.Parts) + len(a.Gauges) + len(a.Characteristics) + len(a.Shifts)
}

// Description is a file that describes a plant and waits to be looked at and confirmed.
type Description struct {
	ID      uuid.UUID
	Person  uuid.UUID // who sent it; nobody else may confirm it
	SentAt  time.Time
	Name    string // of the file
	Content []byte
}
