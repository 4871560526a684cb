package demo

import (
	"context"
	"fmt"
	"math/rand/v2"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/spc/watch"
	"holdfast/internal/store"
)

// How the works learns: limits are frozen after so many subgroups, and some revised
// half way through.
const (
	learnFrom  = 30
	reviseFrom = 700
)

// walker lives through the days of one place, event by event, under a clock of its own.
type walker struct {
	b       *builder
	place   place
	station plant.Station
	machine plant.Machine
	parts   []uuid.UUID
	making  int
	tracks  []*track
	rng     *rand.Rand
	at      time.Time
	store   *store.Store
	running bool
	follow  []followUp
	care    *care
}

// followUp is what somebody will do about a matter.
type followUp struct {
	at     time.Time
	matter uuid.UUID
	track  *track
}

func newWalker(b *builder, pl place, index int, s plant.Station, m plant.Machine, parts map[string]uuid.UUID) *walker {
	w := &walker{care: newCare(index), b: b, place: pl, station: s, machine: m, rng: rand.New(rand.NewPCG(Seed, uint64(1000+index))), at: b.begin}
	for _, name := range pl.parts {
		w.parts = append(w.parts, parts[name])
	}
	w.store = b.store.WithClock(func() time.Time { return w.at })
	return w
}

func (w *walker) day() float64 { return w.at.Sub(w.b.begin).Hours() / 24 }

func (w *walker) operator() uuid.UUID {
	ops := w.b.people[plant.Operator]
	return ops[w.rng.IntN(len(ops))]
}

func (w *walker) minutes(least, most int) time.Duration {
	return time.Duration(least)*time.Minute + time.Duration(w.rng.Float64()*float64(most-least)*float64(time.Minute))
}

// lastHours is how long before its end the history runs without a pause, whatever the
// hour: a works that stands still shows a visitor nothing.
const lastHours = 10 * time.Hour

// works reports whether the place runs at a time: in the early and the late shift, not
// on Sundays.
func (w *walker) works(t time.Time) bool {
	if t.After(w.b.end.Add(-lastHours)) {
		return true
	}
	local := t.In(w.b.zone)
	return local.Weekday() != time.Sunday && local.Hour() >= 6 && local.Hour() < 22
}

// walk goes from event to event until end.
func (w *walker) walk(ctx context.Context, end time.Time, passed func(time.Duration)) error {
	for {
		next := w.next()
		if next.After(end) {
			passed(end.Sub(w.at))
			return w.finish(ctx, end)
		}
		if next.After(w.at) {
			passed(next.Sub(w.at))
			w.at = next
		}
		if err := w.step(ctx); err != nil {
			return fmt.Errorf("%s at %s: %w", w.place.name, w.at.Format(time.RFC3339), err)
		}
		if err := ctx.Err(); err != nil {
			return err
		}
	}
}

// next is when something happens next: a shift begins or ends, a sample is taken,
// somebody does something about a matter.
func (w *walker) next() time.Time {
	at := w.edge()
	if w.running {
		for _, t := range w.tracks {
			if t.due.Before(at) {
				at = t.due
			}
		}
	}
	for _, f := range w.follow {
		if f.at.Before(at) {
			at = f.at
		}
	}
	if at.Before(w.at) {
		return w.at
	}
	return at
}

// edge is when the place will next start or stop.
func (w *walker) edge() time.Time {
	t := w.at.Truncate(30 * time.Minute)
	for {
		if t.After(w.b.end) || t.After(w.at.Add(-time.Second)) && w.works(t) != w.running {
			return t
		}
		t = t.Add(30 * time.Minute)
	}
}

func (w *walker) step(ctx context.Context) error {
	if run := w.works(w.at); run != w.running {
		return w.setRunning(ctx, run)
	}
	for i, f := range w.follow {
		if !f.at.After(w.at) {
			w.follow = append(w.follow[:i:i], w.follow[i+1:]...)
			return w.act(ctx, f)
		}
	}
	return w.round(ctx)
}

func (w *walker) setRunning(ctx context.Context, run bool) error {
	w.running = run
	if run {
		// Where two parts are made, they change over on Mondays.
		if _, week := w.at.ISOWeek(); w.at.In(w.b.zone).Weekday() == time.Monday {
			w.making = week % len(w.parts)
		}
		for _, t := range w.tracks {
			t.due, t.lastDue = w.at.Add(w.minutes(6, 20)), time.Time{}
		}
	}
	if err := w.machineState(ctx, run); err != nil || !run {
		return err
	}
	return w.atShiftStart(ctx)
}

func (w *walker) machineState(ctx context.Context, run bool) error {
	return w.store.SetMachine(ctx, plant.MachineState{
		ID: id(), Machine: w.machine.ID, At: w.at, Running: run, Part: w.parts[w.making],
		Lot: fmt.Sprintf("KR-%02d%02d", int(w.day())/7, w.making+1), Person: w.operator(),
	})
}

func (w *walker) interval(t *track) time.Duration {
	if m := t.setup.Plan.EveryMinutes; m > 0 {
		return time.Duration(m) * time.Minute
	}
	return time.Duration(float64(t.setup.Plan.EveryParts) / w.place.rate * float64(time.Hour))
}

// round takes what is due, together when it is due together.
func (w *walker) round(ctx context.Context) error {
	if w.place.late {
		if skip := w.keepLate(); skip {
			return nil
		}
	}
	var due []*track
	for _, t := range w.tracks {
		if !t.due.After(w.at.Add(5 * time.Minute)) {
			due = append(due, t)
		}
	}
	if len(due) == 0 {
		return nil
	}
	r := plant.Round{ID: id(), Station: w.station.ID, DueAt: due[0].due, Occasion: plant.ByTime, TakenRaw: w.at, Source: "station", Person: w.operator()}
	for _, t := range due {
		t.last = t.sample(w.day())
		e := plant.Entry{Characteristic: t.ID, SetupVersion: 1, Readings: t.last}
		if t.setup.Size > 2 && w.rng.IntN(400) == 0 {
			e.Readings, e.ShortReason = t.last[:t.setup.Size-1], "part lost"
		}
		e.Streams = plant.NextStreams(w.machine.Streams, t.setup.Size, nil)
		e.Streams = e.Streams[:min(len(e.Streams), len(e.Readings))]
		r.Entries = append(r.Entries, e)
	}
	a, err := w.store.Record(ctx, r)
	if err != nil {
		return fmt.Errorf("round: %w", err)
	}
	for _, t := range due {
		t.taken++
		t.due = t.due.Add(w.interval(t))
		if late := w.at.Add(time.Minute); t.due.Before(late) {
			t.due = late
		}
		for _, p := range a.Parts {
			if p.Characteristic == t.ID && p.Opened && !t.aloneNow(w.day()) {
				w.follow = append(w.follow, followUp{at: w.at.Add(w.patience(t, w.minutes(2, 9))), matter: p.Matter, track: t})
			}
		}
		if err := w.afterwards(ctx, t); err != nil {
			return err
		}
	}
	// People come to a sample a little after it is due.
	w.at = w.at.Add(w.minutes(0, 2))
	return nil
}

// keepLate arranges that the last sample of a place was due so long before the end that
// the next one is nine minutes late there. It reports whether there is nothing to take.
func (w *walker) keepLate() bool {
	t := w.tracks[0]
	last := w.b.end.Add(-9 * time.Minute).Add(-w.interval(t))
	switch {
	case t.due.After(last):
		t.due = w.b.end.Add(time.Hour)
		return true
	case t.due.After(last.Add(-w.interval(t))) && t.due.Before(last):
		t.due = last
		return true
	}
	return false
}

// afterwards is what follows a sample besides its verdict: limits are frozen when there
// is enough, and in the spell somebody corrects what needs no correction.
func (w *walker) afterwards(ctx context.Context, t *track) error {
	if !t.learning && (t.taken == learnFrom || t.revised && t.taken == reviseFrom) {
		if err := w.freeze(ctx, t); err != nil {
			return fmt.Errorf("freeze: %w", err)
		}
	}
	if !w.inSpell(t) || w.followed(t) { // somebody is looking into it
		return nil
	}
	return w.overAdjust(ctx, t)
}

// freeze makes a revision of what was taken since the last one, leaving out what
// belonged to a matter whose cause was found.
func (w *walker) freeze(ctx context.Context, t *track) error {
	stretch := plant.Stretch{}
	reason := "First limits after the start-up samples"
	if t.frozen > 0 {
		stretch.From = w.at.Add(-14 * 24 * time.Hour)
		reason = "New insert grade: the process runs closer, and it will last"
	}
	h, err := w.store.History(ctx, t.ID, stretch)
	if err != nil {
		return err
	}
	req := plant.FreezeRequest{
		Characteristic: t.ID, SetupVersion: 1, After: t.frozen, From: stretch.From,
		Reason: reason, Person: w.b.people[plant.Engineer][0],
	}
	// The works wants few alarms: of the zone rules only the two that catch large shifts.
	req.Rules = plant.Rules{Location: watch.WesternElectric()[:2], Dispersion: []watch.Rule{{Kind: watch.Beyond, Z: 3}}}
	causes := map[uuid.UUID]string{}
	for _, m := range h.Matters {
		if !m.Open() && m.Closing == plant.Fixed {
			causes[m.ID] = m.Cause
		}
	}
	for _, p := range h.Points {
		for _, s := range p.Standing() {
			if c := causes[s.Matter]; c != "" {
				req.LeftOut = append(req.LeftOut, plant.LeftOut{Subgroup: p.Subgroup, TakenAt: p.TakenAt, Cause: c})
				break
			}
		}
	}
	if len(h.Points)-len(req.LeftOut) < plant.MinSubgroups {
		req.LeftOut = nil
	}
	if _, err := w.store.Freeze(ctx, req); err != nil {
		return err
	}
	t.frozen++
	return nil
}

// act is the next thing that somebody does about a matter.
func (w *walker) act(ctx context.Context, f followUp) error {
	h := hands{store: w.store, rng: w.rng, track: f.track, day: w.day(), operator: w.operator(), supervisor: w.b.people[plant.Supervisor][0], now: w.at,
		turn: func(found fault) error { return w.turn(ctx, f.track, -found.shift*f.track.sigma, found.action) },
		did:  func(found fault) error { return w.did(ctx, found) }}
	again, err := h.next(ctx, f.matter)
	switch {
	case err != nil:
		return err
	case again > 0:
		f.at = w.at.Add(w.patience(f.track, again))
		w.follow = append(w.follow, f)
	case w.inSpell(f.track):
		return w.overAdjust(ctx, f.track)
	}
	return nil
}

func (t *track) hasOpenFault(day float64) bool {
	for _, i := range t.acting(day) {
		if t.faults[i].open {
			return true
		}
	}
	return false
}

// finish leaves the place as a visitor finds it.
func (w *walker) finish(ctx context.Context, end time.Time) error {
	w.at = end
	if w.place.name != unstated {
		if err := w.stateProduct(ctx); err != nil {
			return err
		}
	}
	if !w.place.stopped {
		return nil
	}
	w.at = end.Add(-36 * time.Minute)
	return w.machineState(ctx, false)
}
