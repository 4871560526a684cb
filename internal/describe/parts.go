package describe

import (
	"github.com/google/uuid"

	"holdfast/internal/plant"
)

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

// maxCheckDays is the most days from one check of a gauge to the next.
const maxCheckDays = 10_000

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
		for _, k := range []string{"resolution", "next_check", "check_days"} {
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
	if g.CheckDays, ok = r.whole("check_days", 0, maxCheckDays); !ok {
		return nil
	}
	for _, k := range []string{"resolution", "next_check", "check_days"} {
		if !r.say(t, k, r.cell[k]) {
			return nil
		}
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
		if r.cell["check_days"] != "" && g.CheckDays != old.CheckDays {
			r.differs(t, "check_days")
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
		if added.CheckDays == 0 {
			added.CheckDays = g.CheckDays
		}
	}
	return t
}
