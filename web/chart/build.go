package chart

import (
	"math"
	"strconv"
	"sync"
)

// builder appends SVG to a byte slice. All coordinates go through num, so that
// no other form of a number, and no NaN, can get into the markup.
type builder struct{ b []byte }

// buffers spares every drawing the growth of a large slice.
var buffers = sync.Pool{New: func() any { return new([]byte) }}

// drawn returns what a drawing appends as a string.
func drawn(appendSVG func([]byte) []byte) string {
	p := buffers.Get().(*[]byte)
	b := appendSVG((*p)[:0])
	s := string(b)
	if cap(b) < 1<<20 {
		*p = b
		buffers.Put(p)
	}
	return s
}

// farAway bounds every coordinate: far outside any drawing, and short to print.
const farAway = 99999

func (d *builder) raw(s string) { d.b = append(d.b, s...) }

// num appends v rounded to one decimal, without a trailing ".0".
func (d *builder) num(v float64) { d.b = appendNum(d.b, v) }

func appendNum(b []byte, v float64) []byte {
	switch {
	case math.IsNaN(v):
		v = 0
	case v > farAway:
		v = farAway
	case v < -farAway:
		v = -farAway
	}
	t := uint32(math.Abs(v)*10 + 0.5) // rounds half away from zero
	if t == 0 {
		return append(b, '0')
	}
	if v < 0 {
		b = append(b, '-')
	}
	whole, tenth := t/10, t%10
	switch { // most coordinates have three digits
	case whole < 10:
		b = append(b, byte('0'+whole))
	case whole < 100:
		b = append(b, byte('0'+whole/10), byte('0'+whole%10))
	case whole < 1000:
		b = append(b, byte('0'+whole/100), byte('0'+whole/10%10), byte('0'+whole%10))
	default:
		b = strconv.AppendUint(b, uint64(whole), 10)
	}
	if tenth != 0 {
		b = append(b, '.', byte('0'+tenth))
	}
	return b
}

func (d *builder) int(v int) { d.b = strconv.AppendInt(d.b, int64(v), 10) }

// special bytes need a look before they are written.
var special = func() (t [256]bool) {
	for c := range t {
		t[c] = c < 0x20 || c == '<' || c == '>' || c == '&' || c == '"' || c >= 0x7f
	}
	return t
}()

// esc appends text that is safe inside an element and inside a double-quoted
// attribute. Characters that XML 1.0 does not allow become U+FFFD.
func (d *builder) esc(s string) {
	i := 0
	for i < len(s) && !special[s[i]] {
		i++
	}
	d.b = append(d.b, s[:i]...)
	if i == len(s) {
		return
	}
	s = s[i:]
	for _, r := range s { // invalid UTF-8 arrives here as U+FFFD
		switch {
		case r == '<':
			d.raw("&lt;")
		case r == '>':
			d.raw("&gt;")
		case r == '&':
			d.raw("&amp;")
		case r == '"':
			d.raw("&#34;")
		case r == '\t' || r == '\n' || r == '\r':
			d.raw(" ")
		case r < 0x20 || r == 0xFFFE || r == 0xFFFF:
			d.raw("\uFFFD")
		default:
			d.b = append(d.b, string(r)...)
		}
	}
}

// attr appends a numeric attribute with its leading space.
func (d *builder) attr(name string, v float64) {
	d.b = append(d.b, ' ')
	d.b = append(d.b, name...)
	d.b = append(d.b, '=', '"')
	d.num(v)
	d.b = append(d.b, '"')
}

// sattr appends a text attribute, and nothing for the empty string.
func (d *builder) sattr(name, v string) {
	if v == "" {
		return
	}
	d.b = append(d.b, ' ')
	d.b = append(d.b, name...)
	d.b = append(d.b, '=', '"')
	d.esc(v)
	d.b = append(d.b, '"')
}

func (d *builder) open(tag, class string) {
	d.b = append(d.b, '<')
	d.b = append(d.b, tag...)
	d.b = append(d.b, ` class="`...)
	d.b = append(d.b, class...)
	d.b = append(d.b, '"')
}

func (d *builder) rect(class string, x, y, w, h float64) {
	d.open("rect", class)
	d.box(x, y, w, h)
	d.raw("/>")
}

// box appends x, y, width and height; a negative extent is drawn as none.
func (d *builder) box(x, y, w, h float64) {
	d.attr("x", x)
	d.attr("y", y)
	d.attr("width", max(w, 0))
	d.attr("height", max(h, 0))
}

func (d *builder) hatched(class string, x, y, w, h float64, pattern string) {
	d.open("rect", class)
	d.box(x, y, w, h)
	d.raw(` fill="url(#`)
	d.raw(pattern)
	d.raw(`)"/>`)
}

func (d *builder) line(class string, x1, y1, x2, y2 float64) {
	d.open("line", class)
	d.attr("x1", x1)
	d.attr("y1", y1)
	d.attr("x2", x2)
	d.attr("y2", y2)
	d.raw("/>")
}

func (d *builder) circle(class string, x, y, r float64) {
	d.open("circle", class)
	d.attr("cx", x)
	d.attr("cy", y)
	d.attr("r", r)
	d.raw("/>")
}

// dots draws points of one radius as one path: subpaths of no length, which the round
// caps of class "dots" make discs. A card of a board is pushed to every screen at each
// round, and 25 circles were a third of it.
func (d *builder) dots(at []xy, r float64) {
	if len(at) == 0 {
		return
	}
	d.open("path", "dots")
	d.attr("stroke-width", 2*r)
	d.raw(` d="`)
	for _, p := range at {
		d.raw("M")
		d.num(p.x)
		d.raw(" ")
		d.num(p.y)
		d.raw("h0")
	}
	d.raw(`"/>`)
}

type anchor int

const (
	start anchor = iota
	middle
	end
)

func (d *builder) text(class string, x, y float64, s string, a anchor) {
	if s == "" {
		return
	}
	d.open("text", class)
	d.attr("x", x)
	d.attr("y", y)
	switch a {
	case middle:
		d.raw(` text-anchor="middle"`)
	case end:
		d.raw(` text-anchor="end"`)
	}
	d.raw(">")
	d.esc(s)
	d.raw("</text>")
}

func (d *builder) title(s string) {
	if s == "" {
		return
	}
	d.raw("<title>")
	d.esc(s)
	d.raw("</title>")
}

type xy struct{ x, y float64 }

func (d *builder) points(pts ...xy) {
	d.raw(` points="`)
	for i, p := range pts {
		if i > 0 {
			d.raw(" ")
		}
		d.num(p.x)
		d.raw(",")
		d.num(p.y)
	}
	d.raw(`"/>`)
}

func (d *builder) polygon(class string, pts ...xy) {
	d.open("polygon", class)
	d.points(pts...)
}

func (d *builder) polyline(class string, pts []xy) {
	if len(pts) < 2 {
		return
	}
	d.open("polyline", class)
	d.points(pts...)
}

func (d *builder) diamond(class string, x, y, r float64) {
	d.polygon(class, xy{x, y - r}, xy{x + r, y}, xy{x, y + r}, xy{x - r, y})
}

func (d *builder) octagon(class string, x, y, r float64) {
	k := r * (math.Sqrt2 - 1)
	d.polygon(class, xy{x - k, y - r}, xy{x + k, y - r}, xy{x + r, y - k}, xy{x + r, y + k},
		xy{x + k, y + r}, xy{x - k, y + r}, xy{x - r, y + k}, xy{x - r, y - k})
}

// chevron marks a value that lies beyond the axis, pointing the way it went.
func (d *builder) chevron(x, y float64, up bool) {
	s := 6.0
	if !up {
		s = -6
	}
	d.open("polyline", "beyond")
	d.points(xy{x - 6, y + s}, xy{x, y}, xy{x + 6, y + s})
}

// hatch defines the reach pattern. Ids are per chart, because two charts of a
// page may not share one: a hidden chart would take its pattern along.
func (d *builder) hatch(id string, gap int) {
	d.raw(`<defs><pattern id="`)
	d.raw(id)
	d.raw(`" class="hatch" width="`)
	d.int(gap)
	d.raw(`" height="`)
	d.int(gap)
	d.raw(`" patternUnits="userSpaceOnUse" patternTransform="rotate(45)"><line x1="0" y1="0" x2="0" y2="`)
	d.int(gap)
	d.raw(`"/></pattern></defs>`)
}

// begin opens the drawing. role is "img" for a picture and "group" for one with
// targets inside.
func (d *builder) begin(class, id, role, label string, w, h float64) {
	d.open("svg", class)
	if id != "" {
		d.raw(` id="`)
		d.raw(id)
		d.raw(`"`)
	}
	d.raw(` viewBox="0 0 `)
	d.num(w)
	d.raw(" ")
	d.num(h)
	d.raw(`" role="`)
	d.raw(role)
	d.raw(`"`)
	d.sattr("aria-label", label)
}

// ident keeps what an id may hold, so that url(#id) needs no escaping.
func ident(s string) string {
	ok := s != ""
	for i := 0; i < len(s); i++ {
		if !idByte(s[i]) {
			ok = false
			break
		}
	}
	if ok && (s[0] < '0' || s[0] > '9') {
		return s
	}
	out := []byte("c-")
	for i := 0; i < len(s); i++ {
		if idByte(s[i]) {
			out = append(out, s[i])
		} else {
			out = append(out, '-')
		}
	}
	return string(out)
}

func idByte(c byte) bool {
	return c >= 'a' && c <= 'z' || c >= 'A' && c <= 'Z' || c >= '0' && c <= '9' || c == '-' || c == '_'
}

func finite(v float64) bool { return !math.IsNaN(v) && !math.IsInf(v, 0) }
