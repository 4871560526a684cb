package desk

import (
	"math"
	"slices"
	"time"

	"holdfast/internal/plant"
	"holdfast/internal/spc/changepoint"
	"holdfast/internal/spc/limits"
	"holdfast/web/ui"
)

// longestLook is how many subgroups back a change is looked for (methods, reach).
const longestLook = 512

// reach is what is suspect because of the open matter, as far as the stretch shows it.
type reach struct {
	From  int       // point from which on it is hatched: the last one before the change
	Since time.Time // when it begins
	Cut   bool      // it may have begun before the stretch
	// Size of the change in the unit and its direction, for a location signal; Ratio
	// of the spread for a dispersion signal. Both zero where there is no estimate.
	Size, Ratio float64
	Began       time.Time // first subgroup after the most likely moment of change
	At          int       // point whose signal the estimate is for, -1 when none
}

// reachOf works out the reach of the open matter over the points that are shown. It is
// false where no matter is open or none of it lies in the stretch.
func reachOf(h plant.History, points []plant.Point) (reach, bool) {
	m := h.State.Matter
	if m == nil || len(points) == 0 || points[len(points)-1].TakenAt.Before(m.OpenedTaken) {
		return reach{}, false
	}
	r := reach{From: len(points), At: -1}
	if m.Kind() == plant.Hold {
		r.hold(m, points)
	}
	if first, panel := firstLook(m); !first.IsZero() {
		r.look(h, points, first, panel)
	}
	if r.From == len(points) { // every line is withdrawn: what opened it stays in doubt
		r.From = slices.IndexFunc(points, func(p plant.Point) bool { return !p.TakenAt.Before(m.OpenedTaken) })
	}
	if r.Since.IsZero() {
		r.Since = points[r.From].TakenAt
	}
	return r, true
}

// hold goes back to the last round before the first reading outside with all readings
// within.
func (r *reach) hold(m *plant.Matter, points []plant.Point) {
	first := m.OpenedTaken
	for _, l := range m.Lines {
		if !l.Withdrawn && l.Panel == plant.Reading && l.First.Before(first) {
			first = l.First
		}
	}
	for i := len(points) - 1; i >= 0; i-- {
		if points[i].TakenAt.Before(first) && points[i].Outside == 0 {
			r.from(i, points, false)
			return
		}
	}
	r.from(0, points, true)
}

// from moves the beginning back to point i if that is earlier.
func (r *reach) from(i int, points []plant.Point, cut bool) {
	if i > r.From || i == r.From && !cut {
		return
	}
	r.From, r.Since, r.Cut = i, points[i].TakenAt, cut
}

// firstLook is the earliest standing line of a rule, and its panel.
func firstLook(m *plant.Matter) (first time.Time, panel plant.Panel) {
	for _, l := range m.Lines {
		if l.Withdrawn || l.Panel.HoldsProduct() {
			continue
		}
		if first.IsZero() || l.First.Before(first) || l.First.Equal(first) && l.Panel == plant.Location {
			first, panel = l.First, l.Panel
		}
	}
	return first, panel
}

// look estimates when the change began that the first firing of a rule showed.
func (r *reach) look(h plant.History, points []plant.Point, first time.Time, panel plant.Panel) {
	signal := slices.IndexFunc(points, func(p plant.Point) bool { return !p.TakenAt.Before(first) })
	if signal < 0 {
		return
	}
	if points[signal].TakenAt.After(first) { // the firing itself lies before the stretch
		r.from(0, points, true)
		return
	}
	segment := h.Course.At(first)
	revision, ok := h.Revisions[segment.Revision]
	if !ok {
		return
	}
	begin := signal
	for begin > 0 && signal-begin+1 < longestLook && h.Course.At(points[begin-1].TakenAt).Same(segment) {
		begin--
	}
	e, err := estimate(revision, h.State.Setup, points[begin:signal+1], panel)
	if err != nil { // nothing can be estimated: the signal itself is all that is known
		r.from(max(signal-1, begin), points, false)
		return
	}
	r.At, r.Began = signal, points[begin+e.After+1].TakenAt
	if panel == plant.Location {
		r.Size = e.Size
	} else {
		r.Ratio = e.Size
	}
	earliest := e.Likely[0] // index of the last subgroup before the change, -1 for the boundary
	switch {
	case earliest >= 0:
		r.from(begin+earliest, points, false)
	case begin > 0 && !h.Course.At(points[begin-1].TakenAt).Same(segment):
		r.from(begin, points, false)
		if r.From == begin {
			r.Since = segment.From
		}
	case begin > 0:
		r.from(begin, points, true)
	default:
		// The stretch begins within the segment unless the boundary lies inside it.
		r.from(begin, points, segment.From.IsZero() || segment.From.Before(points[0].TakenAt))
	}
}

func estimate(rev plant.Revision, s plant.Setup, points []plant.Point, panel plant.Panel) (changepoint.Estimate, error) {
	if panel == plant.Location {
		means, sizes := make([]float64, len(points)), make([]int, len(points))
		for i, p := range points {
			means[i], sizes[i] = p.Stats.Mean(), p.Stats.N
		}
		return changepoint.Location(means, sizes, rev.Center, rev.Sigma)
	}
	variances, df := make([]float64, len(points)), make([]int, len(points))
	for i, p := range points {
		variances[i], df[i] = p.Stats.SD*p.Stats.SD, p.Stats.N-1
		if rev.Chart == limits.Individuals {
			d := p.Stats.Mean() - rev.Center
			variances[i], df[i] = d*d, 1
		}
	}
	return changepoint.Dispersion(variances, df, rev.Sigma, plant.Decimal{Units: 1, Decimals: s.Decimals}.Float())
}

// partsSince is about how many parts were made since an instant; false where the
// machine's rate or what it did is not known that far back.
func partsSince(m plant.MachineNow, since, now time.Time) (int, bool) {
	if m.PartsPerHour <= 0 || len(m.Log) > 0 && m.Log[0].At.After(since) {
		return 0, false
	}
	parts := m.Log.Running(since, now).Hours() * m.PartsPerHour
	step := math.Pow(10, math.Max(0, math.Floor(math.Log10(math.Max(parts, 1)))-1)) // two figures
	return int(math.Round(parts/step) * step), true
}

// words says the reach, as it stands on the chart.
func (r reach) words(f ui.Format, m plant.MachineNow) string {
	since := f.Clock(r.Since)
	if r.Cut {
		return f.Words.T("desk.reach.before", since)
	}
	if parts, ok := partsSince(m, r.Since, f.Now); ok {
		return f.Words.T("desk.reach.parts", since, parts)
	}
	return f.Words.T("desk.reach.since", since)
}

// change says how large the change is and since when, for the second line of the flag.
func (r reach) change(f ui.Format, s plant.Setup) string {
	since := f.Clock(r.Began)
	switch {
	case r.Size != 0:
		return f.Words.T("desk.reach.size", f.WithUnit(f.Signed(r.Size, s.LimitDecimals()), s.Unit), since)
	case r.Ratio != 0:
		return f.Words.T("desk.reach.ratio", f.Number(r.Ratio, 1), since)
	}
	return ""
}
