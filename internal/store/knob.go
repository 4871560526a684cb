package store

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
	"holdfast/internal/plant/ledger"
)

const selectKnob = `select k.id, k.version, k.machine_id, k.name, k.unit, k.step::text, k.moves, k.retired, k.reason, k.made_at, k.person_id, coalesce(p.name, '')
	from knob k left join person p on p.id = k.person_id`

func scanKnob(r pgx.CollectableRow) (plant.Knob, error) {
	var k plant.Knob
	var step string
	var moves []byte
	var person *uuid.UUID
	if err := r.Scan(&k.ID, &k.Version, &k.Machine, &k.Name, &k.Unit, &step, &moves, &k.Retired, &k.Reason, &k.MadeAt, &person, &k.MadeName); err != nil {
		return k, err
	}
	k.MadeBy = orNil(person)
	return k, errors.Join(k.Step.UnmarshalText([]byte(step)), json.Unmarshal(moves, &k.Moves))
}

// Knobs lists the newest version of each adjusting point of a machine by name, retired
// ones at the end.
func (s *Store) Knobs(ctx context.Context, machine uuid.UUID) ([]plant.Knob, error) {
	rows, err := s.pool.Query(ctx, selectKnob+` where k.machine_id = $1 and k.plant_id = $2
		and k.version = (select max(version) from knob n where n.id = k.id) order by k.retired, k.name, k.id`, machine, s.plant())
	if err != nil {
		return nil, fmt.Errorf("read knobs: %w", err)
	}
	return pgx.CollectRows(rows, scanKnob)
}

// KnobVersions lists the versions of one adjusting point, newest first.
func (s *Store) KnobVersions(ctx context.Context, id uuid.UUID) ([]plant.Knob, error) {
	return s.knobVersions(ctx, s.pool, id)
}

func (s *Store) knobVersions(ctx context.Context, q querier, id uuid.UUID) ([]plant.Knob, error) {
	rows, err := q.Query(ctx, selectKnob+` where k.id = $1 and k.plant_id = $2 order by k.version desc`, id, s.plant())
	if err != nil {
		return nil, fmt.Errorf("read knob: %w", err)
	}
	list, err := pgx.CollectRows(rows, scanKnob)
	if err == nil && len(list) == 0 {
		return nil, &plant.Error{Kind: plant.NotFound, Message: "There is no such adjusting point."}
	}
	return list, err
}

// SaveKnob adds a version of an adjusting point. k.Version is the one that the person
// saw, 0 for a new point; when another was quicker it is a Conflict. What says nothing
// new is no version and no error.
func (s *Store) SaveKnob(ctx context.Context, k plant.Knob) (plant.Knob, error) {
	if err := k.Clean(); err != nil {
		return k, err
	}
	err := s.onMachine(ctx, k.Machine, func(tx pgx.Tx, _ *pgx.Batch, held map[uuid.UUID]*locked) error {
		for _, g := range k.Moves {
			if held[g.Characteristic] == nil {
				return &plant.Error{Kind: plant.NotFound, Field: "moves", Message: "This machine has no such characteristic."}
			}
		}
		before, err := s.knobVersions(ctx, tx, k.ID)
		if err != nil && !plant.IsKind(err, plant.NotFound) {
			return err
		}
		newest := 0
		if len(before) > 0 {
			if newest = before[0].Version; before[0].Machine != k.Machine {
				return &plant.Error{Kind: plant.NotFound, Message: "There is no such adjusting point."}
			}
			if before[0].SameContent(k) {
				k = before[0]
				return nil
			}
		}
		if newest != k.Version {
			return &plant.Error{Kind: plant.Conflict, Message: "Somebody has changed this meanwhile. Look at it again."}
		}
		var taken bool
		if err := tx.QueryRow(ctx, `select exists (select from knob k where k.machine_id = $1 and k.id <> $2 and lower(k.name) = lower($3) and not k.retired
			and k.version = (select max(version) from knob n where n.id = k.id))`, k.Machine, k.ID, k.Name).Scan(&taken); err != nil {
			return fmt.Errorf("read names of knobs: %w", err)
		}
		if taken && !k.Retired {
			return &plant.Error{Kind: plant.Conflict, Field: "name", Message: "This machine has an adjusting point of this name already."}
		}
		k.Version, k.MadeAt = newest+1, s.now()
		moves, err := json.Marshal(k.Moves)
		if err != nil {
			return fmt.Errorf("encode gains: %w", err)
		}
		if _, err := tx.Exec(ctx, `insert into knob (id, version, plant_id, machine_id, name, unit, step, moves, retired, reason, made_at, person_id)
			values ($1, $2, $3, $4, $5, $6, $7::text::numeric, $8, $9, $10, $11, $12)`,
			k.ID, k.Version, s.plant(), k.Machine, k.Name, k.Unit, k.Step.String(), moves, k.Retired, k.Reason, k.MadeAt, orNull(k.MadeBy)); err != nil {
			return fmt.Errorf("insert knob: %w", err)
		}
		body := ledger.Knob{Knob: k.ID, Version: k.Version, Machine: k.Machine, Name: k.Name, Unit: k.Unit, Step: k.Step.String(),
			PerUnit: []ledger.Moved{}, Retired: k.Retired, Reason: k.Reason, At: ledger.Time(k.MadeAt), Person: ledger.ID(k.MadeBy)}
		for _, g := range k.Moves {
			body.PerUnit = append(body.PerUnit, ledger.Moved{Characteristic: g.Characteristic, Size: g.PerUnit.String()})
		}
		return s.appendPlantChain(ctx, tx, body)
	})
	return k, err
}

// turn works out what a turn of a knob is expected to do, by the version in force now,
// and fixes it in the change. A retired one was there when somebody turned it.
func (s *Store) turn(ctx context.Context, q querier, c *plant.Change) error {
	if c.Knob == uuid.Nil {
		return nil
	}
	versions, err := s.knobVersions(ctx, q, c.Knob)
	if err != nil {
		return err
	}
	k := versions[0]
	if k.Machine != c.Machine {
		return &plant.Error{Kind: plant.NotFound, Field: "knob", Message: "This machine has no such adjusting point."}
	}
	if c.Moves, err = k.Effects(*c.Turned); err != nil {
		return err
	}
	c.KnobVersion = k.Version
	size, ok := c.EffectOn(c.Characteristic)
	if !ok {
		return plant.Invalidf("knob", "This adjusting point does not move that characteristic.")
	}
	c.Size = &size
	return nil
}

func turnBody(c plant.Change) *ledger.Turn {
	if c.Knob == uuid.Nil {
		return nil
	}
	t := &ledger.Turn{Knob: c.Knob, Version: c.KnobVersion, Turned: c.Turned.String(), Moves: []ledger.Moved{}}
	for _, e := range c.Moves {
		t.Moves = append(t.Moves, ledger.Moved{Characteristic: e.Characteristic, Size: e.Size.String()})
	}
	return t
}

// movesOrNull is the effects as they are kept, nil where no knob was turned.
func movesOrNull(c plant.Change) ([]byte, error) {
	if c.Knob == uuid.Nil {
		return nil, nil
	}
	return json.Marshal(c.Moves)
}

func numberOrNull(n int) *int {
	if n == 0 {
		return nil
	}
	return &n
}

// AdjustmentDays counts the adjustments that move a characteristic, directly or through
// a knob, by day, oldest first.
func (s *Store) AdjustmentDays(ctx context.Context, characteristic uuid.UUID) ([]plant.AdjustmentDay, error) {
	rows, err := s.pool.Query(ctx, `select min(h.happened_at), max(h.happened_at), count(*) filter (where h.prompted), count(*) filter (where not h.prompted)
		from characteristic c join change h on h.machine_id = c.machine_id
		where c.id = $1 and c.plant_id = $2 and h.kind = 'adjustment'
			and (h.moves is null and h.characteristic_id = c.id or h.moves @> jsonb_build_array(jsonb_build_object('characteristic', c.id)))
		group by date_trunc('day', h.happened_at) order by 1`, characteristic, s.plant())
	if err != nil {
		return nil, fmt.Errorf("count adjustments: %w", err)
	}
	return pgx.CollectRows(rows, func(r pgx.CollectableRow) (d plant.AdjustmentDay, err error) {
		return d, r.Scan(&d.First, &d.Last, &d.Prompted, &d.Unprompted)
	})
}
