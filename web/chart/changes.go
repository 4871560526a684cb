package chart

import "sort"

// placed is a change with its px on the time axis.
type placed struct {
	c *Change
	x float64
}

// Below arrowRoom px an arrow, block arrows would run into one another: then small ones
// stand in two rows, those up above those down, without leader and size.
const (
	arrowRoom = 19.0
	smallRoom = 8.0
)

// rugFrom is how many arrows make a rug: then each is a hairline, those up above those down,
// and what else is on the axis hangs below it.
const rugFrom = 80

// changes draws what was done on the time axis: arrows, posts, restart marks.
func (f *frame) changes(d *builder) {
	d.line("axis", f.x0, f.axis, f.x1, f.axis)
	marks := make([]placed, 0, len(f.c.Changes))
	for i := range f.c.Changes {
		c := &f.c.Changes[i]
		marks = append(marks, placed{c, f.timeX(c)})
	}
	arrows := f.c.arrows()
	sort.SliceStable(marks, func(i, j int) bool { return marks[i].x < marks[j].x })
	switch {
	case f.c.IsRug():
		f.rug(d, marks)
		return
	case f.crowded(marks, arrows):
		marks = f.smallArrows(d, marks)
	}
	for i := range marks { // a post has no leader, so it may give way a little
		if marks[i].c.Kind != Post || i+1 == len(marks) {
			continue
		}
		if short := 11 - (marks[i+1].x - marks[i].x); short > 0 && marks[i+1].c.Kind != Post {
			marks[i].x = max(marks[i].x-short, f.x0)
		}
	}
	taken := f.x0 - 40 // right end of what stands on the axis so far
	for i, m := range marks {
		d.raw(`<g class="change">`)
		d.title(m.c.Title)
		next := f.x1 + right
		if i+1 < len(marks) {
			next = marks[i+1].x - 9
		}
		switch m.c.Kind {
		case Post:
			d.line("post", m.x, f.axis-16, m.x, f.axis)
			d.rect("post-head", m.x-6, f.axis-20, 6, 8)
			taken = f.label(d, m.c.Text, m.x, 6, max(taken, m.x-12), next)
		case Restart:
			d.line("restart", m.x-2, f.axis-11, m.x-2, f.axis+5)
			d.line("restart", m.x+2, f.axis-11, m.x+2, f.axis+5)
			taken = max(taken, m.x+5)
		default:
			d.line("leader", m.x, f.loc.top, m.x, f.axis-24)
			d.arrow(arrowClass(m.c), m.x, f.axis, m.c.Kind == Up)
			taken = f.label(d, m.c.Text, m.x, 12, max(taken, m.x-9), next)
		}
		d.raw("</g>")
	}
}

func (c *Control) arrows() (n int) {
	for i := range c.Changes {
		if c.Changes[i].Kind == Up || c.Changes[i].Kind == Down {
			n++
		}
	}
	return n
}

// IsRug reports whether so much was adjusted that each adjustment is a line on the axis and
// no arrow.
func (c *Control) IsRug() bool { return c.arrows() >= rugFrom }

func arrowClass(c *Change) string {
	if c.Prompted {
		return "arrow filled"
	}
	return "arrow hollow"
}

// crowded reports whether more than a few of the block arrows would touch.
func (f *frame) crowded(marks []placed, arrows int) bool {
	touching, last := 0, f.x0-100
	for _, m := range marks {
		if m.c.Kind != Up && m.c.Kind != Down {
			continue
		}
		if m.x-last < arrowRoom-3 {
			touching++
		}
		last = m.x
	}
	return touching > 2 && touching*4 > arrows || float64(arrows)*arrowRoom > f.x1-f.x0
}

// smallArrows draws the arrows of a crowded axis and returns what is not drawn yet. Of
// neighbours that would cover one another, and are of one sort, one stands for all.
func (f *frame) smallArrows(d *builder, marks []placed) []placed {
	var rest []placed
	type sort struct{ up, prompted bool }
	last := map[sort]float64{}
	for _, m := range marks {
		if m.c.Kind != Up && m.c.Kind != Down {
			rest = append(rest, m)
			continue
		}
		s := sort{m.c.Kind == Up, m.c.Prompted}
		if x, drawn := last[s]; drawn && m.x-x < smallRoom {
			continue
		}
		last[s] = m.x
		d.raw(`<g class="change">`)
		d.title(m.c.Title)
		base, tip := f.axis-15, f.axis-26
		if !s.up {
			base, tip = f.axis-13, f.axis-2
		}
		d.polygon(arrowClass(m.c), xy{m.x - 3.6, base}, xy{m.x + 3.6, base}, xy{m.x, tip})
		d.raw("</g>")
	}
	return rest
}

// rug draws every change as a tick that says on hover what it is.
func (f *frame) rug(d *builder, marks []placed) {
	for _, m := range marks {
		from, to, class := f.axis+1, f.axis+6, "rug other"
		switch m.c.Kind {
		case Up, Down:
			if from, to, class = f.axis-13, f.axis-4, "rug"; m.c.Kind == Up {
				from, to = f.axis-25, f.axis-16
			}
			if m.c.Prompted {
				class = "rug prompted"
			}
		}
		d.raw(`<g class="change">`)
		d.title(m.c.Title)
		d.line(class, m.x, from, m.x, to)
		d.raw("</g>")
	}
}

// label writes the size of a change to the right of its mark, or to the left,
// or not at all if both sides are taken; it returns the new taken end.
func (f *frame) label(d *builder, s string, x, off, taken, next float64) float64 {
	w := textWidth(s, 12.5)
	switch {
	case s == "":
		return x + off
	case x+off+w < next:
		d.text("change-value", x+off, f.axis-8, s, start)
		return x + off + w
	case x-off-w > taken && taken < x-off:
		d.text("change-value", x-off, f.axis-8, s, end)
	}
	return x + off
}

// arrow is a block arrow standing on the time axis.
func (d *builder) arrow(class string, x, base float64, up bool) {
	head, tail := base-22, base-1
	s := 10.0
	if !up {
		head, tail, s = tail, head, -10
	}
	d.polygon(class, xy{x, head}, xy{x + 7.5, head + s}, xy{x + 2.8, head + s}, xy{x + 2.8, tail},
		xy{x - 2.8, tail}, xy{x - 2.8, head + s}, xy{x - 7.5, head + s})
}
