package chart

import "math"

// Strip shows each part of a round against its specification while it is typed.
// It has one tick for every part, seen as soon as that part has a value;
// static/js/falls.js moves them.
type Strip struct {
	ID       string
	Label    string
	W, H     float64
	Spec     Spec
	Readings []float64 // typed so far, in order; NaN for one still empty
	Size     int       // parts in the round
	Lo, Hi   float64   // where readings usually lie; used where a side has no specification, equal is unknown
	Words    Words
}

const mostTicks = 100

// SVG returns the drawing.
func (p *Strip) SVG() string { return drawn(p.AppendSVG) }

// AppendSVG appends the drawing to b.
func (p *Strip) AppendSVG(b []byte) []byte {
	w, h := size(p.W, 140), size(p.H, 388)
	words := p.Words.filled()
	lo, hi := p.span()
	s := scale{lo, hi, 14, h - 36}
	const x = 8.0
	d := &builder{b}
	d.begin("chart strip-chart", ident(p.ID), "img", p.Label, w, h)
	d.raw(` data-falls-strip=""`)
	d.scaleData(s)
	d.raw(">")
	top, bottom := s.top, s.bottom
	if finite(p.Spec.Upper) {
		top = s.at(p.Spec.Upper)
	}
	if finite(p.Spec.Lower) {
		bottom = s.at(p.Spec.Lower)
	}
	d.rect("span", x, min(top, bottom), 32, math.Abs(bottom-top))
	near := func(v, o float64) bool { return finite(o) && math.Abs(s.at(v)-s.at(o)) < 44 }
	for _, l := range [...]struct {
		v           float64
		class       string
		value, name string
	}{
		{p.Spec.Upper, "spec", p.Spec.UpperText, words.UpperSpec},
		{p.Spec.Target, "target", p.Spec.TargetText, words.Target},
		{p.Spec.Lower, "spec", p.Spec.LowerText, words.LowerSpec},
	} {
		if !finite(l.v) {
			continue
		}
		y := s.at(l.v)
		d.line(l.class, x-7, y, x+39, y)
		if l.class == "target" && (near(l.v, p.Spec.Upper) || near(l.v, p.Spec.Lower)) {
			continue // a limit's number goes before the target's
		}
		d.text("limit-value", x+46, y+5, l.value, start)
		d.text("tick", x+46, y+24, l.name, start)
	}
	var above, below bool
	for k := range min(max(p.Size, len(p.Readings)), mostTicks) {
		v := math.NaN()
		if k < len(p.Readings) {
			v = p.Readings[k]
		}
		y := (s.top + s.bottom) / 2
		if finite(v) {
			y, _ = s.y(v)
			above, below = above || v > hi, below || v < lo
		}
		d.open("line", "reading-tick")
		d.raw(` data-falls-tick=""`)
		d.hide(!finite(v))
		d.attr("x1", x+4)
		d.attr("y1", y)
		d.attr("x2", x+28)
		d.attr("y2", y)
		d.raw("/>")
	}
	d.raw(`<g data-falls-beyond="up"`)
	d.hide(!above)
	d.raw(">")
	d.chevron(x+16, s.top-10, true)
	d.raw(`</g><g data-falls-beyond="down"`)
	d.hide(!below)
	d.raw(">")
	d.chevron(x+16, s.bottom+10, false)
	d.raw("</g></svg>")
	return d.b
}

// span does not follow the readings: the drawing must stay still while they are
// typed.
func (p *Strip) span() (lo, hi float64) {
	sp := p.Spec
	if finite(sp.Lower) && finite(sp.Upper) && sp.Lower < sp.Upper {
		size := sp.Upper - sp.Lower
		return widen(sp.Lower-0.07*size, sp.Upper+0.07*size)
	}
	if p.Lo < p.Hi {
		lo, hi = p.Lo, p.Hi
		for _, v := range []float64{sp.Lower, sp.Upper, sp.Target} {
			if finite(v) {
				lo, hi = min(lo, v), max(hi, v)
			}
		}
		return widen(lo-0.07*(hi-lo), hi+0.07*(hi-lo))
	}
	return sp.span(p.Readings)
}
