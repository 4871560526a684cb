package store_test

import (
	"context"
	"testing"
	"time"

	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
	"holdfast/internal/store/storetest"
)

// TestFreezingThatWaitsIsNotBackdated: limits that wait for a save under way come into
// force after it, so that what it was told stays how it is judged.
func TestFreezingThatWaitsIsNotBackdated(t *testing.T) {
	t.Parallel()
	p, first := learned(t)
	ctx := context.Background()
	p.Clock.Advance(30 * time.Minute)
	release := holdRow(t, p, p.Diameter)
	frozen := make(chan error, 1)
	var r plant.Revision
	go func() {
		var err error
		r, err = p.Freeze(ctx, plant.FreezeRequest{Characteristic: p.Diameter.ID, SetupVersion: 1, After: 1, Rules: first.Rules,
			Reason: "test", Person: p.Engineer.ID})
		frozen <- err
	}()
	waiting(t, p)
	later := p.Clock.Advance(10 * time.Second) // another save ends meanwhile
	release()
	if err := <-frozen; err != nil {
		t.Fatal(err)
	}
	if r.InForceFrom.Before(later) || r.FrozenAt.Before(later) {
		t.Errorf("in force from %s, frozen at %s; want not before %s, when the lock was free", r.InForceFrom, r.FrozenAt, later)
	}
}

// waiting returns once somebody waits for a lock in the fixture's database.
func waiting(t *testing.T, p *storetest.Plant) {
	t.Helper()
	for range 200 {
		var n int
		if err := p.Pool().QueryRow(context.Background(), `select count(*) from pg_stat_activity
			where datname = current_database() and wait_event_type = 'Lock'`).Scan(&n); err != nil {
			t.Fatal(err)
		}
		if n > 0 {
			return
		}
		time.Sleep(25 * time.Millisecond)
	}
	t.Fatal("nobody waits for a lock")
}

// TestLimitsAreNotMadeFromTwoUnits: the readings of before a change of unit are integers
// like those after it, and mean something else.
func TestLimitsAreNotMadeFromTwoUnits(t *testing.T) {
	t.Parallel()
	p, _ := learned(t)
	ctx := context.Background()
	p.Clock.Advance(time.Minute)
	setup := plant.Setup{Unit: "in", Decimals: 3, Chart: limits.XBarR, Size: 5}
	if err := p.ChangeSetup(ctx, p.Diameter.ID, setup, 1, p.Engineer.ID); err != nil {
		t.Fatal(err)
	}
	change := p.Clock.Now()
	for range 10 {
		p.Clock.Advance(time.Minute)
		r := p.Round(p.Diameter, 590, 591, 592, 590, 591)
		r.Entries[0].SetupVersion = 2
		a, err := p.Record(ctx, r)
		if err != nil || a.Verdict != plant.Learning {
			t.Fatalf("%+v, %v; want learning under the new unit", a, err)
		}
	}
	f := plant.FreezeRequest{Characteristic: p.Diameter.ID, SetupVersion: 2, After: 1, Rules: setup.DefaultRules(), Reason: "test", Person: p.Engineer.ID}
	if _, err := p.Freeze(ctx, f); !plant.IsKind(err, plant.Invalid) {
		t.Errorf("limits from both units: %v, want invalid", err)
	}
	f.From = change
	if _, err := p.Freeze(ctx, f); err != nil {
		t.Errorf("limits from the new unit alone: %v", err)
	}
	consistent(t, p)
}

// TestScheduledLimitsDoNotOutliveTheirSetup: limits that wait to come into force mean
// nothing under a set-up with another unit, which is learning until its own are frozen.
func TestScheduledLimitsDoNotOutliveTheirSetup(t *testing.T) {
	t.Parallel()
	p, first := learned(t)
	ctx := context.Background()
	p.Clock.Advance(time.Minute)
	if _, err := p.Freeze(ctx, plant.FreezeRequest{Characteristic: p.Diameter.ID, SetupVersion: 1, After: 1, Rules: first.Rules,
		Reason: "next shift", Person: p.Engineer.ID, InForceFrom: p.Clock.Now().Add(time.Hour)}); err != nil {
		t.Fatal(err)
	}
	p.Clock.Advance(time.Minute)
	if err := p.ChangeSetup(ctx, p.Diameter.ID, plant.Setup{Unit: "in", Decimals: 3, Chart: limits.XBarR, Size: 5}, 1, p.Engineer.ID); err != nil {
		t.Fatal(err)
	}
	p.Clock.Advance(2 * time.Hour)
	r := p.Round(p.Diameter, 590, 591, 592, 590, 591)
	r.Entries[0].SetupVersion = 2
	if a, err := p.Record(ctx, r); err != nil || a.Verdict != plant.Learning {
		t.Errorf("%+v, %v; want learning", a, err)
	}
	if r, err := p.RevisionAt(ctx, p.Diameter.ID, p.Clock.Now()); !plant.IsKind(err, plant.NotFound) {
		t.Errorf("in force: revision %d, %v; want none", r.Number, err)
	}
	consistent(t, p)
}
