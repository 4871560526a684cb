package chart

import (
	"math"
	"slices"
	"time"
)

// Control is the engineer's control chart: a panel of the location statistic
// above, one of the dispersion statistic below, on one time axis, with signals,
// reach, changes and revisions. A chart of one statistic (a proportion, a count,
// T-squared) leaves Dispersion.Name and every dispersion value empty.
type Control struct {
	ID    string // unique on the page
	Label string // one sentence: what it shows, how many points, what signals
	W     float64
	// H1 and H2 are the heights of the two panels in px; zero chooses them. The
	// whole height follows from the rows that flags need.
	H1, H2 float64

	Location   Panel
	Dispersion Panel
	Points     []Point
	// Other is a second series beside the location, one value a point, such as how it
	// would have been; NaN is missing, nil is none. OtherName is its column in the table.
	Other     []float64
	OtherName string
	Segments  []Segment
	Signals   []Signal
	Reaches   []Reach
	Changes   []Change

	Zone      *time.Location // of the time axis; nil is UTC
	Shifts    []Tick         // shift beginnings, used where they fit
	TickLabel func(time.Time, Unit) string
	// Ordinal numbers the points 1, 2, 3 instead of showing time (limit study).
	// It is also used when a point has no time.
	Ordinal bool
	Words   Words
}

// Panel names one statistic and its axis.
type Panel struct {
	Name     string // "Averages of 5"
	One      string // one value of it, in a sentence: "average"
	Unit     string // a quiet line under the name: "mm"
	Decimals int    // of values the chart itself must print: thinned stretches
	// Lo and Hi fix the axis; both zero chooses it from limits and values.
	Lo, Hi float64
	// Floor says that no value can be below zero, so that neither axis nor band
	// goes there.
	Floor bool
	// Ghosts are limits for comparison, drawn as short marks at the left end.
	Ghosts []Ghost
}

// Ghost is a limit of another revision.
type Ghost struct {
	Value float64
	Text  string
}

// Point is one subgroup. A NaN value is missing; the line breaks there.
type Point struct {
	At                   time.Time
	Location, Dispersion float64

	When           string // "12:12 Thursday"
	LocationText   string // "14.9932 mm"
	DispersionText string // "0.008 mm"
	Readings       string // "14.994 14.989 14.996"
	Person         string
	Note           string // what was done: "adjusted +0.002 mm"

	Excluded string // letter of a point left out of a limit study
	Outside  bool   // a reading was outside specification
	Restart  bool   // the line breaks before this point
}

// Segment is a stretch of the axis with one set of limits, from a point on to
// the next segment. Segments are in order; points before the first have none.
type Segment struct {
	From                 int
	Location, Dispersion Limits
	Notch                string // revision number; empty where limits only step with the subgroup size
	Note                 string // "revision 3, frozen Tue 16:40"
}

// Signal is a rule that fired at a point.
type Signal struct {
	Point      int
	Dispersion bool // on the dispersion panel
	Open       bool
	Newest     bool   // pulses once; none under reduced motion
	Text       string // the rule in words, or the cause found
	Sub        string // second line: size and start
}

// Reach is the stretch that is suspect: from the last point before the change
// up to the signal.
type Reach struct {
	From, To int
	Text     string // "Reach: since 10:42, about 340 parts"
}

// ChangeKind says how a change is drawn.
type ChangeKind int

// Kinds of change.
const (
	Post    ChangeKind = iota // tool, material lot, maintenance, setting
	Up                        // adjustment with a positive size
	Down                      // adjustment with a negative size
	Restart                   // judging starts afresh: a fix, another part
)

// Change is something done to the process.
type Change struct {
	At       time.Time
	Kind     ChangeKind
	Prompted bool   // an adjustment made while a matter was open
	Text     string // signed size, a word for a post, or nothing
	Title    string // "10:56, adjusted +0.002 mm, no matter open"
}

// Sizes of the control chart.
const (
	defaultW = 1096.0
	left     = 62.0
	right    = 74.0
	inset    = 8.0
	locH     = 262.0
	dispH    = 98.0
	lane     = 38.0 // between the lowest panel and the axis: arrows stand here
	foot     = 28.0
)

// frame is the laid-out chart: everything that drawing needs and several parts
// share.
type frame struct {
	c        *Control
	w        Words
	n        int
	x0, x1   float64 // ends of the plot
	step     float64
	two      bool
	loc, dis scale
	axis     float64
	height   float64
	segs     []Segment
	ordinal  bool
	thin     bool
	r1, r2   float64 // dot radii

	flags1, flags2 []pennant
	rows1, rows2   []float64
	gap            float64
}

func (f *frame) x(i int) float64 {
	if f.n == 1 {
		return (f.x0 + f.x1) / 2
	}
	return f.x0 + inset + float64(i)*f.step
}

// floor of a panel as a number.
func (p Panel) floor() float64 {
	if p.Floor {
		return 0
	}
	return math.NaN()
}

// SVG returns the drawing.
func (c *Control) SVG() string { return drawn(c.AppendSVG) }

// Below these distances between points dots shrink, and then give way to an
// envelope of the least and greatest value of a few px.
const (
	roomyStep = 6.0
	thinStep  = 3.0
)

// layout decides all geometry.
func (c *Control) layout() *frame {
	f := &frame{c: c, w: c.Words.filled(), n: len(c.Points)}
	w := c.W
	if !finite(w) || w < 240 {
		w = defaultW
	}
	f.x0, f.x1 = left, w-right
	f.step = (f.x1 - f.x0 - 2*inset) / float64(max(f.n-1, 1))
	f.two = c.Dispersion.Name != ""
	f.segs = c.orderedSegments()
	f.ordinal = c.Ordinal
	for i := range c.Points {
		f.ordinal = f.ordinal || c.Points[i].At.IsZero()
	}
	switch {
	case f.n < 2 || f.step >= 2*roomyStep:
		f.r1, f.r2 = 3.2, 2.5
	case f.step >= roomyStep:
		f.r1, f.r2 = 2.8, 2.2
	case f.step >= thinStep:
		f.r1, f.r2 = 1.7, 1.5
	default:
		f.thin, f.r1, f.r2 = true, 2.6, 2.2
	}

	lims := make([]Limits, len(f.segs))
	vals := make([]float64, f.n)
	pick := func(of func(*Segment) Limits, val func(*Point) float64) ([]Limits, []float64) {
		for i := range f.segs {
			lims[i] = of(&f.segs[i])
		}
		for i := range c.Points {
			vals[i] = val(&c.Points[i])
		}
		return lims, vals
	}
	h1, h2 := c.H1, c.H2
	if !finite(h1) || h1 < 60 {
		h1 = locH
	}
	if !finite(h2) || h2 < 40 {
		h2 = dispH
	}

	// Vertical order: flags, notches, location, flags of dispersion, dispersion, lane.
	locLimits, locValues := pick(func(s *Segment) Limits { return s.Location }, func(p *Point) float64 { return p.Location })
	f.loc.lo, f.loc.hi = c.Location.span(locLimits, append(slices.Clip(locValues), c.Other...))
	if f.two {
		f.dis.lo, f.dis.hi = c.Dispersion.span(pick(
			func(s *Segment) Limits { return s.Dispersion }, func(p *Point) float64 { return p.Dispersion }))
	}
	nameEnd := max(textWidth(c.Location.Name, 15), textWidth(c.Location.Unit, 12.5)) + 14
	f.flags1 = f.signalled(false)
	f.rows1 = layoutFlags(f.flags1, max(nameEnd, 0), w)
	t1 := max(58, 6+rowsHeight(f.rows1)+20)
	f.loc.top, f.loc.bottom = t1, t1+h1
	f.axis = f.loc.bottom + lane
	f.gap = 38
	if f.two {
		f.flags2 = f.signalled(true)
		f.rows2 = layoutFlags(f.flags2, textWidth(c.Dispersion.Name, 15)+14, w)
		if len(f.rows2) > 0 {
			f.gap = 10 + rowsHeight(f.rows2) + 18
		}
		f.dis.top = f.loc.bottom + f.gap
		f.dis.bottom = f.dis.top + h2
		f.axis = f.dis.bottom + lane
	}
	f.height = f.axis + foot
	for i := range f.flags1 {
		f.flags1[i].y, _ = f.loc.y(c.Points[f.flags1[i].point].Location)
	}
	for i := range f.flags2 {
		f.flags2[i].y, _ = f.dis.y(c.Points[f.flags2[i].point].Dispersion)
	}
	return f
}

func (p Panel) span(lims []Limits, vals []float64) (lo, hi float64) {
	if (p.Lo != 0 || p.Hi != 0) && finite(p.Lo) && finite(p.Hi) {
		return widen(p.Lo, p.Hi)
	}
	for _, g := range p.Ghosts {
		if finite(g.Value) {
			lims = append(lims, Limits{Lower: math.NaN(), Centre: g.Value, Upper: math.NaN()})
		}
	}
	return axisRange(lims, vals, p.floor())
}

// orderedSegments drops what cannot be drawn: segments out of range or order.
func (c *Control) orderedSegments() []Segment {
	out := make([]Segment, 0, len(c.Segments))
	for _, s := range c.Segments {
		if s.From < 0 {
			s.From = 0
		}
		if s.From >= len(c.Points) || len(out) > 0 && s.From <= out[len(out)-1].From {
			continue
		}
		out = append(out, s)
	}
	return out
}
