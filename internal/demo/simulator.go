package demo

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"math/rand/v2"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/store"
)

// Simulator goes on taking rounds at the works, as its operators would. It looks at the
// record and does what is due there, so it can be stopped and started at any time and
// shares the stations with visitors: what a visitor does first, it leaves alone.
type Simulator struct {
	store  *store.Store
	log    *slog.Logger
	rng    *rand.Rand
	now    func() time.Time
	begun  time.Time
	people []uuid.UUID // operators

	supervisor uuid.UUID
	tracks     map[uuid.UUID]*track
	waits      map[uuid.UUID]time.Time // when somebody will come to what is due or open
}

// NewSimulator makes a simulator of the works that the store holds.
func NewSimulator(ctx context.Context, st *store.Store, log *slog.Logger, now func() time.Time) (*Simulator, error) {
	s := &Simulator{store: st, log: log, now: now, begun: now(), rng: rand.New(rand.NewPCG(Seed, uint64(now().UnixNano()))),
		tracks: map[uuid.UUID]*track{}, waits: map[uuid.UUID]time.Time{}}
	all, err := st.People(ctx)
	if err != nil {
		return nil, err
	}
	for _, p := range all {
		if p.Roles.Has(plant.Operator) {
			s.people = append(s.people, p.ID)
		}
		if p.Roles.Has(plant.Supervisor) {
			s.supervisor = p.ID
		}
	}
	if len(s.people) == 0 {
		return nil, errors.New("the demo plant has no operators")
	}
	states, err := st.StationStates(ctx, 1)
	if err != nil {
		return nil, err
	}
	for _, station := range states {
		for i, c := range station.Characteristics {
			if m, ok := measureOf(station.Name, c.Name); ok {
				m.faults = nil // what went wrong in the history is over, or is open and found by visitors
				s.tracks[c.ID] = newTrack(m, c.Characteristic, c.Setup, 5000+100*station.Position+i)
			}
		}
	}
	return s, nil
}

func measureOf(station, name string) (measure, bool) {
	for _, pl := range works {
		for _, m := range pl.gauges {
			if pl.name == station && m.name == name {
				return m, true
			}
		}
	}
	return measure{}, false
}

// Run does what is due every few seconds until ctx ends.
func (s *Simulator) Run(ctx context.Context) {
	t := time.NewTicker(3 * time.Second)
	defer t.Stop()
	for {
		if err := s.Once(ctx); err != nil && ctx.Err() == nil {
			s.log.Warn("the simulator could not do what is due", "error", err)
		}
		select {
		case <-ctx.Done():
			return
		case <-t.C:
		}
	}
}

// Once does what is due now.
func (s *Simulator) Once(ctx context.Context) error {
	states, err := s.store.StationStates(ctx, 1)
	if err != nil {
		return err
	}
	for _, st := range states {
		if err := s.matters(ctx, st); err != nil {
			return fmt.Errorf("%s: %w", st.Name, err)
		}
		if err := s.round(ctx, st); err != nil {
			return fmt.Errorf("%s: %w", st.Name, err)
		}
	}
	return nil
}

// ripe reports whether the time has come for something that was first seen now or
// earlier; people take between least and most to come to it.
func (s *Simulator) ripe(id uuid.UUID, least, most time.Duration) bool {
	at, seen := s.waits[id]
	if !seen {
		at = s.now().Add(least + time.Duration(s.rng.Float64()*float64(most-least)))
		s.waits[id] = at
	}
	if s.now().Before(at) {
		return false
	}
	delete(s.waits, id)
	return true
}

func (s *Simulator) operator() uuid.UUID { return s.people[s.rng.IntN(len(s.people))] }

// slow is how long a place keeps a sample waiting: at the first station long enough
// that a visitor can take it, at the late one long enough to be seen as late.
func slow(st plant.StationState) (least, most time.Duration) {
	for _, pl := range works {
		if pl.name == st.Name && pl.late {
			return 14 * time.Minute, 20 * time.Minute
		}
	}
	if st.Position == 0 {
		return 6 * time.Minute, 9 * time.Minute
	}
	return 5 * time.Second, 100 * time.Second
}

func (s *Simulator) round(ctx context.Context, st plant.StationState) error {
	r := plant.Round{ID: id(), Station: st.ID, Source: "station", Person: s.operator(), TakenRaw: s.now()}
	for _, c := range st.Characteristics {
		t := s.tracks[c.ID]
		if t == nil || c.Due.State < plant.DueNow || c.Setup.Size != t.setup.Size {
			continue
		}
		if least, most := slow(st); !s.ripe(c.ID, least, most) {
			continue
		}
		if r.DueAt.IsZero() {
			r.DueAt, r.Occasion = c.Due.At, c.Due.Occasion
		}
		s.mishap(t, c)
		t.last = t.sample(s.days())
		r.Entries = append(r.Entries, plant.Entry{Characteristic: c.ID, SetupVersion: c.Setup.Version, Readings: t.last,
			Streams: plant.NextStreams(c.Machine.InUse(), len(t.last), nil)})
	}
	if len(r.Entries) == 0 {
		return nil
	}
	_, err := s.store.Record(ctx, r)
	return err
}

func (s *Simulator) days() float64 { return s.now().Sub(s.begun).Hours() / 24 }

// mishap lets something go wrong now and then: about once in forty samples, and never
// where something is open already.
func (s *Simulator) mishap(t *track, c plant.CharacteristicState) {
	if c.Matter != nil || len(t.acting(s.days())) > 0 || s.rng.IntN(40) != 0 {
		return
	}
	f := fault{day: s.days(), shift: 2.4, cause: "Setting", action: "Setting restored"}
	switch s.rng.IntN(3) {
	case 0:
		f.shift = -2.4
	case 1:
		f = fault{day: s.days(), widen: 2.2, cause: "Gauge", action: "Gauge cleaned and checked against the master"}
	}
	t.faults, t.ended, t.turned = append(t.faults, f), append(t.ended, false), append(t.turned, false)
}

// matters takes what nobody took for a while and closes it some time later. What a
// person has taken is theirs.
func (s *Simulator) matters(ctx context.Context, st plant.StationState) error {
	for _, c := range st.Characteristics {
		m, t := c.Matter, s.tracks[c.ID]
		if m == nil || t == nil || m.TakenBy == uuid.Nil && leaves(c) {
			continue
		}
		if m.TakenBy == uuid.Nil {
			if s.ripe(m.ID, 4*time.Minute, 15*time.Minute) {
				if err := s.store.TakeMatter(ctx, m.ID, m.Version, s.people[0]); err != nil && !plant.IsKind(err, plant.Conflict) {
					return err
				}
			}
			continue
		}
		if m.TakenBy != s.people[0] || !s.ripe(m.ID, 3*time.Minute, 9*time.Minute) {
			continue
		}
		h := hands{store: s.store, rng: s.rng, track: t, day: s.days(), operator: s.people[0], supervisor: s.supervisor}
		if _, err := h.next(ctx, m.ID); err != nil && !plant.IsKind(err, plant.Conflict) {
			return err
		}
	}
	return nil
}
