package store

import (
	"context"
	"fmt"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
)

const pointColumns = `taken_at, id, version, round_id, setup_version, decimals, readings, streams, reading_sum, reading_range, reading_sd,
	outside, part_id, lot, recorded_at, person_id, short_reason, reason, voided`

func (g *gathering) readPoints(ctx context.Context, tx pgx.Tx, points int) error {
	ids := make([]uuid.UUID, 0, len(g.characteristics))
	for id := range g.characteristics {
		ids = append(ids, id)
	}
	rows, err := tx.Query(ctx, `select p.* from unnest($1::uuid[]) c (id) cross join lateral (
			select * from (select distinct on (taken_at, id) characteristic_id, `+pointColumns+`
				from subgroup where characteristic_id = c.id order by taken_at desc, id desc, version desc) newest
			where not voided limit $2) p order by p.characteristic_id, p.taken_at, p.id`, ids, points)
	if err != nil {
		return fmt.Errorf("read points: %w", err)
	}
	since := map[uuid.UUID]time.Time{}
	if err := scanPoints(rows, func(p plant.Point) {
		c := g.characteristics[p.Characteristic]
		if len(c.Points) == 0 {
			since[c.ID] = p.TakenAt
		}
		c.Points = append(c.Points, p)
	}); err != nil {
		return err
	}
	from := make([]time.Time, len(ids))
	for i, id := range ids {
		from[i] = since[id]
		if from[i].IsZero() {
			from[i] = g.now
		}
	}
	// Without the limit, far above what there can be, the planner reads all signals.
	rows, err = tx.Query(ctx, selectSignals+` from unnest($1::uuid[], $2::timestamptz[]) c (id, since) cross join lateral (
		select * from signal x where x.characteristic_id = c.id and x.taken_at >= c.since order by x.taken_at limit 5000) g`, ids, from)
	if err != nil {
		return fmt.Errorf("read signals: %w", err)
	}
	signals, err := scanSignals(rows)
	if err != nil {
		return err
	}
	for _, c := range g.characteristics {
		attach(c.Points, signals)
	}
	return nil
}

func scanPoints(rows pgx.Rows, add func(plant.Point)) error {
	var p plant.Point
	var part, person *uuid.UUID
	_, err := pgx.ForEachRow(rows, []any{&p.Characteristic, &p.TakenAt, &p.Subgroup, &p.Version, &p.Round, &p.Setup, &p.Stats.Decimals, &p.Readings, &p.Streams,
		&p.Stats.Sum, &p.Stats.Range, &p.Stats.SD, &p.Outside, &part, &p.Lot, &p.RecordedAt, &person, &p.ShortReason, &p.Reason, &p.Voided}, func() error {
		v := p
		v.Stats.N, v.Part, v.Person = len(p.Readings), orNil(part), orNil(person)
		add(v)
		p.Readings, p.Streams = nil, nil
		return nil
	})
	if err != nil {
		return fmt.Errorf("read points: %w", err)
	}
	return nil
}

const selectSignals = `select g.characteristic_id, g.taken_at, g.subgroup_id, g.panel, g.rule, g.side, g.revision_id, g.matter_id, g.found_late, g.withdrawn`

// scanSignals reads signals by subgroup, graver panels first.
func scanSignals(rows pgx.Rows) (map[uuid.UUID][]plant.Signal, error) {
	out := map[uuid.UUID][]plant.Signal{}
	var g plant.Signal
	var revision, matter *uuid.UUID
	_, err := pgx.ForEachRow(rows, []any{&g.Characteristic, &g.TakenAt, &g.Subgroup, &g.Panel, &g.Rule, &g.Side, &revision, &matter, &g.FoundLate, &g.Withdrawn}, func() error {
		g.Revision, g.Matter = orNil(revision), orNil(matter)
		out[g.Subgroup] = append(out[g.Subgroup], g)
		return nil
	})
	if err != nil {
		return nil, fmt.Errorf("read signals: %w", err)
	}
	return out, nil
}

func attach(points []plant.Point, signals map[uuid.UUID][]plant.Signal) {
	for i := range points {
		points[i].Signals = signals[points[i].Subgroup]
	}
}
