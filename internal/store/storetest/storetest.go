// Package storetest gives tests a small plant in a real database: one line, one
// station, two machines, four people, and characteristics of each chart kind.
package storetest

import (
	"context"
	"sync"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/localpg/pgtest"
	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
	"holdfast/internal/store"
)

// Start is where the clocks of fixtures begin: a Thursday noon, UTC.
var Start = time.Date(2026, 3, 12, 12, 0, 0, 0, time.UTC)

// Clock is a clock that a test sets; servers may read it meanwhile.
type Clock struct {
	mu sync.Mutex
	at time.Time
}

// NewClock returns a clock that stands at Start.
func NewClock() *Clock { return &Clock{at: Start} }

// Now reads the clock.
func (c *Clock) Now() time.Time {
	c.mu.Lock()
	defer c.mu.Unlock()
	return c.at
}

// Advance moves the clock on and returns the new time.
func (c *Clock) Advance(d time.Duration) time.Time {
	c.mu.Lock()
	defer c.mu.Unlock()
	c.at = c.at.Add(d)
	return c.at
}

// Plant is a fixture.
type Plant struct {
	*store.Store
	Clock *Clock
	URL   string

	Line     plant.Line
	Station  plant.Station
	Other    plant.Station // a second station, with one characteristic of its own
	Machine  plant.Machine
	Second   plant.Machine // at the same station
	PartA    plant.Part
	PartB    plant.Part           // of the same family as PartA
	Diameter plant.Characteristic // X-bar and R, 5 readings, mm with 3 decimals
	Force    plant.Characteristic // X-bar and S, 6 readings
	Mass     plant.Characteristic // individuals
	Length   plant.Characteristic // at Other

	Operator, Supervisor, Engineer, Administrator plant.Person
}

// New makes the fixture in a fresh copy of the migrated database. secretHash is stored
// as everybody's secret.
func New(t testing.TB, secretHash string) *Plant {
	t.Helper()
	clock := NewClock()
	return NewAt(t, secretHash, clock, clock.Now)
}

// NewAt is New under a clock of the test's own.
func NewAt(t testing.TB, secretHash string, clock *Clock, now func() time.Time) *Plant {
	t.Helper()
	ctx := context.Background()
	url := pgtest.Database(t)
	// Few subgroups between checkpoints, so that small histories cross many.
	st, err := store.Open(ctx, store.Options{URL: url, Clock: now, CheckpointEvery: 16})
	must(t, err)
	t.Cleanup(st.Close)
	p := &Plant{Store: st, Clock: clock, URL: url}
	must(t, st.CreatePlant(ctx, plant.Plant{ID: ID(), Name: "Kestrel Row", Location: time.UTC,
		Shifts: []plant.Shift{{Name: "early", Starts: 6 * time.Hour}, {Name: "late", Starts: 14 * time.Hour}, {Name: "night", Starts: 22 * time.Hour}}}))

	p.Operator = p.person(t, "operator1", "Operator 1", secretHash, plant.Operator)
	p.Supervisor = p.person(t, "supervisor1", "Supervisor 1", secretHash, plant.Supervisor)
	p.Engineer = p.person(t, "engineer1", "Engineer 1", secretHash, plant.Engineer)
	p.Administrator = p.person(t, "administrator1", "Administrator 1", secretHash, plant.Administrator)

	p.Line = plant.Line{ID: ID(), Name: "Axles"}
	must(t, st.AddLine(ctx, p.Line, uuid.Nil))
	p.Station = plant.Station{ID: ID(), LineID: p.Line.ID, Name: "Turning 1", Family: "turning"}
	must(t, st.AddStation(ctx, p.Station, uuid.Nil))
	p.Other = plant.Station{ID: ID(), LineID: p.Line.ID, Name: "Turning 2", Family: "turning", Position: 1}
	must(t, st.AddStation(ctx, p.Other, uuid.Nil))
	p.Machine = plant.Machine{ID: ID(), StationID: p.Station.ID, Name: "Lathe 1", PartsPerHour: 120}
	p.Second = plant.Machine{ID: ID(), StationID: p.Station.ID, Name: "Lathe 2", Position: 1, PartsPerHour: 60}
	third := plant.Machine{ID: ID(), StationID: p.Other.ID, Name: "Lathe 3", PartsPerHour: 60}
	for _, m := range []plant.Machine{p.Machine, p.Second, third} {
		must(t, st.AddMachine(ctx, m, uuid.Nil))
	}
	p.PartA = plant.Part{ID: ID(), Name: "Axle 100", Family: "axles"}
	p.PartB = plant.Part{ID: ID(), Name: "Axle 130", Family: "axles"}
	must(t, st.AddPart(ctx, p.PartA, uuid.Nil))
	must(t, st.AddPart(ctx, p.PartB, uuid.Nil))
	for i, name := range []string{"Insert chipped", "Swarf in collet", "Not found"} {
		must(t, st.AddCause(ctx, "turning", plant.Cause{ID: ID(), Name: name}, i, uuid.Nil))
	}

	p.Diameter = p.characteristic(t, p.Station, p.Machine, "Axle seat diameter", plant.Setup{
		Unit: "mm", Decimals: 3, Target: Decimal(t, "14.991"), Lower: Decimal(t, "14.982"), Upper: Decimal(t, "15.000"),
		Chart: limits.XBarR, Size: 5, Plan: plant.SamplingPlan{EveryMinutes: 30},
	})
	p.Force = p.characteristic(t, p.Station, p.Machine, "Press force", plant.Setup{
		Unit: "kN", Decimals: 2, Upper: Decimal(t, "6.80"), Worse: plant.High, Chart: limits.XBarS, Size: 6, Plan: plant.SamplingPlan{EveryMinutes: 60},
	})
	p.Mass = p.characteristic(t, p.Station, p.Second, "Grease mass", plant.Setup{
		Unit: "g", Decimals: 2, Target: Decimal(t, "1.20"), Lower: Decimal(t, "0.90"), Upper: Decimal(t, "1.50"),
		Chart: limits.Individuals, Size: 1, Plan: plant.SamplingPlan{EveryMinutes: 30},
	})
	p.Length = p.characteristic(t, p.Other, third, "Shoulder length", plant.Setup{
		Unit: "mm", Decimals: 2, Lower: Decimal(t, "9.80"), Upper: Decimal(t, "10.20"),
		Chart: limits.XBarR, Size: 3, Plan: plant.SamplingPlan{EveryMinutes: 30},
	})
	return p
}

func (p *Plant) person(t testing.TB, login, name, secret string, role plant.Role) plant.Person {
	t.Helper()
	v := plant.Person{ID: ID(), Login: login, Name: name, Roles: plant.Roles{role}, Active: true}
	must(t, p.AddPerson(context.Background(), v, secret, uuid.Nil))
	return v
}

func (p *Plant) characteristic(t testing.TB, st plant.Station, m plant.Machine, name string, setup plant.Setup) plant.Characteristic {
	t.Helper()
	c := plant.Characteristic{ID: ID(), StationID: st.ID, MachineID: m.ID, Name: name}
	must(t, p.AddCharacteristic(context.Background(), c, setup, uuid.Nil))
	return c
}

// Round is a round of one characteristic, taken now.
func (p *Plant) Round(c plant.Characteristic, readings ...int64) plant.Round {
	return plant.Round{
		ID: ID(), Station: c.StationID, TakenRaw: p.Clock.Now(), Source: "station", Person: p.Operator.ID,
		Entries: []plant.Entry{{Characteristic: c.ID, SetupVersion: 1, Readings: readings}},
	}
}

// MustRecord records a round of one characteristic.
func (p *Plant) MustRecord(t testing.TB, c plant.Characteristic, readings ...int64) plant.Answer {
	t.Helper()
	a, err := p.Record(context.Background(), p.Round(c, readings...))
	must(t, err)
	return a
}

// MustFreeze freezes limits from everything on record, with the chart's default rules.
func (p *Plant) MustFreeze(t testing.TB, c plant.Characteristic) plant.Revision {
	t.Helper()
	ctx := context.Background()
	h, err := p.History(ctx, c.ID, plant.Stretch{})
	must(t, err)
	revisions, err := p.Revisions(ctx, c.ID)
	must(t, err)
	r, err := p.Freeze(ctx, plant.FreezeRequest{
		Characteristic: c.ID, SetupVersion: h.State.Setup.Version, After: len(revisions), Rules: h.State.Setup.DefaultRules(),
		Reason: "first limits", Person: p.Engineer.ID,
	})
	must(t, err)
	return r
}

// ID makes an id.
func ID() uuid.UUID { return uuid.Must(uuid.NewV7()) }

// Decimal reads an exact decimal.
func Decimal(t testing.TB, s string) *plant.Decimal {
	t.Helper()
	d, err := plant.ParseDecimal(s)
	must(t, err)
	return &d
}

func must(t testing.TB, err error) {
	t.Helper()
	if err != nil {
		t.Fatal(err)
	}
}
