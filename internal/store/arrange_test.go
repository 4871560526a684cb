package store_test

import (
	"context"
	"strings"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
	"holdfast/internal/store"
	"holdfast/internal/store/storetest"
)

// whole demands that every chain holds and every table is as it was sealed.
func whole(t *testing.T, st *store.Store) {
	t.Helper()
	ctx := context.Background()
	if _, err := st.VerifyLedger(ctx); err != nil {
		t.Error(err)
	}
	differ, err := st.CheckRecord(ctx)
	if err != nil || len(differ) > 0 {
		t.Errorf("the record differs from what was sealed: %v, %v", differ, err)
	}
}

func wantKind(t *testing.T, what string, err error, k plant.Kind) {
	t.Helper()
	if !plant.IsKind(err, k) {
		t.Errorf("%s: %v, want kind %d", what, err, k)
	}
}

func TestWhatIsRetiredIsKeptAndShownNoMore(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	p := storetest.New(t, "x")
	p.MustRecord(t, p.Diameter, 14990, 14991, 14992, 14990, 14991)
	by := p.Engineer.ID
	retire := func(kind plant.Thing, id uuid.UUID, retired bool) error { return p.Retire(ctx, kind, id, retired, by) }

	wantKind(t, "a line with stations", retire(plant.ALine, p.Line.ID, true), plant.Conflict)
	wantKind(t, "a station with machines", retire(plant.AStation, p.Station.ID, true), plant.Conflict)
	wantKind(t, "a machine with characteristics", retire(plant.AMachine, p.Machine.ID, true), plant.Conflict)
	wantKind(t, "nothing", retire(plant.AMachine, storetest.ID(), true), plant.NotFound)
	for _, c := range []plant.Characteristic{p.Diameter, p.Force} {
		if err := retire(plant.ACharacteristic, c.ID, true); err != nil {
			t.Fatal(err)
		}
	}
	if err := retire(plant.AMachine, p.Machine.ID, true); err != nil {
		t.Fatal(err)
	}
	st, err := p.StationState(ctx, p.Station.ID, 5)
	if err != nil || len(st.Characteristics) != 1 || len(st.Machines) != 1 || st.Machines[0].ID != p.Second.ID {
		t.Errorf("the station shows %d characteristics and %d machines, %v; want what is in use", len(st.Characteristics), len(st.Machines), err)
	}
	// Its record is still there, and a round that a tablet had kept is still taken in.
	h, err := p.History(ctx, p.Diameter.ID, plant.Stretch{})
	if err != nil || len(h.Points) != 1 || !h.State.Retired || h.State.Name != p.Diameter.Name {
		t.Errorf("its record: %+v, %v", h.State.Characteristic, err)
	}
	p.Clock.Advance(time.Minute)
	p.MustRecord(t, p.Diameter, 14990, 14991, 14992, 14990, 14991)

	wantKind(t, "back below a retired machine", retire(plant.ACharacteristic, p.Diameter.ID, false), plant.Conflict)
	for _, step := range []struct {
		kind plant.Thing
		id   uuid.UUID
	}{{plant.AMachine, p.Machine.ID}, {plant.ACharacteristic, p.Diameter.ID}} {
		if err := retire(step.kind, step.id, false); err != nil {
			t.Fatal(err)
		}
	}
	if st, err = p.StationState(ctx, p.Station.ID, 5); err != nil || len(st.Characteristics) != 2 {
		t.Errorf("brought back: %d characteristics, %v", len(st.Characteristics), err)
	}
	whole(t, p.Store)
}

func TestAnOpenMatterKeepsACharacteristicInUse(t *testing.T) {
	t.Parallel()
	p := storetest.New(t, "x")
	p.MustRecord(t, p.Diameter, 14990, 14991, 15002, 14990, 14991) // a Hold
	wantKind(t, "with an open matter", p.Retire(context.Background(), plant.ACharacteristic, p.Diameter.ID, true, p.Engineer.ID), plant.Conflict)
}

func TestNamesAreGivenOnce(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	p := storetest.New(t, "x")
	by := p.Administrator.ID
	other := plant.Line{ID: storetest.ID(), Name: "Shells", Position: 1}
	if err := p.AddLine(ctx, other, by); err != nil {
		t.Fatal(err)
	}
	for what, err := range map[string]error{
		"line":           p.AddLine(ctx, plant.Line{ID: storetest.ID(), Name: "Axles"}, by),
		"line renamed":   p.ChangeLine(ctx, plant.Line{ID: other.ID, Name: "Axles"}, by),
		"station":        p.ChangeStation(ctx, plant.Station{ID: p.Other.ID, LineID: p.Line.ID, Name: "Turning 1"}, by),
		"machine":        p.ChangeMachine(ctx, plant.Machine{ID: p.Second.ID, Name: "Lathe 1"}, by),
		"part":           p.ChangePart(ctx, plant.Part{ID: p.PartB.ID, Name: "Axle 100", Family: "axles"}, by),
		"characteristic": p.ChangeCharacteristic(ctx, plant.Characteristic{ID: p.Force.ID, Name: p.Diameter.Name}, by),
	} {
		if !plant.IsKind(err, plant.Conflict) || !strings.Contains(err.Error(), "already") {
			t.Errorf("%s: %v, want a conflict that says so", what, err)
		}
	}
	whole(t, p.Store)
}

func TestOrderOfTheFloor(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	p := storetest.New(t, "x")
	for _, up := range []bool{true, true, false, true} { // at the end it stays where it is
		if err := p.Move(ctx, plant.AStation, p.Other.ID, up, p.Engineer.ID); err != nil {
			t.Fatal(err)
		}
	}
	o, err := p.Outline(ctx)
	if err != nil || o.Stations[0].ID != p.Other.ID {
		t.Errorf("first stands %+v, %v", o.Stations[0], err)
	}
	wantKind(t, "parts stand by name", p.Move(ctx, plant.APart, p.PartA.ID, true, p.Engineer.ID), plant.Invalid)
	whole(t, p.Store)
}

func TestShiftsAndStreamsAreReplacedWithoutLosingAny(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	p := storetest.New(t, "x")
	pl, err := p.Plant(ctx)
	if err != nil {
		t.Fatal(err)
	}
	early, late := pl.Shifts[0], pl.Shifts[1]
	early.Starts, late.Starts = late.Starts, early.Starts // they change places
	if err := p.SetShifts(ctx, []plant.Shift{early, late}, p.Engineer.ID); err != nil {
		t.Fatal(err)
	}
	if pl, err = p.Plant(ctx); err != nil || len(pl.Shifts) != 2 || pl.Shifts[0].ID != late.ID {
		t.Errorf("shifts = %+v, %v", pl.Shifts, err)
	}
	wantKind(t, "two shifts of one name", p.SetShifts(ctx, []plant.Shift{{Name: "a"}, {Name: "a", Starts: time.Hour}}, p.Engineer.ID), plant.Invalid)

	m := p.Machine
	spindle := plant.Stream{ID: storetest.ID(), Name: "spindle 1"}
	for _, streams := range [][]plant.Stream{{spindle, {ID: storetest.ID(), Name: "spindle 2"}}, {{ID: storetest.ID(), Name: "spindle 2"}}, {{ID: storetest.ID(), Name: "spindle 1"}}} {
		m.Streams = streams
		if err := p.ChangeMachine(ctx, m, p.Engineer.ID); err != nil {
			t.Fatal(err)
		}
	}
	o, err := p.Outline(ctx)
	if err != nil {
		t.Fatal(err)
	}
	var in, out int
	for _, s := range o.Machine(m.ID).Streams {
		if s.Retired {
			out++
		} else {
			in++
			if s.ID != spindle.ID {
				t.Errorf("a stream that came back is another: %+v", s)
			}
		}
	}
	if in != 1 || out != 1 {
		t.Errorf("%d streams in use and %d retired, want 1 and 1", in, out)
	}
	whole(t, p.Store)
}

func TestKnownLimitsJudgeFromTheFirstRound(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	p := storetest.New(t, "x")
	k := plant.KnownLimits{Characteristic: p.Diameter.ID, SetupVersion: 1, Center: 14.991, Sigma: 0.0018, Reason: "study of the old lathe", Person: p.Engineer.ID}
	for what, bad := range map[string]plant.KnownLimits{
		"no reason": {Characteristic: k.Characteristic, SetupVersion: 1, Center: k.Center, Sigma: k.Sigma, Person: k.Person},
		"no sigma":  {Characteristic: k.Characteristic, SetupVersion: 1, Center: k.Center, Reason: k.Reason, Person: k.Person},
		"in inches": {Characteristic: k.Characteristic, SetupVersion: 1, Center: 0.59, Sigma: k.Sigma, Reason: k.Reason, Person: k.Person},
	} {
		_, err := p.FreezeKnown(ctx, bad)
		wantKind(t, what, err, plant.Invalid)
	}
	r, err := p.FreezeKnown(ctx, k)
	if err != nil || r.Number != 1 || !r.Basis.Given {
		t.Fatalf("frozen: %+v, %v", r, err)
	}
	a := p.MustRecord(t, p.Diameter, 14998, 14998, 14999, 14998, 14999)
	if a.Parts[0].Verdict != plant.Look {
		t.Errorf("four sigma of the mean beyond the centre: %v, want Look", a.Parts[0].Verdict)
	}
	_, err = p.FreezeKnown(ctx, k)
	wantKind(t, "a second time", err, plant.Conflict)
	list, err := p.Revisions(ctx, p.Diameter.ID)
	if err != nil || len(list) != 1 || !list[0].Basis.Given {
		t.Errorf("on record: %+v, %v", list, err)
	}
	whole(t, p.Store)
}

// TestAnAdditionIsAllOrNothing adds a machine with two characteristics, the
// second of which cannot be.
func TestAnAdditionIsAllOrNothing(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	p := storetest.New(t, "x")
	m := plant.Machine{ID: storetest.ID(), StationID: p.Station.ID, Name: "Lathe 9"}
	described := func(name string) plant.Described {
		return plant.Described{Characteristic: plant.Characteristic{ID: storetest.ID(), StationID: p.Station.ID, MachineID: m.ID, Name: name},
			Setup: plant.Setup{Unit: "mm", Decimals: 2, Chart: limits.XBarR, Size: 5}}
	}
	add := plant.Addition{Machines: []plant.Machine{m}, Characteristics: []plant.Described{described("a"), described("a")}}
	err := p.Add(ctx, p.Engineer.ID, func(plant.Outline) (plant.Addition, error) { return add, nil })
	wantKind(t, "one name twice", err, plant.Conflict)
	if o, err := p.Outline(ctx); err != nil || len(o.Machines) != 3 {
		t.Errorf("%d machines, %v; want the three of before", len(o.Machines), err)
	}
	add.Characteristics[1].Name = "b"
	if err := p.Add(ctx, p.Engineer.ID, func(plant.Outline) (plant.Addition, error) { return add, nil }); err != nil {
		t.Fatal(err)
	}
	o, err := p.Outline(ctx)
	if err != nil || len(o.Characteristics) != 6 || o.Characteristic(add.Characteristics[1].ID).Setup.Size != 5 {
		t.Errorf("%d characteristics, %v", len(o.Characteristics), err)
	}
	whole(t, p.Store)
}

// TestARenamedThingBehindTheProgramsBackIsFound as the audit does.
func TestARenamedThingBehindTheProgramsBackIsFound(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	p := storetest.New(t, "x")
	if _, err := p.Pool().Exec(ctx, `update machine set name = 'Lathe 7' where id = $1`, p.Machine.ID); err != nil {
		t.Fatal(err)
	}
	if differ, err := p.CheckRecord(ctx); err != nil || len(differ) != 1 || differ[0].Characteristic != p.Machine.ID {
		t.Errorf("found: %+v, %v", differ, err)
	}
}
