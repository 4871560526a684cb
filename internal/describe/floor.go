package describe

import (
	"slices"
	"strings"

	"github.com/google/uuid"

	"holdfast/internal/plant"
)

func (r *reader) line() *thing {
	t := r.meet(plant.ALine, "line", func(name string) (uuid.UUID, bool, bool) {
		for _, l := range r.o.Lines {
			if l.Name == name {
				return l.ID, l.Retired, true
			}
		}
		return uuid.Nil, false, false
	})
	if t != nil && t.fresh && t.place == 0 {
		position := next(r.o.Lines, func(l plant.Line) (int, bool) { return l.Position, true })
		r.plan.Add.Lines = append(r.plan.Add.Lines, plant.Line{ID: t.id, Name: r.cell["line"], Position: position + len(r.plan.Add.Lines)})
		t.place = len(r.plan.Add.Lines)
	}
	return t
}

func (r *reader) station(line *thing) *thing {
	var old plant.Station
	t := r.meet(plant.AStation, "station", func(name string) (uuid.UUID, bool, bool) {
		for _, s := range r.o.Stations {
			if s.Name == name {
				old = s
				return s.ID, s.Retired, true
			}
		}
		return uuid.Nil, false, false
	})
	if t == nil {
		return nil
	}
	if !r.say(t, "line", r.cell["line"]) || !r.say(t, "station_family", r.cell["station_family"]) {
		return nil
	}
	switch {
	case !t.fresh:
		old = r.o.Station(t.id)
		if line != nil && line.id != old.LineID {
			r.differs(t, "line")
		}
		if f := r.cell["station_family"]; f != "" && f != old.Family {
			r.differs(t, "station_family")
		}
	case t.place == 0:
		if line == nil {
			if r.cell["line"] == "" {
				r.problemIn("line", plant.Invalidf("line", "Name the line that the station stands on."))
			}
			delete(r.seen, key{plant.AStation, r.cell["station"]})
			return nil
		}
		position := next(r.o.Stations, func(s plant.Station) (int, bool) { return s.Position, s.LineID == line.id })
		for _, s := range r.plan.Add.Stations {
			if s.LineID == line.id {
				position++
			}
		}
		r.plan.Add.Stations = append(r.plan.Add.Stations, plant.Station{ID: t.id, LineID: line.id, Name: r.cell["station"], Family: r.cell["station_family"], Position: position})
		t.place = len(r.plan.Add.Stations)
	case r.plan.Add.Stations[t.place-1].Family == "":
		r.plan.Add.Stations[t.place-1].Family = r.cell["station_family"]
	}
	return t
}

func (r *reader) machine(station *thing) *thing {
	t := r.meet(plant.AMachine, "machine", func(name string) (uuid.UUID, bool, bool) {
		for _, m := range r.o.Machines {
			if m.Name == name {
				return m.ID, m.Retired, true
			}
		}
		return uuid.Nil, false, false
	})
	if t == nil {
		for _, k := range []string{"rate", "streams"} {
			if r.cell[k] != "" && r.cell["machine"] == "" {
				r.problemIn("machine", plant.Invalidf("machine", "Name the machine that this is said of."))
			}
		}
		return nil
	}
	m := plant.Machine{ID: t.id, Name: r.cell["machine"]}
	var ok bool
	if m.PartsPerHour, ok = r.rate(); !ok {
		return nil
	}
	for _, name := range list(r.cell["streams"]) {
		m.Streams = append(m.Streams, plant.Stream{ID: newID(), Name: name})
	}
	if err := m.Check(); err != nil {
		r.about(err)
		return nil
	}
	for _, k := range []string{"station", "rate", "streams"} {
		if !r.say(t, k, r.cell[k]) {
			return nil
		}
	}
	if !t.fresh {
		r.machineThere(t, station, m)
		return t
	}
	if t.place == 0 {
		if station == nil {
			if r.cell["station"] == "" {
				r.problemIn("station", plant.Invalidf("station", "Name the station that serves the machine."))
			}
			delete(r.seen, key{plant.AMachine, m.Name})
			return nil
		}
		m.StationID = station.id
		m.Position = next(r.o.Machines, func(m plant.Machine) (int, bool) { return m.Position, m.StationID == station.id })
		for _, o := range r.plan.Add.Machines {
			if o.StationID == station.id {
				m.Position++
			}
		}
		r.plan.Add.Machines = append(r.plan.Add.Machines, m)
		t.place = len(r.plan.Add.Machines)
		return t
	}
	// A later row may say what the first one left out.
	added := &r.plan.Add.Machines[t.place-1]
	if r.cell["rate"] != "" {
		added.PartsPerHour = m.PartsPerHour
	}
	if m.Streams != nil && added.Streams == nil {
		added.Streams = m.Streams
	}
	return t
}

// machineThere compares a row with a machine that the plant has.
func (r *reader) machineThere(t *thing, station *thing, m plant.Machine) {
	old := r.o.Machine(t.id)
	if station != nil && station.id != old.StationID {
		r.problemIn("station", plant.Invalidf("station", "The machine stands at %s. Move it on its own page first.", r.o.Station(old.StationID).Name))
	}
	if r.cell["rate"] != "" && m.PartsPerHour != old.PartsPerHour {
		r.differs(t, "rate")
	}
	names := func(list []plant.Stream) (out []string) {
		for _, s := range list {
			if !s.Retired {
				out = append(out, s.Name)
			}
		}
		return out
	}
	if m.Streams != nil && !slices.Equal(names(m.Streams), names(old.Streams)) {
		r.differs(t, "streams")
	}
}

// rate reads the parts per hour. "1,200" is twelve hundred to some and one and a fifth to
// others, so it is asked again.
func (r *reader) rate() (float64, bool) {
	text := r.cell["rate"]
	if text == "" {
		return 0, true
	}
	if _, after, cut := strings.Cut(text, ","); cut && len(after) == 3 {
		r.problemIn("rate", plant.Invalidf("rate", "%s can be read in two ways. Write it without a mark for thousands.", text))
		return 0, false
	}
	d, err := plant.ParseDecimal(text)
	if err != nil {
		r.problemIn("rate", plant.Invalidf("rate", "%s is not a number.", text))
		return 0, false
	}
	return d.Float(), true
}
