package store

import (
	"context"
	"fmt"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
)

// windowsSQL walks back from each instant along the key, over the newest version of each
// subgroup that is not void, as far as the window and one more.
const windowsSQL = `select a.i, p.id, p.taken_at, p.setup_version, p.decimals, p.readings, p.streams, p.reading_sum, p.reading_range, p.reading_sd, p.outside
	from unnest($1::uuid[], $2::timestamptz[], $3::timestamptz[]) with ordinality a (id, since, upto, i)
	cross join lateral (
		select * from (select distinct on (taken_at, id) * from subgroup
			where characteristic_id = a.id and taken_at >= coalesce(a.since, '-infinity') and taken_at <= a.upto order by taken_at desc, id desc, version desc) newest
		where not voided limit $4) p
	order by a.i, p.taken_at, p.id`

// reachWindows reads the subgroups behind the first firings: on the panels since the last
// boundary, of a reading outside whatever the boundaries.
func (s *Store) reachWindows(ctx context.Context, tx pgx.Tx, fs []*reachFinding) error {
	var ids []uuid.UUID
	var since []*time.Time
	var upTo []time.Time
	var into []*plant.ReachWindowOf
	var of []*reachFinding
	ask := func(f *reachFinding, w *plant.ReachWindowOf, from, to time.Time) {
		ids, since, upTo = append(ids, f.matter.Characteristic), append(since, timeOrNull(from)), append(upTo, to)
		into, of = append(into, w), append(of, f)
	}
	for _, f := range fs {
		for _, p := range lookPanels {
			if first := f.matter.FirstSuspect(p, f.setup); !first.IsZero() {
				w := &f.evidence.Location
				if p == plant.Dispersion {
					w = &f.evidence.Dispersion
				}
				ask(f, w, f.evidence.Segments[p].From, first)
			}
		}
		if first := f.matter.FirstSuspect(plant.Reading, f.setup); !first.IsZero() {
			ask(f, &f.evidence.Reading, time.Time{}, first)
		}
	}
	if len(ids) == 0 {
		return nil
	}
	rows, err := tx.Query(ctx, windowsSQL, ids, since, upTo, plant.ReachWindow+1)
	if err != nil {
		return fmt.Errorf("read subgroups behind a matter: %w", err)
	}
	var i int
	var p plant.ReachPoint
	if _, err := pgx.ForEachRow(rows, []any{&i, &p.Subgroup, &p.TakenAt, &p.Setup, &p.Stats.Decimals, &p.Readings, &p.Streams,
		&p.Stats.Sum, &p.Stats.Range, &p.Stats.SD, &p.Outside}, func() error {
		p.Stats.N = len(p.Readings)
		into[i-1].Points = append(into[i-1].Points, p)
		p.Readings, p.Streams = nil, nil
		return nil
	}); err != nil {
		return fmt.Errorf("read subgroups behind a matter: %w", err)
	}
	for i, w := range into {
		if w.Cut = len(w.Points) > plant.ReachWindow; w.Cut {
			w.Points = w.Points[1:]
		}
		for _, p := range w.Points {
			if _, ok := of[i].evidence.Setups[p.Setup]; !ok {
				if of[i].evidence.Setups[p.Setup], err = s.setup(ctx, tx, ids[i], p.Setup); err != nil {
					return err
				}
			}
		}
	}
	return nil
}

// reachLogs reads what the machines did since each reach began, and the row before that.
func (s *Store) reachLogs(ctx context.Context, tx pgx.Tx, fs []*reachFinding) error {
	matters, machines, from := []uuid.UUID{}, []uuid.UUID{}, []time.Time{}
	place := make(map[uuid.UUID]*plant.Reach, len(fs))
	for _, f := range fs {
		if len(f.reach.Reasons) > 0 && !f.reach.From.IsZero() {
			matters, machines, from = append(matters, f.matter.ID), append(machines, f.machine), append(from, f.reach.From)
			place[f.matter.ID] = f.reach
		}
	}
	if len(matters) == 0 {
		return nil
	}
	rows, err := tx.Query(ctx, `select a.matter, l.at, l.running, l.part_id, l.counter from unnest($1::uuid[], $2::uuid[], $3::timestamptz[]) a (matter, machine, since)
		cross join lateral (
			(select * from machine_state x where x.machine_id = a.machine and x.at <= a.since and x.at <= $4 order by x.at desc, x.id desc limit 1)
			union all
			(select * from machine_state x where x.machine_id = a.machine and x.at > a.since and x.at <= $4 order by x.at desc, x.id desc limit 2000)
		) l order by a.matter, l.at, l.id`, matters, machines, from, s.now())
	if err != nil {
		return fmt.Errorf("read machine logs: %w", err)
	}
	var matter uuid.UUID
	var m plant.MachineState
	var part *uuid.UUID
	_, err = pgx.ForEachRow(rows, []any{&matter, &m.At, &m.Running, &part, &m.Counter}, func() error {
		v := m
		v.Part = orNil(part)
		place[matter].Log = append(place[matter].Log, v)
		m.Counter = nil
		return nil
	})
	return wrapped("read machine logs", err)
}
