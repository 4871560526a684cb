package escalation_test

import (
	"context"
	"fmt"
	"log/slog"
	"testing"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/escalation"
	"holdfast/internal/localpg/pgtest"
	"holdfast/internal/plant"
	"holdfast/internal/store"
	"holdfast/internal/store/storetest"
)

func TestMain(m *testing.M) { pgtest.Main(m, store.Migrate) }

var (
	calm    = []int64{14990, 14991, 14992, 14990, 14991}
	high    = []int64{14998, 14998, 14999, 14998, 14999}
	outside = []int64{14998, 15004, 14999, 14998, 14999}
)

// server is one of the servers on a record.
type server struct {
	*escalation.Watch
	store *store.Store
}

func newServer(t testing.TB, p *storetest.Plant, st *store.Store) *server {
	t.Helper()
	return &server{store: st, Watch: &escalation.Watch{Store: st, Log: slog.New(slog.DiscardHandler), Now: p.Clock.Now,
		Compose: func(c plant.Call) []plant.Message {
			return []plant.Message{{Target: "shift lead", Title: c.Station.Name, Body: string(c.Kind)}, {Target: "tickets", Title: c.Station.Name, Body: "{}"}}
		}}}
}

// another opens the record a second time, as another server does.
func another(t testing.TB, p *storetest.Plant) *server {
	t.Helper()
	st, err := store.Open(context.Background(), store.Options{URL: p.URL, Clock: p.Clock.Now, CheckpointEvery: 16})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(st.Close)
	return newServer(t, p, st)
}

// learned is a plant with limits on the diameter. Its machines stand still, so that
// nothing falls due.
func learned(t testing.TB) *storetest.Plant {
	t.Helper()
	p := storetest.New(t, "x")
	for range 25 {
		p.Clock.Advance(30 * time.Minute)
		p.MustRecord(t, p.Diameter, calm...)
	}
	p.MustFreeze(t, p.Diameter)
	stop(t, p)
	p.Clock.Advance(time.Minute)
	return p
}

// stop stops every machine, so that nothing falls due.
func stop(t testing.TB, p *storetest.Plant) { run(t, p, false) }

func run(t testing.TB, p *storetest.Plant, running bool) {
	t.Helper()
	rows, err := p.Pool().Query(context.Background(), `select id from machine`)
	if err != nil {
		t.Fatal(err)
	}
	ids, err := pgx.CollectRows(rows, pgx.RowTo[uuid.UUID])
	if err != nil {
		t.Fatal(err)
	}
	for _, id := range ids {
		if err := p.SetMachine(context.Background(), plant.MachineState{ID: storetest.ID(), Machine: id, Running: running}); err != nil {
			t.Fatal(err)
		}
	}
}

func (s *server) look(t testing.TB) int {
	t.Helper()
	n, err := s.Look(context.Background())
	if err != nil {
		t.Fatal(err)
	}
	return n
}

// steps are the fired steps as "kind turn.step", in the order in which they fired.
func steps(t testing.TB, p *storetest.Plant) []string {
	t.Helper()
	rows, err := p.Pool().Query(context.Background(), `select kind, turn, step from escalation_step order by fired_at, step`)
	if err != nil {
		t.Fatal(err)
	}
	out, err := pgx.CollectRows(rows, func(r pgx.CollectableRow) (string, error) {
		var kind string
		var turn, step int
		err := r.Scan(&kind, &turn, &step)
		return fmt.Sprintf("%s %d.%d", kind, turn, step), err
	})
	if err != nil {
		t.Fatal(err)
	}
	return out
}

func count(t testing.TB, p *storetest.Plant, sql string, args ...any) (n int) {
	t.Helper()
	if err := p.Pool().QueryRow(context.Background(), sql, args...).Scan(&n); err != nil {
		t.Fatal(err)
	}
	return n
}

// whole demands that the ledger holds and the tables are what it says.
func whole(t testing.TB, p *storetest.Plant) {
	t.Helper()
	if _, err := p.VerifyLedger(context.Background()); err != nil {
		t.Error(err)
	}
	differ, err := p.CheckRecord(context.Background())
	if err != nil {
		t.Fatal(err)
	}
	for _, d := range differ {
		t.Errorf("%s: %s", d.Characteristic, d.What)
	}
}

func take(t testing.TB, p *storetest.Plant, id uuid.UUID) {
	t.Helper()
	m, err := p.Matter(context.Background(), id)
	if err == nil {
		err = p.TakeMatter(context.Background(), id, m.Version, p.Operator.ID)
	}
	if err != nil {
		t.Fatal(err)
	}
}

// quiet keeps a matter quiet for so long; 0 ends the quiet.
func quiet(t testing.TB, p *storetest.Plant, id uuid.UUID, d time.Duration) error {
	t.Helper()
	m, err := p.Matter(context.Background(), id)
	if err != nil {
		t.Fatal(err)
	}
	r := plant.QuietRequest{ID: storetest.ID(), Matter: id, Version: m.Version, Reason: "Insert is on its way", Person: p.Supervisor.ID}
	if d > 0 {
		r.Until = p.Clock.Now().Add(d)
	}
	return p.QuietMatter(context.Background(), r)
}
