package store

import (
	"context"
	"fmt"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
)

// ChangePlant changes the plant's name and time zone, and with the same says that they
// are right.
func (s *Store) ChangePlant(ctx context.Context, p plant.Plant, by uuid.UUID) error {
	return s.arranged(ctx, by, func(ctx context.Context, a *arranging) error {
		a.say("plant changed", s.plant(), map[string]any{"name": p.Name, "time_zone": p.Location.String()})
		_, err := a.tx.Exec(ctx, `update plant set name = $2, time_zone = $3, confirmed_at = $4 where id = $1`,
			s.plant(), p.Name, p.Location.String(), s.now())
		return err
	})
}

// SetShifts makes the shift calendar what is given. Shifts without an id are new; those
// that are not given any more are retired.
func (s *Store) SetShifts(ctx context.Context, shifts []plant.Shift, by uuid.UUID) error {
	if err := plant.CheckShifts(shifts); err != nil {
		return err
	}
	return s.arranged(ctx, by, func(ctx context.Context, a *arranging) error { return a.setShifts(ctx, shifts) })
}

func (a *arranging) setShifts(ctx context.Context, shifts []plant.Shift) error {
	var calendar []map[string]any
	for _, sh := range shifts {
		calendar = append(calendar, map[string]any{"name": sh.Name, "starts_minute": int(sh.Starts.Minutes())})
	}
	a.say("shifts changed", a.s.plant(), map[string]any{"shifts": calendar})
	b := &pgx.Batch{}
	b.Queue(`update shift set retired_at = $2 where plant_id = $1 and retired_at is null`, a.s.plant(), a.s.now())
	for _, sh := range shifts {
		id := sh.ID
		if id == uuid.Nil {
			id = newID()
		}
		b.Queue(`insert into shift (id, plant_id, name, starts) values ($1, $2, $3, make_interval(secs => $4)::time)
			on conflict (id) do update set name = excluded.name, starts = excluded.starts, retired_at = null
			where shift.plant_id = excluded.plant_id`, id, a.s.plant(), sh.Name, sh.Starts.Seconds())
	}
	return nameTaken(a.tx.SendBatch(ctx, b).Close())
}

// one demands that a statement touched one row of the plant.
func one(tag interface{ RowsAffected() int64 }, err error) error {
	if err != nil {
		return nameTaken(err)
	}
	if tag.RowsAffected() != 1 {
		return plant.NotFoundf("", "There is no such thing in this plant.")
	}
	return nil
}

// ChangeLine renames a line.
func (s *Store) ChangeLine(ctx context.Context, l plant.Line, by uuid.UUID) error {
	return s.arranged(ctx, by, func(ctx context.Context, a *arranging) error {
		a.say("line changed", l.ID, map[string]any{"name": l.Name})
		if err := one(a.tx.Exec(ctx, `update line set name = $3 where id = $1 and plant_id = $2`, l.ID, s.plant(), l.Name)); err != nil {
			return err
		}
		return a.stationsOf(ctx, `select id from station where line_id = $1`, l.ID)
	})
}

// ChangeStation changes a station's name, family and line.
func (s *Store) ChangeStation(ctx context.Context, st plant.Station, by uuid.UUID) error {
	return s.arranged(ctx, by, func(ctx context.Context, a *arranging) error {
		a.say("station changed", st.ID, map[string]any{"name": st.Name, "line": st.LineID, "family": st.Family})
		a.stations[st.ID] = true
		return one(a.tx.Exec(ctx, `update station set name = $3, family = $4, line_id = $5 where id = $1 and plant_id = $2
			and exists (select from line where id = $5 and plant_id = $2 and (retired_at is null or id = station.line_id))`,
			st.ID, s.plant(), st.Name, st.Family, st.LineID))
	})
}

// ChangePart changes a part's name and family. A family that charts are shared by stays
// as it is once the part was made: charts begin afresh by it.
func (s *Store) ChangePart(ctx context.Context, p plant.Part, by uuid.UUID) error {
	return s.arranged(ctx, by, func(ctx context.Context, a *arranging) error {
		var family string
		var made bool
		err := a.tx.QueryRow(ctx, `select family, exists (select from machine_state where part_id = part.id) from part where id = $1 and plant_id = $2 for update`,
			p.ID, s.plant()).Scan(&family, &made)
		if err != nil {
			return missing(err, "There is no such part.")
		}
		if made && family != p.Family {
			return plant.Conflictf("family", "Machines have made this part under its family, and charts were judged by it. Retire the part and add another.")
		}
		a.say("part changed", p.ID, map[string]any{"name": p.Name, "family": p.Family})
		if err := one(a.tx.Exec(ctx, `update part set name = $3, family = $4 where id = $1 and plant_id = $2`, p.ID, s.plant(), p.Name, p.Family)); err != nil {
			return err
		}
		return a.stationsOf(ctx, `select distinct station_id from characteristic where plant_id = $1`, s.plant())
	})
}

// ChangeGauge changes a gauge's name, resolution and when it is checked.
func (s *Store) ChangeGauge(ctx context.Context, g plant.Gauge, by uuid.UUID) error {
	return s.arranged(ctx, by, func(ctx context.Context, a *arranging) error {
		a.say("gauge changed", g.ID, gaugeContent(g))
		return one(a.tx.Exec(ctx, `update gauge set name = $3, resolution = $4::text::numeric, next_check = $5, check_days = $6 where id = $1 and plant_id = $2`,
			g.ID, s.plant(), g.Name, decimalOrNull(g.Resolution), timeOrNull(g.NextCheck), g.CheckDays))
	})
}

// ChangeCharacteristic changes a characteristic's name, and of which part or family it is
// as long as nothing was measured. How it is measured is ChangeSetup's.
func (s *Store) ChangeCharacteristic(ctx context.Context, c plant.Characteristic, by uuid.UUID) error {
	return s.arranged(ctx, by, func(ctx context.Context, a *arranging) error {
		var old plant.Characteristic
		var part *uuid.UUID
		var measured bool
		err := a.tx.QueryRow(ctx, `select station_id, machine_id, part_id, family, exists (select from subgroup where characteristic_id = $1)
			from characteristic where id = $1 and plant_id = $2 for update`, c.ID, s.plant()).
			Scan(&old.StationID, &old.MachineID, &part, &old.Family, &measured)
		if err != nil {
			return missing(err, "There is no such characteristic.")
		}
		if measured && (orNil(part) != c.PartID || old.Family != c.Family) {
			return plant.Conflictf("of", "It was measured already, and its chart was judged for this part or family. Retire it and add another.")
		}
		c.StationID, c.MachineID = old.StationID, old.MachineID
		a.say("characteristic changed", c.ID, characteristicContent(c))
		a.stations[c.StationID] = true
		return one(a.tx.Exec(ctx, `update characteristic set name = $3, part_id = $4, family = $5 where id = $1 and plant_id = $2`,
			c.ID, s.plant(), c.Name, orNull(c.PartID), c.Family))
	})
}

// stationsOf marks the stations that a query names as changed.
func (a *arranging) stationsOf(ctx context.Context, sql string, id uuid.UUID) error {
	ids, err := all(ctx, a.tx, pgx.RowTo[uuid.UUID], sql, id)
	if err != nil {
		return fmt.Errorf("read stations: %w", err)
	}
	for _, id := range ids {
		a.stations[id] = true
	}
	return nil
}
