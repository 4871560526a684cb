package store_test

import (
	"context"
	"encoding/json"
	"math"
	"math/rand/v2"
	"os"
	"slices"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/spc/capability"
	"holdfast/internal/spc/limits"
	"holdfast/internal/store"
	"holdfast/internal/store/storetest"
)

// stateOf reads how one characteristic stands now.
func stateOf(t testing.TB, p *storetest.Plant, c plant.Characteristic) plant.CharacteristicState {
	t.Helper()
	st, err := p.StationState(context.Background(), c.StationID, 1)
	if err != nil {
		t.Fatal(err)
	}
	for _, v := range st.Characteristics {
		if v.ID == c.ID {
			return v
		}
	}
	t.Fatal("the characteristic is not at its station")
	return plant.CharacteristicState{}
}

func refresh(t testing.TB, p *storetest.Plant) {
	t.Helper()
	if _, err := p.RefreshStandings(context.Background(), true); err != nil {
		t.Fatal(err)
	}
}

// TestTheFigureIsThatOfTheSameReadings sends published readings through the write path.
// The kept figure is what package capability says of the same readings, and its Ppk is
// the value that testdata/piston_rings.json names with its source.
func TestTheFigureIsThatOfTheSameReadings(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	text, err := os.ReadFile("testdata/piston_rings.json")
	if err != nil {
		t.Fatal(err)
	}
	var rings struct {
		Lower, Upper string
		Mean, Ppk    float64
		SD           float64 `json:"sd_overall"`
		Subgroups    [][]float64
	}
	if err := json.Unmarshal(text, &rings); err != nil {
		t.Fatal(err)
	}
	p := storetest.New(t, "x")
	c := plant.Characteristic{ID: storetest.ID(), StationID: p.Station.ID, MachineID: p.Machine.ID, Name: "Ring diameter"}
	if err := p.AddCharacteristic(ctx, c, plant.Setup{Unit: "mm", Decimals: 3, Lower: storetest.Decimal(t, rings.Lower), Upper: storetest.Decimal(t, rings.Upper),
		Chart: limits.XBarR, Size: 5}, uuid.Nil); err != nil {
		t.Fatal(err)
	}
	var all []capability.Subgroup
	record := func() {
		for _, g := range rings.Subgroups {
			p.Clock.Advance(30 * time.Minute)
			units := make([]int64, len(g))
			for i, x := range g {
				units[i] = int64(math.Round(x * 1000))
			}
			p.MustRecord(t, c, units...)
		}
	}
	record()
	for _, g := range rings.Subgroups {
		all = append(all, capability.Subgroup{Readings: g})
	}
	p.Clock.Advance(time.Minute)
	p.MustFreeze(t, c)
	record() // under the limits from them
	if s := stateOf(t, p, c); s.Matter != nil {
		t.Fatalf("the published subgroups signal under their own limits: %+v", s.Matter.Lines)
	}
	refresh(t, p)
	lower, upper := 73.950, 74.050
	want, err := capability.Assess(all, capability.Specification{Lower: &lower, Upper: &upper}, capability.Options{})
	if err != nil {
		t.Fatal(err)
	}
	s := stateOf(t, p, c)
	f := s.Standing.Figure
	if f.Readings != 125 || f.Subgroups != 25 || math.Abs(f.Mean-want.Mean) > 1e-9 || math.Abs(f.SD-want.SigmaOverall) > 1e-12 ||
		math.Abs(f.Ppk-want.Ppk.Value) > 1e-9 || math.Abs(f.Bound-want.Ppk.LowerBound) > 1e-9 {
		t.Errorf("kept %+v, the same readings give %+v with bound %g", f, want, want.Ppk.LowerBound)
	}
	if math.Abs(f.Ppk-rings.Ppk) > 1e-9 || math.Abs(f.Mean-rings.Mean) > 1e-9 || math.Abs(f.SD-rings.SD) > 1e-11 {
		t.Errorf("Ppk %.11f, mean %.6f, s %.12f; published readings give %.11f, %.6f, %.12f", f.Ppk, f.Mean, f.SD, rings.Ppk, rings.Mean, rings.SD)
	}
	// 1.596 of 125 readings is at least 1.42: capable.
	if o := s.Ownership(); o.Owner != plant.Nobody || o.Reason != plant.IsCapable || !o.Since.Equal(s.LastTaken) {
		t.Errorf("ownership %+v, want nobody since %s", o, s.LastTaken)
	}
}

// wide makes Diameter stable and not capable: limits from 20 subgroups that are wider
// than the specification bears, and so many more under them.
func wide(t testing.TB, p *storetest.Plant, more int) {
	t.Helper()
	for i := range 20 + more {
		if i == 20 {
			p.Clock.Advance(time.Minute)
			p.MustFreeze(t, p.Diameter)
		}
		p.Clock.Advance(30 * time.Minute)
		d := int64(i%3) - 1 // 14.991 +- 0.009 with an s.d. of 2.7 thousandths: a Ppk of 1.1
		p.MustRecord(t, p.Diameter, 14987+d, 14990+d, 14991+d, 14992+d, 14995+d)
	}
	refresh(t, p)
}

func TestProtectionAcceptanceAndTheirEnds(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	p := storetest.New(t, "x")
	wide(t, p, 125)
	s := stateOf(t, p, p.Diameter)
	if o := s.Ownership(); o.Owner != plant.Engineering || o.Reason != plant.NotCapable || !s.WantsProtection() {
		t.Fatalf("ownership %+v of %+v", o, s.Standing)
	}
	statement := plant.Protection{ID: storetest.ID(), Characteristic: p.Diameter.ID, Method: plant.InspectAll, Instruction: " Gauge every axle, red box for the rest.",
		DecidedBy: "Quality manager", Person: p.Engineer.ID}
	for range 2 { // sent twice it is there once
		if err := p.StateProtection(ctx, statement); err != nil {
			t.Fatal(err)
		}
	}
	other := statement
	other.Instruction = "Nothing"
	if err := p.StateProtection(ctx, other); !plant.IsKind(err, plant.Conflict) {
		t.Errorf("other content under the same id: %v", err)
	}
	s = stateOf(t, p, p.Diameter)
	if s.WantsProtection() || len(s.Protections) != 1 || s.Protections[0].PersonName != "Engineer 1" || s.Protections[0].Instruction != "Gauge every axle, red box for the rest." ||
		!s.Protections[0].From.Equal(p.Clock.Now()) {
		t.Errorf("protections %+v", s.Protections)
	}

	accept := plant.Acceptance{ID: storetest.ID(), Characteristic: p.Diameter.ID, SetupVersion: 1, Reason: "customer agrees", Told: "1.10",
		Until: p.Clock.Now().Add(30 * 24 * time.Hour), Person: p.Engineer.ID}
	for range 2 {
		if err := p.Accept(ctx, accept); err != nil {
			t.Fatal(err)
		}
	}
	s = stateOf(t, p, p.Diameter)
	if o := s.Ownership(); o.Owner != plant.Nobody || o.Reason != plant.IsAccepted || !o.Since.Equal(p.Clock.Now()) || s.Acceptance.Told != "1.10" {
		t.Errorf("accepted: %+v", o)
	}
	p.Clock.Advance(31 * 24 * time.Hour)
	if o := stateOf(t, p, p.Diameter).Ownership(); o.Owner != plant.Engineering || o.Reason != plant.AcceptanceEnded || !o.Since.Equal(accept.Until) {
		t.Errorf("after its end: %+v", o)
	}
	accept.ID, accept.Until = storetest.ID(), p.Clock.Now().Add(time.Hour)
	if err := p.Accept(ctx, accept); err != nil {
		t.Fatal(err)
	}
	p.Clock.Advance(time.Minute)
	ends := []plant.Ending{
		{ID: storetest.ID(), Of: statement.ID, Reason: "dispenser rebuilt", Person: p.Engineer.ID},
		{ID: storetest.ID(), Of: accept.ID, Reason: "customer wants more", Person: p.Engineer.ID},
	}
	for _, e := range slices.Concat(ends, ends) {
		if err := p.EndStatement(ctx, p.Diameter.ID, e); err != nil {
			t.Fatal(err)
		}
	}
	again := ends[0]
	again.ID = storetest.ID()
	if err := p.EndStatement(ctx, p.Diameter.ID, again); !plant.IsKind(err, plant.Conflict) {
		t.Errorf("ended twice: %v", err)
	}
	if err := p.EndStatement(ctx, p.Mass.ID, plant.Ending{ID: storetest.ID(), Of: statement.ID, Reason: "x", Person: p.Engineer.ID}); !plant.IsKind(err, plant.NotFound) {
		t.Errorf("ended at another characteristic: %v", err)
	}
	s = stateOf(t, p, p.Diameter)
	if o := s.Ownership(); o.Reason != plant.AcceptanceEnded || !s.WantsProtection() || s.Acceptance.End.Reason != "customer wants more" {
		t.Errorf("after all was ended: %+v, %+v", o, s.Protections)
	}
	if list, err := p.Protections(ctx, p.Diameter.ID); err != nil || len(list) != 1 || list[0].End.Reason != "dispenser rebuilt" {
		t.Errorf("protections on record %+v, %v", list, err)
	}
	_, course, err := p.OwnerCourse(ctx, p.Diameter.ID)
	if err != nil {
		t.Fatal(err)
	}
	var reasons []plant.OwnerReason
	for _, o := range course {
		reasons = append(reasons, o.Reason)
	}
	if want := []plant.OwnerReason{plant.NotCapable, plant.IsAccepted, plant.AcceptanceEnded, plant.IsAccepted, plant.AcceptanceEnded}; len(reasons) < 5 || !slices.Equal(reasons[len(reasons)-5:], want) {
		t.Errorf("course %v, want it to end with %v", reasons, want)
	}
	// What cannot be accepted is refused: Mass has no limits.
	if err := p.Accept(ctx, plant.Acceptance{ID: storetest.ID(), Characteristic: p.Mass.ID, SetupVersion: 1, Reason: "x", Until: p.Clock.Now().Add(time.Hour), Person: p.Engineer.ID}); !plant.IsKind(err, plant.Conflict) {
		t.Errorf("accepted without a figure: %v", err)
	}
	consistent(t, p)
	for _, sql := range []string{
		`update protection set instruction = 'Nothing'`,
		`update protection set from_at = from_at - interval '1 day'`,
		`delete from protection`,
		`update acceptance set until_at = until_at + interval '1 year'`,
		`update acceptance set told = '1.32'`,
		`update ending set reason = 'none'`,
		`delete from ending`,
		`insert into ending select of_id, id, plant_id, characteristic_id, reason, ended_at, person_id from (select gen_random_uuid() as of_id, gen_random_uuid() as id,
			plant_id, characteristic_id, reason, ended_at, person_id from ending limit 1) x`,
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

// TestTheOwnerFollowsARandomHistory plays random histories through the write path: the
// state of the moment, refreshed, says what the fold over the record says, and there is
// exactly one owner.
func TestTheOwnerFollowsARandomHistory(t *testing.T) {
	t.Parallel()
	for seed := range uint64(3) {
		t.Run([]string{"diameter", "force", "mass"}[seed], func(t *testing.T) {
			t.Parallel()
			p := storetest.New(t, "x")
			y := &player{t: t, p: p, c: []plant.Characteristic{p.Diameter, p.Force, p.Mass}[seed], rng: rand.New(rand.NewPCG(seed, 21))}
			for i := range 160 {
				if err := y.act(); err != nil {
					t.Fatalf("step %d (%s): %v", i, y.did[len(y.did)-1], err)
				}
				if i%20 != 19 {
					continue
				}
				refresh(t, p)
				s := stateOf(t, p, y.c)
				standing, course, err := p.OwnerCourse(context.Background(), y.c.ID)
				if err != nil {
					t.Fatal(err)
				}
				got, want := s.Ownership(), course[len(course)-1]
				want.Unknown = got.Unknown
				if got != want || s.Standing != standing || !slices.Contains(plant.Owners, got.Owner) {
					t.Fatalf("step %d: now %+v\nthe fold says %+v\nlast done %v", i, got, want, y.did[max(0, len(y.did)-20):])
				}
			}
		})
	}
}

// TestCorrectionsInAnyOrderGiveOneCourse: two plants with the same readings, one typed
// right at once and one typed wrong and corrected, from the end or from the beginning.
func TestCorrectionsInAnyOrderGiveOneCourse(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	var courses [][]plant.Ownership
	var figures []plant.Figure
	for way := range 3 {
		p := storetest.New(t, "x")
		rng := rand.New(rand.NewPCG(9, 9))
		type typed struct {
			answer plant.Answer
			right  []int64
		}
		var wrong []typed
		for i := range 60 {
			p.Clock.Advance(30 * time.Minute)
			right := make([]int64, 5)
			for k := range right {
				right[k] = 14991 + max(-5, min(5, int64(math.Round(2*rng.NormFloat64()))))
			}
			if i == 20 {
				p.MustFreeze(t, p.Diameter)
			}
			first := right
			if slip := rng.IntN(4) == 0 && i > 20; slip && way > 0 {
				first = slices.Clone(right)
				first[2]++ // a slip that no rule sees
				wrong = append(wrong, typed{right: right})
			}
			a := p.MustRecord(t, p.Diameter, first...)
			if n := len(wrong); n > 0 && wrong[n-1].answer.Parts == nil {
				wrong[n-1].answer = a
			}
		}
		if way == 2 {
			slices.Reverse(wrong)
		}
		for _, w := range wrong {
			if _, err := p.Correct(ctx, plant.Correction{Characteristic: p.Diameter.ID, Subgroup: w.answer.Parts[0].Subgroup, TakenAt: w.answer.TakenAt,
				Replaces: 1, Readings: w.right, Reason: "typing slip", Person: p.Operator.ID}); err != nil {
				t.Fatal(err)
			}
		}
		s, course, err := p.OwnerCourse(ctx, p.Diameter.ID)
		if err != nil {
			t.Fatal(err)
		}
		courses, figures = append(courses, course), append(figures, s.Figure)
	}
	for i := 1; i < 3; i++ {
		if !slices.Equal(courses[i], courses[0]) || figures[i] != figures[0] {
			t.Errorf("corrected: %+v\n%+v\nright at once: %+v\n%+v", courses[i], figures[i], courses[0], figures[0])
		}
	}
}
