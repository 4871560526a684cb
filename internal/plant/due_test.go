package plant_test

import (
	"math/rand/v2"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
)

var noon = time.Date(2026, 3, 12, 12, 0, 0, 0, time.UTC)

func at(minutes float64) time.Time { return noon.Add(time.Duration(minutes * float64(time.Minute))) }

func ran(minutes float64, running bool) plant.MachineState {
	return plant.MachineState{At: at(minutes), Running: running}
}

func TestNextByTime(t *testing.T) {
	t.Parallel()
	every30 := plant.SamplingPlan{EveryMinutes: 30}
	running := plant.MachineLog{ran(-600, true)}
	for _, tc := range []struct {
		name          string
		last, lastDue time.Time
		log           plant.MachineLog
		now           time.Time
		want          time.Time
		state         plant.DueState
	}{
		{"a punctual sample keeps the grid", at(1), at(0), running, at(10), at(30), plant.Later},
		{"a sample far off its time starts a new grid", at(20), at(0), running, at(30), at(50), plant.Later},
		{"due at its time", at(1), at(0), running, at(30), at(30), plant.DueNow},
		{"three minutes are late", at(1), at(0), running, at(33), at(30), plant.Late},
		{"one whole interval late is unknown", at(1), at(0), running, at(61), at(30), plant.TooLate},
		{"only running time counts", at(0), at(0), plant.MachineLog{ran(-600, true), ran(10, false), ran(25, true)}, at(40), at(45), plant.Later},
		{"a machine that stands pauses", at(0), at(0), plant.MachineLog{ran(-600, true), ran(10, false)}, at(400), time.Time{}, plant.Paused},
		{"what fell due before it stopped stays due", at(0), at(0), plant.MachineLog{ran(-600, true), ran(32, false)}, at(33), at(30), plant.Late},
		{"nothing known of the machine counts as running", at(0), at(0), nil, at(10), at(30), plant.Later},
		{"the first sample counts from the plan", time.Time{}, time.Time{}, running, at(10), at(0), plant.Late},
	} {
		d := every30.Next(tc.last, tc.lastDue, at(-30), plant.Machine{}, tc.log, nil, tc.now)
		if !d.At.Equal(tc.want) || d.State != tc.state {
			t.Errorf("%s: due %s in state %d, want %s in state %d", tc.name, d.At.Format("15:04"), d.State, tc.want.Format("15:04"), tc.state)
		}
	}
}

func TestNextByPartsAndEvents(t *testing.T) {
	t.Parallel()
	m := plant.Machine{PartsPerHour: 120}
	running := plant.MachineLog{ran(-600, true)}
	byParts := plant.SamplingPlan{EveryParts: 100}
	if d := byParts.Next(at(0), time.Time{}, at(-60), m, running, nil, at(20)); !d.At.Equal(at(50)) || d.Occasion != plant.ByParts {
		t.Errorf("100 parts at 120 an hour: due %s, %s; want 12:50", d.At.Format("15:04"), d.Occasion)
	}
	count := func(n int64) *int64 { return &n }
	counted := plant.MachineLog{{At: at(-1), Running: true, Counter: count(1000)}, {At: at(10), Running: true, Counter: count(1095)}}
	if d := byParts.Next(at(0), time.Time{}, at(-60), m, counted, nil, at(10)); d.At.Before(at(12)) || d.At.After(at(13)) {
		t.Errorf("95 of 100 parts counted: due %s, want 12:12", d.At.Format("15:04:05"))
	}
	events := plant.SamplingPlan{EveryMinutes: 60, Events: []plant.Occasion{plant.StartUp, plant.ToolChange}}
	log := plant.MachineLog{ran(-600, true), ran(5, false), ran(15, true)}
	happened := plant.Happenings(log, []plant.Change{{Kind: plant.ToolChanged, HappenedAt: at(20)}})
	if d := events.Next(at(0), time.Time{}, at(-60), m, log, happened, at(25)); !d.At.Equal(at(15)) || d.Occasion != plant.StartUp {
		t.Errorf("start-up at 12:15: due %s, %s", d.At.Format("15:04"), d.Occasion)
	}
	if d := events.Next(at(16), time.Time{}, at(-60), m, log, happened, at(25)); d.Occasion != plant.ToolChange {
		t.Errorf("a sample after the start-up answers it; due %s, want tool change", d.Occasion)
	}
	partA, partB := uuid.New(), uuid.New()
	over := plant.Happenings(plant.MachineLog{{At: at(0), Running: true, Part: partA}, {At: at(9), Running: true, Part: partB}}, nil)
	if len(over) != 3 || over[0].Occasion != plant.Changeover {
		t.Errorf("a changeover = %v", over)
	}
}

// TestRunningTimeAddsUp splits any stretch anywhere.
func TestRunningTimeAddsUp(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(3, 3))
	for range 300 {
		var log plant.MachineLog
		clock := -100.0
		for range rng.IntN(12) {
			clock += rng.Float64() * 40
			log = append(log, ran(clock, rng.IntN(2) == 0))
		}
		a := at(-150 + rng.Float64()*300)
		b := a.Add(time.Duration(rng.Float64() * float64(4*time.Hour)))
		mid := a.Add(time.Duration(rng.Float64() * float64(b.Sub(a))))
		if whole, parts := log.Running(a, b), log.Running(a, mid)+log.Running(mid, b); (whole - parts).Abs() > time.Microsecond {
			t.Fatalf("running %s is not %s", whole, parts)
		}
		want := time.Duration(rng.Float64() * float64(2*time.Hour))
		if due, ok := log.After(a, want, b); ok && !due.After(b) && (log.Running(a, due)-want).Abs() > time.Microsecond {
			t.Fatalf("until %s it ran %s, want %s", due, log.Running(a, due), want)
		}
	}
}

func TestShiftsFollowTheWall(t *testing.T) {
	t.Parallel()
	zone, err := time.LoadLocation("Europe/Berlin")
	if err != nil {
		t.Fatal(err)
	}
	p := plant.Plant{Location: zone, Shifts: []plant.Shift{{Name: "early", Starts: 6 * time.Hour}, {Name: "late", Starts: 14 * time.Hour}, {Name: "night", Starts: 22 * time.Hour}}}
	for _, tc := range []struct {
		at, shift string
		began     string
	}{
		{"2026-03-12T05:59:00+01:00", "night", "2026-03-11T22:00:00+01:00"},
		{"2026-03-12T06:00:00+01:00", "early", "2026-03-12T06:00:00+01:00"},
		{"2026-03-29T05:30:00+02:00", "night", "2026-03-28T22:00:00+01:00"}, // a night that is an hour short
		{"2026-10-25T05:30:00+01:00", "night", "2026-10-24T22:00:00+02:00"}, // and one an hour long
	} {
		when, _ := time.Parse(time.RFC3339, tc.at)
		began, _ := time.Parse(time.RFC3339, tc.began)
		if s, from := p.ShiftAt(when); s.Name != tc.shift || !from.Equal(began) {
			t.Errorf("%s is in the %s shift since %s, want %s since %s", tc.at, s.Name, from, tc.shift, tc.began)
		}
	}
}
