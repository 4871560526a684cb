package store_test

import (
	"context"
	"math/rand/v2"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
	"holdfast/internal/store"
	"holdfast/internal/store/storetest"
)

func runs(t testing.TB, p *storetest.Plant, m plant.Machine, running bool) {
	t.Helper()
	if err := p.SetMachine(context.Background(), plant.MachineState{ID: storetest.ID(), Machine: m.ID, Running: running}); err != nil {
		t.Fatal(err)
	}
}

// TestReachIsFoundInTheRecord: it reads its own subgroups, however few are shown, grows
// with the clock without being read again, and stands still with the machine.
func TestReachIsFoundInTheRecord(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	p := storetest.New(t, "x")
	runs(t, p, p.Machine, true)
	learn(t, p)
	lastGood := p.Clock.Advance(30 * time.Minute)
	p.MustRecord(t, p.Diameter, calm...)
	p.Clock.Advance(30 * time.Minute)
	a := p.MustRecord(t, p.Diameter, high...)
	s := state(t, p, p.Diameter)
	if s.Reach == nil || len(s.Reach.Reasons) != 1 || !s.Reach.From.Equal(lastGood) || s.Reach.Cut || s.Reach.Reasons[0].Change.Subgroup != a.Parts[0].Subgroup {
		t.Fatalf("reach %+v; want it since the last calm round", s.Reach)
	}
	parts := func() int {
		t.Helper()
		s := state(t, p, p.Diameter)
		return s.Reach.Suspects(s.Machine.Machine, s.PartID, p.Clock.Now()).Parts
	}
	if n := parts(); n != 60 {
		t.Errorf("%d parts after half an hour, want 60", n)
	}
	p.Clock.Advance(30 * time.Minute)
	if n := parts(); n != 120 {
		t.Errorf("%d parts after an hour, want 120", n)
	}
	runs(t, p, p.Machine, false)
	p.Clock.Advance(3 * time.Hour)
	if n := parts(); n != 120 {
		t.Errorf("%d parts while the machine stands still, want 120", n)
	}
	runs(t, p, p.Machine, true)
	p.Clock.Advance(30 * time.Minute)
	if n := parts(); n != 180 {
		t.Errorf("%d parts after it went on, want 180", n)
	}
	if err := p.LogChange(ctx, plant.Change{ID: storetest.ID(), Station: p.Station.ID, Machine: p.Machine.ID, Kind: plant.ToolChanged}); err != nil {
		t.Fatal(err)
	}
	p.Clock.Advance(30 * time.Minute)
	if n := parts(); n != 180 {
		t.Errorf("%d parts after the tool was changed, want 180 still", n)
	}
	p.MustRecord(t, p.Diameter, 14995, 14995, 15020, 14995, 14995) // it did not help
	s = state(t, p, p.Diameter)
	if n := parts(); n != 240 || s.Reach.Ended != plant.StillGrowing {
		t.Errorf("%d parts, %q; want 240: a reading was outside after the change", n, s.Reach.Ended)
	}
	// What is kept is what is found anew, by another server.
	fresh, err := store.Open(ctx, store.Options{URL: p.URL, Clock: p.Clock.Now})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(fresh.Close)
	p.Clock.Advance(time.Minute)
	m := closeMatter(t, p, a.Parts[0].Matter, "Insert changed", time.Time{})
	p.Clock.Advance(2 * time.Hour)
	for _, st := range []*store.Store{p.Store, fresh} {
		found, err := st.Reaches(ctx, m.ID)
		if err != nil {
			t.Fatal(err)
		}
		if got := found[m.ID]; got.Suspect.Parts != 240 || !got.Reach.Until.Equal(m.RestartAt) {
			t.Errorf("closed: %+v until %s; want 240 parts until the restart mark", got.Suspect, got.Reach.Until)
		}
	}
	consistent(t, p)
}

// learn is learned over a plant that is there.
func learn(t testing.TB, p *storetest.Plant) {
	t.Helper()
	for i := range 20 {
		d := int64(i%5) - 2
		p.MustRecord(t, p.Diameter, 14990+d, 14991, 14992-d, 14989+d, 14993-d)
		p.Clock.Advance(30 * time.Minute)
	}
	p.MustFreeze(t, p.Diameter)
}

// TestReachOfALongDriftSaysThatItWasCut: more subgroups lie behind the signal than are
// looked at, and all of them fit a change.
func TestReachOfALongDriftSaysThatItWasCut(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	p, rev := learned(t)
	// A tenth of sigma off since the beginning of the stretch, and 600 subgroups of it.
	if _, err := p.Pool().Exec(ctx, `insert into subgroup (characteristic_id, taken_at, id, version, plant_id, round_id, setup_version, decimals, readings, keyed_by,
			reading_sum, reading_range, reading_sd, outside, machine_id, recorded_at)
		select $1, $2::timestamptz + n * interval '1 minute', gen_random_uuid(), 1, plant_id, gen_random_uuid(), 1, 3, '{14992,14992,14992,14992,14992}', '{}', 74960, 0, 0, 0, $3, $2
		from characteristic cross join generate_series(1, 600) n where id = $1`, p.Diameter.ID, p.Clock.Now(), p.Machine.ID); err != nil {
		t.Fatal(err)
	}
	began := p.Clock.Now()
	p.Clock.Advance(601 * time.Minute)
	p.MustRecord(t, p.Diameter, high...)
	s := state(t, p, p.Diameter)
	if want := began.Add((601 - plant.ReachWindow + 1) * time.Minute); !s.Reach.From.Equal(want) || !s.Reach.Cut {
		t.Errorf("reach from %s (cut %v), want from %s, cut; centre %v, sigma %v", s.Reach.From, s.Reach.Cut, want, rev.Center, rev.Sigma)
	}
}

// TestReachOfAHoldGoesBackPerStream: of two spindles the one that was outside is in
// doubt, since its own last good round.
func TestReachOfAHoldGoesBackPerStream(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	p := storetest.New(t, "x")
	m := plant.Machine{ID: storetest.ID(), StationID: p.Station.ID, Name: "Twin lathe", PartsPerHour: 240,
		Streams: []plant.Stream{{ID: storetest.ID(), Name: "Spindle 1"}, {ID: storetest.ID(), Name: "Spindle 2"}}}
	if err := p.AddMachine(ctx, m, uuid.Nil); err != nil {
		t.Fatal(err)
	}
	c := plant.Characteristic{ID: storetest.ID(), StationID: p.Station.ID, MachineID: m.ID, Name: "Shoulder"}
	if err := p.AddCharacteristic(ctx, c, plant.Setup{Unit: "mm", Decimals: 2, Upper: storetest.Decimal(t, "10.20"), Chart: limits.XBarR, Size: 2}, uuid.Nil); err != nil {
		t.Fatal(err)
	}
	runs(t, p, m, true)
	take := func(first, second int64) plant.Answer {
		t.Helper()
		p.Clock.Advance(30 * time.Minute)
		r := p.Round(c, first, second)
		r.Entries[0].Streams = []uuid.UUID{m.Streams[0].ID, m.Streams[1].ID}
		a, err := p.Record(ctx, r)
		if err != nil {
			t.Fatal(err)
		}
		return a
	}
	take(1000, 1000)
	a := take(1030, 1000)
	s := state(t, p, c)
	if len(s.Reach.Streams) != 1 || s.Reach.Streams[0] != m.Streams[0].ID || !s.Reach.From.Equal(a.TakenAt.Add(-30*time.Minute)) {
		t.Fatalf("reach %+v; want the first spindle since the round before", s.Reach)
	}
	if got := s.Reach.Suspects(s.Machine.Machine, uuid.Nil, p.Clock.Now()); got != (plant.Suspect{Parts: 60, Known: true, About: true}) {
		t.Errorf("%+v; want about 60 parts: half of what was made", got)
	}
}

func product(t testing.TB, p *storetest.Plant, id uuid.UUID) plant.Containment {
	t.Helper()
	c, err := p.Containment(context.Background(), id)
	if err != nil {
		t.Fatal(err)
	}
	return c
}

// TestContainedProduct: it is opened with the matter, stays open after it with what was
// put aside, and is settled when the last part has its disposition.
func TestContainedProduct(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	p, _ := learned(t)
	p.Clock.Advance(30 * time.Minute)
	a := p.MustRecord(t, p.Diameter, high...)
	m := a.Parts[0].Matter
	say := func(step plant.ContainmentStep, quantity int, note string) error {
		t.Helper()
		p.Clock.Advance(time.Minute)
		e := plant.ContainmentEntry{ID: storetest.ID(), Containment: m, Step: step, Quantity: quantity, Place: "Red rack 3", Tag: "R-17", Note: note, Person: p.Supervisor.ID}
		err := p.StateProduct(ctx, e)
		if err == nil {
			if again := p.StateProduct(ctx, e); again != nil {
				t.Errorf("the same statement sent again: %v", again)
			}
			e.Quantity++
			if again := p.StateProduct(ctx, e); !plant.IsKind(again, plant.Conflict) {
				t.Errorf("another statement under the same id: %v, want a conflict", again)
			}
		}
		return err
	}
	if c := product(t, p, m); c.Stated() || c.Matter != m || c.Settled() {
		t.Fatalf("opened as %+v", c)
	}
	for _, step := range []struct {
		step     plant.ContainmentStep
		quantity int
		note     string
		left     int
	}{{plant.KeptAside, 300, "", 300}, {plant.KeptAside, 40, "", 340}, {plant.CountedAgain, 338, "two were scrap from before", 338},
		{plant.Released, 200, "measured each", 138}, {plant.Reworked, 30, "", 108}, {plant.Scrapped, 8, "", 100}} {
		if err := say(step.step, step.quantity, step.note); err != nil {
			t.Fatalf("%s: %v", step.step, err)
		}
		if c := product(t, p, m); c.Left() != step.left || c.Kept()-c.Disposed() != step.left {
			t.Fatalf("after %s %d are left, want %d", step.step, c.Left(), step.left)
		}
	}
	if err := say(plant.Scrapped, 101, ""); !plant.IsKind(err, plant.Invalid) {
		t.Errorf("scrapping more than there is: %v", err)
	}
	p.Clock.Advance(time.Minute)
	closeMatter(t, p, m, "Insert changed", time.Time{})
	closed := p.Clock.Now()
	if s := state(t, p, p.Diameter); s.Matter != nil || len(s.Contained) != 1 || s.Contained[0].Left() != 100 || s.Contained[0].MatterClosed.IsZero() {
		t.Fatalf("after the matter was closed %+v is contained, want 100 parts", s.Contained)
	}
	if err := say(plant.OtherEnd, 100, "sold as seconds"); err != nil {
		t.Fatal(err)
	}
	if c := product(t, p, m); c.SettledAt.IsZero() || c.Left() != 0 {
		t.Errorf("with everything disposed of: %+v", c)
	}
	for at, want := range map[time.Time]int{closed: 100, {}: 0} {
		list, err := p.Contained(ctx, at)
		n := 0
		for _, c := range list {
			n += c.Left()
		}
		if err != nil || n != want {
			t.Errorf("contained at %s: %d parts, %v; want %d", at, n, err, want)
		}
	}
	// More was found: it is open again.
	if err := say(plant.KeptAside, 5, ""); err != nil {
		t.Fatal(err)
	}
	if c := product(t, p, m); !c.SettledAt.IsZero() || c.Left() != 5 {
		t.Errorf("after more was found: %+v", c)
	}
	// A person opens one without a matter.
	own := storetest.ID()
	for _, step := range []plant.ContainmentEntry{{Step: plant.KeptAside, Quantity: 12, Place: "Returns", Opens: p.Mass.ID}, {Step: plant.Returned, Quantity: 12}} {
		step.ID, step.Containment, step.Person = storetest.ID(), own, p.Supervisor.ID
		if err := p.StateProduct(ctx, step); err != nil {
			t.Fatal(err)
		}
	}
	if c := product(t, p, own); c.Matter != uuid.Nil || c.SettledAt.IsZero() {
		t.Errorf("opened by a person: %+v", c)
	}
	consistent(t, p)
}

// TestMatterWithoutSuspectsNeedsNoStatement: withdrawn, it leaves nothing contained; with
// a line that stands it stays until somebody says what became of the product.
func TestMatterWithoutSuspectsNeedsNoStatement(t *testing.T) {
	t.Parallel()
	p, _ := learned(t)
	p.Clock.Advance(30 * time.Minute)
	a := p.MustRecord(t, p.Diameter, high...)
	correct(t, p, a, 1, calm)
	closeMatter(t, p, a.Parts[0].Matter, "", time.Time{})
	if c := product(t, p, a.Parts[0].Matter); c.SettledAt.IsZero() {
		t.Errorf("withdrawn: %+v", c)
	}
	p.Clock.Advance(30 * time.Minute)
	b := p.MustRecord(t, p.Diameter, high...)
	closeMatter(t, p, b.Parts[0].Matter, "Insert changed", time.Time{})
	if c := product(t, p, b.Parts[0].Matter); !c.SettledAt.IsZero() {
		t.Errorf("nobody has stated anything, and it is settled: %+v", c)
	}
	e := plant.ContainmentEntry{ID: storetest.ID(), Containment: b.Parts[0].Matter, Step: plant.NothingToKeep, Note: "the machine had just been started", Person: p.Supervisor.ID}
	if err := p.StateProduct(context.Background(), e); err != nil {
		t.Fatal(err)
	}
	if c := product(t, p, b.Parts[0].Matter); c.SettledAt.IsZero() {
		t.Errorf("with nothing to keep: %+v", c)
	}
	consistent(t, p)
}

// TestQuantitiesAddUpFromManySides: people state at once what became of the same parts.
func TestQuantitiesAddUpFromManySides(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	p, _ := learned(t)
	p.Clock.Advance(30 * time.Minute)
	m := p.MustRecord(t, p.Diameter, high...).Parts[0].Matter
	say := func(step plant.ContainmentStep, quantity int) error {
		return p.StateProduct(ctx, plant.ContainmentEntry{ID: storetest.ID(), Containment: m, Step: step, Quantity: quantity, Place: "rack", Note: "measured", Person: p.Supervisor.ID})
	}
	if err := say(plant.KeptAside, 100); err != nil {
		t.Fatal(err)
	}
	const people = 8
	done := make(chan int, people)
	for i := range people {
		go func() {
			rng, sum := rand.New(rand.NewPCG(uint64(i), 5)), 0
			for range 6 {
				if n := 1 + rng.IntN(20); say(plant.Dispositions[rng.IntN(len(plant.Dispositions))], n) == nil {
					sum += n
				}
			}
			done <- sum
		}()
	}
	sum := 0
	for range people {
		sum += <-done
	}
	if c := product(t, p, m); sum > 100 || c.Left() != 100-sum || c.Disposed() != sum {
		t.Errorf("%d were told to be disposed of; on record %d, %d left", sum, c.Disposed(), c.Left())
	}
	consistent(t, p)
}

// TestStatementsChangedBesideTheLedgerAreFound, as in TestTablesChangedBesideTheLedgerAreFound.
func TestStatementsChangedBesideTheLedgerAreFound(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	p, _ := learned(t)
	g := gauged(t, p, "Load cell L-01", p.Force)
	checkGauge(t, p, g, false)
	m := state(t, p, p.Force).Matter.ID
	for _, e := range []plant.ContainmentEntry{{Step: plant.KeptAside, Quantity: 40, Place: "rack", Tag: "7"}, {Step: plant.Scrapped, Quantity: 10}} {
		e.ID, e.Containment, e.Person = storetest.ID(), m, p.Supervisor.ID
		if err := p.StateProduct(ctx, e); err != nil {
			t.Fatal(err)
		}
	}
	if ds, err := p.CheckRecord(ctx); err != nil || len(ds) > 0 {
		t.Fatalf("an honest record differs: %v, %v", ds, err)
	}
	for _, sql := range []string{
		`update gauge_check set good = true`,
		`update gauge_check set reading = 15.000`,
		`update gauge_check set at = at - interval '1 day'`,
		`delete from gauge_check`,
		`update signal set taken_at = taken_at - interval '1 day' where panel = 'gauge check'`,
		`update containment_entry set quantity = 39 where step = 'kept'`,
		`update containment_entry set step = 'released' where step = 'scrapped'`,
		`update containment_entry set place = 'yard' where step = 'kept'`,
		`update containment_entry set person_id = null where step = 'scrapped'`,
		`delete from containment_entry where step = 'scrapped'`,
		`update containment set settled_at = opened_at`,
		`update containment set opened_at = opened_at - interval '1 hour'`,
		`insert into containment select gen_random_uuid(), plant_id, station_id, characteristic_id, null, opened_at, null from containment`,
	} {
		tx, err := p.Pool().Begin(ctx)
		if err != nil {
			t.Fatal(err)
		}
		tag, err := tx.Exec(ctx, sql)
		if err != nil || tag.RowsAffected() == 0 {
			t.Fatalf("%s: %d rows, %v", sql, tag.RowsAffected(), err)
		}
		if ds, err := store.CheckRecordIn(ctx, tx); err != nil || len(ds) == 0 {
			t.Errorf("not found: %s (%v)", sql, err)
		}
		if err := tx.Rollback(ctx); err != nil {
			t.Fatal(err)
		}
	}
}
