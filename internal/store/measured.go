package store

import (
	"context"
	"fmt"
	"slices"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
)

// StationSetups reads a station with what is measured there and by which limits, and
// nothing of how it stands: what checking a round needs, in one question. It may be a
// second old; recording the round checks it again, under the lock.
func (s *Store) StationSetups(ctx context.Context, id uuid.UUID) (plant.StationState, error) {
	if v, ok := s.measured.Load(id); ok {
		if m := v.(measuredStation); time.Since(m.read) < time.Second {
			return m.clone(), nil
		}
	}
	m := measuredStation{read: time.Now()}
	var err error
	if m.StationState, err = s.stationSetups(ctx, id); err != nil {
		return m.StationState, err
	}
	s.measured.Store(id, m)
	return m.clone(), nil
}

// measuredStation is what StationSetups read, and when.
type measuredStation struct {
	plant.StationState
	read time.Time
}

func (m measuredStation) clone() plant.StationState {
	st := m.StationState
	st.Characteristics = slices.Clone(st.Characteristics)
	return st
}

func (s *Store) stationSetups(ctx context.Context, id uuid.UUID) (plant.StationState, error) {
	var st plant.StationState
	rows, err := s.pool.Query(ctx, `select t.id, t.name, t.family, t.position, l.id, l.name, l.position,
			c.id, c.machine_id, c.part_id, c.family, c.name, c.position, cs.version, cs.setup_version, force.revision_id, m.name
		from station t join line l on l.id = t.line_id
		left join characteristic c on c.station_id = t.id
		left join machine m on m.id = c.machine_id
		left join characteristic_state cs on cs.characteristic_id = c.id
		left join lateral (select b.revision_id from boundary b where b.characteristic_id = c.id and b.at <= $3 and b.kind in ('revision', 'setup')
			order by b.at desc, b.id desc limit 1) force on true
		where t.id = $1 and t.plant_id = $2 order by c.position, c.name, c.id`, id, s.plant(), s.now())
	if err != nil {
		return st, fmt.Errorf("read station: %w", err)
	}
	type row struct {
		c        plant.CharacteristicState
		setup    int
		revision uuid.UUID
	}
	var found []row
	var cID, machine, part, revision *uuid.UUID
	var family, name, on *string
	var position, setup *int
	var version *int64
	_, err = pgx.ForEachRow(rows, []any{&st.ID, &st.Name, &st.Family, &st.Station.Position, &st.Line.ID, &st.Line.Name, &st.Line.Position,
		&cID, &machine, &part, &family, &name, &position, &version, &setup, &revision, &on}, func() error {
		if cID == nil {
			return nil
		}
		r := row{setup: *setup, revision: orNil(revision)}
		r.c.Characteristic = plant.Characteristic{ID: *cID, StationID: st.ID, MachineID: *machine, PartID: orNil(part), Family: *family, Name: *name, Position: *position}
		r.c.Machine.ID, r.c.Machine.Name = *machine, *on
		r.c.Version = *version
		found = append(found, r)
		return nil
	})
	if err != nil {
		return st, fmt.Errorf("read station: %w", err)
	}
	if st.ID == uuid.Nil {
		return st, plant.NotFoundf("", "There is no such station.")
	}
	st.LineID = st.Line.ID
	for _, r := range found {
		if r.c.Setup, err = s.setup(ctx, s.pool, r.c.ID, r.setup); err != nil {
			return st, err
		}
		fz, err := s.revision(ctx, s.pool, r.revision)
		if err != nil {
			return st, err
		}
		if fz != nil {
			r.c.Revision = &fz.Revision
		}
		st.Characteristics = append(st.Characteristics, r.c)
	}
	return st, nil
}
