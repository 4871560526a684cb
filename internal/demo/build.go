package demo

import (
	"context"
	"errors"
	"fmt"
	"runtime"
	"slices"
	"sync/atomic"
	"time"

	"github.com/google/uuid"
	"golang.org/x/sync/errgroup"

	"holdfast/internal/plant"
	"holdfast/internal/store"
)

// Zone is where Kestrel Row keeps its time.
const Zone = "Europe/London"

// Seed is the seed of everything that is drawn.
const Seed = 20260312

// Hash makes the hash that is stored of a person's secret.
type Hash func(ctx context.Context, login string) (string, error)

// Build makes the works in an empty database and writes its history up to now.
// progress, which may be nil, is told now and then how far it is, from 0 to 1.
func Build(ctx context.Context, st *store.Store, hash Hash, hashPIN HashPIN, now time.Time, progress func(done float64)) error {
	b := &builder{store: st, begin: now.Add(-Days * 24 * time.Hour), end: now, people: map[plant.Role][]uuid.UUID{}}
	begun := st.WithClock(func() time.Time { return b.begin })
	if err := b.structure(ctx, begun, hash); err != nil {
		return fmt.Errorf("build the demo plant: %w", err)
	}
	if err := b.equip(ctx, begun, hashPIN); err != nil {
		return fmt.Errorf("equip the demo plant: %w", err)
	}
	if err := b.history(ctx, progress); err != nil {
		return fmt.Errorf("write the demo history: %w", err)
	}
	if err := b.contacts(ctx); err != nil {
		return fmt.Errorf("equip the demo plant: %w", err)
	}
	if err := b.owners(ctx); err != nil {
		return fmt.Errorf("find the owners of the demo: %w", err)
	}
	if err := b.escalate(ctx); err != nil {
		return fmt.Errorf("find somebody in the demo: %w", err)
	}
	if err := b.outside(ctx); err != nil {
		return fmt.Errorf("tell what came from outside: %w", err)
	}
	return nil
}

type builder struct {
	store      *store.Store
	begin, end time.Time
	people     map[plant.Role][]uuid.UUID
	walkers    []*walker
	zone       *time.Location
}

// id makes an id as of the time when the thing was made, so that ids sort as they
// would have.
func id() uuid.UUID { return uuid.Must(uuid.NewV7()) }

func (b *builder) structure(ctx context.Context, st *store.Store, hash Hash) error {
	var err error
	if b.zone, err = time.LoadLocation(Zone); err != nil {
		return err
	}
	if err := st.CreatePlant(ctx, plant.Plant{ID: id(), Name: "Kestrel Row", Location: b.zone, Demo: true, Shifts: shifts}); err != nil {
		return err
	}
	for _, p := range people {
		h, err := hash(ctx, p.login)
		if err != nil {
			return err
		}
		v := plant.Person{ID: id(), Login: p.login, Name: p.name, Roles: p.roles, Active: true}
		if err := st.AddPerson(ctx, v, h, uuid.Nil); err != nil {
			return err
		}
		b.people[p.roles[0]] = append(b.people[p.roles[0]], v.ID)
	}
	by := b.people[plant.Engineer][0]
	parts := map[string]uuid.UUID{}
	for _, name := range []string{"Axle 100", "Axle 130", "Shell 28", "Shell 32", "Hub F28", "Hub R32"} {
		p := plant.Part{ID: id(), Name: name, Family: families[name]}
		if err := st.AddPart(ctx, p, by); err != nil {
			return err
		}
		parts[name] = p.ID
	}
	if err := b.causes(ctx, st, by); err != nil {
		return err
	}
	lines := map[string]uuid.UUID{}
	for i, pl := range works {
		if _, ok := lines[pl.line]; !ok {
			l := plant.Line{ID: id(), Name: pl.line, Position: len(lines)}
			if err := st.AddLine(ctx, l, by); err != nil {
				return err
			}
			lines[pl.line] = l.ID
		}
		w, err := b.place(ctx, st, pl, i, lines[pl.line], parts, by)
		if err != nil {
			return fmt.Errorf("%s: %w", pl.name, err)
		}
		b.walkers = append(b.walkers, w)
	}
	return b.plans(ctx, st, by)
}

// causes fills the catalogue with what has ever gone wrong, by family of stations.
func (b *builder) causes(ctx context.Context, st *store.Store, by uuid.UUID) error {
	seen := map[string][]string{"": {}}
	add := func(family, name string) error {
		if slices.Contains(seen[family], name) {
			return nil
		}
		seen[family] = append(seen[family], name)
		return st.AddCause(ctx, family, plant.Cause{ID: id(), Name: name}, len(seen[family]), by)
	}
	for _, pl := range works {
		for _, m := range pl.gauges {
			for _, f := range m.faults {
				if err := add(pl.family, f.cause); err != nil {
					return err
				}
			}
		}
	}
	for _, name := range []string{"Material lot", "Gauge", "Setting", "Not found"} {
		if err := add("", name); err != nil {
			return err
		}
	}
	return nil
}

func (b *builder) place(ctx context.Context, st *store.Store, pl place, index int, line uuid.UUID, parts map[string]uuid.UUID, by uuid.UUID) (*walker, error) {
	s := plant.Station{ID: id(), LineID: line, Name: pl.name, Family: pl.family, Position: index}
	if err := st.AddStation(ctx, s, by); err != nil {
		return nil, err
	}
	m := plant.Machine{ID: id(), StationID: s.ID, Name: pl.machine, PartsPerHour: pl.rate}
	for _, name := range pl.streams {
		m.Streams = append(m.Streams, plant.Stream{ID: id(), Name: name})
	}
	if err := st.AddMachine(ctx, m, by); err != nil {
		return nil, err
	}
	w := newWalker(b, pl, index, s, m, parts)
	for j, g := range pl.gauges {
		resolution := plant.Decimal{Units: 1, Decimals: g.setup.Decimals}
		gauge := plant.Gauge{ID: id(), Name: g.gauge, Resolution: &resolution, NextCheck: b.begin.AddDate(0, 0, j), CheckDays: checkEvery}
		if err := st.AddGauge(ctx, gauge, by); err != nil {
			return nil, err
		}
		c := plant.Characteristic{ID: id(), StationID: s.ID, MachineID: m.ID, Family: families[pl.parts[0]], Name: g.name, Position: j}
		setup := g.setup
		setup.GaugeID = gauge.ID
		if err := st.AddCharacteristic(ctx, c, setup, by); err != nil {
			return nil, err
		}
		setup.Version = 1
		w.tracks = append(w.tracks, newTrack(g, c, setup, index*10+j))
	}
	return w, b.knobs(ctx, st, w)
}

// history lets every place live through its sixty days. Places do not touch one
// another, so they go side by side.
func (b *builder) history(ctx context.Context, progress func(float64)) error {
	var done atomic.Int64
	total := int64(len(b.walkers)) * int64(b.end.Sub(b.begin))
	g, ctx := errgroup.WithContext(ctx)
	g.SetLimit(4 * runtime.GOMAXPROCS(0))
	for _, w := range b.walkers {
		g.Go(func() error {
			return w.walk(ctx, b.end, func(d time.Duration) { done.Add(int64(d)) })
		})
	}
	finished := make(chan struct{})
	if progress != nil {
		go func() {
			t := time.NewTicker(time.Second)
			defer t.Stop()
			for {
				select {
				case <-finished:
					return
				case <-t.C:
					progress(float64(done.Load()) / float64(total))
				}
			}
		}()
	}
	err := g.Wait()
	close(finished)
	return err
}

// Empty reports whether the database holds no plant, and Ours whether the one it holds
// was made here.
func Ours(ctx context.Context, st *store.Store) (empty, ours bool, err error) {
	p, err := st.Plant(ctx)
	if pe, ok := errors.AsType[*plant.Error](err); ok && pe.Kind == plant.NotFound {
		return true, false, nil
	}
	return false, p.Demo, err
}
