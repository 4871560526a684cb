package store_test

import (
	"context"
	"testing"
	"time"

	"holdfast/internal/plant"
	"holdfast/internal/store/storetest"
)

// TestTextThatPostgresRefusesIsCleaned: text and JSON columns take no zero byte, and
// text of a sender that is not our page may hold anything.
func TestTextThatPostgresRefusesIsCleaned(t *testing.T) {
	t.Parallel()
	p := storetest.New(t, "x")
	ctx := context.Background()
	r := p.Round(p.Diameter, 14990, 14991)
	r.Source, r.Occasion = "a\x00pi", "first\xff piece"
	r.Entries[0].ShortReason = " part\x00 lost\xff "
	r.Entries[0].Retyped = []plant.Retyped{{Index: 0, First: "149\x00.9\xfe"}}
	if _, err := p.Record(ctx, r); err != nil {
		t.Fatal(err)
	}
	var short, source string
	if err := p.Pool().QueryRow(ctx, `select s.short_reason, r.source from subgroup s join round r on r.id = s.round_id`).Scan(&short, &source); err != nil || short != "part lost" || source != "api" {
		t.Errorf("kept %q from %q, %v", short, source, err)
	}
	if r.Entries[0].ShortReason != " part\x00 lost\xff " {
		t.Error("what the caller holds was changed")
	}
	if _, err := p.Record(ctx, r); err != nil {
		t.Errorf("sent again: %v", err)
	}
	r.ID, r.TakenRaw = storetest.ID(), r.TakenRaw.Add(time.Hour)
	if _, err := p.Record(ctx, r); !plant.IsKind(err, plant.Invalid) {
		t.Errorf("in the future, to be set aside: %v, want invalid", err)
	}
	r.ID, r.TakenRaw, r.Entries[0].ShortReason = storetest.ID(), p.Clock.Now(), string(make([]byte, 3))
	if _, err := p.Record(ctx, r); !plant.IsKind(err, plant.Invalid) {
		t.Errorf("a reason of nothing but zero bytes: %v, want invalid", err)
	}
	b, err := p.Record(ctx, p.Round(p.Diameter, 14990, 14991, 14992, 14990, 14991))
	if err != nil {
		t.Fatal(err)
	}
	c := plant.Correction{Characteristic: p.Diameter.ID, Subgroup: b.Parts[0].Subgroup, TakenAt: b.TakenAt, Replaces: 1, Readings: []int64{14990, 14991},
		ShortReason: "part\x00 lost", Reason: "typing\x00 slip", Person: p.Operator.ID}
	if _, err := p.Correct(ctx, c); err != nil {
		t.Errorf("a correction: %v", err)
	}
	if _, err := p.Correct(ctx, c); !plant.IsKind(err, plant.Conflict) {
		t.Errorf("a stale one, to be set aside: %v, want a conflict", err)
	}
	if err := p.SetMachine(ctx, plant.MachineState{ID: storetest.ID(), Machine: p.Machine.ID, Running: true, Lot: "7\x00"}); err != nil {
		t.Errorf("a machine's lot: %v", err)
	}
	consistent(t, p)
}
