package store

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"maps"
	"slices"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
	"holdfast/internal/plant/ledger"
)

// onMachine runs f while every characteristic of a machine is locked, and marks them
// all as changed.
func (s *Store) onMachine(ctx context.Context, machine uuid.UUID, f func(tx pgx.Tx, b *pgx.Batch, held map[uuid.UUID]*locked) error) error {
	ctx, cancel := s.saving(ctx)
	defer cancel()
	var station uuid.UUID
	err := s.inTx(ctx, func(tx pgx.Tx) error {
		var ids []uuid.UUID
		err := tx.QueryRow(ctx, `select m.station_id, coalesce(array_agg(c.id order by c.id) filter (where c.id is not null), '{}')
			from machine m left join characteristic c on c.machine_id = m.id
			where m.id = $1 and m.plant_id = $2 group by m.station_id`, machine, s.plant()).Scan(&station, &ids)
		if err != nil {
			return fmt.Errorf("read machine: %w", missing(err, "There is no such machine."))
		}
		held, err := s.lock(ctx, tx, ids...)
		if err != nil {
			return err
		}
		b := &pgx.Batch{}
		if err := f(tx, b, held); err != nil {
			return err
		}
		for _, l := range held {
			s.save(b, l)
		}
		return tx.SendBatch(ctx, b).Close()
	})
	if err != nil {
		return err
	}
	s.changed(station)
	return nil
}

// SetMachine records that a machine runs or stands still, and what it makes. Where
// another part begins, charts that do not belong to the family of both start afresh.
// The same record sent again is no error.
func (s *Store) SetMachine(ctx context.Context, m plant.MachineState) error {
	now := s.now()
	m.At, m.RecordedAt = plant.CutTime(m.At), now
	m.Lot = plant.CleanText(m.Lot)
	if m.At.IsZero() {
		m.At = now
	}
	if m.At.After(now.Add(plant.MaxAhead)) || m.At.Before(now.Add(-plant.MaxBack)) {
		return plant.Invalidf("at", "This time is too far from now.")
	}
	return s.onMachine(ctx, m.Machine, func(tx pgx.Tx, b *pgx.Batch, held map[uuid.UUID]*locked) error {
		var before *uuid.UUID
		err := tx.QueryRow(ctx, `select part_id from machine_state where machine_id = $1 and at <= $2 order by at desc, id desc limit 1`,
			m.Machine, m.At).Scan(&before)
		first := errors.Is(err, pgx.ErrNoRows)
		if err != nil && !first {
			return fmt.Errorf("read machine: %w", err)
		}
		tag, err := tx.Exec(ctx, `insert into machine_state (id, plant_id, machine_id, at, running, part_id, lot, counter, recorded_at, person_id)
			values ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10) on conflict (id) do nothing`,
			m.ID, s.plant(), m.Machine, m.At, m.Running, orNull(m.Part), m.Lot, m.Counter, now, orNull(m.Person))
		if err != nil {
			return fmt.Errorf("insert machine state: %w", err)
		}
		if tag.RowsAffected() == 0 {
			return nil
		}
		if !first && orNil(before) != m.Part {
			if err := s.changeover(ctx, tx, b, held, orNil(before), m, now); err != nil {
				return err
			}
		}
		if err := s.changeBack(ctx, tx, b, held, m, now); err != nil {
			return err
		}
		return s.appendPlantChain(ctx, tx, ledger.MachineState{
			State: m.ID, Machine: m.Machine, At: ledger.Time(m.At), Running: m.Running, Part: ledger.ID(m.Part), Lot: m.Lot,
			Counter: m.Counter, RecordedAt: ledger.Time(now), Person: ledger.ID(m.Person),
		})
	})
}

// changeBack enters the changeover that a state recorded behind others makes at the next
// of them: that one held the part which was believed to run.
func (s *Store) changeBack(ctx context.Context, tx pgx.Tx, b *pgx.Batch, held map[uuid.UUID]*locked, m plant.MachineState, now time.Time) error {
	next := plant.MachineState{Machine: m.Machine}
	var part *uuid.UUID
	err := tx.QueryRow(ctx, `select at, part_id from machine_state where machine_id = $1 and (at, id) > ($2, $3) order by at, id limit 1`,
		m.Machine, m.At, m.ID).Scan(&next.At, &part)
	if errors.Is(err, pgx.ErrNoRows) {
		return nil
	}
	if err != nil {
		return fmt.Errorf("read machine: %w", err)
	}
	if next.Part = orNil(part); next.Part == m.Part {
		return nil
	}
	var there bool
	err = tx.QueryRow(ctx, `select exists (select from boundary b join characteristic c on c.id = b.characteristic_id
		where c.machine_id = $1 and b.at = $2 and b.kind = 'changeover')`, m.Machine, next.At).Scan(&there)
	if err != nil {
		return fmt.Errorf("read boundaries: %w", err)
	}
	if there {
		return nil
	}
	// What the first changeover changed must be written before it can be read again.
	if err := tx.SendBatch(ctx, b).Close(); err != nil {
		return fmt.Errorf("write changeover: %w", err)
	}
	*b = pgx.Batch{}
	return s.changeover(ctx, tx, b, held, m.Part, next, now)
}

func (s *Store) changeover(ctx context.Context, tx pgx.Tx, b *pgx.Batch, held map[uuid.UUID]*locked, from uuid.UUID, m plant.MachineState, now time.Time) error {
	rows, err := tx.Query(ctx, `select c.id from characteristic c where c.machine_id = $1
		and not (c.family <> '' and exists (select from part where id = $2 and family = c.family)
			and exists (select from part where id = $3 and family = c.family))
		order by c.id`, m.Machine, from, m.Part)
	if err != nil {
		return fmt.Errorf("read characteristics of machine: %w", err)
	}
	ids, err := pgx.CollectRows(rows, pgx.RowTo[uuid.UUID])
	if err != nil {
		return fmt.Errorf("read characteristics of machine: %w", err)
	}
	for _, id := range ids {
		if held[id] == nil {
			continue // it was added since the locks were taken, and begins with this part
		}
		if err := s.addBoundary(ctx, tx, b, held[id], plant.Boundary{ID: newID(), At: m.At, Kind: plant.ByChangeover}, now); err != nil {
			return err
		}
	}
	return nil
}

// LogChange records something done to the process. Whether it was prompted is fixed
// here: a matter was open, when it happened, on what it affects. A gauge that failed its
// check is no signal of the process: a matter that has nothing else prompts nothing. The
// same change sent again is no error; the same id with other content is a Conflict and is
// set aside.
func (s *Store) LogChange(ctx context.Context, c plant.Change) error {
	now := s.now()
	c.HappenedAt, c.RecordedAt = plant.CutTime(c.HappenedAt), now
	if c.HappenedAt.IsZero() {
		c.HappenedAt = now
	}
	var err error
	if c.Note, err = plant.CleanTextWithin("note", c.Note, 300); err != nil {
		return err
	}
	c.Moves, c.KnobVersion = nil, 0
	if c.Knob == uuid.Nil {
		c.Turned = nil
	}
	if err := c.Check(now); err != nil {
		return err
	}
	digest := c.Digest()
	err = s.onMachine(ctx, c.Machine, func(tx pgx.Tx, b *pgx.Batch, held map[uuid.UUID]*locked) error {
		if c.Characteristic != uuid.Nil && held[c.Characteristic] == nil {
			return plant.NotFoundf("characteristic", "This machine has no such characteristic.")
		}
		if err := s.turn(ctx, tx, &c); err != nil {
			return err
		}
		moves, err := movesOrNull(c)
		if err != nil {
			return fmt.Errorf("encode what was moved: %w", err)
		}
		affected := c.Affects()
		if affected == nil {
			affected = slices.Collect(maps.Keys(held))
		}
		var prompted bool
		// The order makes it a short walk along an index for each; left to itself the planner
		// reads all matters.
		err = tx.QueryRow(ctx, `select count(*) > 0 from unnest($1::uuid[]) h (id) cross join lateral (
				(select t.id from matter t where t.plant_id = $3 and t.characteristic_id = h.id and t.closed_at is null and t.opened_taken <= $2 limit 1)
				union all
				(select t.id from matter t where t.characteristic_id = h.id and t.closed_at > $2 and t.opened_taken <= $2 order by t.closed_at limit 1)) open
			where exists (select from signal g where g.matter_id = open.id and g.panel <> $4 and g.taken_at <= $2)`,
			affected, c.HappenedAt, s.plant(), string(plant.GaugeCheck)).Scan(&prompted)
		if err != nil {
			return fmt.Errorf("read matters: %w", err)
		}
		var have []byte
		err = tx.QueryRow(ctx, `insert into change (id, plant_id, station_id, machine_id, characteristic_id, kind, size, note, prompted,
				happened_at, recorded_at, person_id, digest, knob_id, knob_version, turned, moves)
			select $1, $2, m.station_id, m.id, $4, $5, $6::text::numeric, $7, $12, $8, $9, $10, $11, $13, $14, $15::text::numeric, $16 from machine m where m.id = $3
			on conflict (id) do nothing
			returning prompted`,
			c.ID, s.plant(), c.Machine, orNull(c.Characteristic), string(c.Kind), decimalOrNull(c.Size), c.Note,
			c.HappenedAt, now, orNull(c.Person), digest[:], prompted, orNull(c.Knob), numberOrNull(c.KnobVersion), decimalOrNull(c.Turned), moves).Scan(&c.Prompted)
		if errors.Is(err, pgx.ErrNoRows) {
			if err := tx.QueryRow(ctx, `select digest from change where id = $1`, c.ID).Scan(&have); err != nil {
				return fmt.Errorf("read stored change: %w", err)
			}
			if !bytes.Equal(have, digest[:]) {
				return plant.Conflictf("", "Another change was sent under this number. It was set aside for a person.")
			}
			return nil
		}
		if err != nil {
			return fmt.Errorf("insert change: %w", err)
		}
		size := ""
		if c.Size != nil {
			size = c.Size.String()
		}
		return s.appendPlantChain(ctx, tx, ledger.Change{
			Change: c.ID, Machine: c.Machine, Characteristic: ledger.ID(c.Characteristic), What: string(c.Kind), Size: size, Note: c.Note,
			Prompted: c.Prompted, HappenedAt: ledger.Time(c.HappenedAt), RecordedAt: ledger.Time(now), Person: ledger.ID(c.Person),
			Turn: turnBody(c),
		})
	})
	if pe, ok := errors.AsType[*plant.Error](err); ok && pe.Kind == plant.Conflict {
		if err := s.setAside(ctx, plant.Aside{Station: c.Station, About: c.ID, Person: c.Person, Why: pe}, c, digest); err != nil {
			return err
		}
	}
	return err
}
