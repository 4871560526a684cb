package store_test

import (
	"context"
	"fmt"
	"math/rand/v2"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/spc/watch"
	"holdfast/internal/store"
	"holdfast/internal/store/storetest"
)

// player does random things to one characteristic through the real write path.
type player struct {
	t      testing.TB
	p      *storetest.Plant
	c      plant.Characteristic
	rng    *rand.Rand
	did    []string
	frozen int
}

func (y *player) note(format string, args ...any) {
	y.did = append(y.did, fmt.Sprintf(format, args...))
}

// readings come from few values, so that ties, runs and points on lines are common.
func (y *player) readings() []int64 {
	n, base, spread := 5, int64(14991), int64(4)
	switch y.c.ID {
	case y.p.Force.ID:
		n, base, spread = 6, 640, 8
	case y.p.Mass.ID:
		n, base, spread = 1, 120, 6
	}
	shift := int64(0)
	switch y.rng.IntN(12) {
	case 0:
		shift = spread
	case 1:
		shift = -2 * spread
	case 2:
		shift = 4 * spread
	}
	out := make([]int64, n)
	for i := range out {
		out[i] = base + shift + y.rng.Int64N(2*spread+1) - spread
	}
	return out
}

func (y *player) random(points []plant.Point) (plant.Point, bool) {
	if len(points) == 0 {
		return plant.Point{}, false
	}
	return points[y.rng.IntN(len(points))], true
}

func (y *player) points() []plant.Point {
	h, err := y.p.History(context.Background(), y.c.ID, plant.Stretch{})
	if err != nil {
		y.t.Fatal(err)
	}
	return h.Points
}

// allRules is a set with every kind of rule, more sensitive than any plant would bear.
var allRules = plant.Rules{
	Location: []watch.Rule{
		{Kind: watch.Beyond, Z: 2}, {Kind: watch.KOfM, K: 2, M: 3, Z: 1}, {Kind: watch.KOfM, K: 4, M: 5, Z: 0.5}, {Kind: watch.OneSide, M: 5},
		{Kind: watch.RisingOrFalling, M: 4}, {Kind: watch.Alternating, M: 6}, {Kind: watch.Within, M: 5, Z: 1}, {Kind: watch.Outside, M: 4, Z: 0.5},
	},
	Dispersion: []watch.Rule{{Kind: watch.Beyond, Z: 2}, {Kind: watch.OneSide, M: 5}, {Kind: watch.RisingOrFalling, M: 4}},
}

func (y *player) act() error {
	ctx, p := context.Background(), y.p
	switch k := y.rng.IntN(20); {
	case k < 10: // a round in order
		p.Clock.Advance(time.Duration(1+y.rng.IntN(30)) * time.Minute)
		r := p.Round(y.c, y.readings()...)
		y.note("record %v", r.Entries[0].Readings)
		_, err := p.Record(ctx, r)
		return err
	case k < 13: // a round that comes late
		r := p.Round(y.c, y.readings()...)
		r.TakenRaw = r.TakenRaw.Add(-time.Duration(1+y.rng.IntN(600)) * time.Minute)
		y.note("record late %v", r.Entries[0].Readings)
		_, err := p.Record(ctx, r)
		return err
	case k < 15: // a correction or a void
		pt, ok := y.random(y.points())
		if !ok {
			return nil
		}
		c := plant.Correction{Characteristic: y.c.ID, Subgroup: pt.Subgroup, TakenAt: pt.TakenAt, Replaces: pt.Version, Readings: y.readings(), Reason: "typing slip", Person: p.Operator.ID}
		if y.rng.IntN(4) == 0 {
			c.Void, c.Person = true, p.Supervisor.ID
		}
		y.note("correct %s void %v", pt.TakenAt.Format("15:04"), c.Void)
		_, err := p.Correct(ctx, c)
		return err
	case k < 17: // the open matter is closed, sometimes with a fix that lies back
		st, err := p.StationState(ctx, y.c.StationID, 1)
		if err != nil {
			return err
		}
		for _, c := range st.Characteristics {
			if c.ID != y.c.ID || c.Matter == nil {
				continue
			}
			req := plant.ClosingRequest{Matter: c.Matter.ID, Version: c.Matter.Version, Cause: "Not found", Person: p.Operator.ID}
			if y.rng.IntN(2) == 0 {
				req.Action = "Insert changed"
				if span := p.Clock.Now().Sub(c.Matter.OpenedTaken); span > 0 {
					req.FixedAt = c.Matter.OpenedTaken.Add(time.Duration(y.rng.Int64N(int64(span))))
				}
			}
			y.note("close, fixed at %s", req.FixedAt.Format("15:04"))
			return p.CloseMatter(ctx, req)
		}
		return nil
	case k < 18: // a revision
		if len(y.points()) < 8 || y.frozen > 5 {
			return nil
		}
		req := plant.FreezeRequest{Characteristic: y.c.ID, SetupVersion: 1, After: y.frozen, Rules: allRules, Reason: "property", Person: p.Engineer.ID}
		if y.rng.IntN(3) == 0 {
			req.InForceFrom = p.Clock.Now().Add(time.Duration(y.rng.IntN(60)) * time.Minute)
		}
		y.note("freeze")
		_, err := p.Freeze(ctx, req)
		if plant.IsKind(err, plant.Invalid) {
			return nil // no spread, or too little
		}
		if err == nil {
			y.frozen++
		}
		return err
	default: // the machine changes over
		parts := []uuid.UUID{p.PartA.ID, p.PartB.ID}
		at := p.Clock.Now().Add(-time.Duration(y.rng.IntN(120)) * time.Minute)
		y.note("changeover at %s", at.Format("15:04"))
		return p.SetMachine(ctx, plant.MachineState{ID: storetest.ID(), Machine: y.c.MachineID, At: at, Running: y.rng.IntN(4) > 0, Part: parts[y.rng.IntN(2)]})
	}
}

// TestJudgementsAreThoseOfOneFold plays random histories through the write path and
// demands that what is stored is what one fold over the finished history gives.
func TestJudgementsAreThoseOfOneFold(t *testing.T) {
	t.Parallel()
	for seed := range uint64(6) {
		t.Run(fmt.Sprint("seed ", seed), func(t *testing.T) {
			t.Parallel()
			p := storetest.New(t, "x")
			c := []plant.Characteristic{p.Diameter, p.Force, p.Mass}[seed%3]
			y := &player{t: t, p: p, c: c, rng: rand.New(rand.NewPCG(seed, 7))}
			for i := range 420 {
				if err := y.act(); err != nil {
					t.Fatalf("step %d (%s): %v", i, y.did[len(y.did)-1], err)
				}
				if i%60 == 59 {
					y.check(i)
				}
				if i == 200 {
					y.restart()
				}
			}
			consistent(t, p)
		})
	}
}

// FuzzWritePath is the same with any seed: run it for as long as you like.
func FuzzWritePath(f *testing.F) {
	f.Add(uint64(11), byte(0))
	f.Add(uint64(12), byte(1))
	f.Fuzz(func(t *testing.T, seed uint64, which byte) {
		p := storetest.New(t, "x")
		c := []plant.Characteristic{p.Diameter, p.Force, p.Mass}[which%3]
		y := &player{t: t, p: p, c: c, rng: rand.New(rand.NewPCG(seed, 7))}
		for i := range 80 {
			if err := y.act(); err != nil {
				t.Fatalf("step %d (%s): %v", i, y.did[len(y.did)-1], err)
			}
		}
		y.check(80)
	})
}

func (y *player) check(step int) {
	y.t.Helper()
	n, differences, err := y.p.CheckJudgements(context.Background())
	if err != nil {
		y.t.Fatal(err)
	}
	for _, d := range differences {
		y.t.Errorf("after step %d, %d subgroups: %s", step, n, d.What)
	}
	if len(differences) > 0 {
		y.t.Fatalf("last done: %v", y.did[max(0, len(y.did)-20):])
	}
}

// restart opens the store anew: nothing that it keeps in memory may matter.
func (y *player) restart() {
	st, err := store.Open(context.Background(), store.Options{URL: y.p.URL, Clock: y.p.Clock.Now, CheckpointEvery: 16})
	if err != nil {
		y.t.Fatal(err)
	}
	y.t.Cleanup(st.Close)
	y.p.Store = st
}

// TestManyVersionsOfOneSubgroup: a subgroup that was corrected more often than a refold
// reads at a time counts in its newest version.
func TestManyVersionsOfOneSubgroup(t *testing.T) {
	t.Parallel()
	p, _ := learned(t)
	ctx := context.Background()
	a := p.MustRecord(t, p.Diameter, 14990, 14991, 14992, 14990, 14991)
	p.Clock.Advance(time.Minute)
	p.MustRecord(t, p.Diameter, 14990, 14991, 14992, 14990, 14991)
	c := plant.Correction{Characteristic: p.Diameter.ID, Subgroup: a.Parts[0].Subgroup, TakenAt: a.TakenAt, Reason: "typing slip", Person: p.Operator.ID}
	for c.Replaces = 1; c.Replaces <= 700; c.Replaces++ {
		c.Readings = []int64{14990, 14991, 14992, 14990, 14991 - int64(c.Replaces%2)}
		if c.Replaces == 700 {
			c.Readings = []int64{14998, 14998, 14999, 14998, 14999}
		}
		if _, err := p.Correct(ctx, c); err != nil {
			t.Fatal(err)
		}
	}
	consistent(t, p)
	h, err := p.History(ctx, p.Diameter.ID, plant.Stretch{Last: 2})
	if err != nil || h.Points[0].Version != 701 || len(h.Points[0].Standing()) == 0 {
		t.Errorf("the corrected subgroup = %+v, %v; want version 701 with its signal", h.Points[0], err)
	}
}
