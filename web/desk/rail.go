package desk

import (
	"holdfast/internal/plant"
	"holdfast/web/chart"
	"holdfast/web/ui"
)

// Size of the rail beside the chart.
const railWidth, railHeight = 214, 470

// newRail is the single readings of the stretch against the specification.
func newRail(d *drawing) *chart.Rail {
	w := d.f.Words
	r := &chart.Rail{ID: "rail-of-" + d.h.State.ID.String(), W: railWidth, H: railHeight, Name: w.T("desk.rail.name"),
		Decimals: d.setup.Decimals, Step: plant.Decimal{Units: 1, Decimals: d.setup.Decimals}.Float(),
		Spec: specOf(d.f, d.setup), Words: chartWords(w)}
	outside := 0
	for i, p := range d.points {
		outside += p.Outside
		for _, v := range p.Readings {
			x := plant.Decimal{Units: v, Decimals: p.Stats.Decimals}.Float()
			if d.reach.covers(i) {
				r.Suspect = append(r.Suspect, x)
			} else {
				r.Readings = append(r.Readings, x)
			}
		}
	}
	n := len(r.Readings) + len(r.Suspect)
	if n > 0 {
		r.Sub = w.T("desk.rail.sub", n, d.f.Clock(d.points[0].TakenAt))
	}
	if len(r.Suspect) > 0 {
		r.StableText, r.SuspectText = w.T("desk.rail.stable"), w.T("desk.rail.suspect", len(r.Suspect))
	}
	switch {
	case d.setup.Lower == nil && d.setup.Upper == nil:
		r.Label = w.T("desk.rail.label-no-spec", n)
	default:
		r.Label = w.T("desk.rail.label", outside, n)
	}
	return r
}

func specOf(f ui.Format, s plant.Setup) chart.Spec {
	spec := chart.NoSpec()
	for _, side := range [...]struct {
		from  *plant.Decimal
		value *float64
		text  *string
	}{{s.Lower, &spec.Lower, &spec.LowerText}, {s.Target, &spec.Target, &spec.TargetText}, {s.Upper, &spec.Upper, &spec.UpperText}} {
		if side.from != nil {
			*side.value, *side.text = side.from.Float(), f.Decimal(*side.from)
		}
	}
	return spec
}
