package chart

import (
	"bytes"
	"encoding/xml"
	"errors"
	"flag"
	"fmt"
	"io"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"
	"time"
)

var update = flag.Bool("update", false, "rewrite the golden SVG files")

type drawing interface{ SVG() string }

func samples() map[string]drawing {
	learning := axle("cc", 12, 2)
	learning.Segments = nil
	return map[string]drawing{
		"control-day":      axleDay("cc"),
		"control-crowded":  crowded("cc"),
		"control-study":    study("cc"),
		"control-share":    share("cc"),
		"control-learning": learning,
		"control-empty":    &Control{ID: "cc", Location: Panel{Name: "Averages of 5", Unit: "mm"}, Dispersion: Panel{Name: "Ranges"}},
		"control-years":    longRun("cc", 900),
		"rail":             railSample("rl", false),
		"rail-outside":     railSample("rl", true),
		"rail-empty":       &Rail{ID: "rl", Name: "Single readings", Spec: NoSpec()},
		"spark-look":       sparkSample("sp", SignalMark, 3, 1),
		"spark-hold":       sparkSample("sp", HoldMark, 0, 2),
		"spark-empty":      &Spark{ID: "sp", Limits: NoLimits()},
		"falls":            fallsSample("fa", 352, 388, 14.9930),
		"falls-untyped":    fallsSample("fa", 592, 262, math.NaN()),
		"falls-wild":       fallsSample("fa", 352, 388, 149.930),
		"strip":            stripSample("st", 140, 388, 14.994, 14.989, math.NaN(), 15.2),
		"verdict":          verdictSample("ve"),
	}
}

func TestGoldenDrawings(t *testing.T) {
	t.Parallel()
	for name, d := range samples() {
		// one element a line, so that a changed drawing shows what changed
		got := strings.ReplaceAll(d.SVG(), "><", ">\n<") + "\n"
		file := filepath.Join("testdata", name+".svg")
		if *update {
			if err := os.WriteFile(file, []byte(got), 0o644); err != nil {
				t.Fatal(err)
			}
			continue
		}
		want, err := os.ReadFile(file)
		if err != nil {
			t.Fatalf("%v (write it with -update)", err)
		}
		if got != string(want) {
			t.Errorf("%s differs from %s; look at it, then -update", name, file)
		}
	}
}

// checkSVG is what must hold for every drawing, whatever went in.
func checkSVG(t *testing.T, name, svg string) {
	t.Helper()
	ids := make(map[string]bool)
	var refs []string
	dec := xml.NewDecoder(strings.NewReader(svg))
	root := true
	for {
		tok, err := dec.Token()
		if errors.Is(err, io.EOF) {
			break
		}
		if err != nil {
			t.Fatalf("%s: not well formed: %v", name, err)
		}
		el, ok := tok.(xml.StartElement)
		if !ok {
			continue
		}
		role := ""
		for _, a := range el.Attr {
			switch n := a.Name.Local; {
			case n == "style" || strings.HasPrefix(n, "on"):
				t.Errorf("%s: <%s> has %s, which the content policy refuses", name, el.Name.Local, n)
			case n == "id":
				if ids[a.Value] {
					t.Errorf("%s: id %s twice", name, a.Value)
				}
				ids[a.Value] = true
			case n == "fill" && strings.HasPrefix(a.Value, "url(#"):
				refs = append(refs, strings.TrimSuffix(strings.TrimPrefix(a.Value, "url(#"), ")"))
			case n == "role":
				role = a.Value
			case geometry[n] && !coordinate.MatchString(a.Value):
				t.Errorf("%s: <%s %s=%q>", name, el.Name.Local, n, a.Value)
			case (n == "width" || n == "height") && strings.HasPrefix(a.Value, "-"):
				t.Errorf("%s: negative %s", name, n)
			case n == "points" || n == "d":
				if !path.MatchString(a.Value) {
					t.Errorf("%s: <%s %s=%q>", name, el.Name.Local, n, a.Value)
				}
			}
		}
		if root && (el.Name.Local != "svg" || role != "img" && role != "group") {
			t.Errorf("%s: root <%s role=%q>", name, el.Name.Local, role)
		}
		root = false
	}
	for _, r := range refs {
		if !ids[r] {
			t.Errorf("%s: pattern %s is not there", name, r)
		}
	}
}

var (
	geometry   = map[string]bool{"x": true, "y": true, "x1": true, "y1": true, "x2": true, "y2": true, "cx": true, "cy": true, "r": true, "width": true, "height": true, "stroke-width": true}
	coordinate = regexp.MustCompile(`^-?[0-9]{1,5}(\.[0-9])?$`)
	path       = regexp.MustCompile(`^[-0-9., MHVZh]*$`)
)

func TestSamplesAreWellFormed(t *testing.T) {
	t.Parallel()
	for name, d := range samples() {
		checkSVG(t, name, d.SVG())
	}
	checkSVG(t, "swatch", strings.Replace(HatchSwatch("k"), "<svg", `<svg role="img"`, 1))
	if err := xml.Unmarshal([]byte(Sprite), new(struct{})); err != nil {
		t.Errorf("sprite: %v", err)
	}
}

// odd draws values that no plant has, beside ordinary ones.
func odd(rng *rand.Rand) float64 {
	switch rng.IntN(14) {
	case 0:
		return math.NaN()
	case 1:
		return math.Inf(1)
	case 2:
		return math.Inf(-1)
	case 3:
		return math.MaxFloat64
	case 4:
		return -math.MaxFloat64
	case 5:
		return math.SmallestNonzeroFloat64
	case 6:
		return 0
	case 7:
		return 1e15 + rng.Float64()
	default:
		return 15 + rng.NormFloat64()
	}
}

var nasty = []string{"", "plain", `<script>alert("x")</script>`, "a & b", "\x00\x01\ufffe\xff\xc3", strings.Repeat("very long words ", 9), "Üß 漢字", "]]>", "a\nb"}

func oddLimits(rng *rand.Rand) Limits {
	word := func() string { return nasty[rng.IntN(len(nasty))] }
	return Limits{odd(rng), odd(rng), odd(rng), word(), word(), word()}
}

func oddControl(rng *rand.Rand) *Control {
	word := func() string { return nasty[rng.IntN(len(nasty))] }
	n := rng.IntN(70)
	if rng.IntN(8) == 0 {
		n = rng.IntN(700)
	}
	when := func() time.Time {
		if rng.IntN(20) == 0 {
			return time.Time{}
		}
		return time.Unix(rng.Int64N(4e9)-1e9, 0)
	}
	c := &Control{ID: word(), Label: word(), W: odd(rng) * 60, H1: odd(rng) * 20, H2: odd(rng) * 6, Ordinal: rng.IntN(2) == 0,
		Location:   Panel{Name: word(), One: word(), Unit: word(), Decimals: rng.IntN(20) - 4, Lo: odd(rng), Hi: odd(rng), Floor: rng.IntN(2) == 0},
		Dispersion: Panel{Name: word(), One: word(), Floor: rng.IntN(2) == 0}}
	if rng.IntN(2) == 0 {
		c.Location.Lo, c.Location.Hi = 0, 0
	}
	for i := range n {
		p := Point{At: when(), Location: odd(rng), Dispersion: odd(rng), When: word(), LocationText: word(), Readings: word(), Note: word(), Outside: rng.IntN(9) == 0, Restart: rng.IntN(9) == 0}
		if rng.IntN(2) == 0 {
			p.At = morning.Add(time.Duration(i) * time.Hour)
		}
		if rng.IntN(12) == 0 {
			p.Excluded = word()
		}
		c.Points = append(c.Points, p)
	}
	for range rng.IntN(6) {
		c.Segments = append(c.Segments, Segment{From: rng.IntN(n+4) - 2, Location: oddLimits(rng), Dispersion: oddLimits(rng), Notch: word(), Note: word()})
		c.Reaches = append(c.Reaches, Reach{rng.IntN(n+4) - 2, rng.IntN(n+4) - 2, word()})
		c.Location.Ghosts = append(c.Location.Ghosts, Ghost{odd(rng), word()})
	}
	for range rng.IntN(40) {
		c.Signals = append(c.Signals, Signal{Point: rng.IntN(n+4) - 2, Dispersion: rng.IntN(2) == 0, Open: rng.IntN(2) == 0, Newest: rng.IntN(2) == 0, Text: word(), Sub: word()})
		c.Changes = append(c.Changes, Change{At: when(), Kind: ChangeKind(rng.IntN(3)), Text: word(), Title: word()})
		c.Shifts = append(c.Shifts, Tick{when(), word()})
	}
	return c
}

func TestAnyInputGivesWellFormedDrawings(t *testing.T) {
	t.Parallel()
	for seed := range uint64(70) {
		rng := rand.New(rand.NewPCG(seed, 1))
		word := func() string { return nasty[rng.IntN(len(nasty))] }
		c := oddControl(rng)
		checkSVG(t, fmt.Sprintf("control %d", seed), c.SVG())
		c.Table()
		r := &Rail{ID: word(), Label: word(), W: odd(rng) * 20, H: odd(rng) * 30, Name: word(), Step: odd(rng), Decimals: rng.IntN(5),
			Spec: Spec{odd(rng), odd(rng), odd(rng), word(), word(), word()}}
		s := &Spark{ID: word(), Limits: oddLimits(rng), Reach: rng.IntN(40) - 5, Floor: rng.IntN(2) == 0}
		var st []StationPoint
		for range rng.IntN(30) {
			r.Readings, r.Suspect = append(r.Readings, odd(rng)), append(r.Suspect, odd(rng))
			s.Points = append(s.Points, SparkPoint{odd(rng), rng.IntN(9) == 0, Mark(rng.IntN(3)), oddEvents(rng)})
			st = append(st, StationPoint{Value: odd(rng), Text: word(), Time: word(), Restart: rng.IntN(9) == 0, Mark: Mark(rng.IntN(3)), Before: oddEvents(rng)})
		}
		f := &Falls{ID: word(), Points: st, Limits: oddLimits(rng), Now: odd(rng), Lo: odd(rng), Hi: odd(rng)}
		v := &Verdict{ID: word(), Points: st, Limits: oddLimits(rng), Reach: rng.IntN(20) - 3, Signal: word()}
		p := &Strip{ID: word(), Spec: r.Spec, Readings: r.Readings, Size: rng.IntN(12) - 2}
		for _, d := range []drawing{r, s, f, v, p} {
			checkSVG(t, fmt.Sprintf("%T %d", d, seed), d.SVG())
		}
		r.Table()
		f.Table()
		v.Table()
	}
}

func FuzzTextIsEscaped(f *testing.F) {
	for _, s := range nasty {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		c := axleDay(s)
		c.Label, c.Location.Name, c.Points[3].When, c.Signals[0].Text, c.Changes[0].Title = s, s, s, s, s
		checkSVG(t, "fuzzed", c.SVG())
	})
}

func TestTwoChartsOfAPageShareNoId(t *testing.T) {
	t.Parallel()
	a, b := axleDay("one").SVG(), axleDay("two").SVG()
	for _, m := range regexp.MustCompile(`id="([^"]+)"`).FindAllStringSubmatch(a, -1) {
		if strings.Contains(b, m[0]) {
			t.Errorf("both charts hold %s", m[0])
		}
	}
}

func TestLowerEdgeIsAbsentWhereTheLimitIs(t *testing.T) {
	t.Parallel()
	edges := func(l Limits) int {
		d := &builder{}
		d.band([]stretch{{0, 100, l}}, scale{0, 1, 0, 100}, 0)
		m := regexp.MustCompile(`class="edge" d="([^"]*)"`).FindSubmatch(d.b)
		return bytes.Count(m[1], []byte("M"))
	}
	if n := edges(Limits{Lower: math.NaN(), Centre: 0.4, Upper: 0.9}); n != 1 {
		t.Errorf("without a lower limit %d edges", n)
	}
	if n := edges(Limits{Lower: 0.1, Centre: 0.4, Upper: 0.9}); n != 2 {
		t.Errorf("with both limits %d edges", n)
	}
}

func TestWildValueIsDrawnAtTheEdgeAndSaid(t *testing.T) {
	t.Parallel()
	c := axle("cc", 30, 1)
	c.set(12, 15.4)
	svg := c.SVG()
	if !strings.Contains(svg, `class="beyond"`) || !strings.Contains(svg, ">15.4000 mm</text>") {
		t.Error("a wild average has no chevron or no number")
	}
	f := c.layout()
	if f.loc.hi > 15 {
		t.Errorf("the axis followed the wild value to %g", f.loc.hi)
	}
}

func TestLineBreaksAtRevisionRestartMissingAndExclusion(t *testing.T) {
	t.Parallel()
	count := func(c *Control) int { return strings.Count(c.SVG(), `<polyline class="trace"`) / 2 } // two panels
	c := axle("cc", 40, 1)
	if n := count(c); n != 1 {
		t.Fatalf("an unbroken line has %d parts", n)
	}
	loc, dis := axleLimits(14.991, 0.002, 0.009)
	c.Segments = append(c.Segments, Segment{From: 10, Location: loc, Dispersion: dis, Notch: "2"})
	c.Points[20].Restart = true
	c.Points[25].Location, c.Points[25].Dispersion = math.NaN(), math.NaN()
	c.Points[30].Excluded = "A"
	c.Segments = append(c.Segments, Segment{From: 35, Location: loc, Dispersion: dis}) // a step in size only
	if n := count(c); n != 5 {
		t.Errorf("the line has %d parts, want 5", n)
	}
}

func TestAMarkedPointIsNeverThinnedAway(t *testing.T) {
	t.Parallel()
	c := longRun("cc", 3200)
	svg := c.SVG()
	for _, s := range c.Signals {
		if !strings.Contains(svg, fmt.Sprintf(`data-i="%d" data-when="%s" data-location="%s"`, s.Point, c.Points[s.Point].When, c.Points[s.Point].LocationText)) {
			t.Errorf("signalled point %d has no target", s.Point)
		}
	}
	if n := strings.Count(svg, `<polygon class="ring`); n < len(c.Signals) {
		t.Errorf("%d diamonds for %d signals", n, len(c.Signals))
	}
	if n := strings.Count(svg, `class="ring-hold"`); n != 1 {
		t.Errorf("%d octagons, want 1", n)
	}
	if len(svg) > 400_000 {
		t.Errorf("3200 subgroups take %d bytes", len(svg))
	}
	// the spike of every column is kept: extremes of the envelope are those of the points
	var pts []xy
	rng := rand.New(rand.NewPCG(1, 1))
	lo, hi := math.Inf(1), math.Inf(-1)
	for i := range 3000 {
		y := rng.NormFloat64()
		pts = append(pts, xy{float64(i) * 0.3, y})
		lo, hi = min(lo, y), max(hi, y)
	}
	glo, ghi := math.Inf(1), math.Inf(-1)
	for _, p := range envelope(pts) {
		glo, ghi = min(glo, p.y), max(ghi, p.y)
	}
	if glo != lo || ghi != hi {
		t.Error("the envelope lost an extreme")
	}
}

func TestOneTabStopWhateverTheLength(t *testing.T) {
	t.Parallel()
	for _, n := range []int{1, 2, 53, 200, 1200} {
		if got := strings.Count(axle("cc", n, 1).SVG(), `tabindex="0"`); got != 1 {
			t.Errorf("%d subgroups: %d tab stops", n, got)
		}
	}
}

func TestTableSaysWhatTheChartShows(t *testing.T) {
	t.Parallel()
	c := axleDay("cc")
	tab := c.Table()
	if len(tab.Rows) != len(c.Points) {
		t.Fatalf("%d rows for %d points", len(tab.Rows), len(c.Points))
	}
	for _, row := range tab.Rows {
		if len(row) != len(tab.Head) {
			t.Fatalf("row of %d cells under %d heads", len(row), len(tab.Head))
		}
	}
	newest := strings.Join(tab.Rows[0], "|")
	for _, want := range []string{"14.9932 mm", "14.9885 to 14.9933", "2 of 3 beyond 2 sigma, high side, about +0.0018 mm since 11:12", "Reach: since 10:42"} {
		if !strings.Contains(newest, want) {
			t.Errorf("newest row %q lacks %q", newest, want)
		}
	}
	if rows := railSample("r", true).Table().Rows; rows[0][0] != "15.060" {
		t.Errorf("rail table begins with %v", rows[0])
	}
}

// The bar is 500 µs for 200 subgroups with both panels.
func BenchmarkChartSVG(b *testing.B) {
	c := axle("cc", 200, 1)
	day := axleDay("x")
	c.Signals = []Signal{{Point: 199, Open: true, Text: day.Signals[1].Text, Sub: day.Signals[1].Sub}, {Point: 60, Text: "Beyond 3 sigma: insert chipped"}}
	c.Reaches = []Reach{{195, 199, day.Reaches[0].Text}}
	c.Changes = day.Changes
	loc, dis := axleLimits(14.991, 0.002, 0.009)
	c.Segments = append(c.Segments, Segment{From: 30, Location: loc, Dispersion: dis, Notch: "3", Note: "revision 3"})
	b.SetBytes(int64(len(c.SVG())))
	b.ReportAllocs()
	for b.Loop() {
		_ = c.SVG()
	}
}

func BenchmarkChartSVG3200(b *testing.B) {
	c := longRun("cc", 3200)
	b.ReportAllocs()
	for b.Loop() {
		_ = c.SVG()
	}
}

func oddEvents(rng *rand.Rand) (out []Event) {
	for range rng.IntN(4) {
		out = append(out, Event{ChangeKind(rng.IntN(4)), rng.IntN(2) == 0})
	}
	return out
}
