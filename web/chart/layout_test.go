package chart

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"
	"time"
)

// The check looks at drawn rectangles and lines, not at the layout's own rule.
func TestPennantsNeverOverlapOrCross(t *testing.T) {
	t.Parallel()
	shown := 0
	for seed := range uint64(600) {
		rng := rand.New(rand.NewPCG(seed, 3))
		n := 1 + rng.IntN(25)
		flags := make([]pennant, n)
		x := 62.0
		for i := range flags {
			if rng.IntN(6) > 0 {
				x += rng.Float64() * 1900 / float64(n)
			}
			flags[i] = pennant{x: min(x, 1022), text: nasty[1+rng.IntN(3)] + " some rule", open: rng.IntN(4) == 0}
			if rng.IntN(3) == 0 {
				flags[i].sub = "about +0.0018 mm since 11:12"
			}
		}
		rows := layoutFlags(flags, 120, 1096)
		type box struct{ x1, y1, x2, y2 float64 }
		place := func(f *pennant) (flagBox box, pole box) {
			y := rowsHeight(rows[:f.level])
			a, b := f.extent()
			return box{a, y, b, y + f.height()}, box{f.x, y, f.x, rowsHeight(rows)}
		}
		meet := func(a, b box) bool { return a.x1 < b.x2 && b.x1 < a.x2 && a.y1 < b.y2 && b.y1 < a.y2 }
		cut := func(p, b box) bool { return p.x1 > b.x1 && p.x1 < b.x2 && p.y1 < b.y2 && p.y2 > b.y1 }
		for i := range flags {
			if !flags[i].shown {
				continue
			}
			shown++
			fi, pi := place(&flags[i])
			if fi.x1 < 120 || fi.x2 > 1096 {
				t.Errorf("seed %d: flag %d leaves the drawing", seed, i)
			}
			for j := range flags {
				if j == i || !flags[j].shown {
					continue
				}
				fj, _ := place(&flags[j])
				if meet(fi, fj) {
					t.Errorf("seed %d: flags %d and %d overlap", seed, i, j)
				}
				if cut(pi, fj) {
					t.Errorf("seed %d: the pole of %d crosses flag %d", seed, i, j)
				}
			}
		}
	}
	if shown < 600 {
		t.Errorf("only %d flags found a place", shown)
	}
}

func TestNewestFlagHangsInTheTopRowAndFliesToTheRoom(t *testing.T) {
	t.Parallel()
	flags := []pennant{{x: 100, text: "first rule"}, {x: 900, text: "an older rule"}, {x: 940, text: "the newest rule", open: true}}
	layoutFlags(flags, 60, 1096)
	if !flags[2].shown || flags[2].level != 0 || !flags[2].left {
		t.Errorf("newest: %+v", flags[2])
	}
	if !flags[1].shown || flags[1].level != 1 {
		t.Errorf("older neighbour: %+v", flags[1])
	}
	if !flags[0].shown || flags[0].left {
		t.Errorf("at the left end: %+v", flags[0])
	}
}

func TestNiceTicksAreRoundAndHaveTheirDecimals(t *testing.T) {
	t.Parallel()
	for _, tc := range []struct {
		lo, hi   float64
		want     []string
		decimals int
	}{
		{14.9877, 14.9957, []string{"14.988", "14.990", "14.992", "14.994"}, 3},
		{0, 0.0135, []string{"0.000", "0.005", "0.010"}, 3},
		{0, 10.2, []string{"0", "2", "4", "6", "8", "10"}, 0},
		{-0.5, 0.5, []string{"−0.4", "−0.2", "0.0", "0.2", "0.4"}, 1},
		{950, 1450, []string{"1000", "1100", "1200", "1300", "1400"}, 0},
	} {
		ticks, dec := niceTicks(tc.lo, tc.hi, 4)
		var got []string
		for _, v := range ticks {
			got = append(got, decimal(v, dec))
		}
		if dec != tc.decimals || len(got) != len(tc.want) {
			t.Errorf("%g to %g: %v with %d decimals, want %v", tc.lo, tc.hi, got, dec, tc.want)
			continue
		}
		for i := range got {
			if got[i] != tc.want[i] {
				t.Errorf("%g to %g: %v, want %v", tc.lo, tc.hi, got, tc.want)
				break
			}
		}
	}
}

func TestTimeTicksFitTheSpan(t *testing.T) {
	t.Parallel()
	for _, tc := range []struct {
		name  string
		every time.Duration
		n     int
		first string
	}{
		{"hours", 10 * time.Minute, 40, "19:00"},
		{"a day", 30 * time.Minute, 60, "20:00"},
		{"days", time.Hour, 200, "Tue 10 Mar"},
		{"weeks", 6 * time.Hour, 250, "9 Mar"},
		{"years", 24 * time.Hour, 1500, "Jan 2026"},
	} {
		var at []time.Time
		for i := range tc.n {
			at = append(at, morning.Add(time.Duration(i)*tc.every))
		}
		got := timeTicks(at, nil, time.UTC, 952, nil)
		if len(got) < 2 || len(got) > 11 {
			t.Errorf("%s: %d ticks", tc.name, len(got))
			continue
		}
		if got[0].label != tc.first {
			t.Errorf("%s: first %q, want %q", tc.name, got[0].label, tc.first)
		}
	}
}

func TestShiftBeginningsAreUsedWhereTheyFit(t *testing.T) {
	t.Parallel()
	c := axleDay("cc")
	var at []time.Time
	for _, p := range c.Points {
		at = append(at, p.At)
	}
	got := timeTicks(at, c.Shifts, time.UTC, 952, nil)
	if len(got) < 3 || got[1].label != "Wed early" {
		t.Errorf("%+v", got)
	}
}

// The nights when the clocks change in Berlin, 2026: 29 March and 25 October
// (IANA time zone database, Europe/Berlin).
func TestDayTicksStayAtMidnightWhenClocksChange(t *testing.T) {
	t.Parallel()
	berlin, err := time.LoadLocation("Europe/Berlin")
	if err != nil {
		t.Fatal(err)
	}
	for _, from := range []time.Time{time.Date(2026, 3, 27, 6, 0, 0, 0, berlin), time.Date(2026, 10, 23, 6, 0, 0, 0, berlin)} {
		var at []time.Time
		for i := range 24 * 5 {
			at = append(at, from.Add(time.Duration(i)*time.Hour))
		}
		for _, tick := range timeTicks(at, nil, berlin, 952, nil)[1:] {
			if p := at[tick.index].In(berlin); p.Hour() != 0 {
				t.Errorf("tick %q stands before the point of %s", tick.label, p.Format("2 Jan 15:04"))
			}
		}
	}
	for _, step := range tickSteps { // every step moves on, through both nights
		u := step.floor(time.Date(2026, 10, 24, 23, 0, 0, 0, berlin))
		for range 60 {
			v := step.next(u)
			if !v.After(u) {
				t.Fatalf("step stands still at %s", u)
			}
			u = v
		}
	}
}

func TestBarsCountWholeDigits(t *testing.T) {
	t.Parallel()
	r := railSample("r", true)
	lo, hi := r.Spec.span(append(r.Readings, r.Suspect...))
	b := r.count(scale{lo, hi, 0, 100})
	total := b.above.stable + b.above.suspect + b.below.stable + b.below.suspect
	for _, n := range b.at {
		total += n.stable + n.suspect
	}
	if want := len(r.Readings) + len(r.Suspect); total != want {
		t.Errorf("bars hold %d readings of %d", total, want)
	}
	for _, v := range r.Readings {
		j := int64(math.Floor(math.Round(v/0.001) / float64(b.m)))
		if _, ok := b.at[j]; !ok {
			t.Errorf("no bar for %.3f", v)
		}
	}
}

func TestScaleDataPlacesWhatTheDrawingShows(t *testing.T) {
	t.Parallel()
	f := fallsSample("f", 352, 388, 14.9930)
	a := newAverages(&builder{}, 352, 388, 16, 38, 10, f.Points, f.Limits, false, 0, 0, f.Now)
	want, _ := a.s.y(14.9930)
	got := a.s.top + (a.s.hi-14.9930)/(a.s.hi-a.s.lo)*(a.s.bottom-a.s.top) // what falls.js computes
	if math.Abs(got-want) > 1e-6 {
		t.Errorf("script would put the dot at %g, the server at %g", got, want)
	}
}

// TestValuesBeyondTheAxisStayApart: of neighbours beyond it only the last is said.
func TestValuesBeyondTheAxisStayApart(t *testing.T) {
	t.Parallel()
	v := verdictSample("v")
	for i := range v.Points {
		v.Points[i].Value, v.Points[i].Text = v.Limits.Centre, "calm"
	}
	far := v.Limits.Centre + 40*(v.Limits.Upper-v.Limits.Centre)
	n := len(v.Points)
	v.Points[1].Value, v.Points[1].Text = far, "alone"
	v.Points[n-2].Value, v.Points[n-2].Text = far, "first"
	v.Points[n-1].Value, v.Points[n-1].Text = far, "second"
	svg := v.SVG()
	for text, want := range map[string]bool{"alone": true, "first": false, "second": true} {
		if got := strings.Contains(svg, `>`+text+`</text>`); got != want {
			t.Errorf("%q is written: %v, want %v", text, got, want)
		}
	}
}

// TestManyAdjustmentsAreARug: each is there and says what it is on hover, and none covers
// another or what else is on the axis.
func TestManyAdjustmentsAreARug(t *testing.T) {
	t.Parallel()
	c := axle("rug", 300, 3)
	few := len(c.Changes)
	for i := range 210 {
		c.Changes = append(c.Changes, Change{At: c.Points[20+i].At.Add(time.Minute), Kind: ChangeKind(i % 3), Prompted: i%5 == 0, Text: "+0.001", Title: "adjusted"})
	}
	svg := c.SVG()
	if n := strings.Count(svg, `class="rug`); n != few+210 {
		t.Errorf("%d ticks for %d changes", n, few+210)
	}
	if strings.Contains(svg, `class="arrow`) || strings.Contains(svg, "+0.001</text>") {
		t.Error("arrows or sizes stand in a rug")
	}
}
