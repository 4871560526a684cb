package chart

import (
	"slices"
	"sort"
	"strconv"
	"time"
)

// AppendSVG appends the drawing to b.
func (c *Control) AppendSVG(b []byte) []byte {
	f := c.layout()
	id := ident(c.ID)
	b = slices.Grow(b, f.sizeHint())
	d := &builder{b}
	w := f.x1 + right
	d.begin("chart control", id, "group", c.Label, w, f.height)
	d.raw(">")
	if len(c.Reaches) > 0 {
		d.hatch(id+"-reach", 7)
	}
	d.raw(`<g aria-hidden="true">`)
	f.bands(d)
	f.reaches(d, id+"-reach")
	f.scales(d)
	f.changes(d)
	f.timeAxis(d)
	f.notchLines(d)
	f.traces(d)
	d.raw("</g>")
	f.targets(d)
	d.raw(`<g class="flags" aria-hidden="true">`)
	d.drawFlags(f.flags1, f.rows1, f.loc.top-20-rowsHeight(f.rows1))
	if f.two {
		d.drawFlags(f.flags2, f.rows2, f.loc.bottom+10)
	}
	f.notches(d)
	f.names(d)
	d.raw("</g></svg>")
	return d.b
}

// sizeHint is a little more than the drawing takes, so that it is copied once at
// most while it grows.
func (f *frame) sizeHint() int {
	if f.n == 0 || f.thin {
		return 64 << 10
	}
	p := &f.c.Points[f.n-1]
	said := len(p.When) + len(p.LocationText) + len(p.DispersionText) + len(p.Note)
	return 8<<10 + 400*(len(f.c.Signals)+len(f.c.Changes)) + f.n*(410+2*said+len(p.Readings)+len(p.Person))
}

// signalled returns the flags of a panel in time order.
func (f *frame) signalled(dispersion bool) []pennant {
	var out []pennant
	for _, s := range f.c.Signals {
		if s.Dispersion != dispersion || s.Point < 0 || s.Point >= f.n {
			continue
		}
		p := &f.c.Points[s.Point]
		v := p.Location
		if dispersion {
			v = p.Dispersion
		}
		if !finite(v) {
			continue
		}
		clear := 11.0
		switch {
		case f.thin:
			clear = 8
		case s.Open:
			clear = 13
		}
		if dispersion {
			clear -= 1.5
		}
		out = append(out, pennant{point: s.Point, x: f.x(s.Point), clear: clear, text: s.Text, sub: s.Sub, open: s.Open, newest: s.Newest})
	}
	sort.SliceStable(out, func(i, j int) bool { return out[i].point < out[j].point })
	return out
}

// border is the px where segment k begins.
func (f *frame) border(k int) float64 {
	if k >= len(f.segs) {
		return f.x1
	}
	if f.segs[k].From == 0 {
		return f.x0
	}
	return f.x(f.segs[k].From) - f.step/2
}

func (f *frame) bands(d *builder) {
	runs := make([]stretch, 0, len(f.segs))
	fill := func(of func(*Segment) Limits) []stretch {
		runs = runs[:0]
		for k := range f.segs {
			l := of(&f.segs[k])
			if n := len(runs); n > 0 && runs[n-1].lim.same(l) && f.segs[k].Notch == "" {
				runs[n-1].x2 = f.border(k + 1)
				continue
			}
			runs = append(runs, stretch{f.border(k), f.border(k + 1), l})
		}
		return runs
	}
	d.band(fill(func(s *Segment) Limits { return s.Location }), f.loc, f.c.Location.floor())
	if f.two {
		d.band(fill(func(s *Segment) Limits { return s.Dispersion }), f.dis, f.c.Dispersion.floor())
	}
}

// scales writes the quiet axis at the left, ghosts, and the limits in force at
// the right.
func (f *frame) scales(d *builder) {
	f.scale(d, f.loc, &f.c.Location, 4, func(s *Segment) Limits { return s.Location })
	if f.two {
		f.scale(d, f.dis, &f.c.Dispersion, 3, func(s *Segment) Limits { return s.Dispersion })
	}
}

func (f *frame) scale(d *builder, s scale, p *Panel, want int, of func(*Segment) Limits) {
	ticks, decimals := niceTicks(s.lo, s.hi, want)
	for _, v := range ticks {
		d.text("tick", f.x0-10, s.at(v)+4.5, decimal(v, decimals), end)
	}
	for _, g := range p.Ghosts {
		if !finite(g.Value) || g.Value < s.lo || g.Value > s.hi {
			continue
		}
		y := s.at(g.Value)
		d.line("ghost", f.x0-4, y, f.x0+24, y)
		if y > (s.top+s.bottom)/2 { // below its mark, out of the way of the lower limit
			d.text("tick", f.x0+4, y+15, g.Text, start)
		} else {
			d.text("tick", f.x0+30, y+4.5, g.Text, start)
		}
	}
	if n := len(f.segs); n > 0 {
		d.endLabels(f.x1+9, limitLabels(of(&f.segs[n-1]), s, f.w), 14)
	}
}

// names come last, over a halo, because a pole at the left end may rise
// through them.
func (f *frame) names(d *builder) {
	d.text("panel-name", 0, f.loc.top-44, f.c.Location.Name, start)
	d.text("tick halo", 0, f.loc.top-28, f.c.Location.Unit, start)
	if f.two {
		d.text("panel-name", 0, f.dis.top-10, f.c.Dispersion.Name, start)
	}
}

func (f *frame) reaches(d *builder, pattern string) {
	for _, r := range f.c.Reaches {
		from, to := max(r.From, 0), min(r.To, f.n-1)
		if from > to {
			continue
		}
		x1, x2 := f.x(from), f.x(to)
		f.panels(func(s scale) {
			d.hatched("reach", x1, s.top, x2-x1, s.bottom-s.top, pattern)
			d.line("reach-edge", x1, s.top, x1, s.bottom)
		})
		width := textWidth(r.Text, 13.5)
		switch y := f.loc.bottom - 4; {
		case x1-9-width > f.x0:
			d.text("reach-text", x1-9, y, r.Text, end)
		case x2+9+width < f.x1:
			d.text("reach-text", x2+9, y, r.Text, start)
		default:
			d.text("reach-text", x1+6, y, r.Text, start)
		}
	}
}

func (f *frame) panels(each func(scale)) {
	each(f.loc)
	if f.two {
		each(f.dis)
	}
}

func (f *frame) notches(d *builder) {
	top := f.loc.top
	for k, s := range f.segs {
		if s.Notch == "" {
			continue
		}
		x := f.border(k)
		half := max(11, textWidth(s.Notch, 12.5)/2+5)
		d.raw("<g>")
		d.title(s.Note)
		d.polygon("notch", xy{x - half, top - 20}, xy{x + half, top - 20}, xy{x + half, top - 6}, xy{x, top + 4}, xy{x - half, top - 6})
		d.text("notch-no", x, top-7, s.Notch, middle)
		d.raw("</g>")
		f.notchNote(d, k, x, half)
	}
}

// notchLines lie below the points, the notches themselves above every pole.
func (f *frame) notchLines(d *builder) {
	for k, s := range f.segs {
		if s.Notch != "" {
			d.line("notch-line", f.border(k), f.loc.top+4, f.border(k), f.axis)
		}
	}
}

// notchNote writes the words beside a notch where neither a pole, nor another
// notch, nor the end of the plot is in the way; they stay in the title.
func (f *frame) notchNote(d *builder, k int, x, half float64) {
	note := f.segs[k].Note
	width := textWidth(note, 12.5)
	free := func(a, b float64) bool {
		if a < f.x0+textWidth(f.c.Location.Name, 15)-left || b > f.x1 {
			return false
		}
		for i := range f.flags1 {
			if fl := &f.flags1[i]; fl.shown && fl.x > a-3 && fl.x < b+3 {
				return false
			}
		}
		for j := range f.segs {
			if o := f.border(j); j != k && f.segs[j].Notch != "" && o > a-14 && o < b+14 {
				return false
			}
		}
		return true
	}
	switch {
	case note == "":
	case free(x+half+6, x+half+6+width):
		d.text("tick", x+half+6, f.loc.top-8, note, start)
	case free(x-half-6-width, x-half-6):
		d.text("tick", x-half-6, f.loc.top-8, note, end)
	}
}

// timeX places an instant between the two points around it.
func (f *frame) timeX(c *Change) float64 {
	p := f.c.Points
	if f.n == 0 {
		return f.x0
	}
	k := sort.Search(f.n, func(i int) bool { return p[i].At.After(c.At) })
	switch {
	case k == 0:
		return max(f.x(0)-f.step/2, f.x0)
	case k == f.n:
		if p[k-1].At.Equal(c.At) {
			return f.x(k - 1)
		}
		return min(f.x(k-1)+f.step/2, f.x1)
	}
	span := p[k].At.Sub(p[k-1].At).Seconds()
	if span <= 0 {
		return f.x(k)
	}
	return f.x(k-1) + f.step*min(max(c.At.Sub(p[k-1].At).Seconds()/span, 0), 1)
}

func (f *frame) timeAxis(d *builder) {
	if f.n == 0 {
		return
	}
	y := f.axis + 18
	if f.ordinal {
		d.text("tick", f.x0-10, y, f.w.Subgroup, end)
		for _, i := range ordinalTicks(f.n, f.x1-f.x0) {
			d.line("axis", f.x(i), f.axis, f.x(i), f.axis+6)
			d.text("tick", f.x(i), y, strconv.Itoa(i+1), middle)
		}
		return
	}
	at := make([]time.Time, f.n)
	for i := range at {
		at[i] = f.c.Points[i].At
	}
	word := f.c.TickLabel
	if word == nil {
		word = TickLabel
	}
	zone := f.c.Zone
	if zone == nil {
		zone = time.UTC
	}
	newest := word(at[f.n-1].In(zone), Hour)
	reserved := f.x(f.n-1) - textWidth(newest, 12.5)/2 - 8
	free := f.x0 - 1
	begin := func(t placedTick) float64 {
		if t.index == 0 {
			return f.x0
		}
		return f.x(t.index) - f.step/2
	}
	ticks := timeTicks(at, f.c.Shifts, zone, f.x1-f.x0, word)
	for i, t := range ticks {
		xx := begin(t)
		d.line("axis", xx, f.axis, xx, f.axis+7)
		if i == 0 && len(ticks) > 1 && begin(ticks[1]) < xx+10+textWidth(t.label, 12.5) {
			continue // the short rest of a stretch gives way to a whole one
		}
		if e := xx + 6 + textWidth(t.label, 12.5); xx > free && e < reserved {
			d.text("tick", xx+6, y, t.label, start)
			free = e + 4
		}
	}
	d.text("tick strong", f.x(f.n-1), y, newest, middle)
}

// ordinalTicks are the first point, round numbers, and the last.
func ordinalTicks(n int, width float64) []int {
	out := []int{0}
	step := 1
	for _, m := range []int{1, 2, 5, 10, 20, 50, 100, 200, 500, 1000, 2000, 5000, 10000, 50000, 100000} {
		step = m
		if float64(n/m)*60 <= width {
			break
		}
	}
	for k := step; k < n; k += step {
		if k > 1 && n-k > step/2 {
			out = append(out, k-1)
		}
	}
	if n > 1 {
		out = append(out, n-1)
	}
	return out
}
