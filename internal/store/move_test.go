package store_test

import (
	"context"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/store/storetest"
)

// TestAMachineMoves: what is measured on it goes with it, what was recorded keeps its
// station, and a round that was under way is lost on neither side.
func TestAMachineMoves(t *testing.T) {
	t.Parallel()
	p, _ := learned(t)
	ctx := context.Background()
	p.Clock.Advance(time.Minute)
	open := p.MustRecord(t, p.Diameter, high...).Parts[0].Matter
	move := func(to uuid.UUID) error {
		m := p.Machine
		m.StationID = to
		return p.ChangeMachine(ctx, m, p.Engineer.ID)
	}
	at := func(id uuid.UUID) map[string]bool {
		t.Helper()
		st, err := p.StationState(ctx, id, 5)
		if err != nil {
			t.Fatal(err)
		}
		setups, err := p.StationSetups(ctx, id)
		if err != nil || len(setups.Characteristics) != len(st.Characteristics) {
			t.Errorf("two readings of a station differ: %d and %d, %v", len(setups.Characteristics), len(st.Characteristics), err)
		}
		names := map[string]bool{}
		for _, c := range st.Characteristics {
			names[c.Name] = true
		}
		for _, m := range st.Machines {
			names[m.Name] = true
		}
		return names
	}
	if err := move(p.Other.ID); !plant.IsKind(err, plant.Conflict) || !at(p.Station.ID)[p.Machine.Name] {
		t.Fatalf("a machine on which something is open moved: %v", err)
	}
	p.Clock.Advance(time.Minute)
	closeMatter(t, p, open, "Insert chipped", time.Time{})
	underway := p.Round(p.Diameter, calm...)
	underway.Source, underway.Person = "api", uuid.Nil
	p.Clock.Advance(time.Minute)
	if err := move(p.Other.ID); err != nil {
		t.Fatal(err)
	}
	if here, there := at(p.Station.ID), at(p.Other.ID); here["Lathe 1"] || here["Press force"] || !here["Lathe 2"] || !there["Lathe 1"] || !there["Axle seat diameter"] || !there["Shoulder length"] {
		t.Errorf("at the old station %v, at the new one %v", here, there)
	}
	if _, err := p.Record(ctx, underway); !plant.IsKind(err, plant.Conflict) {
		t.Errorf("a round for the old station: %v", err)
	}
	if st, err := p.StationState(ctx, p.Station.ID, 1); err != nil || len(st.Aside.Newest) != 1 || st.Aside.Newest[0].About != underway.ID {
		t.Errorf("it was not set aside: %+v, %v", st.Aside, err)
	}
	moved := p.Diameter
	moved.StationID = p.Other.ID
	if a := p.MustRecord(t, moved, calm...); a.Station != p.Other.ID || a.Verdict == plant.Learning {
		t.Errorf("a round at the new station: %+v", a)
	}
	var old, fresh int
	if err := p.Pool().QueryRow(ctx, `select count(*) filter (where r.station_id = $2), count(*) filter (where r.station_id = $3)
		from subgroup s join round r on r.id = s.round_id where s.characteristic_id = $1`, p.Diameter.ID, p.Station.ID, p.Other.ID).Scan(&old, &fresh); err != nil || old != 21 || fresh != 1 {
		t.Errorf("%d subgroups at the old station and %d at the new one, %v; want 21 and 1", old, fresh, err)
	}
	consistent(t, p)
	if ds, err := p.CheckRecord(ctx); err != nil || len(ds) > 0 {
		t.Errorf("the record differs from the ledger: %v, %v", ds, err)
	}
	foundSaying(t, p, `update machine set station_id = '`+p.Station.ID.String()+`' where name = 'Lathe 1'`, "stands at another station than was sealed")
	foundSaying(t, p, `update characteristic_state set station_id = '`+p.Station.ID.String()+`' where characteristic_id = '`+p.Diameter.ID.String()+`'`, "than its machine stands at")

	if err := move(storetest.ID()); !plant.IsKind(err, plant.NotFound) {
		t.Errorf("to a station that there is not: %v", err)
	}
	if err := move(uuid.Nil); err != nil || !at(p.Other.ID)["Lathe 1"] {
		t.Errorf("naming no station moved it: %v", err)
	}
}
