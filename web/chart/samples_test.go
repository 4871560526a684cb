package chart

import (
	"fmt"
	"math"
	"math/rand/v2"
	"time"
)

// Invented charts of Kestrel Row, from fixed seeds. The limits are written in,
// not computed: what a limit is belongs to other packages and their tests.

var morning = time.Date(2026, 3, 10, 18, 12, 0, 0, time.UTC)

func axleLimits(centre, half, up float64) (loc, dis Limits) {
	loc = Limits{centre - half, centre, centre + half,
		decimal(centre-half, 4), decimal(centre, 4), decimal(centre+half, 4)}
	c := up / 2.114
	dis = Limits{math.NaN(), c, up, "", decimal(c, 4), decimal(up, 4)}
	return loc, dis
}

// axle is n subgroups of an axle seat, half an hour apart.
func axle(id string, n int, seed uint64) *Control {
	rng := rand.New(rand.NewPCG(seed, 7))
	loc, dis := axleLimits(14.9909, 0.00245, 0.0090)
	c := &Control{
		ID: id, Label: fmt.Sprintf("Averages and ranges of axle seat diameter, %d subgroups of 5.", n),
		Location:   Panel{Name: "Averages of 5", One: "average", Unit: "mm", Decimals: 4},
		Dispersion: Panel{Name: "Ranges", One: "range", Unit: "mm", Decimals: 3, Floor: true},
		Segments:   []Segment{{From: 0, Location: loc, Dispersion: dis}},
	}
	at := morning
	for i := range n {
		if i > 0 {
			at = at.Add(30 * time.Minute)
			if at.Hour() >= 22 {
				at = at.Add(8 * time.Hour)
			}
		}
		sum, lo, hi, readings := 0.0, math.Inf(1), math.Inf(-1), ""
		for k := range 5 {
			r := math.Round((14.9909+0.00183*rng.NormFloat64())*1000) / 1000
			sum, lo, hi = sum+r, min(lo, r), max(hi, r)
			if k > 0 {
				readings += " "
			}
			readings += decimal(r, 3)
		}
		c.Points = append(c.Points, Point{
			At: at, Location: sum / 5, Dispersion: hi - lo,
			When:         at.Format("15:04 Monday"),
			LocationText: decimal(sum/5, 4) + " mm", DispersionText: decimal(hi-lo, 3) + " mm",
			Readings: readings, Person: "Operator 1",
		})
	}
	return c
}

func (c *Control) set(i int, v float64) {
	c.Points[i].Location = v
	c.Points[i].LocationText = decimal(v, 4) + " mm"
}

// axleDay is the chart of the reference picture: a revision, a closed signal
// with its cause, changes, and an open signal with its reach.
func axleDay(id string) *Control {
	c := axle(id, 53, 3)
	oldLoc, oldDis := axleLimits(14.9914, 0.0031, 0.0113)
	c.Segments[0].Location, c.Segments[0].Dispersion = oldLoc, oldDis
	loc, dis := axleLimits(14.9909, 0.00245, 0.0090)
	c.Segments = append(c.Segments, Segment{From: 8, Location: loc, Dispersion: dis, Notch: "3", Note: "revision 3, frozen Tue 16:40"})
	c.set(27, 14.9948)
	c.Points[28].Restart = true
	for i, v := range []float64{14.9896, 14.9921, 14.9928, 14.9932} {
		c.set(49+i, v)
	}
	c.Points[52].Note = "adjusted +0.002 mm before it"
	c.Signals = []Signal{
		{Point: 27, Text: "Beyond 3 sigma: insert chipped"},
		{Point: 52, Open: true, Newest: true, Text: "2 of 3 beyond 2 sigma, high side", Sub: "about +0.0018 mm since 11:12"},
	}
	c.Reaches = []Reach{{49, 52, "Reach: since 10:42, about 340 parts"}}
	between := func(i int) time.Time { return c.Points[i].At.Add(14 * time.Minute) }
	c.Changes = []Change{
		{At: between(3), Kind: Down, Text: "−0.001", Title: "adjusted −0.001 mm, no matter open"},
		{At: between(27), Kind: Post, Title: "insert changed"},
		{At: between(27).Add(8 * time.Minute), Kind: Down, Prompted: true, Text: "−0.003", Title: "adjusted −0.003 mm, matter open"},
		{At: between(49), Kind: Up, Text: "+0.002", Title: "adjusted +0.002 mm, no matter open"},
	}
	day := func(d, h int, label string) Tick { return Tick{time.Date(2026, 3, d, h, 0, 0, 0, time.UTC), label} }
	c.Shifts = []Tick{day(10, 14, "Tue late"), day(11, 6, "Wed early"), day(11, 14, "Wed late"), day(12, 6, "Thu early"), day(12, 14, "Thu late"), day(13, 6, "Fri early")}
	return c
}

// crowded has many signals, on both panels and at both ends, a wild subgroup, a
// missing one, a reading outside specification, and many changes.
func crowded(id string) *Control {
	c := axle(id, 60, 5)
	for _, i := range []int{0, 1, 3, 20, 22, 24, 25, 50, 55, 58} {
		c.set(i, 14.9909+0.0029*float64(1-2*(i%2)))
		c.Signals = append(c.Signals, Signal{Point: i, Text: "Beyond 3 sigma: bar end", Open: i > 50})
	}
	c.Signals = append(c.Signals,
		Signal{Point: 59, Open: true, Text: "8 in a row on one side, high", Sub: "about +0.0011 mm since 08:12"},
		Signal{Point: 30, Dispersion: true, Text: "Range beyond 3 sigma: anvil dirty"},
		Signal{Point: 57, Dispersion: true, Open: true, Text: "Range beyond 3 sigma, wider", Sub: "about 1.6 times as wide"},
		Signal{Point: 2, Dispersion: true, Text: "Range beyond 3 sigma: anvil dirty"})
	c.Points[30].Dispersion, c.Points[57].Dispersion, c.Points[2].Dispersion = 0.0104, 0.0099, 0.0095
	c.set(35, 15.0123)
	c.Points[35].Outside = true
	c.Signals = append(c.Signals, Signal{Point: 35, Text: "Beyond 3 sigma: swarf"})
	c.set(10, 14.975)
	c.Points[40].Location, c.Points[40].Dispersion = math.NaN(), math.NaN()
	for i := range 14 {
		c.Changes = append(c.Changes, Change{At: c.Points[5+3*i].At.Add(time.Duration(i) * time.Minute), Kind: ChangeKind(i % 3), Prompted: i%2 == 0, Text: "+0.001"})
	}
	c.Reaches = []Reach{{56, 59, "Reach: since 08:12, about 310 parts"}}
	return c
}

// longRun has more subgroups than px.
func longRun(id string, n int) *Control {
	c := axle(id, n, 11)
	loc, dis := axleLimits(14.9912, 0.0028, 0.0098)
	c.Segments = append(c.Segments, Segment{From: n / 3, Location: loc, Dispersion: dis, Notch: "2", Note: "revision 2"})
	for k := range 30 {
		i := (k*n/30 + 17) % n
		c.set(i, 14.9951)
		c.Signals = append(c.Signals, Signal{Point: i, Text: fmt.Sprintf("Beyond 3 sigma: cause %d", k+1)})
	}
	c.Signals = append(c.Signals, Signal{Point: n - 1, Open: true, Text: "Beyond 3 sigma, high side"})
	c.set(n-1, 14.9949)
	c.Points[n/2].Outside = true
	return c
}

// study is a limit study: lettered exclusions, ordinal axis, ghost limits.
func study(id string) *Control {
	c := axle(id, 48, 9)
	c.Label = "Limit study: 48 subgroups, three left out with causes."
	c.Ordinal = true
	c.Location.Unit = "mm, trial band from 45 of 48 subgroups"
	c.Location.Ghosts = []Ghost{{14.9944, "revision 2"}, {14.9883, "revision 2"}}
	c.Points[6].Excluded, c.Points[18].Excluded, c.Points[32].Excluded = "A", "B", "C"
	c.Points[6].Dispersion = 0.011
	c.set(18, 14.9944)
	c.set(32, 14.9876)
	c.set(40, 14.9936)
	c.Signals = []Signal{{Point: 40, Open: true, Text: "Beyond 3 sigma, no cause found: stays in"}}
	return c
}

// share is a chart of one statistic whose limits step with the sample size.
func share(id string) *Control {
	rng := rand.New(rand.NewPCG(4, 4))
	c := &Control{ID: id, Label: "Share of noisy hubs, 40 samples of changing size.",
		Location: Panel{Name: "Share of noisy hubs", One: "share", Unit: "%", Decimals: 1, Floor: true}}
	for i := range 40 {
		n := 120 + rng.IntN(180)
		s := 3 * math.Sqrt(0.04*0.96/float64(n)) * 100
		lower := math.NaN()
		if 4-s > 0 {
			lower = 4 - s
		}
		c.Segments = append(c.Segments, Segment{From: i, Location: Limits{lower, 4, 4 + s, decimal(lower, 1), "4.0", decimal(4+s, 1)}})
		v := 4 + s/3*rng.NormFloat64()
		at := morning.Add(time.Duration(i) * time.Hour)
		c.Points = append(c.Points, Point{At: at, Location: max(v, 0), Dispersion: math.NaN(), When: at.Format("15:04"), LocationText: decimal(v, 1) + " %"})
	}
	return c
}

func railSample(id string, outside bool) *Rail {
	rng := rand.New(rand.NewPCG(8, 8))
	r := &Rail{ID: id, Label: "Single readings against specification; none outside.", Name: "Single readings", Sub: "125 since Wed 16:12",
		Step: 0.001, Decimals: 3, StableText: "stable stretch", SuspectText: "within the reach, 15",
		Spec: Spec{14.982, 14.991, 15.000, "14.982", "14.991", "15.000"}}
	for range 110 {
		r.Readings = append(r.Readings, math.Round((14.9909+0.00183*rng.NormFloat64())*1000)/1000)
	}
	for range 15 {
		r.Suspect = append(r.Suspect, math.Round((14.9926+0.00183*rng.NormFloat64())*1000)/1000)
	}
	if outside {
		r.Suspect = append(r.Suspect, 15.002, 15.050, 15.060)
	}
	return r
}

func sparkSample(id string, mark Mark, reach int, seed uint64) *Spark {
	rng := rand.New(rand.NewPCG(seed, 2))
	s := &Spark{ID: id, Label: "The last 25 points inside their band.", Limits: Limits{-3, 0, 3, "", "", ""}, Reach: reach}
	for range 25 {
		s.Points = append(s.Points, SparkPoint{Value: rng.NormFloat64()})
	}
	s.Points[24].Mark = mark
	if mark == SignalMark {
		s.Points[21].Value, s.Points[22].Value, s.Points[23].Value, s.Points[24].Value = -1.6, 1.5, 2.2, 2.7
	}
	return s
}

func stationPoints(n int) []StationPoint {
	c := axleDay("x")
	var out []StationPoint
	for _, p := range c.Points[len(c.Points)-n:] {
		out = append(out, StationPoint{Value: p.Location, Text: p.LocationText, Time: p.At.Format("15:04")})
	}
	return out
}

func nan() float64 { return math.NaN() }

func fallsSample(id string, w, h, now float64) *Falls {
	loc, _ := axleLimits(14.9909, 0.00245, 0.0090)
	return &Falls{ID: id, W: w, H: h, Label: "Averages of the last nine rounds and of this one so far.",
		Points: stationPoints(12)[:9], Limits: loc, Now: now}
}

func stripSample(id string, w, h float64, readings ...float64) *Strip {
	return &Strip{ID: id, W: w, H: h, Label: "Readings of this round, all within specification.", Size: 5, Readings: readings,
		Spec: Spec{14.982, 14.991, 15.000, "14.982", "14.991", "15.000"}, Words: Words{UpperSpec: "upper spec.", LowerSpec: "lower spec."}}
}

func verdictSample(id string) *Verdict {
	loc, _ := axleLimits(14.9909, 0.00245, 0.0090)
	v := &Verdict{ID: id, Label: "The last twelve averages; the newest signals.", Points: stationPoints(12), Limits: loc, Reach: 3, Signal: "2 of 3 beyond 2 sigma, high side"}
	v.Points[11].Mark = SignalMark
	return v
}
