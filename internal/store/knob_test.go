package store_test

import (
	"context"
	"fmt"
	"math/rand/v2"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/store"
	"holdfast/internal/store/storetest"
)

// offset is an adjusting point that moves the diameter one to one and the force the
// other way.
func offset(t *testing.T, p *storetest.Plant) plant.Knob {
	t.Helper()
	k, err := p.SaveKnob(t.Context(), plant.Knob{ID: storetest.ID(), Machine: p.Machine.ID, Name: "X offset of turret 1", Unit: "mm",
		Step: *storetest.Decimal(t, "0.001"), Reason: "setting sheet", MadeBy: p.Engineer.ID,
		Moves: []plant.Gain{{Characteristic: p.Diameter.ID, PerUnit: *storetest.Decimal(t, "2")}, {Characteristic: p.Force.ID, PerUnit: *storetest.Decimal(t, "-0.5")}}})
	if err != nil {
		t.Fatal(err)
	}
	return k
}

func turned(t *testing.T, p *storetest.Plant, k plant.Knob, by string) plant.Change {
	return plant.Change{ID: storetest.ID(), Station: p.Station.ID, Machine: p.Machine.ID, Kind: plant.Adjustment, Characteristic: p.Diameter.ID,
		Knob: k.ID, Turned: storetest.Decimal(t, by), HappenedAt: p.Clock.Now(), Person: p.Operator.ID}
}

// change reads one change as the record has it.
func change(t *testing.T, p *storetest.Plant, id uuid.UUID) plant.Change {
	t.Helper()
	h, err := p.History(t.Context(), p.Diameter.ID, plant.Stretch{})
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range h.Changes {
		if c.ID == id {
			return c
		}
	}
	t.Fatalf("change %s is not on record", id)
	return plant.Change{}
}

func TestATurnFixesWhatItWasExpectedToDo(t *testing.T) {
	t.Parallel()
	p, _ := learned(t)
	ctx := t.Context()
	k := offset(t, p)
	c := turned(t, p, k, "-0.003")
	if err := p.LogChange(ctx, c); err != nil {
		t.Fatal(err)
	}
	check := func(when string) {
		t.Helper()
		got := change(t, p, c.ID)
		diameter, _ := got.EffectOn(p.Diameter.ID)
		force, _ := got.EffectOn(p.Force.ID)
		if _, moves := got.EffectOn(p.Mass.ID); moves || diameter.String() != "-0.006" || force.String() != "0.0015" || got.Size.String() != "-0.006" ||
			got.KnobVersion != 1 || got.KnobName != "X offset of turret 1" || got.Turned.String() != "-0.003" || got.Prompted {
			t.Errorf("%s: %+v", when, got)
		}
	}
	check("as recorded")
	// The engineer finds the gain to be another: what was recorded stays.
	k.Moves[0].PerUnit = *storetest.Decimal(t, "1")
	k.Reason = "measured over ten turns"
	second, err := p.SaveKnob(ctx, k)
	if err != nil || second.Version != 2 {
		t.Fatalf("version %d, %v", second.Version, err)
	}
	check("after another version")
	if err := p.LogChange(ctx, c); err != nil { // sent again, after the gain was changed
		t.Errorf("sent again: %v", err)
	}
	check("sent again")
	c.Turned = storetest.Decimal(t, "-0.004")
	if err := p.LogChange(ctx, c); !plant.IsKind(err, plant.Conflict) {
		t.Errorf("another turn under the same number: %v", err)
	}
	if _, err := p.VerifyLedger(ctx); err != nil {
		t.Error(err)
	}
	if ds, err := p.CheckRecord(ctx); err != nil || len(ds) > 0 {
		t.Errorf("an honest record differs: %v, %v", ds, err)
	}
	for _, sql := range []string{
		`update change set turned = -turned where turned is not null`,
		`update change set moves = '[]' where moves is not null`,
		`update change set knob_version = 2 where knob_id is not null`,
		`update knob set step = 0.002 where version = 1`,
		`update knob set moves = '[]' where version = 1`,
		`update knob set retired = true where version = 2`,
		`insert into knob select gen_random_uuid(), version, plant_id, machine_id, 'Y', unit, step, moves, retired, reason, made_at, person_id from knob limit 1`,
	} {
		tx, err := p.Pool().Begin(ctx)
		if err != nil {
			t.Fatal(err)
		}
		if tag, err := tx.Exec(ctx, sql); err != nil || tag.RowsAffected() == 0 {
			t.Fatalf("%s: %v, %v", sql, tag, err)
		}
		if ds, err := store.CheckRecordIn(ctx, tx); err != nil || len(ds) == 0 {
			t.Errorf("not found: %s (%v)", sql, err)
		}
		if err := tx.Rollback(ctx); err != nil {
			t.Fatal(err)
		}
	}
}

func TestKnobsHaveVersionsAndOneName(t *testing.T) {
	t.Parallel()
	p := storetest.New(t, "x")
	ctx := t.Context()
	k := offset(t, p)
	same, err := p.SaveKnob(ctx, k)
	if err != nil || same.Version != 1 {
		t.Errorf("saying the same again: version %d, %v", same.Version, err)
	}
	next := k
	next.Step, next.Reason = *storetest.Decimal(t, "0.002"), "new scale"
	if next, err = p.SaveKnob(ctx, next); err != nil || next.Version != 2 {
		t.Fatalf("version %d, %v", next.Version, err)
	}
	stale := k
	stale.Unit = "notches"
	if _, err := p.SaveKnob(ctx, stale); !plant.IsKind(err, plant.Conflict) {
		t.Errorf("a version that another was quicker with: %v", err)
	}
	twin := k
	twin.ID, twin.Version, twin.Name = storetest.ID(), 0, "x OFFSET of turret 1"
	if _, err := p.SaveKnob(ctx, twin); !plant.IsKind(err, plant.Conflict) {
		t.Errorf("a second of the same name: %v", err)
	}
	foreign := k
	foreign.ID, foreign.Version, foreign.Name = storetest.ID(), 0, "Nozzle"
	foreign.Moves = []plant.Gain{{Characteristic: p.Length.ID, PerUnit: *storetest.Decimal(t, "1")}}
	if _, err := p.SaveKnob(ctx, foreign); !plant.IsKind(err, plant.NotFound) {
		t.Errorf("moving a characteristic of another machine: %v", err)
	}
	elsewhere := turned(t, p, k, "0.001")
	elsewhere.Machine, elsewhere.Characteristic = p.Second.ID, p.Mass.ID
	if err := p.LogChange(ctx, elsewhere); !plant.IsKind(err, plant.NotFound) {
		t.Errorf("turned on another machine: %v", err)
	}
	next.Retired, next.Reason = true, "taken off"
	if next, err = p.SaveKnob(ctx, next); err != nil {
		t.Fatal(err)
	}
	if twin, err = p.SaveKnob(ctx, twin); err != nil || twin.Version != 1 {
		t.Errorf("the name of a retired one: version %d, %v", twin.Version, err)
	}
	if err := p.LogChange(ctx, turned(t, p, k, "0.001")); err != nil {
		t.Errorf("turned before it was retired, sent late: %v", err)
	}
	list, err := p.Knobs(ctx, p.Machine.ID)
	if err != nil || len(list) != 2 || list[0].ID != twin.ID || list[1].Version != 3 || !list[1].Retired {
		t.Errorf("%+v, %v", list, err)
	}
	versions, err := p.KnobVersions(ctx, k.ID)
	if err != nil || len(versions) != 3 || versions[2].Reason != "setting sheet" || versions[2].MadeName != p.Engineer.Name {
		t.Errorf("%+v, %v", versions, err)
	}
}

// TestATurnIsPromptedByAMatterOnAnythingItMoves and by nothing else.
func TestATurnIsPromptedByAMatterOnAnythingItMoves(t *testing.T) {
	t.Parallel()
	p, _ := learned(t)
	ctx := t.Context()
	k := offset(t, p)
	p.Clock.Advance(30 * time.Minute)
	p.MustRecord(t, p.Diameter, high...)
	p.Clock.Advance(time.Minute)
	c := turned(t, p, k, "0.002")
	c.Characteristic = p.Force.ID // meant for the force, yet it moves the diameter as well
	if err := p.LogChange(ctx, c); err != nil {
		t.Fatal(err)
	}
	direct := plant.Change{ID: storetest.ID(), Station: p.Station.ID, Machine: p.Machine.ID, Kind: plant.Adjustment, Characteristic: p.Force.ID,
		Size: storetest.Decimal(t, "0.01"), HappenedAt: p.Clock.Now()}
	if err := p.LogChange(ctx, direct); err != nil {
		t.Fatal(err)
	}
	if !change(t, p, c.ID).Prompted || change(t, p, direct.ID).Prompted {
		t.Errorf("prompted: through the knob %v, directly %v; want true and false", change(t, p, c.ID).Prompted, change(t, p, direct.ID).Prompted)
	}
}

// TestPromptedStaysWhenJudgementsChange goes through random histories of rounds, turns,
// corrections, voids and closings: whatever is judged anew, what was fixed of every
// adjustment stays as it was told.
func TestPromptedStaysWhenJudgementsChange(t *testing.T) {
	t.Parallel()
	for seed := range uint64(4) {
		t.Run(fmt.Sprint(seed), func(t *testing.T) {
			t.Parallel()
			p, _ := learned(t)
			ctx := context.Background()
			k := offset(t, p)
			rng := rand.New(rand.NewPCG(6, seed))
			type fact struct {
				prompted bool
				size     string
			}
			told := map[uuid.UUID]fact{}
			for range 40 {
				p.Clock.Advance(time.Duration(1+rng.IntN(40)) * time.Minute)
				switch n := rng.IntN(10); {
				case n < 4:
					shift := int64(rng.IntN(3)) * 3
					p.MustRecord(t, p.Diameter, 14990+shift, 14991+shift, 14992+shift, 14990+shift, 14991+shift)
				case n < 7:
					c := turned(t, p, k, []string{"0.001", "-0.002"}[rng.IntN(2)])
					c.HappenedAt = p.Clock.Now().Add(-time.Duration(rng.IntN(90)) * time.Minute) // some come late
					if err := p.LogChange(ctx, c); err != nil {
						t.Fatal(err)
					}
					got := change(t, p, c.ID)
					told[c.ID] = fact{got.Prompted, got.Size.String()}
				case n < 9:
					h, err := p.History(ctx, p.Diameter.ID, plant.Stretch{Last: 12})
					if err != nil {
						t.Fatal(err)
					}
					at := h.Points[rng.IntN(len(h.Points))]
					correction := plant.Correction{Subgroup: at.Subgroup, Characteristic: p.Diameter.ID, Replaces: at.Version, TakenAt: at.TakenAt,
						Reason: "typing slip", Person: p.Supervisor.ID, Readings: low}
					if rng.IntN(4) == 0 {
						correction.Void, correction.Readings = true, nil
					}
					if _, err := p.Correct(ctx, correction); err != nil {
						t.Fatal(err)
					}
				default:
					st, err := p.StationState(ctx, p.Station.ID, 1)
					if err != nil {
						t.Fatal(err)
					}
					for _, c := range st.Characteristics {
						if c.Matter != nil {
							closeMatter(t, p, c.Matter.ID, "Insert changed", time.Time{})
						}
					}
				}
				for id, want := range told {
					if got := change(t, p, id); got.Prompted != want.prompted || got.Size.String() != want.size {
						t.Fatalf("change %s was told as %+v and is now prompted %v, size %s", id, want, got.Prompted, got.Size)
					}
				}
			}
			if ds, err := p.CheckRecord(ctx); err != nil || len(ds) > 0 {
				t.Errorf("%v, %v", ds, err)
			}
			consistent(t, p)
		})
	}
}
