package store_test

import (
	"context"
	"log/slog"
	"math/rand/v2"
	"sync"
	"testing"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"
	"golang.org/x/sync/errgroup"

	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
	"holdfast/internal/store"
	"holdfast/internal/store/storetest"
)

// TestManyWriters lets many tablets write the same and different characteristics at
// once, rounds that lock several among them, in every order.
func TestManyWriters(t *testing.T) {
	t.Parallel()
	p := storetest.New(t, "x")
	ctx := context.Background()
	const writers, rounds = 12, 25
	g, ctx := errgroup.WithContext(ctx)
	for w := range writers {
		rng := rand.New(rand.NewPCG(uint64(w), 1))
		g.Go(func() error {
			for i := range rounds {
				r := plant.Round{ID: storetest.ID(), Station: p.Station.ID, Source: "station", Person: p.Operator.ID,
					TakenRaw: storetest.Start.Add(-time.Duration(rng.IntN(100)) * time.Minute)}
				entries := []plant.Entry{
					{Characteristic: p.Diameter.ID, SetupVersion: 1, Readings: []int64{14990, 14991, 14992, 14993, 14985 + rng.Int64N(20)}},
					{Characteristic: p.Force.ID, SetupVersion: 1, Readings: []int64{640, 641, 642, 643, 644, 640 + rng.Int64N(50)}},
					{Characteristic: p.Mass.ID, SetupVersion: 1, Readings: []int64{100 + rng.Int64N(60)}},
				}
				rng.Shuffle(len(entries), func(i, j int) { entries[i], entries[j] = entries[j], entries[i] })
				r.Entries = entries[:1+rng.IntN(3)]
				if _, err := p.Record(ctx, r); err != nil {
					return err
				}
				if i%10 == 9 {
					if err := p.SetMachine(ctx, plant.MachineState{ID: storetest.ID(), Machine: p.Machine.ID, Running: true, Part: p.PartA.ID}); err != nil {
						return err
					}
				}
			}
			return nil
		})
	}
	if err := g.Wait(); err != nil {
		t.Fatal(err)
	}
	var stored int
	if err := p.Pool().QueryRow(context.Background(), `select count(*) from round`).Scan(&stored); err != nil || stored != writers*rounds {
		t.Errorf("%d rounds on record, %v; want %d", stored, err, writers*rounds)
	}
	consistent(t, p)
}

// TestOneIDManyTimes sends one round from many sides at once, with equal content and
// with different content. It is there once, whoever came first; what was different is
// set aside.
func TestOneIDManyTimes(t *testing.T) {
	t.Parallel()
	p := storetest.New(t, "x")
	ctx := context.Background()
	for range 8 {
		id := storetest.ID()
		round := func(last int64) plant.Round {
			r := p.Round(p.Diameter, 14990, 14991, 14992, 14990, last)
			r.ID = id
			return r
		}
		other := p.Round(p.Mass, 120) // locks another row
		other.ID = id
		sends := []plant.Round{round(14990), round(14990), round(14990), round(14991), round(14991), other, other}
		answers := make([]error, len(sends))
		var wg sync.WaitGroup
		for i, r := range sends {
			wg.Go(func() { _, answers[i] = p.Record(ctx, r) })
		}
		wg.Wait()
		taken := map[[32]byte]bool{}
		for i, err := range answers {
			switch {
			case err == nil:
				taken[sends[i].Digest()] = true
			case !plant.IsKind(err, plant.Conflict):
				t.Errorf("send %d: %v, want success or a conflict", i, err)
			}
		}
		if len(taken) != 1 {
			t.Errorf("%d different contents were accepted under one id, want 1", len(taken))
		}
		var rounds, subgroups, aside int
		if err := p.Pool().QueryRow(ctx, `select (select count(*) from round where id = $1), (select count(*) from subgroup where round_id = $1),
			(select count(*) from set_aside where about = $1)`, id).Scan(&rounds, &subgroups, &aside); err != nil {
			t.Fatal(err)
		}
		if rounds != 1 || subgroups != 1 || aside != 2 {
			t.Errorf("on record: %d rounds, %d subgroups, %d set aside; want 1, 1 and 2", rounds, subgroups, aside)
		}
	}
	consistent(t, p)
}

// TestTwoPeopleOnOneMatter lets several people take and close one matter at once.
func TestTwoPeopleOnOneMatter(t *testing.T) {
	t.Parallel()
	p, _ := learned(t)
	ctx := context.Background()
	a := p.MustRecord(t, p.Diameter, 14998, 14998, 14999, 14998, 14999)
	m, err := p.Matter(ctx, a.Parts[0].Matter)
	if err != nil {
		t.Fatal(err)
	}
	closed := make([]error, 6)
	var wg sync.WaitGroup
	for i := range closed {
		wg.Go(func() {
			closed[i] = p.CloseMatter(ctx, plant.ClosingRequest{Matter: m.ID, Version: m.Version, Cause: "Not found", Person: p.Operator.ID})
		})
	}
	wg.Wait()
	won := 0
	for _, err := range closed {
		if err == nil {
			won++
		} else if !plant.IsKind(err, plant.Conflict) {
			t.Errorf("closing: %v, want success or a conflict", err)
		}
	}
	if won != 1 {
		t.Errorf("%d of the closings were accepted, want 1", won)
	}
	consistent(t, p)
}

func consistent(t testing.TB, p *storetest.Plant) {
	t.Helper()
	_, differences, err := p.CheckJudgements(context.Background())
	if err != nil {
		t.Fatal(err)
	}
	for _, d := range differences {
		t.Error(d.What)
	}
	if n, err := p.VerifyLedger(context.Background()); err != nil {
		t.Errorf("ledger breaks after %d entries: %v", n, err)
	}
	differences, err = p.CheckRecord(context.Background())
	if err != nil {
		t.Fatal(err)
	}
	for _, d := range differences {
		t.Error(d.What)
	}
}

// told collects what a feed tells.
type told struct{ got chan uuid.UUID }

func newTold() *told { return &told{got: make(chan uuid.UUID, 1000)} }

func (o *told) tell(ids []uuid.UUID) {
	for _, id := range ids {
		select {
		case o.got <- id:
		default:
		}
	}
}

func (o *told) await(t *testing.T, want uuid.UUID, within time.Duration) {
	t.Helper()
	limit := time.After(within)
	for {
		select {
		case id := <-o.got:
			if id == want {
				return
			}
		case <-limit:
			t.Fatalf("nobody was told of station %s within %s", want, within)
		}
	}
}

func (o *told) drain() {
	for {
		select {
		case <-o.got:
		default:
			return
		}
	}
}

// TestAnotherServerHears covers the way between two servers on one database, by notice
// and, when the first died between commit and notice, by looking again.
func TestAnotherServerHears(t *testing.T) {
	t.Parallel()
	p := storetest.New(t, "x")
	ctx, cancel := context.WithCancel(context.Background())
	second, err := store.Open(ctx, store.Options{URL: p.URL})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(second.Close)
	here, there := newTold(), newTold()
	var running sync.WaitGroup
	t.Cleanup(running.Wait)
	t.Cleanup(cancel)
	log := slog.New(slog.DiscardHandler)
	first := p.NewFeed(log, here.tell)
	firstCtx, firstDies := context.WithCancel(ctx)
	running.Go(func() { first.Run(firstCtx) })
	feed := second.NewFeed(log, there.tell)
	running.Go(func() { feed.Run(ctx) })
	there.await(t, p.Station.ID, 10*time.Second) // all are marked when the line stands

	there.drain()
	p.MustRecord(t, p.Diameter, 14990, 14991, 14992, 14990, 14991)
	here.await(t, p.Station.ID, time.Second)
	there.await(t, p.Station.ID, 10*time.Second)

	firstDies() // it goes on committing, but announces nothing any more
	there.drain()
	time.Sleep(1700 * time.Millisecond) // what is under way is told once more by looking again
	there.drain()
	p.Clock.Advance(time.Minute)
	p.MustRecord(t, p.Length, 1000, 1001, 999)
	there.await(t, p.Other.ID, 10*time.Second)
}

// holdRow locks the state row of a characteristic until release is called.
func holdRow(t *testing.T, p *storetest.Plant, c plant.Characteristic) (release func()) {
	t.Helper()
	ctx := context.Background()
	conn, err := pgx.Connect(ctx, p.URL)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { _ = conn.Close(ctx) })
	tx, err := conn.Begin(ctx)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := tx.Exec(ctx, `select from characteristic_state where characteristic_id = $1 for update`, c.ID); err != nil {
		t.Fatal(err)
	}
	return func() {
		if err := tx.Rollback(ctx); err != nil {
			t.Error(err)
		}
	}
}

// TestSaveThatCannotGetItsLock gives up in time, leaves nothing behind and blocks
// nobody; the same round sent again is taken.
func TestSaveThatCannotGetItsLock(t *testing.T) {
	t.Parallel()
	p := storetest.New(t, "x")
	ctx := context.Background()
	st, err := store.Open(ctx, store.Options{URL: p.URL, Clock: p.Clock.Now, MaxConns: 1, SaveLimit: 300 * time.Millisecond})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(st.Close)
	release := holdRow(t, p, p.Diameter)
	both := p.Round(p.Diameter, 14990, 14991, 14992, 14990, 14991)
	both.Entries = append(both.Entries, plant.Entry{Characteristic: p.Mass.ID, SetupVersion: 1, Readings: []int64{120}})
	began := time.Now()
	if a, err := st.Record(ctx, both); err == nil {
		t.Fatalf("a save that cannot get its lock answered %+v", a)
	}
	if took := time.Since(began); took > 10*time.Second {
		t.Errorf("it gave up after %s", took)
	}
	var open int
	for range 50 { // the server is told, and may need a moment
		if err := p.Pool().QueryRow(ctx, `select count(*) from pg_stat_activity where datname = current_database() and wait_event_type = 'Lock'`).Scan(&open); err != nil {
			t.Fatal(err)
		}
		if open == 0 {
			break
		}
		time.Sleep(100 * time.Millisecond)
	}
	if open > 0 {
		t.Errorf("%d backends still wait for the lock", open)
	}
	if _, err := p.Record(ctx, p.Round(p.Mass, 121)); err != nil {
		t.Errorf("another characteristic of that round: %v", err)
	}
	release()
	if _, err := p.Record(ctx, both); err != nil {
		t.Errorf("the same round again: %v", err)
	}
	consistent(t, p)
}

// TestSaveOutlivesItsRequest: who leaves the page has still pressed the key.
func TestSaveOutlivesItsRequest(t *testing.T) {
	t.Parallel()
	p := storetest.New(t, "x")
	release := holdRow(t, p, p.Diameter)
	ctx, leave := context.WithCancel(context.Background())
	r := p.Round(p.Diameter, 14990, 14991, 14992, 14990, 14991)
	saved := make(chan error, 1)
	go func() {
		_, err := p.Record(ctx, r)
		saved <- err
	}()
	time.Sleep(50 * time.Millisecond)
	leave()
	time.Sleep(50 * time.Millisecond)
	release()
	if err := <-saved; err != nil {
		t.Fatal(err)
	}
	if _, err := p.Answer(context.Background(), r.ID); err != nil {
		t.Error(err)
	}
}

// TestEverythingAtOnce: rounds in and out of order over several characteristics,
// corrections, takings, closings, changes, changeovers, new limits and another set-up,
// from many sides. Nobody waits for ever, and what is on record is what one fold gives.
func TestEverythingAtOnce(t *testing.T) {
	t.Parallel()
	p, first := learned(t)
	began := p.Clock.Now()
	g, ctx := errgroup.WithContext(context.Background())
	ctx, cancel := context.WithTimeout(ctx, time.Minute)
	defer cancel()
	tolerated := func(err error) error {
		if plant.IsKind(err, plant.Conflict) || plant.IsKind(err, plant.Invalid) || plant.IsKind(err, plant.NotFound) {
			return nil // somebody was quicker
		}
		return err
	}
	for w := range 10 {
		rng := rand.New(rand.NewPCG(uint64(w), 3))
		g.Go(func() error {
			for range 22 {
				p.Clock.Advance(time.Duration(rng.IntN(90)) * time.Second)
				if err := tolerated(somethingAtOnce(ctx, p, rng, began, first)); err != nil {
					return err
				}
			}
			return nil
		})
	}
	if err := g.Wait(); err != nil {
		t.Fatal(err)
	}
	consistent(t, p)
	var rounds, revisions, closed int
	if err := p.Pool().QueryRow(context.Background(), `select (select count(*) from round), (select count(*) from revision),
		(select count(*) from matter where closed_at is not null)`).Scan(&rounds, &revisions, &closed); err != nil {
		t.Fatal(err)
	}
	if rounds < 30 || revisions < 2 || closed < 1 {
		t.Errorf("%d rounds, %d revisions, %d matters closed: too little happened to show anything", rounds, revisions, closed)
	}
}

func somethingAtOnce(ctx context.Context, p *storetest.Plant, rng *rand.Rand, began time.Time, first plant.Revision) error {
	state := func() (plant.CharacteristicState, error) {
		st, err := p.StationState(ctx, p.Station.ID, 30)
		if err != nil {
			return plant.CharacteristicState{}, err
		}
		return st.Characteristics[0], nil
	}
	switch k := rng.IntN(14); {
	case k < 6:
		now := p.Clock.Now()
		r := plant.Round{ID: storetest.ID(), Station: p.Station.ID, Source: "station", Person: p.Operator.ID,
			TakenRaw: now.Add(-time.Duration(rng.Int64N(int64(now.Sub(began) + 1))))}
		shift := int64(rng.IntN(3)) * 5
		r.Entries = []plant.Entry{
			{Characteristic: p.Mass.ID, SetupVersion: 1, Readings: []int64{100 + rng.Int64N(60)}},
			{Characteristic: p.Diameter.ID, SetupVersion: 1, Readings: []int64{14990 + shift, 14991, 14992, 14990, 14991 + shift}},
			{Characteristic: p.Force.ID, SetupVersion: 1, Readings: []int64{640, 641, 642, 643, 644, 640 + rng.Int64N(50)}},
		}
		rng.Shuffle(3, func(i, j int) { r.Entries[i], r.Entries[j] = r.Entries[j], r.Entries[i] })
		r.Entries = r.Entries[:1+rng.IntN(3)]
		_, err := p.Record(ctx, r)
		return err
	case k < 8:
		c, err := state()
		if err != nil || len(c.Points) == 0 {
			return err
		}
		pt := c.Points[rng.IntN(len(c.Points))]
		_, err = p.Correct(ctx, plant.Correction{Characteristic: c.ID, Subgroup: pt.Subgroup, TakenAt: pt.TakenAt, Replaces: pt.Version,
			Readings: []int64{14990, 14991, 14992, 14990, 14985 + rng.Int64N(12)}, Reason: "typing slip", Person: p.Operator.ID})
		return err
	case k < 10:
		c, err := state()
		if err != nil || c.Matter == nil {
			return err
		}
		if rng.IntN(3) == 0 {
			return p.TakeMatter(ctx, c.Matter.ID, c.Matter.Version, p.Operator.ID)
		}
		return p.CloseMatter(ctx, plant.ClosingRequest{Matter: c.Matter.ID, Version: c.Matter.Version, Cause: "Not found", Action: "Insert changed",
			FixedAt: c.Matter.OpenedTaken.Add(time.Second), Person: p.Operator.ID})
	case k < 11:
		return p.LogChange(ctx, plant.Change{ID: storetest.ID(), Station: p.Station.ID, Machine: p.Machine.ID, Kind: plant.ToolChanged})
	case k < 12:
		parts := []uuid.UUID{p.PartA.ID, p.PartB.ID}
		return p.SetMachine(ctx, plant.MachineState{ID: storetest.ID(), Machine: p.Machine.ID, Running: true, Part: parts[rng.IntN(2)],
			At: p.Clock.Now().Add(-time.Duration(rng.IntN(600)) * time.Second)})
	case k < 13:
		return p.ChangeSetup(ctx, p.Mass.ID, plant.Setup{Unit: "g", Decimals: 2, Chart: limits.Individuals, Size: 1}, 1, p.Engineer.ID)
	default:
		revisions, err := p.Revisions(ctx, p.Diameter.ID)
		if err != nil {
			return err
		}
		_, err = p.Freeze(ctx, plant.FreezeRequest{Characteristic: p.Diameter.ID, SetupVersion: 1, After: len(revisions), Rules: first.Rules,
			Reason: "at once", Person: p.Engineer.ID})
		return err
	}
}
