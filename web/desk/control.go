package desk

import (
	"math"
	"strings"
	"time"
	"unicode"
	"unicode/utf8"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
	"holdfast/web/chart"
	"holdfast/web/ui"
	"holdfast/web/words"
)

// Heights of the two panels: both, the stretch links and the line under the chart stay
// on one screen of 900 px.
const (
	locationHeight   = 226
	dispersionHeight = 84
	pulseFor         = time.Minute
)

// chartWords are the words that drawings say on their own.
func chartWords(w *words.Printer) chart.Words {
	return chart.Words{
		Upper: w.T("desk.chart.upper"), Centre: w.T("desk.chart.centre"), Lower: w.T("desk.chart.lower"),
		UpperSpec: w.T("desk.chart.upper-spec"), Target: w.T("desk.chart.target"), LowerSpec: w.T("desk.chart.lower-spec"),
		Subgroup: w.T("desk.chart.subgroup"), Subgroups: w.T("desk.chart.subgroups"), To: w.T("desk.chart.to"),
		Time: w.T("desk.chart.time"), Readings: w.T("desk.chart.readings"), Person: w.T("desk.chart.person"), Notes: w.T("desk.chart.notes"),
		Band: w.T("desk.chart.band"), Excluded: w.T("desk.chart.left-out"), Outside: w.T("desk.chart.outside"), Newest: w.T("desk.chart.newest"),
		Stable: w.T("desk.chart.not-suspect"), Reading: w.T("desk.chart.reading"), Count: w.T("desk.chart.count"), Points: w.T("desk.chart.value"),
	}
}

// tickLabel words the beginning of a stretch of the time axis.
func tickLabel(w *words.Printer) func(time.Time, chart.Unit) string {
	return func(t time.Time, u chart.Unit) string {
		month := w.T("ui.month-short." + itoa(int(t.Month())))
		switch u {
		case chart.Hour:
			return t.Format("15:04")
		case chart.Day:
			return w.T("desk.tick.day", w.T("ui.weekday."+itoa(int(t.Weekday()))), itoa(t.Day()), month)
		case chart.Week:
			return w.T("ui.day-month", itoa(t.Day()), month)
		case chart.Month:
			return w.T("desk.tick.month", month, itoa(t.Year()))
		}
		return itoa(t.Year())
	}
}

// panels name the two statistics of a set-up.
func panels(w *words.Printer, s plant.Setup) (location, dispersion chart.Panel) {
	location = chart.Panel{Unit: s.Unit, Decimals: s.MeanDecimals(), Name: w.T("desk.panel.averages", s.Size), One: w.T("desk.one.average")}
	dispersion = chart.Panel{Unit: s.Unit, Floor: true}
	switch s.Chart.DispersionStatistic() {
	case "sd":
		dispersion.Name, dispersion.One, dispersion.Decimals = w.T("desk.panel.sds"), w.T("desk.one.sd"), s.Decimals+1
	case "moving-range":
		location.Name, location.One = w.T("desk.panel.readings"), w.T("desk.one.reading")
		dispersion.Name, dispersion.One, dispersion.Decimals = w.T("desk.panel.moving-ranges"), w.T("desk.one.moving-range"), s.Decimals
	default:
		dispersion.Name, dispersion.One, dispersion.Decimals = w.T("desk.panel.ranges"), w.T("desk.one.range"), s.Decimals
	}
	return location, dispersion
}

// drawing is a control chart in the making.
type drawing struct {
	f      ui.Format
	h      plant.History
	setup  plant.Setup
	points []plant.Point // those in the unit that is in use now
	segs   []plant.Segment
	c      *chart.Control
	reach  *drawnReach
	sized  map[plant.Panel]bool // panels whose change was said on a flag
	other  int                  // points of another unit, not drawn
}

// newDrawing builds the chart of a stretch.
func newDrawing(f ui.Format, h plant.History) *drawing {
	d := &drawing{f: f, h: h, setup: h.State.Setup, sized: map[plant.Panel]bool{}}
	for _, p := range h.Points {
		if h.Setups[p.Setup].Unit != d.setup.Unit {
			d.other++
			continue
		}
		d.points = append(d.points, p)
		d.segs = append(d.segs, h.Course.At(p.TakenAt))
	}
	w := f.Words
	d.c = &chart.Control{ID: "chart-of-" + h.State.ID.String(), H1: locationHeight, H2: dispersionHeight,
		Zone: f.Zone, TickLabel: tickLabel(w), Words: chartWords(w)}
	d.c.Location, d.c.Dispersion = panels(w, d.setup)
	d.nameBySizes()
	d.putPoints()
	d.putSegments()
	d.putReach()
	d.putSignals()
	d.putChanges()
	d.c.Label = d.label()
	return d
}

// nameBySizes names the averages by how many parts the subgroups that are drawn have, which
// the set-up of now may not be: its size was changed, or parts were lost.
func (d *drawing) nameBySizes() {
	if len(d.points) == 0 || d.setup.Chart == limits.Individuals {
		return
	}
	least, most := d.points[0].Stats.N, d.points[0].Stats.N
	for _, p := range d.points {
		least, most = min(least, p.Stats.N), max(most, p.Stats.N)
	}
	if d.c.Location.Name = d.f.Words.T("desk.panel.averages", most); least < most {
		d.c.Location.Name = d.f.Words.T("desk.panel.averages-of-each", least, most)
	}
}

// dispersions are the values of the lower panel, NaN where there is none. No moving
// range crosses a boundary.
func dispersions(chartKind limits.Chart, points []plant.Point, setups map[int]plant.Setup, starts func(i int) bool) []float64 {
	out := make([]float64, len(points))
	var before limits.Subgroup
	for i, p := range points {
		s := limits.Subgroup{N: p.Stats.N, Location: p.Stats.Mean(), Range: p.Stats.RangeFloat(), SD: p.Stats.SD, Break: starts(i)}
		var last *limits.Subgroup
		if i > 0 {
			last = &before
		}
		out[i] = math.NaN()
		if setup, ok := setups[p.Setup]; !ok || setup.Chart.DispersionStatistic() == chartKind.DispersionStatistic() {
			if v, ok := chartKind.DispersionPoint(last, s); ok {
				out[i] = v
			}
		}
		before = s
	}
	return out
}

// begins reports whether the fold starts afresh at point i.
func (d *drawing) begins(i int) bool { return i > 0 && !d.segs[i].Same(d.segs[i-1]) }

func (d *drawing) putPoints() {
	values := dispersions(d.setup.Chart, d.points, d.h.Setups, d.begins)
	d.c.Points = make([]chart.Point, len(d.points))
	for i, p := range d.points {
		d.c.Points[i] = chartPoint(d.f, d.setup, d.h.State.Machine.Machine, p, values[i], d.c.Dispersion.Decimals)
		d.c.Points[i].Restart = d.begins(i)
	}
}

// chartPoint is one subgroup as charts and the line under them show it.
func chartPoint(f ui.Format, s plant.Setup, m plant.Machine, p plant.Point, dispersion float64, decimals int) chart.Point {
	cp := chart.Point{At: p.TakenAt, Location: p.Stats.Mean(), Dispersion: dispersion, When: when(f, p.TakenAt),
		LocationText: f.Mean(p.Stats.Mean(), s), DispersionText: f.WithUnit(f.Number(dispersion, decimals), s.Unit),
		Person: p.PersonName, Outside: p.Outside > 0}
	if p.Stats.N > 1 {
		readings := make([]string, len(p.Readings))
		for k, v := range p.Readings {
			readings[k] = f.Units(v, p.Stats.Decimals)
			if k < len(p.Streams) {
				if from := m.StreamName(p.Streams[k]); from != "" {
					readings[k] = f.Words.T("desk.chart.from-stream", from, readings[k])
				}
			}
		}
		cp.Readings = strings.Join(readings, "\u2002")
	}
	if p.Version > 1 {
		cp.Note = note(f, cp.Note, f.Words.T("desk.note.corrected", p.Reason))
	}
	if p.ShortReason != "" {
		cp.Note = note(f, cp.Note, f.Words.T("desk.note.short", p.ShortReason))
	}
	return cp
}

func note(f ui.Format, have, more string) string {
	if have == "" {
		return more
	}
	return f.Words.T("desk.note.and", have, more)
}

// when is a point's time with its day, as the line under the chart says it.
func when(f ui.Format, t time.Time) string {
	if t.In(f.Zone).Year() != f.Now.In(f.Zone).Year() {
		return f.Words.T("desk.when", f.Time(t), f.Date(t))
	}
	return f.Words.T("desk.when", f.Time(t), f.Day(t))
}

func (d *drawing) putSegments() {
	bands := bandsOf{f: d.f, setup: d.setup, decimals: d.c.Dispersion.Decimals, tables: map[uuid.UUID]*limits.Table{}}
	var before uuid.UUID
	size := 0
	for i, p := range d.points {
		rev := d.segs[i].Revision
		if i > 0 && rev == before && p.Stats.N == size {
			continue
		}
		s := chart.Segment{From: i}
		s.Location, s.Dispersion = bands.at(d.h.Revisions, rev, p.Stats.N)
		if i > 0 && rev != before {
			if r, ok := d.h.Revisions[rev]; ok {
				s.Notch = itoa(r.Number)
				s.Note = d.f.Words.T("desk.notch", r.Number, d.f.Clock(r.FrozenAt))
			}
		}
		d.c.Segments = append(d.c.Segments, s)
		before, size = rev, p.Stats.N
	}
}

// bandsOf gives the limits of subgroups by revision and size, each computed once.
type bandsOf struct {
	f        ui.Format
	setup    plant.Setup
	decimals int // of the dispersion
	tables   map[uuid.UUID]*limits.Table
}

func (b bandsOf) at(revisions map[uuid.UUID]plant.Revision, rev uuid.UUID, n int) (location, dispersion chart.Limits) {
	r, ok := revisions[rev]
	if !ok {
		return chart.NoLimits(), chart.NoLimits()
	}
	t := b.tables[rev]
	if t == nil {
		var err error
		if t, err = r.Standard().Table(); err != nil {
			return chart.NoLimits(), chart.NoLimits() // limits are checked when they are frozen
		}
		b.tables[rev] = t
	}
	l, s, err := t.Bands(n)
	if err != nil {
		return chart.NoLimits(), chart.NoLimits() // taken under another chart than the revision's
	}
	return limitsOf(b.f, l, b.setup.LimitDecimals()), limitsOf(b.f, s, b.setup.LimitDecimals())
}

// limitsOf is a band as charts draw it.
func limitsOf(f ui.Format, b limits.Band, decimals int) chart.Limits {
	if !b.Exists() {
		return chart.NoLimits()
	}
	l := chart.Limits{Lower: math.NaN(), Centre: b.Center, Upper: math.NaN(), CentreText: f.Number(b.Center, decimals)}
	if b.HasLower() {
		l.Lower, l.LowerText = b.Lower, f.Number(b.Lower, decimals)
	}
	if b.HasUpper() {
		l.Upper, l.UpperText = b.Upper, f.Number(b.Upper, decimals)
	}
	return l
}

// said names what a flag has already been hung for: one rule of one matter.
type said struct {
	matter uuid.UUID
	firing plant.Firing
	rev    uuid.UUID
}

// putSignals marks every point at which a rule holds. The flag hangs at the first of
// them, as a rule that holds on says nothing new.
func (d *drawing) putSignals() {
	matters := make(map[uuid.UUID]plant.Matter, len(d.h.Matters)+1)
	for _, m := range d.h.Matters {
		matters[m.ID] = m
	}
	if m := d.h.State.Matter; m != nil {
		matters[m.ID] = *m
	}
	hung := map[said]bool{}
	for i, p := range d.points {
		for _, s := range p.Signals {
			if s.Withdrawn || s.Panel.HoldsProduct() {
				continue // a reading outside has its octagon
			}
			m, known := matters[s.Matter]
			mark := chart.Signal{Point: i, Dispersion: s.Panel == plant.Dispersion, Open: known && m.Open()}
			key := said{s.Matter, s.Firing, s.Revision}
			if !hung[key] {
				hung[key] = true
				d.hang(&mark, s, m, i)
			}
			d.c.Signals = append(d.c.Signals, mark)
		}
	}
}

// hang words the flag of a signal.
func (d *drawing) hang(mark *chart.Signal, s plant.Signal, m plant.Matter, i int) {
	w := d.f.Words
	firing := s.Firing
	if firing.Panel == plant.Dispersion {
		firing.Panel = plant.Location // the panel says that it is the spread
	}
	mark.Text = upperFirst(w.RuleKey(firing.Rule, firing.Side))
	if s.Better(d.setup) {
		mark.Text = w.T("desk.signal.better", mark.Text)
	}
	if s.FoundLate {
		mark.Text = w.T("desk.signal.late", mark.Text)
	}
	switch {
	case mark.Open:
		mark.Newest = i == len(d.points)-1 && d.f.Now.Sub(d.points[i].RecordedAt) < pulseFor
		if c := d.reach.changeAt(d.points[i], s.Panel); c != nil && !d.sized[s.Panel] {
			mark.Sub = flagWords(d.f, *c, d.setup)
			d.sized[s.Panel] = true // said once, however many rules fired there
		}
	case m.Cause != "":
		mark.Text = w.T("desk.signal.cause", mark.Text, m.Cause)
	}
}

// label says the chart in a sentence or two.
func (d *drawing) label() string {
	w := d.f.Words
	n := len(d.points)
	if n == 0 {
		return w.T("desk.label.empty", d.h.State.Name)
	}
	p := d.c.Points[n-1]
	text := w.T("desk.label", d.c.Location.Name, d.c.Dispersion.Name, d.h.State.Name, n, p.When, p.LocationText)
	open := 0
	for _, s := range d.c.Signals {
		if s.Open {
			open++
		}
	}
	if open > 0 {
		return w.T("desk.label.open", text, open)
	}
	return w.T("desk.label.quiet", text)
}

// upperFirst begins a sentence.
func upperFirst(s string) string {
	r, n := utf8.DecodeRuneInString(s)
	return string(unicode.ToUpper(r)) + s[n:]
}
