package plant_test

import (
	_ "embed"
	"encoding/json"
	"math"
	"math/rand/v2"
	"slices"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/spc/changepoint"
	"holdfast/internal/spc/limits"
	"holdfast/internal/spc/watch"
)

func minute(i int) time.Time { return noon.Add(time.Duration(i) * time.Minute) }

var singles = plant.Setup{Version: 1, Unit: "g", Decimals: 3, Chart: limits.Individuals, Size: 1}

// behind is a stretch of single readings with three decimals, a minute apart, that
// began an hour before the first.
func behind(center, sigma float64, units ...int64) plant.ReachEvidence {
	rev := plant.Revision{ID: uuid.New(), Number: 1, Chart: limits.Individuals, Center: center, Sigma: sigma, Multiple: 3}
	e := plant.ReachEvidence{Setups: map[int]plant.Setup{1: singles}, Revisions: map[uuid.UUID]plant.Revision{rev.ID: rev}, Segments: map[plant.Panel]plant.Segment{}}
	e.Matter = plant.Matter{ID: uuid.New(), Characteristic: uuid.New(), OpenedTaken: minute(len(units) - 1), OpenedAt: minute(len(units) - 1)}
	for i, u := range units {
		e.Location.Points = append(e.Location.Points, plant.ReachPoint{Subgroup: uuid.New(), TakenAt: minute(i), Setup: 1, Readings: []int64{u},
			Stats: plant.Summarise([]int64{u}, 3)})
	}
	e.Segments[plant.Location] = plant.Segment{From: noon.Add(-time.Hour), Revision: rev.ID}
	return e
}

func line(panel plant.Panel, side plant.Side, first, last time.Time) plant.MatterLine {
	key := plant.OutsideSpecification
	switch panel {
	case plant.GaugeCheck:
		key = plant.GaugeFailed
	case plant.Location, plant.Dispersion:
		key = plant.RuleKey(watch.Rule{Kind: watch.Beyond, Z: 3})
	}
	return plant.MatterLine{Firing: plant.Firing{Panel: panel, Rule: key, Side: side}, First: first, Last: last, Count: 1}
}

func (o opened) with(lines ...plant.MatterLine) plant.ReachEvidence {
	o.e.Matter.Lines = append(o.e.Matter.Lines, lines...)
	return o.e
}

type opened struct{ e plant.ReachEvidence }

//go:embed testdata/changepoint.json
var changePoints []byte

// The reference series were evaluated outside this code by the formula of Samuel,
// Pignatiello and Calvin (1998), Quality Engineering 10; see testdata/README.md.
func TestReachOfTheReferenceSeries(t *testing.T) {
	t.Parallel()
	type known struct {
		T         int
		Before    int       `json:"tau_hat_last_in_control"`
		Profile   []float64 `json:"profile"`
		MeanAfter float64   `json:"mean_after"`
	}
	var file struct {
		Cases []struct {
			Name  string
			X     []float64
			Mu0   float64
			Sigma *float64
			All   *known `json:"known_mean"`
			At45  *known `json:"known_mean_signal_at_45"`
			At29  *known `json:"known_mean_signal_at_29"`
		}
	}
	if err := json.Unmarshal(changePoints, &file); err != nil {
		t.Fatal(err)
	}
	checked := 0
	for _, c := range file.Cases {
		for _, k := range []*known{c.All, c.At45, c.At29} {
			if k == nil {
				continue
			}
			checked++
			sigma := 1.0
			if c.Sigma != nil {
				sigma = *c.Sigma
			}
			units := make([]int64, k.T)
			for i := range units {
				units[i] = int64(math.Round(c.X[i] * 1000))
			}
			e := behind(c.Mu0, sigma, units...)
			last := minute(k.T - 1)
			e = opened{e}.with(line(plant.Location, plant.High, last, last))
			r := plant.ReachOf(e, singles)
			if len(r.Reasons) != 1 || r.Reasons[0].Change == nil {
				t.Fatalf("%s: %+v", c.Name, r)
			}
			est := r.Reasons[0].Change
			if want := minute(k.Before); !est.Began.Equal(want) { // the subgroup after the last before it, from 0
				t.Errorf("%s at %d: the change began at %s, want %s", c.Name, k.T, est.Began, want)
			}
			if got := c.Mu0 + est.Size; math.Abs(got-k.MeanAfter) > 1e-6 {
				t.Errorf("%s at %d: mean after %v, want %v", c.Name, k.T, got, k.MeanAfter)
			}
			if want := sigma / math.Sqrt(float64(k.T-k.Before)); math.Abs(est.SE-want) > 1e-9 {
				t.Errorf("%s at %d: standard error %v, want %v", c.Name, k.T, est.SE, want)
			}
			// The earliest likely moment, by the profile as it was evaluated outside; it is not
			// divided by the variance there.
			earliest := slices.IndexFunc(k.Profile, func(v float64) bool { return (slices.Max(k.Profile)-v)/(sigma*sigma) <= changepoint.LikelyCut })
			want := noon.Add(-time.Hour) // the boundary
			if earliest > 0 {
				want = minute(earliest - 1)
			}
			if !r.From.Equal(want) || r.Cut {
				t.Errorf("%s at %d: the reach begins at %s (cut %v), want %s", c.Name, k.T, r.From, r.Cut, want)
			}
		}
	}
	if checked != 5 {
		t.Errorf("%d series were checked, want 5", checked)
	}
}

// The reach must begin no later than the true change in at least 90 % of histories: by
// simulation, with a fixed seed, of a chart that signals by one point beyond 3 sigma or
// eight on one side after a shift of 0.75 to 2 sigma.
func TestReachHoldsTheTrueChange(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(20260312, 6))
	const histories = 400
	held, exact := 0, 0
	for n := 0; n < histories; {
		before, shift := rng.IntN(60), 0.75+1.25*rng.Float64()
		var units []int64
		side := 0
		for {
			z := rng.NormFloat64()
			if len(units) >= before {
				z += shift
			}
			units = append(units, 10000+int64(math.Round(1000*z)))
			if z > 0 {
				side = max(side, 0) + 1
			} else {
				side = min(side, 0) - 1
			}
			if math.Abs(z) > 3 || side >= 8 || side <= -8 {
				break
			}
		}
		if len(units) <= before {
			continue // a false alarm before the change: its matter would be closed by then
		}
		n++
		last := minute(len(units) - 1)
		e := behind(10, 1, units...)
		r := plant.ReachOf(opened{e}.with(line(plant.Location, plant.High, last, last)), singles)
		lastBefore := minute(before - 1)
		if !r.From.After(lastBefore) || before == 0 && !r.From.After(minute(0)) {
			held++
		}
		if r.Reasons[0].Change.Began.Equal(minute(before)) {
			exact++
		}
	}
	t.Logf("of %d histories the reach holds the true change in %d; the best single moment hits it in %d", histories, held, exact)
	if held < histories*90/100 {
		t.Errorf("the reach holds the true change in %d of %d histories", held, histories)
	}
}

// A step of four sigma at the sixth point: by hand, C of a change before the sixth
// point is 2·4² = 32 with two points after it, that before the fifth (0+4+4)²/3 = 21.3,
// so only the former is within 7.35 of the maximum.
func TestReachOfALook(t *testing.T) {
	t.Parallel()
	e := behind(10, 0.1, 10000, 10000, 10000, 10000, 10000, 10400, 10400)
	r := plant.ReachOf(opened{e}.with(line(plant.Location, plant.High, minute(6), minute(6))), singles)
	c := r.Reasons[0].Change
	if !r.From.Equal(minute(4)) || r.Cut || !c.Began.Equal(minute(5)) || math.Abs(c.Size-0.4) > 1e-9 || math.Abs(c.SE-0.1/math.Sqrt2) > 1e-9 {
		t.Errorf("%+v with %+v; want it from the fifth point on, 0.4 large", r, c)
	}
	r.Log = plant.MachineLog{{At: noon.Add(-time.Hour), Running: true}}
	s := r.Suspects(plant.Machine{PartsPerHour: 600}, uuid.Nil, minute(10))
	if s != (plant.Suspect{Parts: 60, Known: true, About: true}) {
		t.Errorf("%+v; want about 60 parts in six minutes", s)
	}
}

func TestReachGoesBackToTheBoundaryOrSaysThatTheWindowWasCut(t *testing.T) {
	t.Parallel()
	e := behind(10, 0.1, 10400, 10400, 10400)
	look := line(plant.Location, plant.High, minute(2), minute(2))
	if r := plant.ReachOf(opened{e}.with(look), singles); !r.From.Equal(noon.Add(-time.Hour)) || r.Cut {
		t.Errorf("%+v; want it from the boundary on", r)
	}
	e.Location.Cut = true
	if r := plant.ReachOf(opened{e}.with(look), singles); !r.From.Equal(noon) || !r.Cut {
		t.Errorf("%+v; want it from the window's first subgroup on, and said that it was cut", r)
	}
	clear(e.Revisions)
	if r := plant.ReachOf(opened{e}.with(look), singles); !r.From.Equal(minute(1)) || !r.Cut || r.Reasons[0].Change != nil {
		t.Errorf("%+v; want the last subgroup before the signal and no estimate", r)
	}
}

// Five times the spread since the ninth of twelve subgroups of three: by hand, C after the
// eighth is 8 (25 - 1 - ln 25) = 166.2, after the seventh 10 (20.2 - 1 - ln 20.2) = 161.9,
// after the sixth 12 (17 - 1 - ln 17) = 158.0, which is more than 7.35 below.
func TestReachOfASpread(t *testing.T) {
	t.Parallel()
	setup := singles
	setup.Chart, setup.Size = limits.XBarR, 3
	e := behind(10, 0.1)
	rev := plant.Revision{ID: uuid.New(), Chart: limits.XBarR, Center: 10, Sigma: 0.1}
	e.Revisions[rev.ID], e.Segments[plant.Dispersion] = rev, plant.Segment{From: noon, Revision: rev.ID}
	for i := range 12 {
		readings := []int64{9900, 10000, 10100}
		if i >= 8 {
			readings = []int64{9500, 10000, 10500}
		}
		e.Dispersion.Points = append(e.Dispersion.Points, plant.ReachPoint{Subgroup: uuid.New(), TakenAt: minute(i), Readings: readings, Stats: plant.Summarise(readings, 3)})
	}
	e.Matter.OpenedTaken = minute(11)
	r := plant.ReachOf(opened{e}.with(line(plant.Dispersion, plant.High, minute(11), minute(11))), setup)
	c := r.Reasons[0].Change
	if c == nil || !c.Began.Equal(minute(8)) || math.Abs(c.Size-5) > 1e-9 || !r.From.Equal(minute(6)) {
		t.Errorf("%+v with %+v; want five times the spread since the ninth subgroup", r, c)
	}
	better := line(plant.Dispersion, plant.Low, minute(11), minute(11))
	if r := plant.ReachOf(opened{e}.with(better), setup); len(r.Reasons) > 0 {
		t.Errorf("%+v; want nothing suspect after a change for the better", r)
	}
}

// held is a Hold of two streams at minute 3.
func held(outside ...[2]bool) plant.ReachEvidence {
	e := plant.ReachEvidence{Setups: map[int]plant.Setup{1: {Version: 1, Unit: "mm", Decimals: 2, Upper: &plant.Decimal{Units: 1050, Decimals: 2}, Chart: limits.XBarR, Size: 2}}}
	for i, o := range outside {
		readings := []int64{1000, 1000}
		n := 0
		for k, out := range o {
			if out {
				readings[k] = 1090
				n++
			}
		}
		e.Reading.Points = append(e.Reading.Points, plant.ReachPoint{Subgroup: uuid.New(), TakenAt: minute(i), Setup: 1, Readings: readings,
			Stats: plant.Summarise(readings, 2), Outside: n})
	}
	last := minute(len(outside) - 1)
	e.Matter = plant.Matter{ID: uuid.New(), Characteristic: uuid.New(), OpenedTaken: last}
	e.Matter.Lines = []plant.MatterLine{line(plant.Reading, plant.High, last, last)}
	return e
}

func TestReachOfAHold(t *testing.T) {
	t.Parallel()
	none, one, two := [2]bool{}, [2]bool{true, false}, [2]bool{false, true}
	e := held(none, none, one)
	if r := plant.ReachOf(e, e.Setups[1]); !r.From.Equal(minute(1)) || r.Cut || r.Streams != nil {
		t.Errorf("%+v; want it since the last round with all within", r)
	}
	e = held(one, one)
	if r := plant.ReachOf(e, e.Setups[1]); !r.From.Equal(minute(0)) || !r.Cut {
		t.Errorf("%+v; want it since before the first round", r)
	}
	e = held(one)
	if r := plant.ReachOf(e, e.Setups[1]); !r.From.IsZero() || !r.Cut {
		t.Errorf("%+v; want it since the very beginning", r)
	}
	// With streams named, only the one that is outside is in doubt, since its own last
	// good round: here the second, although the first was outside in between.
	a, b := uuid.New(), uuid.New()
	e = held(none, none, one, two)
	for i := range e.Reading.Points {
		e.Reading.Points[i].Streams = []uuid.UUID{a, b}
	}
	r := plant.ReachOf(e, e.Setups[1])
	if !r.From.Equal(minute(2)) || !slices.Equal(r.Streams, []uuid.UUID{b}) {
		t.Errorf("%+v; want the second stream alone, since its own last good round", r)
	}
	r.Log = plant.MachineLog{{At: noon.Add(-time.Hour), Running: true}}
	m := plant.Machine{PartsPerHour: 1200, Streams: []plant.Stream{{ID: a}, {ID: b}}}
	if s := r.Suspects(m, uuid.Nil, minute(12)); s.Parts != 100 || !s.About {
		t.Errorf("%+v; want about 100 parts: half of ten minutes", s)
	}
}

func TestReachOfAFailedGauge(t *testing.T) {
	t.Parallel()
	e := plant.ReachEvidence{Matter: plant.Matter{ID: uuid.New(), OpenedTaken: minute(60)}}
	e.Matter.Lines = []plant.MatterLine{line(plant.GaugeCheck, plant.Neither, minute(60), minute(60))}
	check := func(i int, good bool) plant.GaugeCheckRecord {
		return plant.GaugeCheckRecord{At: minute(i), Good: good}
	}
	e.Checks = []plant.GaugeCheckRecord{check(10, true), check(60, false)}
	if r := plant.ReachOf(e, singles); !r.From.Equal(minute(10)) || r.Cut || !r.Until.IsZero() {
		t.Errorf("%+v; want it since the last good check, still growing", r)
	}
	// A change to the process mends no gauge.
	e.Changes = []plant.Change{{Kind: plant.Maintenance, HappenedAt: minute(70)}}
	e.Checks = append(e.Checks, check(75, false), check(80, true), check(90, true))
	if r := plant.ReachOf(e, singles); !r.Until.Equal(minute(80)) || r.Ended != plant.ByGoodCheck {
		t.Errorf("%+v; want it until the gauge was good again", r)
	}
	e.Checks = e.Checks[1:2]
	if r := plant.ReachOf(e, singles); !r.From.IsZero() || !r.Cut {
		t.Errorf("%+v; want it since the very beginning: no good check is on record", r)
	}
}

func TestReachEndsWhereTheProcessWasCorrected(t *testing.T) {
	t.Parallel()
	e := opened{behind(10, 0.1, 10000, 10000, 10400, 10400)}.with(line(plant.Location, plant.High, minute(3), minute(3)))
	e.Changes = []plant.Change{{Kind: plant.Adjustment, Characteristic: uuid.New(), HappenedAt: minute(4)}, // of something else
		{Kind: plant.ToolChanged, HappenedAt: minute(8)}, {Kind: plant.Setting, HappenedAt: minute(9)}}
	if r := plant.ReachOf(e, singles); !r.Until.Equal(minute(8)) || r.Ended != plant.ByCorrection {
		t.Errorf("%+v; want it until the tool was changed", r)
	}
	// It did not help: a firing stands after it.
	e.Matter.Lines[0].Last = minute(20)
	if r := plant.ReachOf(e, singles); !r.Until.IsZero() {
		t.Errorf("%+v; want it to grow on", r)
	}
	e.Boundaries = []plant.Boundary{{At: minute(30), Kind: plant.ByRevision}, {At: minute(40), Kind: plant.ByChangeover}}
	if r := plant.ReachOf(e, singles); !r.Until.Equal(minute(40)) || r.Ended != plant.ByNewStart {
		t.Errorf("%+v; want it until the changeover: limits change no process", r)
	}
	e.Matter.ClosedAt, e.Matter.RestartAt = minute(35), minute(33)
	if r := plant.ReachOf(e, singles); !r.Until.Equal(minute(33)) || r.Ended != plant.ByFix {
		t.Errorf("%+v; want it until it was put right", r)
	}
	e.Matter.Closing = plant.NothingDone
	if r := plant.ReachOf(e, singles); !r.Until.Equal(minute(33)) || r.Ended != plant.ByNewStart {
		t.Errorf("%+v; want it until the restart mark", r)
	}
	e.Matter.Closing = plant.Fixed
	r := plant.ReachOf(e, singles)
	r.Log = plant.MachineLog{{At: noon.Add(-time.Hour), Running: true}}
	m := plant.Machine{PartsPerHour: 60}
	if a, b := r.Suspects(m, uuid.Nil, minute(50)), r.Suspects(m, uuid.Nil, minute(500)); a != b || a.Parts != 32 {
		t.Errorf("%+v, then %+v; want 32 parts for good", a, b)
	}
}

func TestPartsAreSaidOnlyWhereTheyAreKnown(t *testing.T) {
	t.Parallel()
	count := func(n int64) *int64 { return &n }
	part := uuid.New()
	hour := func(i int) time.Time { return noon.Add(time.Duration(i) * time.Hour) }
	for name, c := range map[string]struct {
		m    plant.Machine
		log  plant.MachineLog
		from time.Time
		want plant.Suspect
	}{
		"it stood still afterwards": {plant.Machine{PartsPerHour: 120}, plant.MachineLog{{At: noon, Running: true}, {At: hour(1)}}, noon, plant.Suspect{Parts: 120, Known: true, About: true}},
		"two figures":               {plant.Machine{PartsPerHour: 1234}, plant.MachineLog{{At: noon, Running: true}, {At: hour(1)}}, noon, plant.Suspect{Parts: 1200, Known: true, About: true}},
		"before the log":            {plant.Machine{PartsPerHour: 120}, plant.MachineLog{{At: noon, Running: true}}, noon.Add(-time.Minute), plant.Suspect{}},
		"no rate":                   {plant.Machine{}, plant.MachineLog{{At: noon, Running: true}}, noon, plant.Suspect{}},
		"since the very beginning":  {plant.Machine{PartsPerHour: 120}, nil, time.Time{}, plant.Suspect{}},
		"counted": {plant.Machine{}, plant.MachineLog{{At: noon, Running: true, Counter: count(1000)}, {At: hour(1), Counter: count(1337)}}, noon,
			plant.Suspect{Parts: 337, Known: true}},
		"another part ran for an hour": {plant.Machine{PartsPerHour: 100}, plant.MachineLog{{At: noon, Running: true, Part: part, Counter: count(0)},
			{At: hour(1), Running: true, Part: uuid.New(), Counter: count(100)}, {At: hour(2), Running: true, Part: part, Counter: count(200)}, {At: hour(3), Part: part, Counter: count(300)}},
			noon, plant.Suspect{Parts: 200, Known: true, About: true}},
	} {
		r := plant.Reach{Reasons: []plant.Suspicion{{}}, From: c.from, Log: c.log}
		if got := r.Suspects(c.m, part, hour(5)); got != c.want {
			t.Errorf("%s: %+v, want %+v", name, got, c.want)
		}
	}
	if got := (plant.Reach{}).Suspects(plant.Machine{}, part, noon); got != (plant.Suspect{Known: true}) {
		t.Errorf("%+v; want no part suspect where there is no reason", got)
	}
}

// While a matter is open its reach only grows, whatever the machine does and whatever
// fires: it never begins later, and never holds fewer parts.
func TestReachOnlyGrowsWhileOpen(t *testing.T) {
	t.Parallel()
	for seed := range uint64(300) {
		rng := rand.New(rand.NewPCG(seed, 7))
		units := make([]int64, 3+rng.IntN(30))
		shift := rng.IntN(len(units))
		for i := range units {
			units[i] = 10000 + int64(100*rng.NormFloat64())
			if i >= shift {
				units[i] += 200
			}
		}
		last := minute(len(units) - 1)
		e := opened{behind(10, 0.1, units...)}.with(line(plant.Location, plant.High, last, last))
		m := plant.Machine{PartsPerHour: 100 + 500*rng.Float64()}
		log := plant.MachineLog{{At: noon.Add(-2 * time.Hour), Running: true}}
		var before plant.Reach
		var parts int
		for now := last; now.Before(last.Add(5 * time.Hour)); {
			now = now.Add(time.Duration(1+rng.IntN(30)) * time.Minute)
			switch rng.IntN(5) {
			case 0:
				log = append(log, plant.MachineState{At: now, Running: rng.IntN(2) == 0})
			case 1:
				e.Matter.Lines[0].Last = now
			case 2:
				e.Matter.Lines = append(e.Matter.Lines, line(plant.Reading, plant.High, now, now))
				e.Reading = e.Location
				e.Reading.Points = append(slices.Clone(e.Location.Points), plant.ReachPoint{TakenAt: now, Setup: 1, Readings: []int64{11000}, Stats: plant.Summarise([]int64{11000}, 3), Outside: 1})
			case 3:
				e.Changes = append(e.Changes, plant.Change{Kind: plant.ChangeKinds[rng.IntN(len(plant.ChangeKinds))], HappenedAt: now})
			}
			r := plant.ReachOf(e, singles)
			r.Log = log
			s := r.Suspects(m, uuid.Nil, now)
			if before.Reasons != nil && (r.From.After(before.From) || s.Parts < parts) {
				t.Fatalf("seed %d: from %s with %d parts to %s with %d", seed, before.From, parts, r.From, s.Parts)
			}
			before, parts = r, s.Parts
		}
	}
}
