package store_test

import (
	"context"
	"slices"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/store"
	"holdfast/internal/store/storetest"
)

// spanNow is the shift of now, as the plant's calendar has it.
func spanNow(t *testing.T, p *storetest.Plant) plant.ShiftSpan {
	t.Helper()
	pl, err := p.Plant(context.Background())
	if err != nil {
		t.Fatal(err)
	}
	return pl.SpanAt(p.Clock.Now())
}

func summary(t *testing.T, p *storetest.Plant, span plant.ShiftSpan) plant.ShiftSummary {
	t.Helper()
	list, err := p.ShiftSummaries(context.Background(), span)
	if err != nil {
		t.Fatal(err)
	}
	if len(list) == 0 {
		t.Fatal("no line")
	}
	return list[0]
}

func TestShiftSummaryHoldsWhatTheShiftDid(t *testing.T) {
	t.Parallel()
	p, _ := learned(t)
	ctx := context.Background()
	span := spanNow(t, p)
	p.Clock.Advance(30 * time.Minute)
	a := p.MustRecord(t, p.Diameter, 14998, 14998, 14999, 14998, 14999)
	p.Clock.Advance(5 * time.Minute)
	matter := a.Parts[0].Matter
	if matter == uuid.Nil {
		t.Fatalf("no matter: %+v", a)
	}
	adjust := plant.Change{ID: storetest.ID(), Station: p.Station.ID, Machine: p.Machine.ID, Kind: plant.Adjustment, Characteristic: p.Diameter.ID,
		Size: &plant.Decimal{Units: -5, Decimals: 3}, HappenedAt: p.Clock.Now(), Person: p.Operator.ID}
	if err := p.LogChange(ctx, adjust); err != nil {
		t.Fatal(err)
	}
	p.Clock.Advance(time.Minute)
	s := summary(t, p, span)
	opened, taken, closed, open := s.Counts()
	if opened != 1 || taken != 0 || closed != 0 || open != 1 || len(s.StillOpen()) != 1 || s.StillOpen()[0].Name == "" {
		t.Errorf("%d opened, %d taken, %d closed, %d open", opened, taken, closed, open)
	}
	if len(s.Changes) != 1 || !s.Changes[0].Prompted || s.Changes[0].Unit == "" {
		t.Errorf("changes %+v", s.Changes)
	}
	if k := s.Kept(); k.Taken() == 0 || k.Promised == 0 {
		t.Errorf("samples %+v", k)
	}

	// Kept quiet: said with the matter until its time is over, and of no summary before it.
	m, err := p.Matter(ctx, matter)
	if err != nil {
		t.Fatal(err)
	}
	until := plant.CutTime(p.Clock.Now().Add(time.Hour))
	if err := p.QuietMatter(ctx, plant.QuietRequest{ID: storetest.ID(), Matter: matter, Version: m.Version, Until: until, Reason: "insert is ordered", Person: p.Supervisor.ID}); err != nil {
		t.Fatal(err)
	}
	p.Clock.Advance(time.Minute)
	s = summary(t, p, span)
	if q := s.StillOpen()[0]; q.Quiet.Reason != "insert is ordered" || !q.QuietUntil(s.Until).Equal(until) || !q.QuietUntil(until).IsZero() {
		t.Errorf("quiet %+v, until %v", q.Quiet, q.QuietUntil(s.Until))
	}

	// A correction takes the signal back: it is listed, with what it took back.
	correctCalm(t, p, a)
	p.Clock.Advance(time.Minute)
	s = summary(t, p, span)
	if len(s.Corrections) != 1 || s.Corrections[0].Reason == "" || len(s.Corrections[0].Withdrew) == 0 {
		t.Errorf("corrections %+v", s.Corrections)
	}
	if m, err = p.Matter(ctx, matter); err != nil {
		t.Fatal(err)
	}
	if err := p.CloseMatter(ctx, plant.ClosingRequest{Matter: matter, Version: m.Version, Person: p.Operator.ID}); err != nil {
		t.Fatal(err)
	}
	p.Clock.Advance(time.Minute)
	s = summary(t, p, span)
	if _, _, closed, open := s.Counts(); closed != 1 || open != 0 || len(s.Ended()) != 1 {
		t.Errorf("after the closing: %d closed, %d open", closed, open)
	}
	// What was withdrawn had no cause.
	list, err := p.ClosedMatters(ctx, span.From, p.Clock.Now())
	if err != nil || len(list) != 1 || len(plant.Pareto(list, false)) != 0 {
		t.Errorf("%d closed, %v", len(list), err)
	}
	// The shift before knows nothing of all this.
	pl, err := p.Plant(ctx)
	if err != nil {
		t.Fatal(err)
	}
	before := summary(t, p, pl.SpanAt(p.Clock.Now().Add(-72*time.Hour)))
	if len(before.Matters)+len(before.Changes)+len(before.Corrections) > 0 {
		t.Errorf("three days ago: %+v", before)
	}
}

// correctCalm corrects the only subgroup of an answer to calm readings.
func correctCalm(t *testing.T, p *storetest.Plant, a plant.Answer) {
	t.Helper()
	_, err := p.Correct(context.Background(), plant.Correction{
		Characteristic: p.Diameter.ID, Subgroup: a.Parts[0].Subgroup, TakenAt: a.TakenAt, Replaces: 1,
		Readings: []int64{14990, 14991, 14992, 14990, 14991}, Reason: "gauge misread", Person: p.Operator.ID,
	})
	if err != nil {
		t.Fatal(err)
	}
}

func TestNotesAreCarriedUntilCleared(t *testing.T) {
	t.Parallel()
	p := storetest.New(t, "x")
	ctx := context.Background()
	note := plant.ShiftNote{ID: storetest.ID(), Line: p.Line.ID, Text: " Coolant\nlow ", WrittenByID: p.Operator.ID}
	for range 2 { // sent twice
		if err := p.WriteNote(ctx, note); err != nil {
			t.Fatal(err)
		}
	}
	other := note
	other.Text = "Something else"
	if err := p.WriteNote(ctx, other); !plant.IsKind(err, plant.Conflict) {
		t.Errorf("another text under the same number: %v", err)
	}
	for _, bad := range []plant.ShiftNote{
		{ID: storetest.ID(), Line: p.Line.ID, Text: " \n", WrittenByID: p.Operator.ID},
		{ID: storetest.ID(), Line: p.Line.ID, Text: string(slices.Repeat([]byte("a"), 501)), WrittenByID: p.Operator.ID},
	} {
		if err := p.WriteNote(ctx, bad); !plant.IsKind(err, plant.Invalid) {
			t.Errorf("%q: %v", bad.Text, err)
		}
	}
	if err := p.WriteNote(ctx, plant.ShiftNote{ID: storetest.ID(), Line: storetest.ID(), Text: "x", WrittenByID: p.Operator.ID}); !plant.IsKind(err, plant.NotFound) {
		t.Errorf("a line that is not there: %v", err)
	}

	// It is carried over shifts and days, until it is cleared; then the shift in which it was
	// cleared still shows it, and later ones do not.
	p.Clock.Advance(50 * time.Hour)
	s := summary(t, p, spanNow(t, p))
	if len(s.Notes) != 1 || s.Notes[0].Text != "Coolant low" || s.Notes[0].WrittenBy != p.Operator.Name {
		t.Fatalf("notes %+v", s.Notes)
	}
	if err := p.ClearNote(ctx, note.ID, p.Supervisor.ID); err != nil {
		t.Fatal(err)
	}
	if err := p.ClearNote(ctx, note.ID, p.Operator.ID); !plant.IsKind(err, plant.Conflict) {
		t.Errorf("cleared twice: %v", err)
	}
	if s := summary(t, p, spanNow(t, p)); len(s.Notes) != 1 || s.Notes[0].ClearedBy != p.Supervisor.Name {
		t.Errorf("in the shift of the clearing: %+v", s.Notes)
	}
	p.Clock.Advance(25 * time.Hour)
	if s := summary(t, p, spanNow(t, p)); len(s.Notes) != 0 {
		t.Errorf("a day later: %+v", s.Notes)
	}
	agrees(t, p)
}

// agrees demands that tables and ledger agree.
func agrees(t *testing.T, p *storetest.Plant) {
	t.Helper()
	differ, err := p.CheckRecord(context.Background())
	if err != nil || len(differ) > 0 {
		t.Errorf("the record differs from the ledger: %v %v", differ, err)
	}
}

func TestHandoverIsConfirmedOnceAndWhenItIsOver(t *testing.T) {
	t.Parallel()
	p := storetest.New(t, "x")
	ctx := context.Background()
	span := spanNow(t, p)
	if err := p.ConfirmHandover(ctx, p.Line.ID, span, p.Operator.ID); !plant.IsKind(err, plant.Invalid) {
		t.Errorf("while the shift runs: %v", err)
	}
	p.Clock.Advance(span.To.Sub(p.Clock.Now()) + time.Minute)
	for range 2 {
		if err := p.ConfirmHandover(ctx, p.Line.ID, span, p.Operator.ID); err != nil {
			t.Fatal(err)
		}
	}
	if err := p.ConfirmHandover(ctx, p.Line.ID, span, p.Supervisor.ID); err != nil {
		t.Fatal(err)
	}
	if err := p.ConfirmHandover(ctx, storetest.ID(), span, p.Supervisor.ID); !plant.IsKind(err, plant.NotFound) {
		t.Errorf("a line that is not there: %v", err)
	}
	if s := summary(t, p, span); len(s.Readers) != 2 {
		t.Errorf("readers %+v", s.Readers)
	}
	agrees(t, p)
}

func TestOneRootADay(t *testing.T) {
	t.Parallel()
	p := storetest.New(t, "x")
	ctx := context.Background()
	p.MustRecord(t, p.Diameter, 14990, 14991, 14992, 14990, 14991)
	done := make(chan error)
	for range 4 { // servers that ask at once
		go func() { done <- p.KeepRoot(ctx) }()
	}
	for range 4 {
		if err := <-done; err != nil {
			t.Fatal(err)
		}
	}
	day := p.Clock.Now().In(time.UTC).Format(time.DateOnly)
	first, err := p.RootOn(ctx, day)
	if err != nil || first == nil || first.Chains == 0 {
		t.Fatalf("%+v, %v", first, err)
	}
	p.Clock.Advance(24 * time.Hour)
	p.MustRecord(t, p.Diameter, 14990, 14991, 14992, 14990, 14991)
	if err := p.KeepRoot(ctx); err != nil {
		t.Fatal(err)
	}
	second, err := p.RootOn(ctx, p.Clock.Now().Format(time.DateOnly))
	if err != nil || second == nil || second.Root == first.Root || second.Day == first.Day {
		t.Errorf("%+v after %+v, %v", second, first, err)
	}
	agrees(t, p)

	// A chain that is cut no longer contains the head that the root was made of.
	if _, err := p.Pool().Exec(ctx, `delete from ledger where chain = $1 and seq = (select max(seq) from ledger where chain = $1)`, p.Diameter.ID); err != nil {
		t.Fatal(err)
	}
	differ, err := p.CheckRecord(ctx)
	if err != nil || !slices.ContainsFunc(differ, func(d store.Difference) bool { return d.Characteristic == p.Diameter.ID }) {
		t.Errorf("a cut chain was not found: %v %v", differ, err)
	}
}

// TestHandoverNamesOverdueGaugeChecks: as they stood when the shift ended, whatever was
// checked since.
func TestHandoverNamesOverdueGaugeChecks(t *testing.T) {
	t.Parallel()
	p := storetest.New(t, "")
	ctx := context.Background()
	g := gauged(t, p, "Micrometer M-04", p.Diameter)
	check := func() {
		t.Helper()
		if err := p.CheckGauge(ctx, plant.GaugeCheckRecord{ID: storetest.ID(), Gauge: g.ID, Good: true, Person: p.Operator.ID}); err != nil {
			t.Fatal(err)
		}
	}
	check()
	due := p.Clock.Now().AddDate(0, 0, 7).Format(time.DateOnly)
	if s := summary(t, p, spanNow(t, p)); len(s.Gauges) != 0 {
		t.Errorf("checked just now: %+v", s.Gauges)
	}
	p.Clock.Advance(9 * 24 * time.Hour)
	late := spanNow(t, p)
	p.Clock.Advance(48 * time.Hour) // that shift is over
	for _, when := range []string{"overdue still", "checked since"} {
		s := summary(t, p, late)
		if len(s.Gauges) != 1 || s.Gauges[0].Gauge.Name != g.Name || s.Gauges[0].Gauge.NextCheck.Format(time.DateOnly) != due || s.Gauges[0].First != p.Diameter.ID {
			t.Errorf("%s: %+v, want one due %s", when, s.Gauges, due)
		}
		check()
	}
	if s := summary(t, p, spanNow(t, p)); len(s.Gauges) != 0 {
		t.Errorf("checked now: %+v", s.Gauges)
	}
}
