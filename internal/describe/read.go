package describe

import (
	"slices"
	"strconv"
	"strings"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
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
		r.problemIn(column, plant.Invalidf(column, "Row %d says %s here.", old.row, old.text))
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
	t := &thing{said: map[string]statement{}, found: -1}
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
		r.problemIn("station", plant.Invalidf("station", "The machine stands at %s already, and stays there.", r.o.Station(old.StationID).Name))
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

func (r *reader) part() *thing {
	t := r.meet(plant.APart, "part", func(name string) (uuid.UUID, bool, bool) {
		for _, p := range r.o.Parts {
			if p.Name == name {
				return p.ID, p.Retired, true
			}
		}
		return uuid.Nil, false, false
	})
	if t == nil || !r.say(t, "part_family", r.cell["part_family"]) {
		return nil
	}
	switch {
	case !t.fresh:
		if f := r.cell["part_family"]; f != "" && f != r.o.Part(t.id).Family {
			r.differs(t, "part_family")
		}
	case t.place == 0:
		r.plan.Add.Parts = append(r.plan.Add.Parts, plant.Part{ID: t.id, Name: r.cell["part"], Family: r.cell["part_family"]})
		t.place = len(r.plan.Add.Parts)
	case r.plan.Add.Parts[t.place-1].Family == "":
		r.plan.Add.Parts[t.place-1].Family = r.cell["part_family"]
	}
	return t
}

func (r *reader) gauge() *thing {
	t := r.meet(plant.AGauge, "gauge", func(name string) (uuid.UUID, bool, bool) {
		for _, g := range r.o.Gauges {
			if g.Name == name {
				return g.ID, g.Retired, true
			}
		}
		return uuid.Nil, false, false
	})
	if t == nil {
		for _, k := range []string{"resolution", "next_check"} {
			if r.cell[k] != "" && r.cell["gauge"] == "" {
				r.problemIn("gauge", plant.Invalidf("gauge", "Name the gauge that this is said of."))
			}
		}
		return nil
	}
	g := plant.Gauge{ID: t.id, Name: r.cell["gauge"]}
	var ok bool
	if g.Resolution, ok = r.decimal("resolution"); !ok {
		return nil
	}
	if g.Resolution != nil && g.Resolution.Units <= 0 {
		r.problemIn("resolution", plant.Invalidf("resolution", "The resolution is a number above zero."))
		return nil
	}
	if g.NextCheck, ok = r.day("next_check"); !ok {
		return nil
	}
	if !r.say(t, "resolution", r.cell["resolution"]) || !r.say(t, "next_check", r.cell["next_check"]) {
		return nil
	}
	switch {
	case !t.fresh:
		old := r.o.Gauge(t.id)
		if g.Resolution != nil && (old.Resolution == nil || g.Resolution.Compare(*old.Resolution) != 0) {
			r.differs(t, "resolution")
		}
		if !g.NextCheck.IsZero() && !g.NextCheck.Equal(old.NextCheck) {
			r.differs(t, "next_check")
		}
	case t.place == 0:
		r.plan.Add.Gauges = append(r.plan.Add.Gauges, g)
		t.place = len(r.plan.Add.Gauges)
	default:
		added := &r.plan.Add.Gauges[t.place-1]
		if added.Resolution == nil {
			added.Resolution = g.Resolution
		}
		if added.NextCheck.IsZero() {
			added.NextCheck = g.NextCheck
		}
	}
	return t
}

// decimal reads an exact number; nil when the cell is empty.
func (r *reader) decimal(column string) (*plant.Decimal, bool) {
	text := r.cell[column]
	if text == "" {
		return nil, true
	}
	d, err := plant.ParseDecimal(text)
	if err != nil {
		r.problemIn(column, plant.Invalidf(column, "%s is not a number of at most %d decimals.", text, plant.MaxDecimals))
		return nil, false
	}
	return &d, true
}

// whole reads a whole number, 0 when the cell is empty.
func (r *reader) whole(column string, most int) (int, bool) {
	text := r.cell[column]
	if text == "" {
		return 0, true
	}
	n, err := strconv.Atoi(text)
	if err != nil || n < 0 || n > most {
		r.problemIn(column, plant.Invalidf(column, "%s is not a whole number from 0 to %d.", text, most))
		return 0, false
	}
	return n, true
}

// workbookEpoch is the day 0 of the days that workbooks count, for dates after February
// of 1900.
var workbookEpoch = time.Date(1899, 12, 30, 0, 0, 0, 0, time.UTC)

func (r *reader) day(column string) (time.Time, bool) {
	text := r.cell[column]
	if text == "" {
		return time.Time{}, true
	}
	if r.xlsx {
		if n, err := strconv.Atoi(text); err == nil && n > 36_525 && n < 73_050 { // 2000 to 2100
			return workbookEpoch.AddDate(0, 0, n), true
		}
	}
	for _, layout := range []string{"2006-01-02", "2.1.2006"} {
		if t, err := time.Parse(layout, text); err == nil {
			return t, true
		}
	}
	r.problemIn(column, plant.Invalidf(column, "%s is not a day. Write it as 2027-01-31.", text))
	return time.Time{}, false
}

// setup reads how the characteristic of the row is measured.
func (r *reader) setup(gauge *thing) (plant.Setup, bool) {
	before := len(r.plan.Problems)
	c := r.cell
	s := plant.Setup{Unit: c["unit"], Worse: plant.Side(strings.ToLower(c["worse"])), ControlPlan: plant.ControlPlan{
		Operation: c["operation"], Drawing: c["drawing"], DrawingRevision: c["drawing_revision"], Plan: c["plan"],
		RiskAnalysis: c["risk_analysis"], SpecialMark: c["special_mark"], Method: c["method"],
	}}
	s.Target, _ = r.decimal("target")
	s.Lower, _ = r.decimal("lower")
	s.Upper, _ = r.decimal("upper")
	s.Decimals, _ = r.whole("decimals", plant.MaxDecimals)
	s.Size, _ = r.whole("size", 25)
	s.Plan.EveryMinutes, _ = r.whole("minutes", 100_000)
	s.Plan.EveryParts, _ = r.whole("parts", 10_000_000)
	s.Plan.GraceMinutes, _ = r.whole("grace", 100_000)
	for _, k := range []string{"decimals", "size"} {
		if c[k] == "" {
			r.problemIn(k, plant.Invalidf(k, "This is needed."))
		}
	}
	for _, name := range list(c["events"]) {
		i := slices.IndexFunc(occasionNames, func(o struct {
			occasion plant.Occasion
			name     string
		}) bool {
			return squash(o.name) == squash(name) || squash(string(o.occasion)) == squash(name)
		})
		if i < 0 {
			r.problemIn("events", plant.Invalidf("events", "%s is no occasion to sample on. There are start-up, changeover, tool change, an adjustment, first piece and last piece.", name))
			continue
		}
		if o := occasionNames[i].occasion; !slices.Contains(s.Plan.Events, o) {
			s.Plan.Events = append(s.Plan.Events, o)
		}
	}
	slices.SortFunc(s.Plan.Events, func(a, b plant.Occasion) int {
		return slices.Index(Events(), a) - slices.Index(Events(), b)
	})
	if s.Chart = DefaultChart(s.Size); c["chart"] != "" {
		s.Chart = limits.Chart("")
		for _, n := range chartNames {
			if squash(n.name) == squash(c["chart"]) {
				s.Chart = n.chart
			}
		}
		if s.Chart == "" {
			r.problemIn("chart", plant.Invalidf("chart", "%s is no chart here. There are average and range, average and standard deviation, and single readings.", c["chart"]))
		}
	}
	if gauge != nil {
		s.GaugeID = gauge.id
	}
	if len(r.plan.Problems) > before {
		return s, false
	}
	for _, d := range []struct {
		column string
		value  *plant.Decimal
	}{{"target", s.Target}, {"lower", s.Lower}, {"upper", s.Upper}} {
		if d.value != nil {
			if _, err := d.value.In(s.Decimals); err != nil {
				r.problemIn(d.column, plant.Invalidf(d.column, "%s has more decimals than are measured (%d).", d.value.String(), s.Decimals))
				return s, false
			}
		}
	}
	err := s.Clean()
	if err == nil {
		err = s.Validate()
	}
	r.about(err)
	return s, err == nil
}

// characteristic adds the characteristic of the row, or finds it in the plant.
func (r *reader) characteristic(machine, part *thing, s plant.Setup) {
	name, err := plant.CleanTextWithin("name", r.cell["name"], plant.MaxName)
	if err != nil {
		r.about(err)
		return
	}
	d := plant.Described{Characteristic: plant.Characteristic{ID: newID(), MachineID: machine.id, Name: name}, Setup: s}
	if part != nil {
		d.PartID = part.id
	} else {
		d.Family = r.cell["part_family"]
	}
	k := key{plant.ACharacteristic, machine.id.String() + "\n" + name}
	if old := r.seen[k]; old != nil {
		r.problemIn("name", plant.Invalidf("name", "Row %d describes it already, on the same machine.", old.said["name"].row))
		return
	}
	t := &thing{said: map[string]statement{"name": {name, r.row.number}}, found: -1}
	r.seen[k] = t
	d.StationID = r.stationOf(machine)
	position := 0
	for _, c := range r.o.Characteristics {
		if c.MachineID == machine.id && c.Name == name {
			if c.Retired {
				r.problemIn("name", plant.Invalidf("name", "%s is retired. Bring it back first, or choose another name.", name))
				return
			}
			t.found = len(r.plan.Found)
			r.plan.Found = append(r.plan.Found, Found{Kind: plant.ACharacteristic, Name: name, Row: r.row.number})
			for _, column := range s.Effect(c.Setup).Changed {
				r.differs(t, column)
			}
			if d.PartID != c.PartID {
				r.differs(t, "part")
			}
			if d.Family != c.Family {
				r.differs(t, "part_family")
			}
			return
		}
		if c.StationID == d.StationID && c.Position >= position {
			position = c.Position + 1
		}
	}
	for _, c := range r.plan.Add.Characteristics {
		if c.StationID == d.StationID {
			position++
		}
	}
	d.Position = position
	r.plan.Add.Characteristics = append(r.plan.Add.Characteristics, d)
}

func (r *reader) stationOf(machine *thing) uuid.UUID {
	if machine.fresh {
		return r.plan.Add.Machines[machine.place-1].StationID
	}
	return r.o.Machine(machine.id).StationID
}
