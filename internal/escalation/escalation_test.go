package escalation_test

import (
	"context"
	"slices"
	"sync"
	"testing"
	"time"

	"holdfast/internal/plant"
	"holdfast/internal/store/storetest"
)

func TestStepsFireInTheirOrderAtTheirTimesAndOnce(t *testing.T) {
	t.Parallel()
	p := learned(t)
	s := newServer(t, p, p.Store)
	p.MustRecord(t, p.Diameter, high...)
	opened := p.Clock.Now()
	for _, at := range []struct {
		minutes int
		want    []string
		out     int // messages
	}{
		{9, nil, 0}, {10, []string{"look 0.1"}, 0}, {19, []string{"look 0.1"}, 0},
		{20, []string{"look 0.1", "look 0.2"}, 0}, {44, []string{"look 0.1", "look 0.2"}, 0},
		{45, []string{"look 0.1", "look 0.2", "look 0.3"}, 2}, {600, []string{"look 0.1", "look 0.2", "look 0.3"}, 2},
	} {
		p.Clock.Advance(opened.Add(time.Duration(at.minutes) * time.Minute).Sub(p.Clock.Now()))
		s.look(t)
		s.look(t)
		if got := steps(t, p); !slices.Equal(got, at.want) {
			t.Errorf("after %d minutes: %q, want %q", at.minutes, got, at.want)
		}
		if n := count(t, p, `select count(*) from outbox`); n != at.out {
			t.Errorf("after %d minutes: %d messages, want %d", at.minutes, n, at.out)
		}
	}
	whole(t, p)
}

func TestWhatWasMissedWhileNoServerRanIsMadeUp(t *testing.T) {
	t.Parallel()
	p := learned(t)
	p.MustRecord(t, p.Diameter, outside...)
	p.Clock.Advance(3 * time.Hour)
	if n := newServer(t, p, p.Store).look(t); n != 3 {
		t.Errorf("%d steps, want all three at once", n)
	}
	if got, want := steps(t, p), []string{"hold 0.1", "hold 0.2", "hold 0.3"}; !slices.Equal(got, want) {
		t.Errorf("%q, want %q", got, want)
	}
}

func TestTakingAndClosingStopIt(t *testing.T) {
	t.Parallel()
	p := learned(t)
	s := newServer(t, p, p.Store)
	a := p.MustRecord(t, p.Diameter, high...)
	p.Clock.Advance(12 * time.Minute)
	s.look(t)
	take(t, p, a.Parts[0].Matter)
	p.Clock.Advance(5 * time.Hour)
	s.look(t)
	if got := steps(t, p); !slices.Equal(got, []string{"look 0.1"}) {
		t.Errorf("after it was taken: %q", got)
	}
	// A call that was read before it was taken is not fired after.
	states, err := p.StationStates(context.Background(), 0)
	if err != nil {
		t.Fatal(err)
	}
	for i := range states {
		for j := range states[i].Characteristics {
			if m := states[i].Characteristics[j].Matter; m != nil {
				m.TakenAt = time.Time{}
			}
		}
	}
	due := plant.CallsDue(states, p.Clock.Now())
	if len(due) != 2 {
		t.Fatalf("%d calls, want two that are stale", len(due))
	}
	for _, c := range due {
		if fired, err := p.FireStep(context.Background(), c, nil); err != nil || fired {
			t.Errorf("a stale call: fired = %v, %v", fired, err)
		}
	}
}

func TestAWithdrawnSignalDoesNotEscalate(t *testing.T) {
	t.Parallel()
	p := learned(t)
	a := p.MustRecord(t, p.Diameter, high...)
	if _, err := p.Correct(context.Background(), plant.Correction{Characteristic: p.Diameter.ID, Subgroup: a.Parts[0].Subgroup, TakenAt: a.TakenAt,
		Replaces: 1, Readings: calm, Reason: "typing slip", Person: p.Operator.ID}); err != nil {
		t.Fatal(err)
	}
	p.Clock.Advance(3 * time.Hour)
	if n := newServer(t, p, p.Store).look(t); n != 0 {
		t.Errorf("%d steps for a matter that waits to be closed as withdrawn", n)
	}
}

// TestTwoServersAndARestart has two servers look at once, again and again, while their
// connections are killed under them, and one be started anew.
func TestTwoServersAndARestart(t *testing.T) {
	t.Parallel()
	p := learned(t)
	p.MustRecord(t, p.Diameter, high...)
	run(t, p, true) // the rest of the plant is overdue as well, later on
	a, b := another(t, p), another(t, p)
	ctx := context.Background()
	for range 12 {
		p.Clock.Advance(8 * time.Minute)
		var wg sync.WaitGroup
		for _, s := range []*server{a, b} {
			wg.Go(func() {
				for range 4 {
					_, _ = s.Look(ctx) // may be cut off in the midst of anything
				}
			})
		}
		wg.Go(func() {
			for range 6 {
				_, _ = p.Pool().Exec(ctx, `select pg_terminate_backend(pid) from pg_stat_activity where datname = current_database() and pid <> pg_backend_pid() and random() < 0.4`)
				time.Sleep(3 * time.Millisecond)
			}
		})
		wg.Wait()
		a.store.Close()
		a = another(t, p)
	}
	for range 3 {
		_, _ = b.Look(ctx) // a connection that was killed while it lay idle is found out here
	}
	b.look(t)
	if n := count(t, p, `select count(*) from (select from escalation_step group by matter_id, overdue_id, turn, step having count(*) > 1) twice`); n != 0 {
		t.Errorf("%d steps fired twice", n)
	}
	if n := count(t, p, `select count(*) from escalation_step where matter_id is not null`); n != 3 {
		t.Errorf("%d steps of the matter, want 3", n)
	}
	if n := count(t, p, `select count(*) from overdue_round where ended_at is null`); n != 2 {
		t.Errorf("%d overdue rounds, want one a station", n)
	}
	if n := count(t, p, `select count(*) from escalation_step where overdue_id is not null`); n == 0 {
		t.Error("the overdue rounds did not escalate")
	}
	if n, want := count(t, p, `select count(*) from outbox`), 2*count(t, p, `select count(*) from escalation_step where step = 3`); n != want {
		t.Errorf("%d messages, want %d", n, want)
	}
	whole(t, p)
}

// TestAServerThatComesSecondFiresNothing: the other one fires between its look and its
// write.
func TestAServerThatComesSecondFiresNothing(t *testing.T) {
	t.Parallel()
	p := learned(t)
	p.MustRecord(t, p.Diameter, high...)
	a, b := another(t, p), another(t, p)
	p.Clock.Advance(time.Hour)
	compose := a.Compose
	a.Compose = func(c plant.Call) []plant.Message {
		if n := b.look(t); n == 0 {
			t.Error("the other server had nothing to fire")
		}
		return compose(c)
	}
	if n := a.look(t) + len(steps(t, p)); n != 2+3 {
		t.Errorf("fired %q", steps(t, p))
	}
	if n := count(t, p, `select count(*) from outbox`); n != 2 {
		t.Errorf("%d messages, want one a target", n)
	}
}

func TestAnOverdueRoundEscalatesAndEndsWithTheRound(t *testing.T) {
	t.Parallel()
	p := learned(t)
	s := newServer(t, p, p.Store)
	run(t, p, true)
	for _, c := range []plant.Characteristic{p.Force, p.Mass, p.Length} { // a fresh beginning for all
		n := map[plant.Characteristic]int{p.Force: 6, p.Mass: 1, p.Length: 3}[c]
		p.MustRecord(t, c, slices.Repeat([]int64{map[int]int64{6: 650, 1: 120, 3: 1000}[n]}, n)...)
	}
	p.MustRecord(t, p.Diameter, calm...)
	taken := p.Clock.Now()
	at := func(minutes int) {
		t.Helper()
		p.Clock.Advance(taken.Add(time.Duration(minutes) * time.Minute).Sub(p.Clock.Now()))
		s.look(t)
		s.look(t) // found by the first, fired by the second
	}
	at(49) // due at 30, late, and the first step is 20 minutes after
	if got := steps(t, p); len(got) != 0 {
		t.Errorf("too early: %q", got)
	}
	at(50)
	if got, want := steps(t, p), []string{"round 0.1", "round 0.1"}; !slices.Equal(got, want) {
		t.Errorf("%q, want one a station: %q", got, want)
	}
	// The machine stands still for a while and goes on: the same sample is missing, and
	// the step that was fired is not fired again.
	p.MustRecord(t, p.Diameter, calm...)
	p.MustRecord(t, p.Mass, 120)
	p.MustRecord(t, p.Force, 650, 650, 650, 650, 650, 650)
	at(71)
	if got, want := steps(t, p), []string{"round 0.1", "round 0.1", "round 0.2"}; !slices.Equal(got, want) {
		t.Errorf("the other station goes on: %q, want %q", got, want)
	}
	p.MustRecord(t, p.Length, 1000, 1000, 1000)
	at(72)
	if n := count(t, p, `select count(*) from overdue_round where ended_at is null`); n != 0 {
		t.Errorf("%d rounds go on after they were taken", n)
	}
	whole(t, p)
}

func TestTheSameMissedSampleGoesOnWhereItWas(t *testing.T) {
	t.Parallel()
	p := learned(t)
	s := newServer(t, p, p.Store)
	ctx := context.Background()
	set := func(running bool, part plant.Part) {
		t.Helper()
		if err := p.SetMachine(ctx, plant.MachineState{ID: storetest.ID(), Machine: p.Machine.ID, Running: running, Part: part.ID}); err != nil {
			t.Fatal(err)
		}
	}
	set(true, p.PartA)
	p.MustRecord(t, p.Force, 650, 650, 650, 650, 650, 650)
	p.Clock.Advance(55 * time.Minute)
	s.look(t)
	s.look(t)
	if got := steps(t, p); !slices.Equal(got, []string{"round 0.1"}) {
		t.Fatalf("%q", got)
	}
	if _, err := p.Pool().Exec(ctx, `update characteristic set part_id = $2 where id = any($1)`, []any{p.Diameter.ID, p.Force.ID}, p.PartA.ID); err != nil {
		t.Fatal(err)
	}
	set(true, p.PartB) // nothing is measured of this part
	p.Clock.Advance(time.Minute)
	s.look(t)
	if n := count(t, p, `select count(*) from overdue_round where ended_at is null`); n != 0 {
		t.Errorf("%d rounds are overdue while something else is made", n)
	}
	set(true, p.PartA)
	p.Clock.Advance(time.Minute)
	s.look(t)
	s.look(t)
	if got := steps(t, p); !slices.Equal(got, []string{"round 0.1"}) {
		t.Errorf("fired again: %q", got)
	}
	if n := count(t, p, `select count(*) from overdue_round where ended_at is null`); n != 1 {
		t.Errorf("%d rounds are overdue, want the same one", n)
	}
}
