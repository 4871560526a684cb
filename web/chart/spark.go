package chart

import "math"

// Mark is the ring around a point.
type Mark int

// Marks.
const (
	NoMark     Mark = iota
	SignalMark      // amber diamond
	HoldMark        // red octagon
)

// Spark is the small chart of a board card: the last points in their band. It
// has no figures; the card says the value beside it.
type Spark struct {
	ID     string
	Label  string
	W, H   float64
	Points []SparkPoint
	Limits Limits
	Floor  bool // no value can be below zero
	// Reach, if positive, hatches from that many points before the newest.
	Reach   int
	Stopped bool    // the machine stands still: the chart recedes
	After   []Event // done since the newest point
}

// SparkPoint is one value. NaN is missing; the line breaks there.
type SparkPoint struct {
	Value   float64
	Restart bool // the line breaks before this point
	Mark    Mark
	Before  []Event // done between the point before and this one
}

// SparkLength is how many points a card shows.
const SparkLength = 25

// SVG returns the drawing.
func (s *Spark) SVG() string { return drawn(s.AppendSVG) }

// AppendSVG appends the drawing to b.
func (s *Spark) AppendSVG(b []byte) []byte {
	w, h := size(s.W, 322), size(s.H, 132)
	id := ident(s.ID)
	pts := s.Points
	if len(pts) > SparkLength {
		pts = pts[len(pts)-SparkLength:]
	}
	values := make([]float64, len(pts))
	for i := range pts {
		values[i] = pts[i].Value
	}
	lo, hi := sparkSpan(s.Limits, values, s.Floor)
	sc := scale{lo, hi, 4, h - 4}
	const pad, r = 14.0, 3.0
	step := (w - pad - 24) / float64(max(len(pts)-1, 1))
	x := func(i int) float64 { return pad + float64(i)*step }
	d := &builder{b}
	class := "spark"
	if s.Stopped {
		class = "spark stopped"
	}
	d.begin(class, id, "img", s.Label, w, h)
	d.raw(">")
	newest := len(pts) - 1
	for newest >= 0 && !finite(pts[newest].Value) {
		newest--
	}
	reach := s.Reach > 0 && newest > 0
	if reach {
		d.hatch(id+"-reach", 8)
	}
	floor := math.NaN()
	if s.Floor {
		floor = 0
	}
	d.band([]stretch{{0, w, s.Limits}}, sc, floor)
	if reach {
		from := x(max(newest-s.Reach, 0))
		d.hatched("reach", from, 0, x(newest)-from, h, id+"-reach")
	}
	run, dots := make([]xy, 0, len(pts)), make([]xy, 0, len(pts))
	for i, p := range pts {
		if p.Restart || !finite(p.Value) {
			d.polyline("trace", run)
			run = run[:0]
		}
		if finite(p.Value) {
			y, _ := sc.y(p.Value)
			run = append(run, xy{x(i), y})
			if i != newest {
				dots = append(dots, xy{x(i), y})
			}
		}
	}
	d.polyline("trace", run)
	d.dots(dots, r)
	for i, p := range pts {
		if !finite(p.Value) {
			continue
		}
		y, inside := sc.y(p.Value)
		if i == newest {
			d.circle("dot newest", x(i), y, r*1.75)
		}
		switch p.Mark {
		case SignalMark:
			d.diamond("ring", x(i), y, r*4.6)
		case HoldMark:
			d.octagon("ring-hold", x(i), y, r*4.4)
		}
		if !inside {
			off := r * 4.6
			if y < h/2 {
				d.chevron(x(i), y+off+4, true)
			} else {
				d.chevron(x(i), y-off-4, false)
			}
		}
	}
	for i, p := range pts {
		if i > 0 {
			d.events(p.Before, x(i)-step/2, h-2, 13)
		}
	}
	if len(pts) > 0 {
		d.events(s.After, x(len(pts)-1)+12, h-2, 13)
	}
	d.raw("</svg>")
	return d.b
}

// sparkSpan gives every card the same proportion of band to free space: four
// sigma either way where the limits are three, so that cards compare at a glance.
func sparkSpan(l Limits, values []float64, floor bool) (lo, hi float64) {
	f := math.NaN()
	if floor {
		f = 0
	}
	if !finite(l.Centre) {
		return axisRange(nil, values, f)
	}
	low, _, up, _ := l.ends(math.NaN())
	if up-low <= 0 {
		return axisRange([]Limits{l}, values, f)
	}
	return widen(l.Centre-(l.Centre-low)*4/3, l.Centre+(up-l.Centre)*4/3)
}
