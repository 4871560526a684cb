package chart

// pennant is a flag on its pole: what it says, where its point is, and, after
// layout, where it hangs.
type pennant struct {
	point     int
	x, y      float64 // the pole's line and the point it rises from
	clear     float64 // px between point and pole: the diamond's radius
	text, sub string
	open      bool
	newest    bool // pulses once

	shown bool
	level int // 0 is the top row
	left  bool
	width float64
}

const (
	flagLine    = 24.0 // height of a flag with one line
	flagTwo     = 42.0 // and with two
	flagGap     = 5.0  // between rows
	flagText    = 13.5
	flagSub     = 13.0
	poleRoom    = 4.0 // a pole keeps this far from a flag it passes
	maxLevels   = 4
	maxFlags    = 24 // flags of one panel; later ones keep their diamond
	flagPadding = 22.0
)

func (f *pennant) height() float64 {
	if f.sub != "" {
		return flagTwo
	}
	return flagLine
}

func (f *pennant) extent() (from, to float64) {
	if f.left {
		return f.x - f.width, f.x
	}
	return f.x, f.x + f.width
}

// crosses says whether two placed flags, poles included, touch. A pole runs
// from its flag's row down to the point, so it passes every lower row.
func (f *pennant) crosses(g *pennant) bool {
	f1, f2 := f.extent()
	g1, g2 := g.extent()
	if f.level == g.level {
		return f1 < g2+poleRoom && g1 < f2+poleRoom
	}
	high, low, l1, l2 := f, g, g1, g2
	if g.level < f.level {
		high, low, l1, l2 = g, f, f1, f2
	}
	if high.x == low.x { // one point, several rules: the flags share a pole
		return false
	}
	return high.x > l1-poleRoom && high.x < l2+poleRoom
}

// layoutFlags hangs the flags into rows so that none overlaps another and no
// pole crosses one. Open signals are placed first, then the newest first, from
// the top row down; each flies to the left, or to the right where the left has
// no room between from and to. A flag without a place keeps its diamond only:
// its words stay in the point's title and in the table. The slice is in time
// order. It returns the height of each used row.
func layoutFlags(flags []pennant, from, to float64) []float64 {
	order := make([]*pennant, 0, len(flags))
	for _, open := range [...]bool{true, false} {
		for i := len(flags) - 1; i >= 0; i-- {
			if flags[i].open == open && flags[i].text != "" {
				order = append(order, &flags[i])
			}
		}
	}
	var placed []*pennant
	for _, f := range order {
		if len(placed) == maxFlags {
			break
		}
		room := 0.62 * (to - from)
		f.text = shorten(f.text, flagText, room)
		f.sub = shorten(f.sub, flagSub, room)
		f.width = flagPadding + max(textWidth(f.text, flagText), textWidth(f.sub, flagSub))
		if place(f, placed, from, to) {
			placed = append(placed, f)
		}
	}
	return rowHeights(placed)
}

func place(f *pennant, placed []*pennant, from, to float64) bool {
	for f.level = 0; f.level < maxLevels; f.level++ {
		for _, f.left = range [...]bool{true, false} {
			a, b := f.extent()
			if a < from || b > to {
				continue
			}
			free := true
			for _, g := range placed {
				if f.crosses(g) {
					free = false
					break
				}
			}
			if free {
				f.shown = true
				return true
			}
		}
	}
	return false
}

func rowHeights(placed []*pennant) []float64 {
	var rows []float64
	for _, f := range placed {
		for len(rows) <= f.level {
			rows = append(rows, 0)
		}
		rows[f.level] = max(rows[f.level], f.height())
	}
	for i, h := range rows {
		if h == 0 { // a row between two used ones
			rows[i] = flagLine
		}
	}
	return rows
}

func rowsHeight(rows []float64) float64 {
	h := 0.0
	for _, r := range rows {
		h += r + flagGap
	}
	return h
}

// drawFlags draws poles, diamonds and flags; top is the px of the first row.
func (d *builder) drawFlags(flags []pennant, rows []float64, top float64) {
	for _, open := range [...]bool{false, true} { // open ones lie on top
		for i := range flags {
			if flags[i].open == open {
				d.drawFlag(&flags[i], rows, top)
			}
		}
	}
}

func (d *builder) drawFlag(f *pennant, rows []float64, top float64) {
	state, ring := "past", "ring past"
	if f.open {
		state, ring = "open", "ring"
	}
	y := top + rowsHeight(rows[:min(f.level, len(rows))])
	if f.shown {
		d.line("pole "+state, f.x, f.y-f.clear, f.x, y)
	}
	if f.newest {
		d.raw(`<g class="is-new">`)
	}
	d.diamond(ring, f.x, f.y, f.clear)
	if f.newest {
		d.raw("</g>")
	}
	if !f.shown {
		return
	}
	h, s, a := f.height(), 1.0, start
	if f.left {
		s, a = -1, end
	}
	d.polygon("pennant "+state, xy{f.x, y}, xy{f.x + s*f.width, y}, xy{f.x + s*(f.width-8), y + h/2},
		xy{f.x + s*f.width, y + h}, xy{f.x, y + h})
	d.text("pennant-text "+state, f.x+s*8, y+16.5, f.text, a)
	d.text("pennant-sub "+state, f.x+s*8, y+34, f.sub, a)
}
