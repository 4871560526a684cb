package store_test

import (
	"context"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/localpg/pgtest"
	"holdfast/internal/plant"
	"holdfast/internal/store"
	"holdfast/internal/store/storetest"
)

func TestMain(m *testing.M) { pgtest.Main(m, store.Migrate) }

// learned is a fixture whose diameter has 20 calm subgroups and frozen limits.
func learned(t testing.TB) (*storetest.Plant, plant.Revision) {
	p := storetest.New(t, "x")
	for i := range 20 {
		d := int64(i%5) - 2
		p.MustRecord(t, p.Diameter, 14990+d, 14991, 14992-d, 14989+d, 14993-d)
		p.Clock.Advance(30 * time.Minute)
	}
	return p, p.MustFreeze(t, p.Diameter)
}

func TestLearningThenFrozen(t *testing.T) {
	t.Parallel()
	p := storetest.New(t, "x")
	a := p.MustRecord(t, p.Diameter, 14990, 14991, 14992, 14990, 14991)
	if a.Verdict != plant.Learning {
		t.Fatalf("verdict before any limits = %s, want learning", a.Verdict)
	}
	p2, r := learned(t)
	if r.Number != 1 || r.Sigma <= 0 {
		t.Fatalf("revision = %+v", r)
	}
	if a := p2.MustRecord(t, p2.Diameter, 14990, 14991, 14992, 14990, 14991); a.Verdict != plant.Leave {
		t.Errorf("a calm round: verdict = %s, want leave", a.Verdict)
	}
}

func TestSignalOpensOneMatterUntilItIsClosed(t *testing.T) {
	t.Parallel()
	p, _ := learned(t)
	ctx := context.Background()
	p.Clock.Advance(30 * time.Minute)
	a := p.MustRecord(t, p.Diameter, 14998, 14998, 14999, 14998, 14999)
	part := a.Parts[0]
	if a.Verdict != plant.Look || !part.Opened || part.Matter == uuid.Nil {
		t.Fatalf("answer to a mean beyond the limit = %+v", a)
	}
	p.Clock.Advance(30 * time.Minute)
	b := p.MustRecord(t, p.Diameter, 14990, 14991, 14992, 14990, 14991)
	if b.Verdict != plant.Look || !b.Parts[0].StillOpen || b.Parts[0].Opened || b.Parts[0].Matter != part.Matter {
		t.Errorf("answer while a matter is open = %+v", b)
	}
	p.Clock.Advance(time.Minute)
	m, err := p.Matter(ctx, part.Matter)
	if err != nil || len(m.Lines) == 0 || m.Kind() != plant.Look || !m.Alarmed {
		t.Fatalf("matter = %+v, %v", m, err)
	}
	if err := p.TakeMatter(ctx, m.ID, m.Version, p.Operator.ID); err != nil {
		t.Fatal(err)
	}
	if err := p.TakeMatter(ctx, m.ID, m.Version, p.Supervisor.ID); !plant.IsKind(err, plant.Conflict) {
		t.Errorf("taking a stale matter: %v, want a conflict", err)
	}
	close := plant.ClosingRequest{Matter: m.ID, Version: m.Version + 1, Cause: "Insert chipped", Action: "Insert changed", Person: p.Operator.ID}
	if err := p.CloseMatter(ctx, close); err != nil {
		t.Fatal(err)
	}
	if err := p.CloseMatter(ctx, close); !plant.IsKind(err, plant.Conflict) {
		t.Errorf("closing twice: %v, want a conflict", err)
	}
	p.Clock.Advance(time.Minute)
	if c := p.MustRecord(t, p.Diameter, 14990, 14991, 14992, 14990, 14991); c.Verdict != plant.Leave {
		t.Errorf("verdict after closing = %s, want leave", c.Verdict)
	}
	st, err := p.StationState(ctx, p.Station.ID, 25)
	if err != nil || st.Characteristics[0].Matter != nil || st.Characteristics[0].Revision == nil {
		t.Errorf("state = %+v, %v", st.Characteristics[0], err)
	}
	if n, err := p.VerifyLedger(ctx); err != nil || n < 30 {
		t.Errorf("ledger: %d entries, %v", n, err)
	}
}

func TestHoldWhileLearning(t *testing.T) {
	t.Parallel()
	p := storetest.New(t, "x")
	a := p.MustRecord(t, p.Diameter, 14990, 15001, 14992, 14990, 14991)
	if a.Verdict != plant.Hold || a.Parts[0].Firings[0].Side != plant.High {
		t.Errorf("a reading above specification while learning = %+v, want hold", a)
	}
	p.Clock.Advance(time.Minute)
	if a := p.MustRecord(t, p.Diameter, 14990, 15000, 14982, 14990, 14991); a.Verdict != plant.Hold || !a.Parts[0].StillOpen {
		t.Errorf("readings on the limits, while the hold is open = %+v, want hold, still open", a)
	}
}

func TestRepeatedAndConflictingRounds(t *testing.T) {
	t.Parallel()
	p := storetest.New(t, "x")
	ctx := context.Background()
	r := p.Round(p.Diameter, 14990, 14991, 14992, 14990, 14991)
	first, err := p.Record(ctx, r)
	if err != nil {
		t.Fatal(err)
	}
	p.Clock.Advance(8 * 24 * time.Hour) // an old send that comes again is still the same round
	again, err := p.Record(ctx, r)
	if err != nil || again.Round != first.Round || again.Verdict != first.Verdict {
		t.Errorf("the same round again = %+v, %v", again, err)
	}
	r.Entries[0].Readings = []int64{14990, 14991, 14992, 14990, 14999}
	if _, err := p.Record(ctx, r); !plant.IsKind(err, plant.Conflict) {
		t.Errorf("another round under the same id: %v, want a conflict", err)
	}
	h, err := p.History(ctx, p.Diameter.ID, plant.Stretch{})
	if err != nil || len(h.Points) != 1 {
		t.Errorf("record holds %d subgroups, %v; want 1", len(h.Points), err)
	}
	var aside int
	if err := p.Pool().QueryRow(ctx, "select count(*) from set_aside").Scan(&aside); err != nil || aside != 1 {
		t.Errorf("set aside: %d, %v; want 1", aside, err)
	}
}

func TestBadRoundsWriteNothing(t *testing.T) {
	t.Parallel()
	p := storetest.New(t, "x")
	ctx := context.Background()
	good := func() plant.Round { return p.Round(p.Diameter, 14990, 14991, 14992, 14990, 14991) }
	for _, tc := range []struct {
		name string
		kind plant.Kind
		make func(r *plant.Round)
	}{
		{"no readings", plant.Invalid, func(r *plant.Round) { r.Entries[0].Readings = nil }},
		{"too many readings", plant.Invalid, func(r *plant.Round) { r.Entries[0].Readings = make([]int64, 6) }},
		{"short without a reason", plant.Invalid, func(r *plant.Round) { r.Entries[0].Readings = make([]int64, 4) }},
		{"unknown characteristic", plant.NotFound, func(r *plant.Round) { r.Entries[0].Characteristic = storetest.ID() }},
		{"of another station", plant.Conflict, func(r *plant.Round) { r.Entries[0].Characteristic = p.Length.ID }},
		{"twice the same", plant.Invalid, func(r *plant.Round) { r.Entries = append(r.Entries, r.Entries[0]) }},
		{"in the future", plant.Invalid, func(r *plant.Round) { r.TakenRaw = p.Clock.Now().Add(3 * time.Minute) }},
		{"long ago", plant.Invalid, func(r *plant.Round) { r.TakenRaw = p.Clock.Now().Add(-8 * 24 * time.Hour) }},
		{"another set-up", plant.Conflict, func(r *plant.Round) { r.Entries[0].SetupVersion = 2 }},
		{"absurd reading", plant.Invalid, func(r *plant.Round) { r.Entries[0].Readings[0] = 1 << 60 }},
		{"no id", plant.Invalid, func(r *plant.Round) { r.ID = uuid.Nil }},
		{"empty", plant.Invalid, func(r *plant.Round) { r.Entries = nil }},
	} {
		r := good()
		tc.make(&r)
		if _, err := p.Record(ctx, r); !plant.IsKind(err, tc.kind) {
			t.Errorf("%s: %v, want kind %d", tc.name, err, tc.kind)
		}
	}
	h, err := p.History(ctx, p.Diameter.ID, plant.Stretch{})
	if err != nil || len(h.Points) != 0 {
		t.Errorf("record holds %d subgroups, %v; want none", len(h.Points), err)
	}
}

func TestCorrectionWithdrawsAndFindsLate(t *testing.T) {
	t.Parallel()
	p, _ := learned(t)
	ctx := context.Background()
	p.Clock.Advance(30 * time.Minute)
	a := p.MustRecord(t, p.Diameter, 14998, 14998, 14999, 14998, 14999)
	taken := a.TakenAt
	p.Clock.Advance(30 * time.Minute)
	c := plant.Correction{Characteristic: p.Diameter.ID, Subgroup: a.Parts[0].Subgroup, TakenAt: taken, Replaces: 1,
		Readings: []int64{14990, 14991, 14992, 14990, 14991}, Reason: "typing slip", Person: p.Operator.ID}
	part, err := p.Correct(ctx, c)
	if err != nil || len(part.Firings) != 0 {
		t.Fatalf("correction = %+v, %v", part, err)
	}
	m, err := p.Matter(ctx, a.Parts[0].Matter)
	if err != nil || !m.AllWithdrawn() || !m.Open() {
		t.Errorf("matter after the correction = %+v, %v; want all withdrawn, still open", m, err)
	}
	if _, err := p.Correct(ctx, c); !plant.IsKind(err, plant.Conflict) {
		t.Errorf("a stale correction: %v, want a conflict", err)
	}
	c.Replaces, c.Readings = 2, []int64{14998, 14998, 14999, 14998, 14999}
	if _, err := p.Correct(ctx, c); err != nil {
		t.Fatal(err)
	}
	if m, _ = p.Matter(ctx, m.ID); m.AllWithdrawn() || !m.Lines[0].FoundLate {
		t.Errorf("matter after correcting back = %+v; want a line that stands, found late", m)
	}
}

func TestLastRoundIsAsItStandsNow(t *testing.T) {
	t.Parallel()
	p := storetest.New(t, "x")
	ctx := context.Background()
	if _, err := p.LastRound(ctx, p.Station.ID); !plant.IsKind(err, plant.NotFound) {
		t.Errorf("before any round: %v, want not found", err)
	}
	p.MustRecord(t, p.Mass, 120)
	p.Clock.Advance(time.Minute)
	a := p.MustRecord(t, p.Diameter, 14990, 14991, 14992, 14990, 14991)
	if _, err := p.Correct(ctx, plant.Correction{Characteristic: p.Diameter.ID, Subgroup: a.Parts[0].Subgroup, TakenAt: a.TakenAt, Replaces: 1,
		Readings: []int64{14990, 14991, 14992, 14990, 14995}, Reason: "typing slip", Person: p.Operator.ID}); err != nil {
		t.Fatal(err)
	}
	r, err := p.LastRound(ctx, p.Station.ID)
	if err != nil || r.ID != a.Round || len(r.Points) != 1 || r.Points[0].Version != 2 || r.Points[0].Readings[4] != 14995 || r.PersonName != "Operator 1" {
		t.Errorf("last round = %+v, %v", r, err)
	}
}
