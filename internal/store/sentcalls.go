package store

import (
	"context"
	"encoding/json"
	"fmt"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
)

const selectSentCalls = `select x.step, x.kind, x.fired_at, t.name, t.id, c.name, c.id, x.matter_id, coalesce(m.opened_at, o.due_at),
		coalesce(p.name, ''), m.taken_at, coalesce(m.closed_at, o.ended_at),
		coalesce((select json_agg(json_build_object('Target', b.target, 'Delivered', b.delivered_at is not null, 'GivenUp', b.given_up_at is not null)
			order by b.target) from outbox b where b.plant_id = x.plant_id and b.step_id = x.id), '[]')
	from escalation_step x join station t on t.id = x.station_id
	left join matter m on m.id = x.matter_id left join overdue_round o on o.id = x.overdue_id
	join characteristic c on c.id = coalesce(m.characteristic_id, o.characteristic_id) left join person p on p.id = m.taken_by
	where x.plant_id = $1 and x.fired_at >= $2 and x.step > 1 order by x.fired_at desc, x.step desc, x.id desc limit $3`

// SentCalls lists the calls that went to people since then, newest first.
func (s *Store) SentCalls(ctx context.Context, since time.Time, most int) ([]plant.SentCall, error) {
	rows, err := s.pool.Query(ctx, selectSentCalls, s.plant(), since, most)
	if err != nil {
		return nil, fmt.Errorf("read calls: %w", err)
	}
	list, err := pgx.CollectRows(rows, func(r pgx.CollectableRow) (c plant.SentCall, err error) {
		var matter *uuid.UUID
		var taken, ended *time.Time
		var messages []byte
		err = r.Scan(&c.Step, &c.Kind, &c.At, &c.Station, &c.StationID, &c.Characteristic, &c.CharacteristicID, &matter, &c.Since,
			&c.TakenBy, &taken, &ended, &messages)
		if err != nil {
			return c, err
		}
		c.Matter, c.TakenAt, c.EndedAt = orNil(matter), orZero(taken), orZero(ended)
		return c, json.Unmarshal(messages, &c.Messages)
	})
	if err != nil {
		return nil, fmt.Errorf("read calls: %w", err)
	}
	return list, nil
}

// MatterState reads the station of an open matter and the matter's characteristic there.
func (s *Store) MatterState(ctx context.Context, id uuid.UUID) (plant.StationState, plant.CharacteristicState, error) {
	m, err := s.Matter(ctx, id)
	if err != nil {
		return plant.StationState{}, plant.CharacteristicState{}, err
	}
	st, err := s.StationState(ctx, m.Station, 0)
	if err != nil {
		return st, plant.CharacteristicState{}, err
	}
	for _, c := range st.Characteristics {
		if c.Matter != nil && c.Matter.ID == id {
			return st, c, nil
		}
	}
	return st, plant.CharacteristicState{}, plant.Conflictf("", "This was closed meanwhile. Nothing calls any more.")
}
