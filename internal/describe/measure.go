package describe

import (
	"slices"
	"strings"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
)

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
	s.Decimals, _ = r.whole("decimals", 0, plant.MaxDecimals)
	s.Size, _ = r.whole("size", 1, 25)
	s.Plan.EveryMinutes, _ = r.whole("minutes", 0, 100_000)
	s.Plan.EveryParts, _ = r.whole("parts", 0, 10_000_000)
	s.Plan.GraceMinutes, _ = r.whole("grace", 0, 100_000)
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
