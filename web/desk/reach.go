package desk

import (
	"slices"
	"strings"

	"holdfast/internal/plant"
	"holdfast/web/chart"
	"holdfast/web/ui"
)

// putReach hatches the reach of the open matter as far as it lies among the points.
func (d *drawing) putReach() {
	r := d.h.State.Reach
	says, ok := ui.SayReachOf(d.f, d.h.State)
	n := len(d.points)
	if !ok || n == 0 || d.points[n-1].TakenAt.Before(r.From) {
		return
	}
	d.reach = &drawnReach{Reach: r, Says: says, From: slices.IndexFunc(d.points, func(p plant.Point) bool { return !p.TakenAt.Before(r.From) }), To: n - 1}
	if !r.Until.IsZero() {
		for d.reach.To > d.reach.From && d.points[d.reach.To].TakenAt.After(r.Until) {
			d.reach.To--
		}
	}
	d.c.Reaches = []chart.Reach{{From: d.reach.From, To: d.reach.To, Text: says.Is}}
}

// drawnReach is a reach with the points that it covers.
type drawnReach struct {
	*plant.Reach
	From, To int
	Says     ui.ReachSaid
}

// covers reports whether a point lies within the reach.
func (r *drawnReach) covers(i int) bool { return r != nil && i >= r.From && i <= r.To }

// changeAt is the change that was estimated from the firing of a subgroup on a panel.
func (r *drawnReach) changeAt(p plant.Point, panel plant.Panel) *plant.EstimatedChange {
	if r == nil {
		return nil
	}
	for _, s := range r.Reasons {
		if c := s.Change; c != nil && c.Subgroup == p.Subgroup && c.Panel == panel {
			return c
		}
	}
	return nil
}

// flagWords say how large a change is and since when, for the second line of its flag.
func flagWords(f ui.Format, c plant.EstimatedChange, s plant.Setup) string {
	since := f.Clock(c.Began)
	if c.Panel == plant.Dispersion {
		return f.Words.T("reach.flag-ratio", f.Number(c.Size, 1), since)
	}
	return f.Words.T("reach.flag-size", f.WithUnit(f.Signed(c.Size, s.LimitDecimals()), s.Unit), since)
}

// notes say under the chart why the reach begins where it does, and how large the change
// is with its standard error.
func (r *drawnReach) notes(f ui.Format, s plant.Setup) []string {
	out := []string{strings.Join(append([]string{r.Says.Is + "."}, r.Says.Why...), " ")}
	for _, reason := range r.Reasons {
		c := reason.Change
		switch {
		case c == nil:
		case c.Panel == plant.Dispersion:
			out = append(out, f.Words.T("reach.ratio", f.Number(c.Size, 1), f.Number(c.SE, 1)))
		default:
			out = append(out, f.Words.T("reach.size", f.WithUnit(f.Signed(c.Size, s.LimitDecimals()), s.Unit), f.WithUnit(f.Number(c.SE, s.LimitDecimals()), s.Unit)))
		}
	}
	return out
}
