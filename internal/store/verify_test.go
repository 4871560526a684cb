package store_test

import (
	"context"
	"slices"
	"strings"
	"testing"
	"time"

	"holdfast/internal/plant"
	"holdfast/internal/store"
	"holdfast/internal/store/storetest"
)

// TestTablesChangedBesideTheLedgerAreFound changes the tables behind the program's back,
// as their owner, and leaves the ledger alone: every chain still holds.
func TestTablesChangedBesideTheLedgerAreFound(t *testing.T) {
	t.Parallel()
	p, first := learned(t)
	ctx := context.Background()
	set := func(running bool, part plant.Part) {
		t.Helper()
		p.Clock.Advance(time.Minute)
		if err := p.SetMachine(ctx, plant.MachineState{ID: storetest.ID(), Machine: p.Machine.ID, Running: running, Part: part.ID, Lot: "L7"}); err != nil {
			t.Fatal(err)
		}
	}
	set(true, p.PartA)
	p.Clock.Advance(time.Minute)
	a := p.MustRecord(t, p.Diameter, high...)
	p.Clock.Advance(time.Minute)
	b := p.MustRecord(t, p.Diameter, calm...)
	correct(t, p, b, 1, low)
	p.Clock.Advance(time.Minute)
	closeMatter(t, p, a.Parts[0].Matter, "Insert changed", time.Time{})
	set(false, p.PartB)
	if err := p.LogChange(ctx, plant.Change{ID: storetest.ID(), Station: p.Station.ID, Machine: p.Machine.ID, Kind: plant.Adjustment, Characteristic: p.Diameter.ID,
		Size: storetest.Decimal(t, "-0.010"), Note: "after the insert"}); err != nil {
		t.Fatal(err)
	}
	p.MustFreeze(t, p.Diameter)
	short := p.Round(p.Diameter, 14990, 15003)
	short.Entries[0].ShortReason, short.Entries[0].Retyped = "part lost", []plant.Retyped{{Index: 1, First: "150.03"}}
	if _, err := p.Record(ctx, short); err != nil {
		t.Fatal(err)
	}
	differences := func() []string {
		t.Helper()
		if _, err := p.VerifyLedger(ctx); err != nil {
			t.Fatalf("the ledger was not touched: %v", err)
		}
		ds, err := p.CheckRecord(ctx)
		if err != nil {
			t.Fatal(err)
		}
		var out []string
		for _, d := range ds {
			out = append(out, d.What)
		}
		return out
	}
	if ds := differences(); len(ds) > 0 {
		t.Fatalf("an honest record differs: %v", ds)
	}
	one := ` where characteristic_id = '` + p.Diameter.ID.String() + `' and version = 1 and taken_at = (select max(taken_at) from subgroup)`
	for _, sql := range []string{
		`update subgroup set readings[1] = 14992` + one,
		`update subgroup set readings = array[14991, 15002]` + one, // the same sum
		`update subgroup set reading_sum = reading_sum + 1` + one,
		`update subgroup set outside = 0` + one,
		`update subgroup set reading_sd = reading_sd / 2` + one,
		`update subgroup set voided = true` + one,
		`update subgroup set taken_at = taken_at + interval '1 minute'` + one,
		`update subgroup set short_reason = 'machine stopped'` + one,
		`update subgroup set retyped = null` + one,
		`update subgroup set person_id = '` + p.Engineer.ID.String() + `'` + one,
		`delete from subgroup` + one,
		`insert into subgroup select characteristic_id, taken_at, id, 2, plant_id, round_id, setup_version, decimals, readings, keyed_by, streams, retyped, short_reason,
			reading_sum, reading_range, reading_sd, outside, machine_id, part_id, lot, gauge_id, recorded_at, person_id, voided, reason from subgroup` + one,
		`update revision set sigma = sigma * 1.0001 where id = '` + first.ID.String() + `'`,
		`update revision set rules = jsonb_set(rules, '{location}', '[]') where id = '` + first.ID.String() + `'`,
		`update setup set upper_spec = 15.005 where upper_spec = 15.000`,
		`update matter set cause = 'Swarf in collet' where cause = 'Not found'`,
		`update matter set closed_at = closed_at - interval '1 minute' where closed_at is not null`,
		`update boundary set at = at - interval '10 minutes' where kind = 'restart'`,
		`delete from boundary where kind = 'revision'`,
		`insert into boundary select gen_random_uuid(), plant_id, characteristic_id, at + interval '5 minutes', 'restart', null, recorded_at from boundary limit 1`,
		`update change set prompted = not prompted`,
		`update change set size = -size`,
		`delete from machine_state where not running`,
		`update machine_state set part_id = null where running`,
	} {
		found(t, p, sql)
	}
}

// found changes the tables behind the program's back, demands that it is found, and takes
// it back.
func found(t testing.TB, p *storetest.Plant, sql string) {
	t.Helper()
	foundSaying(t, p, sql, "")
}

// foundSaying is found where one of the differences must say this.
func foundSaying(t testing.TB, p *storetest.Plant, sql, says string) {
	t.Helper()
	ctx := context.Background()
	tx, err := p.Pool().Begin(ctx)
	if err != nil {
		t.Fatal(err)
	}
	tag, err := tx.Exec(ctx, sql)
	if err != nil || tag.RowsAffected() == 0 {
		t.Fatalf("%s: %d rows, %v", sql, tag.RowsAffected(), err)
	}
	ds, err := store.CheckRecordIn(ctx, tx)
	if err != nil || !slices.ContainsFunc(ds, func(d store.Difference) bool { return strings.Contains(d.What, says) }) {
		t.Errorf("not found: %s (%v); told %v, want %q", sql, err, ds, says)
	}
	if err := tx.Rollback(ctx); err != nil {
		t.Fatal(err)
	}
}

// TestARoundOfAnotherSenderIsFound: which device sent a round, and how it came, is as
// much a fact as its readings.
func TestARoundOfAnotherSenderIsFound(t *testing.T) {
	t.Parallel()
	p := storetest.New(t, "x")
	ctx := context.Background()
	var senders []plant.Device
	for _, name := range []string{"Bore gauge", "Test bench"} {
		code, err := p.MakeDeviceCode(ctx, plant.Device{Kind: plant.Sender, Name: name, Station: p.Station.ID}, p.Administrator.ID)
		if err != nil {
			t.Fatal(err)
		}
		d, err := p.Enrol(ctx, code.Code, []byte(name))
		if err != nil {
			t.Fatal(err)
		}
		senders = append(senders, d)
	}
	r := p.Round(p.Diameter, calm...)
	r.Source, r.Device, r.Person, r.Skew, r.Lot = "api", senders[0].ID, [16]byte{}, -time.Second, "K-2231"
	r.TakenRaw = r.TakenRaw.Add(time.Second)
	if _, err := p.Record(ctx, r); err != nil {
		t.Fatal(err)
	}
	p.Clock.Advance(time.Minute)
	a := p.MustRecord(t, p.Diameter, calm...)
	correct(t, p, a, 1, low)
	if ds, err := p.CheckRecord(ctx); err != nil || len(ds) > 0 {
		t.Fatalf("an honest record differs: %v, %v", ds, err)
	}
	const is = " is not on record as it was sealed"
	one := ` where source = 'api'`
	for _, change := range []string{
		`device_id = '` + senders[1].ID.String() + `'`, `device_id = null`, `source = 'station'`, `taken_raw = taken_raw + interval '1 second'`, `skew_ms = 0`,
		`station_id = '` + p.Other.ID.String() + `'`, `person_id = '` + p.Operator.ID.String() + `'`, `recorded_at = recorded_at + interval '1 minute'`,
	} {
		foundSaying(t, p, `update round set `+change+one, "round "+r.ID.String()+is)
	}
	foundSaying(t, p, `delete from round`+one, "round "+r.ID.String()+is)
	foundSaying(t, p, `insert into round select gen_random_uuid(), plant_id, station_id, due_at, occasion, taken_at, taken_raw, skew_ms, recorded_at, person_id, source, digest, answer, device_id
		from round`+one, "holds nothing that was sealed")
	foundSaying(t, p, `update subgroup set lot = 'K-2232' where lot = 'K-2231'`, is)
}
