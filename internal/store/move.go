package store

import (
	"context"
	"fmt"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
)

// ChangeMachine changes a machine's name, rate and streams, and the station that serves
// it; Nil leaves it where it stands. What is measured on a machine moves with it, and what
// was recorded keeps the station at which it was. While something is open on it the
// machine stays, since somebody at its station is at work on that: Conflict.
func (s *Store) ChangeMachine(ctx context.Context, m plant.Machine, by uuid.UUID) error {
	if err := m.Check(); err != nil {
		return err
	}
	return s.arranged(ctx, by, func(ctx context.Context, a *arranging) error {
		var from uuid.UUID
		err := a.tx.QueryRow(ctx, `select station_id from machine where id = $1 and plant_id = $2 for update`, m.ID, s.plant()).Scan(&from)
		if err != nil {
			return missing(err, "There is no such machine.")
		}
		if m.StationID == uuid.Nil {
			m.StationID = from
		}
		a.say("machine changed", m.ID, machineContent(m))
		a.stations[from] = true
		if m.StationID != from {
			if err := a.moveMachine(ctx, m); err != nil {
				return err
			}
		}
		if err := one(a.tx.Exec(ctx, `update machine set name = $3, parts_per_hour = $4 where id = $1 and plant_id = $2`,
			m.ID, s.plant(), m.Name, m.PartsPerHour)); err != nil {
			return err
		}
		a.putStreams(m)
		return nil
	})
}

// moveMachine brings a machine and what is measured on it to another station. The states
// are locked, so that no round is judged on the way.
func (a *arranging) moveMachine(ctx context.Context, m plant.Machine) error {
	s := a.s
	if err := a.tx.QueryRow(ctx, `select id from station where id = $1 and plant_id = $2 and retired_at is null for share`, m.StationID, s.plant()).
		Scan(new(uuid.UUID)); err != nil {
		return missing(err, "There is no such station, or no longer.")
	}
	measured, err := all(ctx, a.tx, func(r pgx.CollectableRow) (c plant.Characteristic, err error) {
		var part *uuid.UUID
		err = r.Scan(&c.ID, &c.Name, &c.MachineID, &part, &c.Family)
		c.PartID, c.StationID = orNil(part), m.StationID
		return c, err
	}, `select id, name, machine_id, part_id, family from characteristic where machine_id = $1 order by id`, m.ID)
	if err != nil {
		return fmt.Errorf("read what is measured on a machine: %w", err)
	}
	ids := make([]uuid.UUID, len(measured))
	for i, c := range measured {
		ids[i] = c.ID
	}
	held, err := s.lock(ctx, a.tx, ids...)
	if err != nil {
		return err
	}
	for _, l := range held {
		if l.matter != uuid.Nil {
			return plant.Conflictf("station", "Something is open on this machine. Close it at its station before the machine moves.")
		}
	}
	for _, c := range measured {
		a.say("characteristic changed", c.ID, characteristicContent(c))
	}
	a.stations[m.StationID] = true
	a.b.Queue(`update machine set station_id = $2, position = (select coalesce(max(o.position) + 1, 0) from machine o where o.station_id = $2) where id = $1`, m.ID, m.StationID)
	a.b.Queue(`update characteristic set station_id = $2, position = position + (select coalesce(max(o.position) + 1, 0) from characteristic o where o.station_id = $2)
		where machine_id = $1`, m.ID, m.StationID)
	a.b.Queue(`update characteristic_state set station_id = $2, version = version + 1, changed = pg_current_xact_id() where characteristic_id = any($1)`, ids, m.StationID)
	return nil
}
