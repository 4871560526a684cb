package describe

import (
	"slices"

	"github.com/google/uuid"

	"holdfast/internal/plant"
)

func newID() uuid.UUID { return uuid.Must(uuid.NewV7()) }

// read understands one row: what hangs higher first, since the rest refers to it.
func (r *reader) read() {
	if !r.cells() {
		return
	}
	before := len(r.plan.Problems)
	line := r.line()
	station := r.station(line)
	machine := r.machine(station)
	part := r.part()
	gauge := r.gauge()
	r.shift()
	if r.cell["name"] == "" {
		for _, k := range []string{"unit", "decimals", "target", "lower", "upper", "worse", "size", "chart", "minutes", "parts", "events", "grace",
			"operation", "drawing", "drawing_revision", "plan", "risk_analysis", "special_mark", "method"} {
			if r.cell[k] != "" {
				r.problemIn("name", plant.Invalidf("name", "This row says how something is measured, and not what."))
				return
			}
		}
		return
	}
	if machine == nil && r.cell["machine"] == "" {
		r.problemIn("machine", plant.Invalidf("machine", "Name the machine that the characteristic is measured on."))
	}
	setup, ok := r.setup(gauge)
	if !ok || len(r.plan.Problems) > before {
		return
	}
	r.characteristic(machine, part, setup)
}

// say notes what a row says about a thing and finds when it says something else than a
// row above. Nothing said means no change.
func (r *reader) say(t *thing, column, text string) bool {
	if text == "" {
		return true
	}
	if old, ok := t.said[column]; ok && old.text != text {
		switch column {
		case "line":
			r.problemIn(column, plant.Invalidf(column, "Station %s stands on %s in row %d; here it is on %s.", t.name, old.text, old.row, text))
		case "station":
			r.problemIn(column, plant.Invalidf(column, "Machine %s stands at %s in row %d; here it is at %s.", t.name, old.text, old.row, text))
		default:
			r.problemIn(column, plant.Invalidf(column, "Of %s, row %d says %s; here it says %s.", t.name, old.row, old.text, text))
		}
		return false
	}
	t.said[column] = statement{text, r.row.number}
	return true
}

// meet returns the thing of this name: named above, in the plant, or new.
func (r *reader) meet(kind plant.Thing, column string, found func(name string) (id uuid.UUID, retired, ok bool)) *thing {
	name, err := plant.CleanTextWithin(column, r.cell[column], plant.MaxName)
	if err != nil {
		r.about(err)
		return nil
	}
	if name == "" {
		return nil
	}
	k := key{kind, name}
	if t := r.seen[k]; t != nil {
		return t
	}
	t := &thing{name: name, said: map[string]statement{}, found: -1}
	id, retired, ok := found(name)
	switch {
	case ok && retired:
		r.problemIn(column, plant.Invalidf(column, "%s is retired. Bring it back first, or choose another name.", name))
		return nil
	case ok:
		t.id, t.found = id, len(r.plan.Found)
		r.plan.Found = append(r.plan.Found, Found{Kind: kind, Name: name, Row: r.row.number})
	default:
		t.id, t.fresh = newID(), true
	}
	r.seen[k] = t
	return t
}

// differs notes that the file says something else about a thing that is there.
func (r *reader) differs(t *thing, column string) {
	f := &r.plan.Found[t.found]
	for _, c := range columns {
		if c.Key == column && !slices.Contains(f.Differs, c.Header) {
			f.Differs = append(f.Differs, c.Header)
		}
	}
}

// next is the position behind those that are there.
func next[T any](list []T, position func(T) (int, bool)) int {
	n := 0
	for _, v := range list {
		if p, ok := position(v); ok && p >= n {
			n = p + 1
		}
	}
	return n
}
