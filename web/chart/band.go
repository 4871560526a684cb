package chart

import "math"

// Limits are the control limits of a stretch: numbers to draw and the words that
// stand at the right end. NaN means absent: without a centre nothing is drawn,
// without a lower or upper limit that side has no edge (the band then fades
// without one, as for ranges of small subgroups).
type Limits struct {
	Lower, Centre, Upper             float64
	LowerText, CentreText, UpperText string
}

// NoLimits is a stretch that is still learning.
func NoLimits() Limits {
	return Limits{Lower: math.NaN(), Centre: math.NaN(), Upper: math.NaN()}
}

func (l Limits) same(o Limits) bool {
	eq := func(a, b float64) bool { return a == b || !finite(a) && !finite(b) }
	return eq(l.Lower, o.Lower) && eq(l.Centre, o.Centre) && eq(l.Upper, o.Upper)
}

// ends returns the outer values of the band and whether each is a real limit.
// An absent side mirrors the other one, and stops at floor.
func (l Limits) ends(floor float64) (low float64, hasLow bool, up float64, hasUp bool) {
	low, up = l.Lower, l.Upper
	hasLow, hasUp = finite(low) && low <= l.Centre, finite(up) && up >= l.Centre
	switch {
	case hasLow && !hasUp:
		up = l.Centre + (l.Centre - low)
	case hasUp && !hasLow:
		low = l.Centre - (up - l.Centre)
	case !hasLow && !hasUp:
		low, up = l.Centre, l.Centre
	}
	if !finite(low) {
		low = l.Centre
	}
	if !finite(up) {
		up = l.Centre
	}
	if finite(floor) && !hasLow {
		low = max(low, floor)
	}
	return low, hasLow, up, hasUp
}

// stretch is a run of the time axis with one set of limits.
type stretch struct {
	x1, x2 float64
	lim    Limits
}

// band draws all stretches of a panel: three steps inwards, the firm edges, the
// centre hairline. One path a step keeps a chart with changing subgroup sizes,
// whose limits move at every point, small.
func (d *builder) band(runs []stretch, s scale, floor float64) {
	steps := [...]struct {
		class string
		part  float64
	}{{"band band-3", 1}, {"band band-2", 2.0 / 3}, {"band band-1", 1.0 / 3}}
	drawn := false
	for _, r := range runs {
		drawn = drawn || finite(r.lim.Centre)
	}
	if !drawn {
		return
	}
	for _, st := range steps {
		d.open("path", st.class)
		d.raw(` d="`)
		for _, r := range runs {
			if !finite(r.lim.Centre) {
				continue
			}
			low, hasLow, up, _ := r.lim.ends(floor)
			c := r.lim.Centre
			a, b := s.at(c+(up-c)*st.part), s.at(c-(c-low)*st.part)
			if !hasLow && finite(r.lim.Upper) { // mirrored: steps of the upper side, cut at the floor
				b = s.at(max(low, c-(up-c)*st.part))
			}
			d.raw("M")
			d.num(r.x1)
			d.raw(" ")
			d.num(a)
			d.raw("H")
			d.num(r.x2)
			d.raw("V")
			d.num(b)
			d.raw("H")
			d.num(r.x1)
			d.raw("Z")
		}
		d.raw(`"/>`)
	}
	d.levels("edge", runs, s, func(l Limits) (float64, float64) {
		low, hasLow, up, hasUp := l.ends(floor)
		if !hasLow {
			low = math.NaN()
		}
		if !hasUp {
			up = math.NaN()
		}
		return low, up
	})
	d.levels("centre", runs, s, func(l Limits) (float64, float64) { return l.Centre, math.NaN() })
}

func (d *builder) levels(class string, runs []stretch, s scale, of func(Limits) (float64, float64)) {
	d.open("path", class)
	d.raw(` d="`)
	for _, r := range runs {
		if !finite(r.lim.Centre) {
			continue
		}
		a, b := of(r.lim)
		for _, v := range [...]float64{a, b} {
			if finite(v) {
				d.raw("M")
				d.num(r.x1)
				d.raw(" ")
				d.num(s.at(v))
				d.raw("H")
				d.num(r.x2)
			}
		}
	}
	d.raw(`"/>`)
}

// endLabel is a limit's value at the right end of a panel.
type endLabel struct {
	y           float64
	value, name string
}

// endLabels writes the values of the limits in force. Names are left out when
// there is no room for them; values are pushed apart, never dropped.
func (d *builder) endLabels(x float64, labels []endLabel, line float64) {
	kept := labels[:0]
	for _, l := range labels {
		if l.value != "" {
			kept = append(kept, l)
		}
	}
	names := true
	for i := 1; i < len(kept); i++ { // callers list them from top to bottom
		if kept[i].y-kept[i-1].y < 2*line {
			names = false
		}
	}
	switch len(kept) {
	case 2:
		if short := line - (kept[1].y - kept[0].y); short > 0 {
			kept[0].y -= short / 2
			kept[1].y += short / 2
		}
	case 3:
		kept[0].y = min(kept[0].y, kept[1].y-line)
		kept[2].y = max(kept[2].y, kept[1].y+line)
	}
	for _, l := range kept {
		d.text("limit-value", x, l.y+4, l.value, start)
		if names {
			d.text("limit-name", x, l.y+4+line, l.name, start)
		}
	}
}

func limitLabels(l Limits, s scale, w Words) []endLabel {
	if !finite(l.Centre) {
		return nil
	}
	var out []endLabel
	if finite(l.Upper) {
		out = append(out, endLabel{s.at(l.Upper), l.UpperText, w.Upper})
	}
	out = append(out, endLabel{s.at(l.Centre), l.CentreText, w.Centre})
	if finite(l.Lower) {
		out = append(out, endLabel{s.at(l.Lower), l.LowerText, w.Lower})
	}
	return out
}
