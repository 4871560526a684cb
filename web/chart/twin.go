package chart

import (
	"math"
	"strings"
)

// Twin sets one series beside what it would have been: two rows on one scale about the
// same centre, each with its spread as a band and a bracket, and its name at the right.
type Twin struct {
	ID     string
	Label  string // one sentence: what both rows show
	W, H   float64
	Centre float64
	Rows   [2]TwinRow
}

// TwinRow is one of the two series.
type TwinRow struct {
	Values []float64
	Half   float64 // half the width of its band, in the unit
	Name   string
}

// Sizes of a twin.
const (
	twinNames = 190.0 // px at the right for the names
	twinGap   = 22.0  // px between the rows
	twinText  = 15.5
	twinLine  = 20.0
)

// SVG returns the drawing.
func (t *Twin) SVG() string { return drawn(t.AppendSVG) }

// AppendSVG appends the drawing to b.
func (t *Twin) AppendSVG(b []byte) []byte {
	w, h := size(t.W, 774), size(t.H, 200)
	d := &builder{b}
	d.begin("chart twin-chart", ident(t.ID), "img", t.Label, w, h)
	d.raw(">")
	halves := [2]float64{}
	for i, r := range t.Rows {
		halves[i] = r.Half
		for _, v := range r.Values {
			if finite(v) {
				halves[i] = max(halves[i], math.Abs(v-t.Centre))
			}
		}
	}
	px := (h - twinGap) / 2 / max(halves[0]+halves[1], 1e-300) // of one unit
	x1 := w - twinNames
	y := 0.0
	for i, r := range t.Rows {
		y += halves[i] * px
		at := func(v float64) float64 { return y - (v-t.Centre)*px }
		top, bottom := at(t.Centre+r.Half), at(t.Centre-r.Half)
		d.rect("band band-2", 0, top, x1, bottom-top)
		d.rect("band band-1", 0, at(t.Centre+r.Half/2), x1, (bottom-top)/2)
		d.line("centre", 0, y, x1, y)
		run := make([]xy, 0, len(r.Values))
		for k, v := range r.Values {
			if finite(v) {
				run = append(run, xy{12 + float64(k)*(x1-24)/float64(max(len(r.Values)-1, 1)), at(v)})
			}
		}
		d.polyline("trace", run)
		for _, p := range run {
			d.circle("dot", p.x, p.y, 3.2)
		}
		d.polyline("bracket", []xy{{x1 + 8, top}, {x1 + 16, top}, {x1 + 16, bottom}, {x1 + 8, bottom}})
		lines := wrap(r.Name, twinText, twinNames-30)
		for k, line := range lines {
			d.text("hump-name", x1+28, y+6+(float64(k)-float64(len(lines)-1)/2)*twinLine, line, start)
		}
		y += halves[i]*px + twinGap
	}
	d.raw("</svg>")
	return d.b
}

// wrap breaks words into lines of at most width px.
func wrap(s string, size, width float64) []string {
	var lines []string
	line := ""
	for _, word := range strings.Fields(s) {
		switch {
		case line == "":
			line = word
		case textWidth(line+" "+word, size) <= width:
			line += " " + word
		default:
			lines, line = append(lines, line), word
		}
	}
	if line != "" {
		lines = append(lines, line)
	}
	return lines
}
