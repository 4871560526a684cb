package chart

import (
	"math"
	"sort"
)

// breaks says whether the line stops before point i.
func (f *frame) breaks() []bool {
	out := make([]bool, f.n)
	for i := range f.c.Points {
		out[i] = f.c.Points[i].Restart
	}
	for _, s := range f.segs {
		if s.Notch != "" {
			out[s.From] = true
		}
	}
	return out
}

// traces draws the thin lines of both panels.
func (f *frame) traces(d *builder) {
	stop := f.breaks()
	if f.c.Other != nil {
		f.trace(d, "other", stop, f.loc, func(i int) float64 {
			if i >= len(f.c.Other) {
				return math.NaN()
			}
			return f.c.Other[i]
		})
	}
	f.trace(d, "trace", stop, f.loc, func(i int) float64 { return f.c.Points[i].Location })
	if f.two {
		f.trace(d, "trace", stop, f.dis, func(i int) float64 { return f.c.Points[i].Dispersion })
	}
}

func (f *frame) trace(d *builder, class string, stop []bool, s scale, of func(i int) float64) {
	run := make([]xy, 0, f.n)
	flush := func() {
		if f.thin {
			run = envelope(run)
			d.polyline(class+" dense", run)
		} else {
			d.polyline(class, run)
		}
		run = run[:0]
	}
	for i := range f.c.Points {
		p := &f.c.Points[i]
		v := of(i)
		if stop[i] {
			flush()
		}
		if !finite(v) || p.Excluded != "" {
			flush()
			continue
		}
		y, _ := s.y(v)
		run = append(run, xy{f.x(i), y})
	}
	flush()
}

// columnWidth is the px that one step of an envelope covers.
const columnWidth = 3.0

// envelope thins a line to the least and the greatest value of each column, in
// the order in which they came, so that no spike is lost.
func envelope(pts []xy) []xy {
	if len(pts) < 3 {
		return pts
	}
	out := make([]xy, 0, len(pts))
	for i := 0; i < len(pts); {
		j, lo, hi := i, i, i
		for col := int(pts[i].x / columnWidth); j < len(pts) && int(pts[j].x/columnWidth) == col; j++ {
			if pts[j].y < pts[lo].y {
				lo = j
			}
			if pts[j].y > pts[hi].y {
				hi = j
			}
		}
		out = append(out, pts[min(lo, hi)])
		if lo != hi {
			out = append(out, pts[max(lo, hi)])
		}
		i = j
	}
	return out
}

// targets draws the points, each in a group that can be pointed at and focused.
// Only the newest is in the tab order; the script moves the focus on from it.
func (f *frame) targets(d *builder) {
	said := make([]string, f.n) // what signals say of a point
	signal := make([]bool, f.n)
	for _, s := range f.c.Signals {
		if s.Point < 0 || s.Point >= f.n {
			continue
		}
		signal[s.Point] = true
		if s.Text != "" {
			said[s.Point] += ". " + s.Text
			if s.Sub != "" {
				said[s.Point] += ", " + s.Sub
			}
		}
	}
	newest := f.newest()
	d.raw(`<g class="points">`)
	if f.thin {
		f.columns(d)
	}
	for i := range f.c.Points {
		p := &f.c.Points[i]
		if !finite(p.Location) && (!f.two || !finite(p.Dispersion)) {
			continue
		}
		if f.thin && i != newest && !signal[i] && !p.Outside && p.Excluded == "" {
			continue // the envelope stands for it; a marked point is never thinned away
		}
		f.target(d, i, newest, said[i])
	}
	d.raw("</g>")
}

func (f *frame) newest() int {
	for i := f.n - 1; i >= 0; i-- {
		p := &f.c.Points[i]
		if p.Excluded == "" && (finite(p.Location) || f.two && finite(p.Dispersion)) {
			return i
		}
	}
	return -1
}

func (f *frame) target(d *builder, i, newest int, said string) {
	p := &f.c.Points[i]
	d.raw(`<g class="pt" role="img" tabindex="`)
	if i == newest {
		d.raw(`0" data-newest="" data-i="`)
	} else {
		d.raw(`-1" data-i="`)
	}
	d.int(i)
	d.raw(`"`)
	d.sattr("data-when", p.When)
	d.sattr("data-location", p.LocationText)
	if f.two {
		d.sattr("data-dispersion", p.DispersionText)
	}
	d.sattr("data-readings", p.Readings)
	d.sattr("data-person", p.Person)
	d.sattr("data-note", p.Note)
	d.raw("><title>")
	f.sentence(d, p, said)
	d.raw("</title>")
	half := max(f.step/2, 2)
	if f.n == 1 {
		half = 12
	}
	if f.thin {
		half = 5
	}
	x := f.x(i)
	bottom := f.loc.bottom
	if f.two {
		bottom = f.dis.bottom
	}
	d.rect("hit", x-half, f.loc.top, 2*half, bottom-f.loc.top)
	f.mark(d, i, newest, f.loc, p.Location, p.LocationText, true)
	if f.two {
		f.mark(d, i, newest, f.dis, p.Dispersion, p.DispersionText, false)
	}
	d.raw("</g>")
}

// sentence is the name of a point: time, values, what was found, what was done.
func (f *frame) sentence(d *builder, p *Point, said string) {
	d.esc(p.When)
	put := func(one, value string) {
		if value == "" {
			return
		}
		d.raw(", ")
		if one != "" {
			d.esc(one)
			d.raw(" ")
		}
		d.esc(value)
	}
	put(f.c.Location.One, p.LocationText)
	if f.two {
		put(f.c.Dispersion.One, p.DispersionText)
	}
	d.esc(said)
	if p.Outside {
		d.raw(". ")
		d.esc(f.w.Outside)
	}
	if p.Excluded != "" {
		d.raw(". ")
		d.esc(f.w.Excluded)
		d.raw(" (")
		d.esc(p.Excluded)
		d.raw(")")
	}
	if p.Note != "" {
		d.raw(". ")
		d.esc(p.Note)
	}
}

// mark draws one value of a point.
func (f *frame) mark(d *builder, i, newest int, s scale, v float64, said string, location bool) {
	if !finite(v) {
		return
	}
	p := &f.c.Points[i]
	x := f.x(i)
	y, inside := s.y(v)
	r, big, hollow, class := f.r2, 4.4, 3.4, "dot small"
	if location {
		r, big, hollow, class = f.r1, 5.6, 4, "dot"
	}
	switch {
	case p.Excluded != "":
		d.circle("dot out", x, y, hollow)
		l := f.limitsAt(i, location)
		up := !finite(l.Centre) || v >= l.Centre
		if location && up {
			d.text("letter", x, y-10, p.Excluded, middle)
		} else if location {
			d.text("letter", x, y+20, p.Excluded, middle)
		} else if finite(l.Upper) && v > l.Upper {
			d.text("letter", x+12, y+5, p.Excluded, middle)
		}
	case i == newest && f.thin:
		d.circle("dot newest", x, y, 4)
	case i == newest:
		d.circle("dot newest", x, y, big)
	case f.thin && !location && !f.flagged(i):
		// the target is there for its location; the envelope shows this value
	default:
		d.circle(class, x, y, r)
	}
	if location && p.Outside {
		d.octagon("ring-hold", x, y, f.outsideRadius(i))
	}
	if !inside {
		if said == "" {
			panel := &f.c.Dispersion
			if location {
				panel = &f.c.Location
			}
			said = decimal(v, panel.Decimals)
		}
		f.beyond(d, x, y, ringRoom(p), v > s.hi, said)
	}
}

// flagged says whether the dispersion of point i has a signal.
func (f *frame) flagged(i int) bool {
	k := sort.Search(len(f.flags2), func(k int) bool { return f.flags2[k].point >= i })
	return k < len(f.flags2) && f.flags2[k].point == i
}

// outsideRadius makes the octagon stand around a diamond, not through it.
func (f *frame) outsideRadius(i int) float64 {
	for k := range f.flags1 {
		if f.flags1[k].point == i {
			return f.flags1[k].clear + 5
		}
	}
	return 11
}

// ringRoom keeps a chevron out of the rings around its point.
func ringRoom(p *Point) float64 {
	if p.Outside {
		return 28
	}
	return 23
}

// beyond marks a value outside the axis and says it.
func (f *frame) beyond(d *builder, x, y, off float64, up bool, said string) {
	a, s := start, 1.0
	if x+off+10+textWidth(said, 13) > f.x1 {
		a, s = end, -1
	}
	d.chevron(x+s*off, y-3, up)
	d.text("beyond-value", x+s*(off+10), y+5, said, a)
}

func (f *frame) limitsAt(i int, location bool) Limits {
	l := NoLimits()
	for k := range f.segs {
		if f.segs[k].From > i {
			break
		}
		l = f.segs[k].Dispersion
		if location {
			l = f.segs[k].Location
		}
	}
	return l
}

// columns are the targets of a thinned chart: each says its stretch and the
// least and greatest value in it.
func (f *frame) columns(d *builder) {
	bottom := f.loc.bottom
	if f.two {
		bottom = f.dis.bottom
	}
	const wide = 4 * columnWidth
	p := f.c.Points
	for i := 0; i < f.n; {
		j, n := i, 0
		var lo, hi float64
		for col := int(f.x(i) / wide); j < f.n && int(f.x(j)/wide) == col; j++ {
			v := p[j].Location
			if !finite(v) {
				continue
			}
			if n == 0 {
				lo, hi = v, v
			}
			lo, hi = min(lo, v), max(hi, v)
			n++
		}
		if n > 0 {
			d.raw(`<g class="pt" role="img" tabindex="-1" data-i="`)
			d.int(i)
			d.raw(`"`)
			when := p[i].When + " " + f.w.To + " " + p[j-1].When
			span := decimal(lo, f.c.Location.Decimals) + " " + f.w.To + " " + decimal(hi, f.c.Location.Decimals)
			if f.c.Location.Unit != "" {
				span += " " + f.c.Location.Unit
			}
			d.sattr("data-when", when)
			d.sattr("data-location", span)
			d.raw("><title>")
			d.esc(when)
			d.raw(": ")
			d.int(n)
			d.raw(" ")
			d.esc(f.w.Subgroups)
			d.raw(", ")
			d.esc(span)
			d.raw("</title>")
			x := float64(int(f.x(i)/wide)) * wide
			d.rect("hit", x, f.loc.top, wide, bottom-f.loc.top)
			d.raw("</g>")
		}
		i = j
	}
}
