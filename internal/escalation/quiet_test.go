package escalation_test

import (
	"context"
	"slices"
	"testing"
	"time"

	"holdfast/internal/plant"
	"holdfast/internal/store/storetest"
)

func TestQuietStopsTheStepsAndEndsByItself(t *testing.T) {
	t.Parallel()
	p := learned(t)
	s := newServer(t, p, p.Store)
	id := p.MustRecord(t, p.Diameter, high...).Parts[0].Matter
	p.Clock.Advance(12 * time.Minute)
	s.look(t)
	if err := quiet(t, p, id, 4*time.Hour); err != nil {
		t.Fatal(err)
	}
	p.Clock.Advance(4*time.Hour - time.Minute)
	s.look(t)
	if got := steps(t, p); !slices.Equal(got, []string{"look 0.1"}) {
		t.Errorf("while it is quiet: %q", got)
	}
	if m, err := p.Matter(context.Background(), id); err != nil || !m.Open() {
		t.Errorf("the matter itself is closed: %+v, %v", m, err)
	}
	// The steps begin anew when it ends, and not all at once.
	p.Clock.Advance(2 * time.Minute)
	s.look(t)
	if got := steps(t, p); !slices.Equal(got, []string{"look 0.1"}) {
		t.Errorf("a minute after the end: %q", got)
	}
	p.Clock.Advance(10 * time.Minute)
	s.look(t)
	if got := steps(t, p); !slices.Equal(got, []string{"look 0.1", "look 1.1"}) {
		t.Errorf("ten minutes after the end: %q", got)
	}
	whole(t, p)
}

func TestAGraverLineEndsTheQuiet(t *testing.T) {
	t.Parallel()
	p := learned(t)
	s := newServer(t, p, p.Store)
	id := p.MustRecord(t, p.Diameter, high...).Parts[0].Matter
	if err := quiet(t, p, id, 6*time.Hour); err != nil {
		t.Fatal(err)
	}
	p.Clock.Advance(30 * time.Minute)
	p.MustRecord(t, p.Diameter, high...) // no graver than before
	p.Clock.Advance(30 * time.Minute)
	s.look(t)
	if got := steps(t, p); len(got) != 0 {
		t.Errorf("another line of the same kind: %q", got)
	}
	p.MustRecord(t, p.Diameter, outside...)
	p.Clock.Advance(6 * time.Minute)
	s.look(t)
	if got := steps(t, p); !slices.Equal(got, []string{"hold 1.1"}) {
		t.Errorf("after a Hold: %q, want its first step, counted from the Hold", got)
	}
	whole(t, p)
}

func TestQuietIsChecked(t *testing.T) {
	t.Parallel()
	p := learned(t)
	ctx := context.Background()
	id := p.MustRecord(t, p.Diameter, high...).Parts[0].Matter
	m, err := p.Matter(ctx, id)
	if err != nil {
		t.Fatal(err)
	}
	now := p.Clock.Now()
	good := plant.QuietRequest{ID: storetest.ID(), Matter: id, Version: m.Version, Until: now.Add(time.Hour), Reason: "Insert is on its way", Person: p.Supervisor.ID}
	for name, change := range map[string]func(*plant.QuietRequest){
		"no reason":       func(r *plant.QuietRequest) { r.Reason = " \t" },
		"too short":       func(r *plant.QuietRequest) { r.Until = now.Add(4 * time.Minute) },
		"in the past":     func(r *plant.QuietRequest) { r.Until = now.Add(-time.Hour) },
		"beyond the most": func(r *plant.QuietRequest) { r.Until = now.Add(12*time.Hour + time.Second) },
	} {
		r := good
		change(&r)
		if err := p.QuietMatter(ctx, r); !plant.IsKind(err, plant.Invalid) {
			t.Errorf("%s: %v, want it refused", name, err)
		}
	}
	for name, change := range map[string]func(*plant.QuietRequest){
		"a version that nobody saw": func(r *plant.QuietRequest) { r.Version++ },
		"nothing to end":            func(r *plant.QuietRequest) { r.Until = time.Time{} },
	} {
		r := good
		change(&r)
		if err := p.QuietMatter(ctx, r); !plant.IsKind(err, plant.Conflict) {
			t.Errorf("%s: %v, want a conflict", name, err)
		}
	}
	for range 2 { // sent twice, kept once
		if err := p.QuietMatter(ctx, good); err != nil {
			t.Fatal(err)
		}
	}
	if n := count(t, p, `select count(*) from quieting`); n != 1 {
		t.Errorf("%d quietings, want 1", n)
	}
	p.Clock.Advance(time.Minute)
	if err := quiet(t, p, id, 0); err != nil { // ended early
		t.Fatal(err)
	}
	p.Clock.Advance(11 * time.Minute)
	if n := newServer(t, p, p.Store).look(t); n != 1 {
		t.Errorf("%d steps after the quiet was ended early, want the first", n)
	}
	take(t, p, id)
	if err := quiet(t, p, id, time.Hour); !plant.IsKind(err, plant.Conflict) {
		t.Errorf("quieting what somebody has taken: %v, want a conflict", err)
	}
	whole(t, p)
}
