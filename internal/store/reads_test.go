package store_test

import (
	"context"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
	"holdfast/internal/store"
	"holdfast/internal/store/storetest"
)

// longRecord fills the tables that grow behind a fixture whose diameter has frozen
// limits, as if it had worked for long. What it writes is not judged.
func longRecord(t *testing.T, p *storetest.Plant) {
	t.Helper()
	for _, sql := range []string{
		`insert into round (id, plant_id, station_id, taken_at, taken_raw, skew_ms, recorded_at, source, digest, answer)
			select gen_random_uuid(), s.plant_id, s.id, $1::timestamptz - make_interval(mins => i), $1, 0, $1, 'station', '\x00', '{}'
			from generate_series(1, 20000) i, station s`,
		`insert into subgroup (characteristic_id, taken_at, id, version, plant_id, round_id, setup_version, decimals, readings, keyed_by,
				reading_sum, reading_range, reading_sd, outside, machine_id, recorded_at)
			select c.id, $1::timestamptz - make_interval(mins => i), gen_random_uuid(), 1, c.plant_id, gen_random_uuid(), 1, 3,
				array[14990, 14991, 14992, 14990, 14991], '{}', 74954, 2, 0.001, 0, c.machine_id, $1
			from generate_series(1, 20000) i, characteristic c`,
		`insert into matter (id, plant_id, station_id, characteristic_id, opened_at, opened_taken, opened_subgroup, alarmed, closed_at, closing)
			select gen_random_uuid(), c.plant_id, c.station_id, c.id, at, at, gen_random_uuid(), true, at, 'fixed'
			from generate_series(1, 20000) i, characteristic c, lateral (select $1::timestamptz - make_interval(mins => i) as at) a`,
		`insert into signal (characteristic_id, taken_at, subgroup_id, panel, rule, plant_id, side, matter_id, judged_at)
			select characteristic_id, opened_taken, opened_subgroup, 'location', 'r', plant_id, 'high', id, $1 from matter`,
		`insert into change (id, plant_id, station_id, machine_id, kind, happened_at, recorded_at, digest)
			select gen_random_uuid(), m.plant_id, m.station_id, m.id, 'tool', $1::timestamptz - make_interval(mins => i), $1, '\x00'
			from generate_series(1, 20000) i, machine m`,
		`insert into machine_state (id, plant_id, machine_id, at, running, recorded_at)
			select gen_random_uuid(), m.plant_id, m.id, $1::timestamptz - make_interval(mins => i), true, $1 from generate_series(1, 20000) i, machine m`,
		`insert into boundary (id, plant_id, characteristic_id, at, kind, recorded_at)
			select gen_random_uuid(), c.plant_id, c.id, $1::timestamptz - make_interval(mins => i), 'restart', $1
			from generate_series(1, 20000) i, characteristic c`,
		`insert into set_aside (id, plant_id, about, why, body, digest, came_at)
			select gen_random_uuid(), p.id, gen_random_uuid(), 'x', '{}', '\x00', $1 from generate_series(1, 20000) i, plant p`,
	} {
		if _, err := p.Pool().Exec(context.Background(), sql, storetest.Start.Add(-24*time.Hour)); err != nil {
			t.Fatalf("%s: %v", sql[:50], err)
		}
	}
	if _, err := p.Pool().Exec(context.Background(), `analyze`); err != nil {
		t.Fatal(err)
	}
}

// TestNothingReadsAWholeTable counts the rows that Postgres touches for each thing that
// people wait for, on a long record.
func TestNothingReadsAWholeTable(t *testing.T) {
	t.Parallel()
	p, _ := learned(t)
	longRecord(t, p)
	ctx := context.Background()
	one, err := store.Open(ctx, store.Options{URL: p.URL, Clock: p.Clock.Now, MaxConns: 1})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(one.Close)
	touched := func() map[string]int64 {
		t.Helper()
		if _, err := one.Pool().Exec(ctx, `select pg_stat_force_next_flush()`); err != nil {
			t.Fatal(err)
		}
		rows, err := one.Pool().Query(ctx, `select relname, seq_tup_read + coalesce(idx_tup_fetch, 0) from pg_stat_user_tables`)
		if err != nil {
			t.Fatal(err)
		}
		out := map[string]int64{}
		var table string
		var n int64
		if _, err := pgx.ForEachRow(rows, []any{&table, &n}, func() error { out[table] = n; return nil }); err != nil {
			t.Fatal(err)
		}
		return out
	}
	var calmly, loudly plant.Answer
	record := func(into *plant.Answer, readings []int64) func() error {
		return func() (err error) {
			p.Clock.Advance(time.Minute)
			*into, err = one.Record(ctx, p.Round(p.Diameter, readings...))
			return err
		}
	}
	old := storetest.Start.Add(-5 * 24 * time.Hour)
	for _, tc := range []struct {
		name string
		most int64
		do   func() error
	}{
		{"board", 3000, func() error { _, err := one.StationStates(ctx, 25); return err }},
		{"station", 2000, func() error { _, err := one.StationState(ctx, p.Station.ID, 12); return err }},
		{"newest chart", 4000, func() error { _, err := one.History(ctx, p.Diameter.ID, plant.Stretch{Last: 200}); return err }},
		{"old chart", 4000, func() error {
			_, err := one.History(ctx, p.Diameter.ID, plant.Stretch{To: old, Last: 200})
			return err
		}},
		{"what was in force", 100, func() error { _, _ = one.RevisionAt(ctx, p.Diameter.ID, storetest.Start); return nil }},
		{"last round", 100, func() error { _, err := one.LastRound(ctx, p.Station.ID); return err }},
		{"save", 100, record(&calmly, calm)},
		{"save that opens a matter", 100, record(&loudly, high)},
		{"correct", 1000, func() error {
			_, err := one.Correct(ctx, plant.Correction{Characteristic: p.Diameter.ID, Subgroup: loudly.Parts[0].Subgroup, TakenAt: loudly.TakenAt,
				Replaces: 1, Readings: low, Reason: "typing slip", Person: p.Operator.ID})
			return err
		}},
		{"close", 1000, func() error {
			p.Clock.Advance(time.Minute)
			return one.CloseMatter(ctx, plant.ClosingRequest{Matter: loudly.Parts[0].Matter, Version: 1, Cause: "Not found", Person: p.Operator.ID})
		}},
		{"change", 200, func() error {
			return one.LogChange(ctx, plant.Change{ID: storetest.ID(), Station: p.Station.ID, Machine: p.Machine.ID, Kind: plant.ToolChanged})
		}},
		{"machine", 200, func() error {
			return one.SetMachine(ctx, plant.MachineState{ID: storetest.ID(), Machine: p.Machine.ID, Running: true})
		}},
		{"answer again", 100, func() error { _, err := one.Answer(ctx, calmly.Round); return err }},
	} {
		before := touched()
		if err := tc.do(); err != nil {
			t.Fatalf("%s: %v", tc.name, err)
		}
		sum, by := int64(0), map[string]int64{}
		for table, n := range touched() {
			if n -= before[table]; n > 0 {
				sum, by[table] = sum+n, n
			}
		}
		if sum > tc.most {
			t.Errorf("%s touched %d rows, want at most %d: %v", tc.name, sum, tc.most, by)
		}
	}
}
