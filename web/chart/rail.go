package chart

import (
	"math"
	"slices"
	"strconv"
)

// Rail shows single readings as a histogram on their own scale, against
// specification and target: the only place beside Strip where specification
// limits stand. Readings within the reach of a matter are hatched.
type Rail struct {
	ID    string
	Label string // "Single readings against specification; none outside"
	W, H  float64

	Name, Sub string    // "Single readings", "125 since Wed 16:12"
	Readings  []float64 // outside the reach
	Suspect   []float64 // within it
	Step      float64   // the last digit of a reading, 0.001; bars are a multiple of it
	Decimals  int
	Spec      Spec

	StableText, SuspectText string // legend: "stable stretch", "within the reach, 15"
	Words                   Words
}

// Spec is a specification. NaN means absent: one side may be missing, and the
// target too.
type Spec struct {
	Lower, Target, Upper             float64
	LowerText, TargetText, UpperText string
}

// NoSpec is a characteristic without a specification.
func NoSpec() Spec { return Spec{Lower: math.NaN(), Target: math.NaN(), Upper: math.NaN()} }

// span is the axis that a specification wants: both limits and a margin, or
// what the readings need where there is no limit.
func (sp Spec) span(values []float64) (lo, hi float64) {
	hasLo, hasUp := finite(sp.Lower), finite(sp.Upper)
	lo, hi = middleOf(values)
	if hasLo && hasUp && sp.Lower < sp.Upper {
		size := sp.Upper - sp.Lower
		low, up := sp.Lower-0.07*size, sp.Upper+0.07*size
		for _, v := range values {
			if finite(v) {
				low = min(low, max(v-0.02*size, sp.Lower-0.3*size))
				up = max(up, min(v+0.02*size, sp.Upper+0.3*size))
			}
		}
		return widen(low, up)
	}
	for _, v := range [...]float64{sp.Lower, sp.Target, sp.Upper} {
		if finite(v) {
			if len(values) == 0 {
				lo, hi = min(v, sp.or(v)), max(v, sp.or(v))
			}
			lo, hi = min(lo, v), max(hi, v)
		}
	}
	lo, hi = widen(lo, hi)
	size := hi/2 - lo/2
	return widen(lo-0.16*size, hi+0.16*size)
}

func (sp Spec) or(v float64) float64 {
	if finite(sp.Target) {
		return sp.Target
	}
	return v
}

// bin is a bar: its count within and outside the reach.
type bin struct{ stable, suspect int }

const mostBars = 34

// bars is a histogram in whole digits: bar j holds the readings whose digit is
// m·j to m·j+m-1. Whole numbers keep a reading from falling beside its bar
// through the last bit of a division.
type bars struct {
	step         float64 // one digit
	m            int64   // digits a bar
	at           map[int64]bin
	below, above bin // beyond the axis
}

func (b *bars) middle(j int64) float64 { return (float64(b.m*j) + float64(b.m-1)/2) * b.step }

func (r *Rail) count(s scale) *bars {
	b := &bars{step: r.Step, m: 1, at: make(map[int64]bin)}
	far := max(math.Abs(s.lo), math.Abs(s.hi))
	if !finite(b.step) || b.step <= 0 || far/b.step > 1e15 {
		b.step = max((s.hi-s.lo)/mostBars, far/1e12)
	}
	for k := 0; (s.hi-s.lo)/b.step/float64(b.m) > mostBars && k < 45; k++ {
		b.m = [...]int64{1, 2, 5}[k%3] * int64(math.Pow10(k/3))
	}
	add := func(v float64, suspect bool) {
		if !finite(v) {
			return
		}
		n := &b.below
		var at bin
		j := int64(0)
		inside := v >= s.lo && v <= s.hi
		if inside {
			u := int64(math.Round(v / b.step))
			j = u / b.m
			if u%b.m < 0 {
				j--
			}
			at = b.at[j]
			n = &at
		} else if v > s.hi {
			n = &b.above
		}
		if suspect {
			n.suspect++
		} else {
			n.stable++
		}
		if inside {
			b.at[j] = at
		}
	}
	for _, v := range r.Readings {
		add(v, false)
	}
	for _, v := range r.Suspect {
		add(v, true)
	}
	return b
}

// SVG returns the drawing.
func (r *Rail) SVG() string { return drawn(r.AppendSVG) }

// AppendSVG appends the drawing to b.
func (r *Rail) AppendSVG(b []byte) []byte {
	w, h := size(r.W, 214), size(r.H, 538)
	words := r.Words.filled()
	all := make([]float64, 0, len(r.Readings)+len(r.Suspect))
	all = append(append(all, r.Readings...), r.Suspect...)
	lo, hi := r.Spec.span(all)
	s := scale{lo, hi, 74, h - 92}
	x := 64.0
	id := ident(r.ID)
	d := &builder{b}
	d.begin("chart rail", id, "img", r.Label, w, h)
	d.raw(">")
	if len(r.Suspect) > 0 {
		d.hatch(id+"-reach", 6)
	}
	d.text("panel-name", 0, 24, r.Name, start)
	d.text("tick", 0, 40, r.Sub, start)
	top, bottom := s.top, s.bottom
	if finite(r.Spec.Upper) {
		top = s.at(r.Spec.Upper)
	}
	if finite(r.Spec.Lower) {
		bottom = s.at(r.Spec.Lower)
	}
	if finite(r.Spec.Lower) || finite(r.Spec.Upper) {
		d.rect("span", x, min(top, bottom), w-x, math.Abs(bottom-top))
	}
	r.bars(d, s, x, w, id+"-reach")
	r.spec(d, s, x, w, words)
	y := h - 34
	if r.StableText != "" {
		d.rect("hist", 0, y-11, 14, 12)
		d.text("tick", 20, y, r.StableText, start)
	}
	if len(r.Suspect) > 0 {
		d.hatched("hist-reach", 0, y+9, 14, 12, id+"-reach")
		d.text("tick", 20, y+20, r.SuspectText, start)
	}
	d.raw("</svg>")
	return d.b
}

func (r *Rail) bars(d *builder, s scale, x, w float64, pattern string) {
	b := r.count(s)
	most := 1
	order := make([]int64, 0, len(b.at))
	for j, n := range b.at {
		order = append(order, j)
		most = max(most, n.stable+n.suspect)
	}
	slices.Sort(order)
	unit := (w - x - 14) / float64(most)
	height := max((s.bottom-s.top)*(b.step*float64(b.m)/(s.hi-s.lo)), 2)
	for _, j := range order {
		n := b.at[j]
		y := s.at(b.middle(j)) - height/2 + 1
		if n.stable > 0 {
			d.rect("hist", x, y, float64(n.stable)*unit, max(height-2, 1))
		}
		if n.suspect > 0 {
			d.hatched("hist-reach", x+float64(n.stable)*unit, y, float64(n.suspect)*unit, max(height-2, 1), pattern)
		}
	}
	if n := b.above.stable + b.above.suspect; n > 0 {
		d.chevron(x+12, s.top-14, true)
		d.text("beyond-value", x+24, s.top-7, strconv.Itoa(n), start)
	}
	if n := b.below.stable + b.below.suspect; n > 0 {
		d.chevron(x+12, s.bottom+14, false)
		d.text("beyond-value", x+24, s.bottom+16, strconv.Itoa(n), start)
	}
}

func (r *Rail) spec(d *builder, s scale, x, w float64, words Words) {
	sp := r.Spec
	if finite(sp.Upper) {
		y := s.at(sp.Upper)
		d.line("spec", x-6, y, w, y)
		d.text("limit-value", x-10, y+4.5, sp.UpperText, end)
		d.text("limit-name", w, y-7, words.UpperSpec, end)
	}
	if finite(sp.Lower) {
		y := s.at(sp.Lower)
		d.line("spec", x-6, y, w, y)
		d.text("limit-value", x-10, y+4.5, sp.LowerText, end)
		d.text("limit-name", w, y+16, words.LowerSpec, end)
	}
	if finite(sp.Target) {
		y := s.at(sp.Target)
		d.line("target", x-6, y, w, y)
		near := finite(sp.Upper) && math.Abs(y-s.at(sp.Upper)) < 28 || finite(sp.Lower) && math.Abs(y-s.at(sp.Lower)) < 28
		if !near {
			d.text("limit-value", x-10, y+4.5, sp.TargetText, end)
			d.text("limit-name", x-10, y+18, words.Target, end)
		}
	}
}

// size returns v, or a fallback where v is no usable extent.
func size(v, fallback float64) float64 {
	if !finite(v) || v < 60 || v > 20000 {
		return fallback
	}
	return v
}
