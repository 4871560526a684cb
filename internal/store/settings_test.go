package store_test

import (
	"context"
	"testing"

	"holdfast/internal/plant"
	"holdfast/internal/store"
	"holdfast/internal/store/storetest"
)

func TestSettingsAreVersionedSealedAndSentOnce(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	p := storetest.New(t, "x")
	first, err := p.Settings(ctx)
	if err != nil || first != plant.DefaultSettings() {
		t.Fatalf("settings = %+v, %v; want the defaults", first, err)
	}
	c := plant.SettingsChange{ID: storetest.ID(), Settings: first, Reason: "the customer asks for it", Person: p.Engineer.ID}
	c.Settings.Owner.Capable = 1.67
	for range 2 { // sent again it is answered as the first time
		v, err := p.ChangeSettings(ctx, c)
		if err != nil || v.Version != 1 || v.Owner.Capable != 1.67 || v.PersonName != "Engineer 1" || !v.MadeAt.Equal(p.Clock.Now()) {
			t.Fatalf("changed = %+v, %v", v, err)
		}
	}
	other := c
	other.Settings.Owner.Capable = 2
	if _, err := p.ChangeSettings(ctx, other); !plant.IsKind(err, plant.Conflict) {
		t.Errorf("other content under the same id: %v, want a conflict", err)
	}
	other.ID = storetest.ID()
	if _, err := p.ChangeSettings(ctx, other); !plant.IsKind(err, plant.Conflict) {
		t.Errorf("replacing what is no longer there: %v, want a conflict", err)
	}
	other.Replaces = 1
	if _, err := p.ChangeSettings(ctx, other); err != nil {
		t.Fatal(err)
	}
	list, err := p.SettingsVersions(ctx)
	if err != nil || len(list) != 2 || list[0].Owner.Capable != 2 || list[1].Owner.Capable != 1.67 {
		t.Errorf("versions = %+v, %v", list, err)
	}
	if _, err := p.VerifyLedger(ctx); err != nil {
		t.Error(err)
	}
	if ds, err := p.CheckRecord(ctx); err != nil || len(ds) > 0 {
		t.Errorf("an honest record differs: %v, %v", ds, err)
	}
	for _, sql := range []string{
		`update plant_settings set content = jsonb_set(content, '{owner.capable}', '"1.00"') where version = 1`,
		`update plant_settings set reason = 'other' where version = 2`,
		`delete from plant_settings where version = 1`,
		`insert into plant_settings select plant_id, 3, gen_random_uuid(), content, reason, made_at, person_id from plant_settings where version = 2`,
	} {
		tx, err := p.Pool().Begin(ctx)
		if err != nil {
			t.Fatal(err)
		}
		if tag, err := tx.Exec(ctx, sql); err != nil || tag.RowsAffected() == 0 {
			t.Fatalf("%s: %v", sql, err)
		}
		if ds, err := store.CheckRecordIn(ctx, tx); err != nil || len(ds) == 0 {
			t.Errorf("not found: %s (%v)", sql, err)
		}
		if err := tx.Rollback(ctx); err != nil {
			t.Fatal(err)
		}
	}
}
