package chart

import (
	"math"
	"strconv"
)

// Falls shows, while a round is typed, where its average falls so far: the last
// nine points and a hollow dot for this one. The drawing carries its scale in
// data attributes, so that static/js/falls.js can move the dot at every digit
// without knowing any statistics. A page gives each size its own drawing.
type Falls struct {
	ID     string
	Label  string
	W, H   float64
	Points []StationPoint
	Limits Limits
	Floor  bool
	Now    float64 // average of what is typed so far; NaN while nothing is
	After  []Event // done since the last point
	// Lo and Hi are the axis where there are no limits yet (specification, say);
	// both zero chooses it from the points.
	Lo, Hi float64
	Words  Words
}

// StationPoint is one earlier round.
type StationPoint struct {
	Value   float64
	Text    string // "14.9932 mm", for the table
	Time    string // "07:42"
	Restart bool
	Mark    Mark
	Before  []Event // done between the point before and this one
}

// Verdict is the picture beside an answer: the last twelve points, the reach,
// and a pennant with the rule that fired.
type Verdict struct {
	ID     string
	Label  string
	W, H   float64
	Points []StationPoint
	Limits Limits
	Floor  bool
	Reach  int     // hatched from that many points before the newest; 0 is none
	Signal string  // pennant at the newest point; empty is none
	After  []Event // done since the newest point
	Lo, Hi float64
	Words  Words
}

// Points of the two station charts.
const (
	FallsLength   = 9
	VerdictLength = 12
)

// averages is the common part: a few large points in their band, right-aligned
// in fixed slots so that the geometry does not jump while history grows.
type averages struct {
	d      *builder
	w, h   float64
	top    float64
	bottom float64
	slots  int
	points []StationPoint
	limits Limits
	floor  float64
	s      scale
	x0, x1 float64
}

const stationR = 5.0

// eventTall is how tall events stand at the foot of a station's chart.
const eventTall = 18.0

func newAverages(d *builder, w, h, top, bottom float64, slots int, pts []StationPoint, lim Limits, floorZero bool, lo, hi float64, also float64) *averages {
	a := &averages{d: d, w: w, h: h, top: top, bottom: bottom, slots: slots, points: pts, limits: lim, floor: math.NaN()}
	if floorZero {
		a.floor = 0
	}
	low, _, up, _ := lim.ends(math.NaN())
	switch {
	case finite(lim.Centre) && up > low:
		const reach = 4.1 / 3
		lo, hi = widen(lim.Centre-(lim.Centre-low)*reach, lim.Centre+(up-lim.Centre)*reach)
	case (lo != 0 || hi != 0) && finite(lo) && finite(hi):
		lo, hi = widen(lo, hi)
	default:
		values := []float64{also}
		for _, p := range pts {
			values = append(values, p.Value)
		}
		lo, hi = axisRange(nil, values, a.floor)
	}
	a.s = scale{lo, hi, top, h - bottom}
	a.x0, a.x1 = 8, w-84
	return a
}

// x is the px of slot k, counted from the left.
func (a *averages) x(k int) float64 {
	return a.x0 + 14 + float64(k)*(a.x1-a.x0-28)/float64(max(a.slots-1, 1))
}

// slot of point i; last is the slot of the newest point.
func (a *averages) slot(i, last int) int { return last - (len(a.points) - 1 - i) }

func (a *averages) draw(last int, newest bool) {
	d := a.d
	run := make([]xy, 0, len(a.points))
	for i, p := range a.points {
		if p.Restart || !finite(p.Value) {
			d.polyline("trace", run)
			run = run[:0]
		}
		if finite(p.Value) {
			y, _ := a.s.y(p.Value)
			run = append(run, xy{a.x(a.slot(i, last)), y})
		}
	}
	d.polyline("trace", run)
	for i, p := range a.points {
		if i > 0 {
			d.events(p.Before, (a.x(a.slot(i, last))+a.x(a.slot(i-1, last)))/2, a.s.bottom, eventTall)
		}
	}
	said := a.saidBeyond(last)
	for i, p := range a.points {
		if !finite(p.Value) {
			continue
		}
		x := a.x(a.slot(i, last))
		y, inside := a.s.y(p.Value)
		if newest && i == len(a.points)-1 {
			d.circle("dot newest", x, y, stationR*1.6)
		} else {
			d.circle("dot", x, y, stationR)
		}
		off := stationR + 4
		switch p.Mark {
		case SignalMark:
			d.diamond("ring", x, y, stationR*3.4)
			off = stationR*3.4 + 4
		case HoldMark:
			d.octagon("ring-hold", x, y, stationR*3.2)
			off = stationR*3.2 + 4
		}
		if !inside {
			up := p.Value > a.s.hi
			if up {
				off = -off
			}
			d.chevron(x, y-off, up)
			if left, ok := said[i]; ok {
				d.text("beyond-value", left-stationR*3.4-4, y+5, p.Text, end)
			}
		}
	}
}

// beyondWidth is the room that the value of a point beyond the axis takes.
const beyondWidth = 110

// saidBeyond chooses whose values are written of the points beyond the axis: of points
// so near to one another that their values would lie over one another only the last,
// to the left of them all. It returns that place by the index of the point.
func (a *averages) saidBeyond(last int) map[int]float64 {
	said := make(map[int]float64)
	before := map[bool]int{true: -1, false: -1} // the last point beyond, above and below
	for i, p := range a.points {
		if !finite(p.Value) {
			continue
		}
		if _, inside := a.s.y(p.Value); inside {
			continue
		}
		up := p.Value > a.s.hi
		left := a.x(a.slot(i, last))
		if b := before[up]; b >= 0 && left-a.x(a.slot(b, last)) < beyondWidth {
			left = said[b]
			delete(said, b)
		}
		said[i], before[up] = left, i
	}
	return said
}

func (a *averages) band() {
	a.d.band([]stretch{{a.x0, a.x1, a.limits}}, a.s, a.floor)
	labels := limitLabels(a.limits, a.s, Words{})
	for i := range labels {
		labels[i].y++
	}
	a.d.endLabels(a.x1+10, labels, 18)
}

func tail(p []StationPoint, n int) []StationPoint {
	if len(p) > n {
		return p[len(p)-n:]
	}
	return p
}

// scaleData writes what a script needs to place a value: data-lo and data-hi in
// the unit of the characteristic, data-top and data-bottom in the drawing's px.
func (d *builder) scaleData(s scale) {
	for _, v := range [...]struct {
		name string
		v    float64
	}{{"data-lo", s.lo}, {"data-hi", s.hi}, {"data-top", s.top}, {"data-bottom", s.bottom}} {
		d.exact(v.name, v.v)
	}
}

// exact writes a finite number with all its digits, for a script and not for a
// coordinate; an absent one is left out.
func (d *builder) exact(name string, v float64) {
	if !finite(v) {
		return
	}
	d.raw(" ")
	d.raw(name)
	d.raw(`="`)
	d.b = strconv.AppendFloat(d.b, v, 'g', -1, 64)
	d.raw(`"`)
}

// SVG returns the drawing.
func (f *Falls) SVG() string { return drawn(f.AppendSVG) }

// AppendSVG appends the drawing to b.
func (f *Falls) AppendSVG(b []byte) []byte {
	w, h := size(f.W, 352), size(f.H, 388)
	d := &builder{b}
	words := f.Words.filled()
	pts := tail(f.Points, FallsLength)
	a := newAverages(d, w, h, 16, 38, FallsLength+1, pts, f.Limits, f.Floor, f.Lo, f.Hi, f.Now)
	d.begin("chart falls-chart", ident(f.ID), "img", f.Label, w, h)
	d.raw(` data-falls-chart=""`)
	d.scaleData(a.s)
	if finite(f.Limits.Centre) {
		d.exact("data-upper", f.Limits.Upper)
		d.exact("data-lower", f.Limits.Lower)
	}
	d.raw(">")
	a.band()
	a.draw(FallsLength-1, false)
	d.events(f.After, (a.x(FallsLength-1)+a.x(FallsLength))/2, a.s.bottom, eventTall)
	a.provisional(f.Now)
	if len(pts) > 0 {
		const room = 80 // for a time, and half of the word for now in the longest language
		if x := a.x(a.slot(0, FallsLength-1)) - 6; a.x(FallsLength)-x >= room {
			d.text("tick", x, h-8, pts[0].Time, start)
		}
	}
	d.text("tick strong", a.x(FallsLength), h-8, words.Now, middle)
	d.raw("</svg>")
	return d.b
}

// provisional is the hollow dot, its dashed link and the two chevrons for a
// value beyond the axis. All are always there; display says which are seen.
func (a *averages) provisional(now float64) {
	d := a.d
	shown := finite(now)
	v := now
	if !shown {
		v = a.s.lo/2 + a.s.hi/2
	}
	y, inside := a.s.y(v)
	x := a.x(FallsLength)
	d.raw(`<g class="now" data-falls-now=""`)
	d.hide(!shown)
	d.raw(">")
	if n := len(a.points); n > 0 && finite(a.points[n-1].Value) {
		last, _ := a.s.y(a.points[n-1].Value)
		d.line("trace faint", a.x(FallsLength-1), last, x, y)
	}
	d.circle("dot provisional", x, y, stationR*2)
	d.raw(`<g data-falls-beyond="up"`)
	d.hide(inside || v < a.s.lo)
	d.raw(">")
	d.chevron(x, a.s.top+15, true)
	d.raw(`</g><g data-falls-beyond="down"`)
	d.hide(inside || v > a.s.hi)
	d.raw(">")
	d.chevron(x, a.s.bottom-15, false)
	d.raw("</g></g>")
}

func (d *builder) hide(yes bool) {
	if yes {
		d.raw(` display="none"`)
	}
}

// SVG returns the drawing.
func (v *Verdict) SVG() string { return drawn(v.AppendSVG) }

// AppendSVG appends the drawing to b.
func (v *Verdict) AppendSVG(b []byte) []byte {
	w, h := size(v.W, 540), size(v.H, 318)
	d := &builder{b}
	id := ident(v.ID)
	pts := tail(v.Points, VerdictLength)
	top := 16.0
	if v.Signal != "" {
		top = 54
	}
	a := newAverages(d, w, h, top, 38, VerdictLength, pts, v.Limits, v.Floor, v.Lo, v.Hi, math.NaN())
	d.begin("chart verdict-chart", id, "img", v.Label, w, h)
	d.raw(">")
	last := VerdictLength - 1
	reach := v.Reach > 0 && len(pts) > 1
	if reach {
		d.hatch(id+"-reach", 9)
	}
	a.band()
	from := last
	if reach {
		from = max(last-v.Reach, last-len(pts)+1)
		x1, x2 := a.x(from), a.x(last)
		d.hatched("reach", x1, a.s.top, x2-x1, a.s.bottom-a.s.top, id+"-reach")
		d.line("reach-edge", x1, a.s.top, x1, a.s.bottom)
	}
	a.draw(last, true)
	d.events(v.After, min(a.x(last)+14, a.x1), a.s.bottom, eventTall)
	if n := len(pts); v.Signal != "" && n > 0 && finite(pts[n-1].Value) {
		y, _ := a.s.y(pts[n-1].Value)
		f := pennant{x: a.x(last), y: y, clear: stationR * 3.4, open: true, shown: true, left: true}
		f.text = shorten(v.Signal, flagText+1.5, f.x-flagPadding)
		f.width = flagPadding + textWidth(f.text, flagText+1.5)
		d.drawFlag(&f, nil, 8)
	}
	a.times(last, from)
	d.raw("</svg>")
	return d.b
}

// times names the first, the reach's and the newest point where they have room.
func (a *averages) times(last, reach int) {
	free := a.x1 + 60
	for k, slot := range [...]int{last, reach, last - len(a.points) + 1} {
		i := slot - (last - len(a.points) + 1)
		if i < 0 || i >= len(a.points) || k > 0 && slot == last {
			continue
		}
		s, x := a.points[i].Time, a.x(slot)
		half := textWidth(s, 16) / 2
		if x-half < 2 {
			x = half + 2
		}
		if x+half+8 < free {
			a.d.text("tick", x, a.h-8, s, middle)
			free = x - half
		}
	}
}
