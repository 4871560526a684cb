package store_test

import (
	"context"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/store/storetest"
)

// TestBackdatedMachineStateMakesTheChangeoverBack: what was recorded for a later instant
// already is another part than what is now known to have run before it.
func TestBackdatedMachineStateMakesTheChangeoverBack(t *testing.T) {
	t.Parallel()
	p := storetest.New(t, "x")
	ctx := context.Background()
	at := p.Clock.Now()
	set := func(minute int, running bool, part uuid.UUID) {
		t.Helper()
		if err := p.SetMachine(ctx, plant.MachineState{ID: storetest.ID(), Machine: p.Machine.ID, At: at.Add(time.Duration(minute) * time.Minute), Running: running, Part: part}); err != nil {
			t.Fatal(err)
		}
	}
	p.Clock.Advance(3 * time.Hour)
	set(0, true, p.PartA.ID)
	set(60, false, p.PartA.ID)
	p.MustRecord(t, p.Diameter, calm...)
	set(30, true, p.PartB.ID) // the tablet of the other shift was out of reach
	rows, err := p.Pool().Query(ctx, `select at from boundary where characteristic_id = $1 and kind = 'changeover' order by at`, p.Diameter.ID)
	if err != nil {
		t.Fatal(err)
	}
	defer rows.Close()
	var got []time.Time
	for rows.Next() {
		var b time.Time
		if err := rows.Scan(&b); err != nil {
			t.Fatal(err)
		}
		got = append(got, b)
	}
	if len(got) != 2 || !got[0].Equal(at.Add(30*time.Minute)) || !got[1].Equal(at.Add(60*time.Minute)) {
		t.Errorf("changeovers at %v; want after 30 and after 60 minutes", got)
	}
	consistent(t, p)
}

// TestPromptedIsJudgedAtTheInstantOfTheChange by what is known when it is recorded, for
// what it affects.
func TestPromptedIsJudgedAtTheInstantOfTheChange(t *testing.T) {
	t.Parallel()
	p, _ := learned(t)
	ctx := context.Background()
	p.Clock.Advance(30 * time.Minute)
	before := p.Clock.Now().Add(-time.Minute)
	a := p.MustRecord(t, p.Diameter, high...)
	during := p.Clock.Advance(10 * time.Minute)
	p.Clock.Advance(10 * time.Minute)
	closeMatter(t, p, a.Parts[0].Matter, "Insert changed", time.Time{})
	closed := p.Clock.Now()
	for _, tc := range []struct {
		what     string
		at       time.Time
		of       plant.Characteristic
		whole    bool
		prompted bool
	}{
		{"before the signal", before, p.Diameter, false, false},
		{"at the signal", a.TakenAt, p.Diameter, false, true},
		{"while it was open", during, p.Diameter, false, true},
		{"on the whole machine while it was open", during, p.Diameter, true, true},
		{"on another characteristic while it was open", during, p.Force, false, false},
		{"at the closing", closed, p.Diameter, false, false},
	} {
		c := plant.Change{ID: storetest.ID(), Station: p.Station.ID, Machine: p.Machine.ID, Kind: plant.ToolChanged, HappenedAt: tc.at}
		if !tc.whole {
			c.Kind, c.Characteristic, c.Size = plant.Adjustment, tc.of.ID, storetest.Decimal(t, "0.01")
		}
		if err := p.LogChange(ctx, c); err != nil {
			t.Fatalf("%s: %v", tc.what, err)
		}
		var prompted bool
		if err := p.Pool().QueryRow(ctx, `select prompted from change where id = $1`, c.ID).Scan(&prompted); err != nil || prompted != tc.prompted {
			t.Errorf("%s: prompted = %v, %v; want %v", tc.what, prompted, err, tc.prompted)
		}
	}
}
