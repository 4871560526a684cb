package store_test

import (
	"context"
	"testing"
	"time"

	"holdfast/internal/plant"
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
	consistent(t, p)
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
	consistent(t, p)
}
