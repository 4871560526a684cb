package store_test

import (
	"context"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/store/storetest"
)

var (
	calm = []int64{14990, 14991, 14992, 14990, 14991}
	high = []int64{14998, 14998, 14999, 14998, 14999}
	low  = []int64{14984, 14984, 14983, 14984, 14983}
)

// correct replaces the readings of a round's only subgroup; nil readings void it.
func correct(t testing.TB, p *storetest.Plant, a plant.Answer, replaces int, readings []int64) plant.PartAnswer {
	t.Helper()
	c := plant.Correction{Characteristic: a.Parts[0].Characteristic, Subgroup: a.Parts[0].Subgroup, TakenAt: a.TakenAt, Replaces: replaces,
		Readings: readings, Void: readings == nil, Reason: "typing slip", Person: p.Supervisor.ID}
	part, err := p.Correct(context.Background(), c)
	if err != nil {
		t.Fatal(err)
	}
	return part
}

func openMatter(t testing.TB, p *storetest.Plant, c plant.Characteristic) *plant.Matter {
	t.Helper()
	h, err := p.History(context.Background(), c.ID, plant.Stretch{Last: 1})
	if err != nil {
		t.Fatal(err)
	}
	return h.State.Matter
}

func closeMatter(t testing.TB, p *storetest.Plant, id uuid.UUID, action string, fixed time.Time) plant.Matter {
	t.Helper()
	ctx := context.Background()
	m, err := p.Matter(ctx, id)
	if err != nil {
		t.Fatal(err)
	}
	if err := p.CloseMatter(ctx, plant.ClosingRequest{Matter: id, Version: m.Version, Cause: "Not found", Action: action, FixedAt: fixed, Person: p.Operator.ID}); err != nil {
		t.Fatal(err)
	}
	if m, err = p.Matter(ctx, id); err != nil {
		t.Fatal(err)
	}
	return m
}

// TestSignalThatStandsAgainAfterItsMatterWasClosed: a firing is corrected away, its
// matter is closed as withdrawn, and the correction is taken back. The firing is found
// late with no matter open, so it must be a line of a new one.
func TestSignalThatStandsAgainAfterItsMatterWasClosed(t *testing.T) {
	t.Parallel()
	p, _ := learned(t)
	p.Clock.Advance(30 * time.Minute)
	a := p.MustRecord(t, p.Diameter, high...)
	correct(t, p, a, 1, calm)
	if m := closeMatter(t, p, a.Parts[0].Matter, "", time.Time{}); m.Closing != plant.WithdrawnBy || !m.RestartAt.IsZero() {
		t.Errorf("closed as %q with a restart at %s, want withdrawn without one", m.Closing, m.RestartAt)
	}
	correct(t, p, a, 2, high)
	m := openMatter(t, p, p.Diameter)
	if m == nil || m.AllWithdrawn() || len(m.Lines) == 0 || m.Alarmed {
		t.Fatalf("open after the firing stands again: %+v; want a matter with a standing line, not alarmed", m)
	}
	consistent(t, p)
}

// TestSignalThatStandsAgainStaysWhereItWasDealtWith: it lies before the restart mark of
// the matter that was closed with a fix, so it opens nothing and leaves no other matter.
func TestSignalThatStandsAgainStaysWhereItWasDealtWith(t *testing.T) {
	t.Parallel()
	p, _ := learned(t)
	p.Clock.Advance(30 * time.Minute)
	a := p.MustRecord(t, p.Diameter, high...)
	p.Clock.Advance(time.Minute)
	closeMatter(t, p, a.Parts[0].Matter, "Insert changed", time.Time{})
	p.Clock.Advance(30 * time.Minute)
	second := p.MustRecord(t, p.Diameter, low...).Parts[0].Matter
	correct(t, p, a, 1, calm)
	correct(t, p, a, 2, high)
	m, err := p.Matter(context.Background(), a.Parts[0].Matter)
	if err != nil || len(m.Lines) == 0 || m.AllWithdrawn() {
		t.Errorf("the closed matter: %+v, %v; want its line to stand again", m, err)
	}
	if m := openMatter(t, p, p.Diameter); m == nil || m.ID != second {
		t.Errorf("open: %+v; want the second matter still", m)
	}
	consistent(t, p)
}

// TestBothSidesOfAFiringStayOnRecord: a correction that turns a firing to the other side
// withdraws the one and finds the other; neither is removed.
func TestBothSidesOfAFiringStayOnRecord(t *testing.T) {
	t.Parallel()
	p, _ := learned(t)
	p.Clock.Advance(30 * time.Minute)
	a := p.MustRecord(t, p.Diameter, high...)
	correct(t, p, a, 1, low)
	m, err := p.Matter(context.Background(), a.Parts[0].Matter)
	if err != nil {
		t.Fatal(err)
	}
	var withdrawn, found bool
	for _, l := range m.Lines {
		withdrawn = withdrawn || l.Side == plant.High && l.Withdrawn
		found = found || l.Side == plant.Low && !l.Withdrawn && l.FoundLate
	}
	if !withdrawn || !found {
		t.Errorf("lines = %+v; want the high one withdrawn and the low one found late", m.Lines)
	}
	consistent(t, p)
}

// TestFoundLateWhileLimitsWaitForTheirHour: a revision that comes into force later is no
// boundary yet, so what is found late now still opens a matter.
func TestFoundLateWhileLimitsWaitForTheirHour(t *testing.T) {
	t.Parallel()
	p, _ := learned(t)
	ctx := context.Background()
	p.Clock.Advance(30 * time.Minute)
	if _, err := p.Freeze(ctx, plant.FreezeRequest{Characteristic: p.Diameter.ID, SetupVersion: 1, After: 1, Rules: plant.Setup{Chart: "individuals"}.DefaultRules(),
		Reason: "next week", Person: p.Engineer.ID, InForceFrom: p.Clock.Now().Add(48 * time.Hour)}); err != nil {
		t.Fatal(err)
	}
	p.Clock.Advance(30 * time.Minute)
	p.MustRecord(t, p.Diameter, calm...)
	late := p.Round(p.Diameter, high...)
	late.TakenRaw = late.TakenRaw.Add(-10 * time.Minute)
	a, err := p.Record(ctx, late)
	if err != nil {
		t.Fatal(err)
	}
	if m := openMatter(t, p, p.Diameter); m == nil || m.Alarmed || !a.Parts[0].Late {
		t.Errorf("open: %+v, answer %+v; want a matter that did not alarm", m, a)
	}
	consistent(t, p)
}

// TestFoundLateBeforeTheLastBoundaryStaysOnTheRecord.
func TestFoundLateBeforeTheLastBoundaryStaysOnTheRecord(t *testing.T) {
	t.Parallel()
	p, _ := learned(t)
	ctx := context.Background()
	p.Clock.Advance(30 * time.Minute)
	p.MustFreeze(t, p.Diameter)
	p.Clock.Advance(30 * time.Minute)
	late := p.Round(p.Diameter, high...)
	late.TakenRaw = late.TakenRaw.Add(-45 * time.Minute)
	p.MustRecord(t, p.Diameter, calm...)
	a, err := p.Record(ctx, late)
	if err != nil {
		t.Fatal(err)
	}
	if a.Verdict != plant.Look || a.Parts[0].Opened {
		t.Errorf("answer = %+v; want a look that opened nothing", a)
	}
	if m := openMatter(t, p, p.Diameter); m != nil {
		t.Errorf("open: %+v; want nothing", m)
	}
	var kept int
	if err := p.Pool().QueryRow(ctx, `select count(*) from signal where found_late and matter_id is null and not withdrawn`).Scan(&kept); err != nil || kept == 0 {
		t.Errorf("%d firings on the record, %v; want at least one", kept, err)
	}
	consistent(t, p)
}

// TestRestartAtTheVeryInstantOfASubgroup: a boundary applies to subgroups taken at or
// after it.
func TestRestartAtTheVeryInstantOfASubgroup(t *testing.T) {
	t.Parallel()
	p, _ := learned(t)
	ctx := context.Background()
	p.Clock.Advance(30 * time.Minute)
	a := p.MustRecord(t, p.Diameter, high...)
	p.Clock.Advance(30 * time.Minute)
	b := p.MustRecord(t, p.Diameter, high...)
	p.Clock.Advance(time.Minute)
	closeMatter(t, p, a.Parts[0].Matter, "Insert changed", b.TakenAt)
	m := openMatter(t, p, p.Diameter)
	if m == nil || m.OpenedSubgroup != b.Parts[0].Subgroup || m.Alarmed || !m.OpenedTaken.Equal(b.TakenAt) {
		t.Fatalf("open: %+v; want a matter opened without alarm by the subgroup at the mark", m)
	}
	old, err := p.Matter(ctx, a.Parts[0].Matter)
	if err != nil {
		t.Fatal(err)
	}
	for name, lines := range map[string][]plant.MatterLine{"before": old.Lines, "at": m.Lines} {
		if l := lines[0]; l.Withdrawn || l.Count != 1 {
			t.Errorf("line %s the mark: %+v; want one firing that stands", name, l)
		}
	}
	var from time.Time
	if err := p.Pool().QueryRow(ctx, `select segment_from from characteristic_state where characteristic_id = $1`, p.Diameter.ID).Scan(&from); err != nil || !from.Equal(b.TakenAt) {
		t.Errorf("the segment begins at %s, %v; want %s", from, err, b.TakenAt)
	}
	consistent(t, p)
}

// TestSubgroupTakenAtTheVeryInstantOfARevision is judged by it.
func TestSubgroupTakenAtTheVeryInstantOfARevision(t *testing.T) {
	t.Parallel()
	p := storetest.New(t, "x")
	for i := range 20 {
		d := int64(i%5) - 2
		p.MustRecord(t, p.Diameter, 14990+d, 14991, 14992-d, 14989+d, 14993-d)
		p.Clock.Advance(30 * time.Minute)
	}
	before := p.MustRecord(t, p.Diameter, high...) // at the same instant, before limits are frozen
	r := p.MustFreeze(t, p.Diameter)
	if !r.InForceFrom.Equal(before.TakenAt) || before.Verdict != plant.Learning {
		t.Fatalf("the fixture does not meet its instant: %s, %+v", r.InForceFrom, before)
	}
	if m := openMatter(t, p, p.Diameter); m == nil || m.OpenedSubgroup != before.Parts[0].Subgroup || m.Alarmed {
		t.Errorf("open: %+v; want what was taken at the instant judged by the revision, without alarm", m)
	}
	after := p.MustRecord(t, p.Diameter, high...) // the same instant again: ordered by id
	if after.Verdict != plant.Look {
		t.Errorf("verdict = %s, want look", after.Verdict)
	}
	consistent(t, p)
}

func TestCorrectingFirstLastAndOnlySubgroup(t *testing.T) {
	t.Parallel()
	p := storetest.New(t, "x")
	outside := []int64{14990, 15001, 14992, 14990, 14991}
	only := p.MustRecord(t, p.Diameter, outside...)
	correct(t, p, only, 1, calm)
	consistent(t, p)
	closeMatter(t, p, only.Parts[0].Matter, "", time.Time{})
	correct(t, p, only, 2, nil)
	consistent(t, p)
	p.Clock.Advance(time.Minute)
	first := p.MustRecord(t, p.Diameter, calm...)
	p.Clock.Advance(time.Minute)
	last := p.MustRecord(t, p.Diameter, outside...)
	correct(t, p, first, 1, outside)
	correct(t, p, last, 1, calm)
	consistent(t, p)
	if m := openMatter(t, p, p.Diameter); m == nil || m.Kind() != plant.Hold {
		t.Errorf("open: %+v; want a hold", m)
	}
	correct(t, p, last, 2, nil)
	correct(t, p, first, 2, nil)
	m := openMatter(t, p, p.Diameter)
	if m == nil || !m.AllWithdrawn() {
		t.Fatalf("open after everything is void: %+v; want a matter that waits to be closed as withdrawn", m)
	}
	if m := closeMatter(t, p, m.ID, "", time.Time{}); m.Closing != plant.WithdrawnBy {
		t.Errorf("closed as %q", m.Closing)
	}
	p.Clock.Advance(time.Minute)
	if a := p.MustRecord(t, p.Diameter, calm...); a.Verdict != plant.Learning {
		t.Errorf("verdict after all that = %s, want learning", a.Verdict)
	}
	consistent(t, p)
}

// TestEachRevisionComesIntoForceAtItsInstant: one that was scheduled takes over at its
// hour, also from one that was frozen later for the time between.
func TestEachRevisionComesIntoForceAtItsInstant(t *testing.T) {
	t.Parallel()
	p, _ := learned(t)
	ctx := context.Background()
	freeze := func(after int, from time.Time) {
		t.Helper()
		if _, err := p.Freeze(ctx, plant.FreezeRequest{Characteristic: p.Diameter.ID, SetupVersion: 1, After: after,
			Rules: plant.Setup{Chart: "individuals"}.DefaultRules(), Reason: "test", Person: p.Engineer.ID, InForceFrom: from}); err != nil {
			t.Fatal(err)
		}
	}
	p.Clock.Advance(time.Minute)
	hour := p.Clock.Now().Add(time.Hour)
	freeze(1, hour)
	p.Clock.Advance(time.Minute)
	freeze(2, time.Time{})
	for _, tc := range []struct {
		at     time.Time
		number int
	}{{p.Clock.Now().Add(-time.Second), 1}, {p.Clock.Now(), 3}, {hour.Add(-time.Microsecond), 3}, {hour, 2}} {
		if r, err := p.RevisionAt(ctx, p.Diameter.ID, tc.at); err != nil || r.Number != tc.number {
			t.Errorf("in force at %s: revision %d, %v; want %d", tc.at, r.Number, err, tc.number)
		}
	}
	for range 4 { // across the hour
		p.Clock.Advance(25 * time.Minute)
		p.MustRecord(t, p.Diameter, calm...)
	}
	consistent(t, p)
}

// TestHistoryHoldsWhatTouchesTheStretch: the matter that was open when the stretch
// begins, and the signal of a subgroup whose tablet is a minute ahead.
func TestHistoryHoldsWhatTouchesTheStretch(t *testing.T) {
	t.Parallel()
	p, _ := learned(t)
	ctx := context.Background()
	p.Clock.Advance(30 * time.Minute)
	a := p.MustRecord(t, p.Diameter, high...)
	p.Clock.Advance(30 * time.Minute)
	begin := p.Clock.Now()
	p.MustRecord(t, p.Diameter, calm...)
	p.Clock.Advance(30 * time.Minute)
	closeMatter(t, p, a.Parts[0].Matter, "Insert changed", time.Time{})
	p.Clock.Advance(30 * time.Minute)
	h, err := p.History(ctx, p.Diameter.ID, plant.Stretch{From: begin, To: p.Clock.Now()})
	if err != nil || len(h.Points) != 1 || len(h.Matters) != 1 || h.Matters[0].ID != a.Parts[0].Matter {
		t.Errorf("%d points, matters %+v, %v; want the one that was open at the beginning", len(h.Points), h.Matters, err)
	}
	if h, err = p.History(ctx, p.Diameter.ID, plant.Stretch{From: p.Clock.Now().Add(-time.Minute)}); err != nil || len(h.Matters) != 0 {
		t.Errorf("after it was closed: %+v, %v; want none", h.Matters, err)
	}
	ahead := p.Round(p.Diameter, high...)
	ahead.TakenRaw = ahead.TakenRaw.Add(time.Minute)
	if _, err := p.Record(ctx, ahead); err != nil {
		t.Fatal(err)
	}
	h, err = p.History(ctx, p.Diameter.ID, plant.Stretch{Last: 1})
	if err != nil || len(h.Points) != 1 || len(h.Points[0].Signals) == 0 || len(h.Matters) != 1 {
		t.Errorf("history of what was taken a minute ahead: %+v, %v; want its signal and matter", h.Points, err)
	}
}
