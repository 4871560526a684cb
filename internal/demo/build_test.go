package demo_test

import (
	"context"
	"testing"
	"time"

	"holdfast/internal/demo"
	"holdfast/internal/localpg/pgtest"
	"holdfast/internal/plant"
	"holdfast/internal/store"
)

func TestMain(m *testing.M) { pgtest.Main(m, store.Migrate) }

func TestTheWorksHasALifeBehindIt(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	st, err := store.Open(ctx, store.Options{URL: pgtest.Database(t)})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(st.Close)
	now := time.Date(2026, 3, 12, 12, 24, 0, 0, time.UTC) // a Thursday noon
	hash := func(context.Context, string) (string, error) { return "x", nil }
	began := time.Now()
	if err := demo.Build(ctx, st, hash, hash, now, nil); err != nil {
		t.Fatal(err)
	}
	t.Logf("built in %s", time.Since(began).Round(time.Millisecond))
	states, err := st.WithClock(func() time.Time { return now }).StationStates(ctx, 25)
	if err != nil {
		t.Fatal(err)
	}
	seen := map[plant.Condition]int{}
	for _, s := range states {
		for _, c := range s.Characteristics {
			seen[c.Condition()]++
			t.Logf("%-14s %-20s %-9s %d points, owner %s, version %d", s.Name, c.Name, c.Condition(), len(c.Points), c.Owner(), c.Version)
		}
	}
	for _, want := range []plant.Condition{plant.CalmLeave, plant.IsLearning, plant.IsLook, plant.IsHold, plant.IsLate, plant.IsStopped} {
		if seen[want] == 0 {
			t.Errorf("a visitor finds nothing in state %s", want)
		}
	}
	if n, err := st.VerifyLedger(ctx); err != nil {
		t.Errorf("ledger breaks after %d entries: %v", n, err)
	}
}
