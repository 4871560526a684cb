package store_test

import (
	"context"
	"testing"
	"time"

	"holdfast/internal/plant"
	"holdfast/internal/store/storetest"
)

// TestJudgingAgainLeavesAGaugeCheckAlone: a failed check of a gauge is a fact among the
// signals, so neither a correction before it nor a restart takes it back.
func TestJudgingAgainLeavesAGaugeCheckAlone(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	p, _ := learned(t)
	p.Clock.Advance(30 * time.Minute)
	a := p.MustRecord(t, p.Diameter, high...)
	// The worst case: the check stands at the very place of the subgroup.
	if _, err := p.Pool().Exec(ctx, `insert into signal (characteristic_id, taken_at, subgroup_id, panel, rule, plant_id, side, matter_id, judged_at)
		select characteristic_id, taken_at, subgroup_id, 'gauge check', $2, plant_id, '', matter_id, judged_at from signal where subgroup_id = $1 limit 1`,
		a.Parts[0].Subgroup, plant.GaugeFailed); err != nil {
		t.Fatal(err)
	}
	judgedAsFolded := func() {
		t.Helper()
		if _, ds, err := p.CheckJudgements(ctx); err != nil || len(ds) > 0 {
			t.Errorf("%v, %v", ds, err)
		}
	}
	judgedAsFolded()
	correct(t, p, a, 1, calm)
	standing := func(id string) (n int) {
		t.Helper()
		if err := p.Pool().QueryRow(ctx, `select count(*) from signal where matter_id = $1::text::uuid and panel = 'gauge check' and not withdrawn`, id).Scan(&n); err != nil {
			t.Fatal(err)
		}
		return n
	}
	m := openMatter(t, p, p.Diameter)
	if m == nil || m.AllWithdrawn() || m.Kind() != plant.Hold || standing(m.ID.String()) != 1 {
		t.Fatalf("after the correction %+v is open; want a Hold by the gauge alone", m)
	}
	p.Clock.Advance(time.Minute)
	if m := closeMatter(t, p, m.ID, "Gauge replaced", time.Time{}); standing(m.ID.String()) != 1 || m.RestartAt.IsZero() {
		t.Errorf("after the closing: %+v; want its line and a restart", m)
	}
	judgedAsFolded()
}

// gauged gives a characteristic a gauge of its own.
func gauged(t testing.TB, p *storetest.Plant, name string, cs ...plant.Characteristic) plant.Gauge {
	t.Helper()
	ctx := context.Background()
	g := plant.Gauge{ID: storetest.ID(), Name: name, CheckDays: 7}
	if err := p.AddGauge(ctx, g, p.Engineer.ID); err != nil {
		t.Fatal(err)
	}
	for _, c := range cs {
		h, err := p.History(ctx, c.ID, plant.Stretch{Last: 1})
		if err != nil {
			t.Fatal(err)
		}
		setup := h.State.Setup
		setup.GaugeID = g.ID
		if err := p.ChangeSetup(ctx, c.ID, setup, setup.Version, p.Engineer.ID); err != nil {
			t.Fatal(err)
		}
	}
	return g
}

func checkGauge(t testing.TB, p *storetest.Plant, g plant.Gauge, good bool) plant.GaugeCheckRecord {
	t.Helper()
	c := plant.GaugeCheckRecord{ID: storetest.ID(), Gauge: g.ID, At: p.Clock.Now(), Good: good, Person: p.Operator.ID,
		Master: storetest.Decimal(t, "15.000"), Reading: storetest.Decimal(t, "15.004")}
	if !good {
		c.Note = "anvil worn"
	}
	if err := p.CheckGauge(context.Background(), c); err != nil {
		t.Fatal(err)
	}
	return c
}

func state(t testing.TB, p *storetest.Plant, c plant.Characteristic) plant.CharacteristicState {
	t.Helper()
	h, err := p.History(context.Background(), c.ID, plant.Stretch{Last: 1})
	if err != nil {
		t.Fatal(err)
	}
	return h.State
}

// TestGaugeThatFailed: its failure is one line on the matter of each characteristic
// concerned, the reach goes back to its last good check, and ends with the next.
func TestGaugeThatFailed(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	p, _ := learned(t)
	if err := p.SetMachine(ctx, plant.MachineState{ID: storetest.ID(), Machine: p.Machine.ID, Running: true, Part: p.PartA.ID}); err != nil {
		t.Fatal(err)
	}
	g := gauged(t, p, "Micrometer M-04", p.Diameter, p.Force)
	other := gauged(t, p, "Balance W-02", p.Mass)
	good := checkGauge(t, p, g, true)
	checkGauge(t, p, other, true)
	if s := state(t, p, p.Diameter); s.Gauge == nil || s.Gauge.Failed() || !s.Gauge.LastGood.Equal(good.At) ||
		s.Gauge.NextCheck.Format(time.DateOnly) != "2026-03-19" || s.Gauge.Overdue(p.Clock.Now(), time.UTC) || !s.Gauge.Overdue(p.Clock.Now().AddDate(0, 0, 8), time.UTC) {
		t.Fatalf("after a good check: %+v", s.Gauge)
	}
	p.Clock.Advance(30 * time.Minute)
	r := p.Round(p.Diameter, high...)
	r.Entries[0].SetupVersion = 2
	a, err := p.Record(ctx, r)
	if err != nil {
		t.Fatal(err)
	}
	p.Clock.Advance(30 * time.Minute)
	failed := checkGauge(t, p, g, false)
	if err := p.CheckGauge(ctx, failed); err != nil {
		t.Errorf("the same check sent again: %v", err)
	}
	failed.Note = "dropped"
	if err := p.CheckGauge(ctx, failed); !plant.IsKind(err, plant.Conflict) {
		t.Errorf("another check under the same id: %v, want a conflict", err)
	}
	d, f, m := state(t, p, p.Diameter), state(t, p, p.Force), state(t, p, p.Mass)
	if d.Matter == nil || d.Matter.ID != a.Parts[0].Matter || d.Matter.Kind() != plant.Hold || len(d.Matter.Lines) < 2 {
		t.Fatalf("on the diameter %+v; want the line on the matter that was open", d.Matter)
	}
	if f.Matter == nil || len(f.Matter.Lines) != 1 || f.Matter.Kind() != plant.Hold || !f.Matter.Alarmed || !f.Gauge.Failed() {
		t.Fatalf("on the force %+v with %+v; want a matter of its own", f.Matter, f.Gauge)
	}
	if m.Matter != nil || m.Gauge.Failed() {
		t.Errorf("on the mass %+v; it has another gauge", m.Matter)
	}
	if f.Reach == nil || !f.Reach.From.Equal(good.At) || !f.Reach.Until.IsZero() {
		t.Fatalf("reach of the force %+v; want it since the good check", f.Reach)
	}
	p.Clock.Advance(30 * time.Minute)
	if got := f.Reach.Suspects(f.Machine.Machine, f.PartID, p.Clock.Now()); got != (plant.Suspect{Parts: 180, Known: true, About: true}) {
		t.Errorf("%+v, want about 180 parts in an hour and a half", got)
	}
	checkGauge(t, p, g, true)
	if f = state(t, p, p.Force); f.Gauge.Failed() || f.Matter == nil || !f.Reach.Until.Equal(p.Clock.Now()) || f.Reach.Ended != plant.ByGoodCheck {
		t.Errorf("after a good check %+v, reach %+v; want the reach ended and the matter open", f.Gauge, f.Reach)
	}
	// Judging again leaves the lines where they are.
	correct(t, p, a, 1, calm)
	if d = state(t, p, p.Diameter); d.Matter == nil || d.Matter.AllWithdrawn() || !d.Reach.From.Equal(good.At) {
		t.Errorf("after the correction %+v; want the failed check to stand alone", d.Matter)
	}
	list, err := p.Gauges(ctx, p.Station.ID)
	if err != nil || len(list) != 2 || list[1].Name != g.Name || len(list[1].Characteristics) != 2 || len(list[1].Stations) != 1 {
		t.Errorf("gauges in use %+v, %v", list, err)
	}
	checks, err := p.GaugeChecks(ctx, g.ID, 10)
	if err != nil || len(checks) != 3 || !checks[0].Good || checks[1].Good || checks[1].Note != "anvil worn" || checks[1].PersonName != "Operator 1" || checks[1].Reading.String() != "15.004" {
		t.Errorf("checks %+v, %v", checks, err)
	}
	consistent(t, p)
}
