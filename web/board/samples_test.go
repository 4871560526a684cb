package board

import (
	"math/rand/v2"
	"slices"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
	"holdfast/internal/spc/watch"
	"holdfast/web/ui"
	"holdfast/web/words"
)

// noon is when these tests look at the board: a Thursday, 12:24.
var noon = time.Date(2026, 3, 12, 12, 24, 0, 0, time.UTC)

func format() ui.Format { return ui.NewFormat(words.For("en"), time.UTC, noon) }

func before(d time.Duration) time.Time { return noon.Add(-d) }

// named makes ids that stay the same from run to run.
func named(name string) uuid.UUID { return uuid.NewSHA1(uuid.NameSpaceOID, []byte(name)) }

var kestrelRow = plant.Plant{ID: named("plant"), Name: "Kestrel Row", Location: time.UTC, Demo: true,
	Shifts: []plant.Shift{{Name: "early", Starts: 6 * time.Hour}, {Name: "late", Starts: 14 * time.Hour}, {Name: "night", Starts: 22 * time.Hour}}}

func decimal(units int64, decimals int) *plant.Decimal {
	return &plant.Decimal{Units: units, Decimals: decimals}
}

// quiet is a characteristic that nothing is the matter with: 25 subgroups, limits,
// the next round in a while.
func quiet(station plant.Station, name, unit string, decimals int, centre int64) plant.CharacteristicState {
	setup := plant.Setup{Version: 1, Unit: unit, Decimals: decimals, Chart: limits.XBarR, Size: 5,
		Lower: decimal(centre-9, decimals), Upper: decimal(centre+9, decimals), Plan: plant.SamplingPlan{EveryMinutes: 30}}
	c := plant.CharacteristicState{
		Characteristic: plant.Characteristic{ID: named(station.Name + name), StationID: station.ID, Name: name},
		Setup:          setup, Version: 1,
		Segment:   plant.Segment{From: before(75 * time.Hour), Revision: named("revision" + station.Name + name)},
		LastTaken: before(12 * time.Minute),
		Due:       plant.Due{At: noon.Add(18 * time.Minute), Occasion: plant.ByTime, State: plant.Later},
	}
	unitSize := decimal(1, decimals).Float()
	c.Standing = plant.Standing{Revision: c.Segment.Revision, Figure: plant.Figure{Grade: plant.AtCapable}}
	c.Revision = &plant.Revision{ID: c.Segment.Revision, Number: 1, Chart: limits.XBarR, Center: float64(centre) * unitSize,
		Sigma: 3 * unitSize, Multiple: 3, Rules: setup.DefaultRules()}
	r := rand.New(rand.NewPCG(7, uint64(station.ID[0])<<8|uint64(len(name))))
	for i := range 25 {
		readings := make([]int64, 5)
		for k := range readings {
			readings[k] = centre + int64(r.NormFloat64()*3)
		}
		c.Points = append(c.Points, plant.Point{Characteristic: c.ID, Subgroup: named(c.ID.String() + string(rune('a'+i))),
			TakenAt: before(time.Duration(24-i)*30*time.Minute + 12*time.Minute), Setup: 1,
			Stats: plant.Summarise(readings, decimals), Readings: readings})
	}
	return c
}

var beyond = plant.Firing{Panel: plant.Location, Rule: plant.RuleKey(watch.Rule{Kind: watch.Beyond, Z: 3}), Side: plant.High}
var outside = plant.Firing{Panel: plant.Reading, Rule: plant.OutsideSpecification, Side: plant.High}

// open opens a matter on a characteristic with its newest subgroup.
func open(c *plant.CharacteristicState, since time.Duration, firings ...plant.Firing) *plant.Matter {
	newest := &c.Points[len(c.Points)-1]
	m := &plant.Matter{ID: named("matter" + c.ID.String()), Station: c.StationID, Characteristic: c.ID, OpenedAt: before(since), Version: 1}
	for i := range newest.Readings {
		newest.Readings[i] += 5
	}
	for _, f := range firings {
		if f.Panel == plant.Reading {
			newest.Readings[0] = c.Setup.Upper.Units + 11
			newest.Outside = 1
		}
		newest.Signals = append(newest.Signals, plant.Signal{Firing: f, Characteristic: c.ID, Subgroup: newest.Subgroup, Matter: m.ID})
		m.Lines = append(m.Lines, plant.MatterLine{Firing: f, First: m.OpenedAt, Last: newest.TakenAt, Count: 1})
	}
	newest.Stats = plant.Summarise(newest.Readings, c.Setup.Decimals)
	c.Matter = m
	return m
}

func late(c *plant.CharacteristicState, by time.Duration, state plant.DueState) {
	c.Due = plant.Due{At: before(by), Occasion: plant.ByTime, State: state}
	c.LastTaken = before(by + 30*time.Minute)
}

func learning(c *plant.CharacteristicState, collected int) {
	c.Revision, c.Collected, c.Segment = nil, collected, plant.Segment{}
	c.Points = c.Points[max(0, len(c.Points)-collected):]
}

func stopped(c *plant.CharacteristicState, since time.Duration) {
	c.Due = plant.Due{State: plant.Paused}
	c.Machine.Known, c.Machine.State = true, plant.MachineState{At: before(since)}
}

// floor makes lanes of stations with one quiet characteristic each.
func floor(lanes ...[]string) []plant.StationState {
	names := []string{"Axles", "Shells", "Assembly", "Rims", "Spokes", "Forks", "Paint", "Packing", "Wheels", "Tools"}
	var out []plant.StationState
	for i, stations := range lanes {
		line := plant.Line{ID: named("line" + names[i]), Name: names[i], Position: i}
		for j, name := range stations {
			st := plant.StationState{Station: plant.Station{ID: named(line.Name + name), LineID: line.ID, Name: name, Position: j}, Line: line}
			st.Characteristics = []plant.CharacteristicState{quiet(st.Station, "Axle seat", "mm", 3, 14991)}
			st.Machines = []plant.MachineNow{{Machine: plant.Machine{ID: named("machine" + name), StationID: st.ID, Name: name}}}
			out = append(out, st)
		}
	}
	return out
}

// twelve is the plant of the picture: three lanes of four, one of each state.
func twelve() []plant.StationState {
	s := floor([]string{"Turning 1", "Turning 2", "Thread rolling", "Straightening"},
		[]string{"Shell turning", "Drilling 1", "Drilling 2", "Anodising"},
		[]string{"Press", "Greasing", "Final test", "Sound check"})
	set := func(i int, name, unit string, decimals int, centre int64) *plant.CharacteristicState {
		s[i].Characteristics[0] = quiet(s[i].Station, name, unit, decimals, centre)
		return &s[i].Characteristics[0]
	}
	m := open(set(0, "Axle seat", "mm", 3, 14991), 12*time.Minute, beyond)
	m.TakenByName, m.TakenAt = "Operator 1", before(10*time.Minute)
	late(set(3, "Run-out", "mm", 3, 18), 9*time.Minute, plant.Late)
	set(2, "Pitch diameter", "mm", 3, 14352)
	set(4, "Bearing bore", "mm", 3, 27994)
	learning(set(5, "Spoke-hole position", "mm", 3, 62), 12)
	c := set(6, "Spoke-hole position", "mm", 3, 41)
	stopped(c, 36*time.Minute)
	s[6].Machines[0].Known, s[6].Machines[0].State = true, c.Machine.State
	set(7, "Coating", "μm", 1, 98)
	m = open(set(8, "Press force", "kN", 2, 671), 26*time.Minute, outside)
	m.TakenByName, m.TakenAt = "Supervisor 1", before(23*time.Minute)
	set(9, "Grease mass", "g", 2, 124)
	more := quiet(s[9].Station, "Fill height", "mm", 1, 84)
	late(&more, 3*time.Hour, plant.TooLate)
	s[9].Characteristics = append(s[9].Characteristics, more, quiet(s[9].Station, "Seal lip", "mm", 2, 310))
	late(set(10, "Drag torque", "N m", 3, 31), 2*time.Minute, plant.DueNow)
	open(set(11, "Noise", "dB", 1, 412), 19*time.Minute, beyond)
	return s
}

// sixty is a large works: eight lanes, much going on.
func sixty() []plant.StationState {
	lanes := make([][]string, 8)
	for i := range 60 {
		lanes[i%8] = append(lanes[i%8], []string{"Turning ", "Drilling ", "Press ", "Greasing ", "Final test "}[i%5]+string(rune('A'+i/26))+string(rune('A'+i%26)))
	}
	s := floor(lanes...)
	for i := range s {
		c := &s[i].Characteristics[0]
		switch i % 12 {
		case 1:
			open(c, time.Duration(i)*3*time.Minute, beyond)
		case 4:
			late(c, time.Duration(i+5)*time.Minute, plant.Late)
		case 6:
			open(c, time.Duration(i)*time.Minute, outside, beyond)
		case 8:
			learning(c, i%25)
		case 9:
			s[i].Characteristics = append(s[i].Characteristics, quiet(s[i].Station, "Bearing bore", "mm", 3, 27994))
		}
	}
	return s
}

func characteristic(t *testing.T, s []plant.StationState, station string, i int) *plant.CharacteristicState {
	t.Helper()
	for k := range s {
		if s[k].Name == station {
			return &s[k].Characteristics[i]
		}
	}
	t.Fatalf("no station %s", station)
	return nil
}

// troubled is a works in which so many stations have something open; the machines of some
// stand still.
func troubled(n int, still ...int) []plant.StationState {
	states := sixty()
	for i := range states {
		c := &states[i].Characteristics[0]
		if c.Matter = nil; i < n {
			open(c, time.Duration(i+1)*7*time.Minute, outside)
		}
		if slices.Contains(still, i) {
			stopped(c, time.Hour)
		}
		for j := range states[i].Characteristics {
			c := &states[i].Characteristics[j]
			c.Due = plant.Due{State: plant.Later, At: noon.Add(time.Hour)}
			if j > 0 {
				c.Matter = nil
			}
		}
	}
	return states
}
