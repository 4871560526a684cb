package store

import (
	"context"
	"fmt"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
)

// Outline reads all that the plant is set up with, retired things included. Its cost
// grows with the plant and not with what was recorded.
func (s *Store) Outline(ctx context.Context) (plant.Outline, error) {
	var o plant.Outline
	err := pgx.BeginTxFunc(ctx, s.pool, pgx.TxOptions{IsoLevel: pgx.RepeatableRead, AccessMode: pgx.ReadOnly}, func(tx pgx.Tx) error {
		var err error
		if o.Plant, err = s.plantFrom(ctx, tx); err != nil {
			return err
		}
		return s.outline(ctx, tx, &o)
	})
	if err != nil {
		return o, fmt.Errorf("read outline: %w", err)
	}
	return o, nil
}

// outline reads what the plant has, within a transaction that may hold it still.
func (s *Store) outline(ctx context.Context, q querier, o *plant.Outline) error {
	for _, read := range []func(context.Context, querier, *plant.Outline) error{
		s.outlineFloor, s.outlineMachines, s.outlineParts, s.outlineCharacteristics, s.outlinePeople,
	} {
		if err := read(ctx, q, o); err != nil {
			return err
		}
	}
	return nil
}

// all collects the rows of a query.
func all[T any](ctx context.Context, q querier, scan pgx.RowToFunc[T], sql string, args ...any) ([]T, error) {
	rows, err := q.Query(ctx, sql, args...)
	if err != nil {
		return nil, err
	}
	return pgx.CollectRows(rows, scan)
}

func (s *Store) outlineFloor(ctx context.Context, q querier, o *plant.Outline) (err error) {
	o.Lines, err = all(ctx, q, func(r pgx.CollectableRow) (l plant.Line, err error) {
		return l, r.Scan(&l.ID, &l.Name, &l.Position, &l.Retired)
	}, `select id, name, position, retired_at is not null from line where plant_id = $1 order by position, name`, s.plant())
	if err != nil {
		return fmt.Errorf("read lines: %w", err)
	}
	o.Stations, err = all(ctx, q, func(r pgx.CollectableRow) (st plant.Station, err error) {
		return st, r.Scan(&st.ID, &st.LineID, &st.Name, &st.Family, &st.Position, &st.Retired)
	}, `select s.id, s.line_id, s.name, s.family, s.position, s.retired_at is not null from station s join line l on l.id = s.line_id
		where s.plant_id = $1 order by l.position, l.name, s.position, s.name`, s.plant())
	if err != nil {
		return fmt.Errorf("read stations: %w", err)
	}
	return nil
}

func (s *Store) outlineMachines(ctx context.Context, q querier, o *plant.Outline) (err error) {
	o.Machines, err = all(ctx, q, func(r pgx.CollectableRow) (m plant.Machine, err error) {
		return m, r.Scan(&m.ID, &m.StationID, &m.Name, &m.Position, &m.PartsPerHour, &m.Retired)
	}, `select m.id, m.station_id, m.name, m.position, m.parts_per_hour, m.retired_at is not null
		from machine m join station s on s.id = m.station_id join line l on l.id = s.line_id
		where m.plant_id = $1 order by l.position, l.name, s.position, s.name, m.position, m.name`, s.plant())
	if err != nil {
		return fmt.Errorf("read machines: %w", err)
	}
	at := make(map[uuid.UUID]int, len(o.Machines))
	for i, m := range o.Machines {
		at[m.ID] = i
	}
	rows, err := q.Query(ctx, `select id, machine_id, name, retired_at is not null from stream where plant_id = $1 order by position, name`, s.plant())
	if err != nil {
		return fmt.Errorf("read streams: %w", err)
	}
	var st plant.Stream
	var machine uuid.UUID
	if _, err := pgx.ForEachRow(rows, []any{&st.ID, &machine, &st.Name, &st.Retired}, func() error {
		m := &o.Machines[at[machine]]
		m.Streams = append(m.Streams, st)
		return nil
	}); err != nil {
		return fmt.Errorf("read streams: %w", err)
	}
	return nil
}

func (s *Store) outlineParts(ctx context.Context, q querier, o *plant.Outline) (err error) {
	o.Parts, err = all(ctx, q, func(r pgx.CollectableRow) (p plant.Part, err error) {
		return p, r.Scan(&p.ID, &p.Name, &p.Family, &p.Retired)
	}, `select id, name, family, retired_at is not null from part where plant_id = $1 order by family, name`, s.plant())
	if err != nil {
		return fmt.Errorf("read parts: %w", err)
	}
	o.Gauges, err = all(ctx, q, func(r pgx.CollectableRow) (g plant.Gauge, err error) {
		var resolution *string
		var check *time.Time
		if err = r.Scan(&g.ID, &g.Name, &resolution, &check, &g.CheckDays, &g.Retired); err != nil {
			return g, err
		}
		g.NextCheck = orZero(check)
		g.Resolution, err = decimalFrom(resolution)
		return g, err
	}, `select id, name, resolution::text, next_check, check_days, retired_at is not null from gauge where plant_id = $1 order by name`, s.plant())
	if err != nil {
		return fmt.Errorf("read gauges: %w", err)
	}
	return nil
}

func (s *Store) outlineCharacteristics(ctx context.Context, q querier, o *plant.Outline) (err error) {
	versions := map[uuid.UUID]int{}
	o.Characteristics, err = all(ctx, q, func(r pgx.CollectableRow) (d plant.Described, err error) {
		var part *uuid.UUID
		var version int
		err = r.Scan(&d.ID, &d.StationID, &d.MachineID, &part, &d.Family, &d.Name, &d.Position, &d.Retired, &version, &d.Revision, &d.Given)
		d.PartID, versions[d.ID] = orNil(part), version
		return d, err
	}, `select c.id, c.station_id, c.machine_id, c.part_id, c.family, c.name, c.position, c.retired_at is not null, cs.setup_version,
			coalesce(force.number, 0), coalesce((force.basis->>'given')::boolean, false)
		from characteristic c join characteristic_state cs on cs.characteristic_id = c.id
		join machine m on m.id = c.machine_id join station s on s.id = c.station_id join line l on l.id = s.line_id
		left join lateral (select r.number, r.basis from boundary b left join revision r on r.id = b.revision_id
			where b.characteristic_id = c.id and b.at <= $2 and b.kind in ('revision', 'setup') order by b.at desc, b.id desc limit 1) force on true
		where c.plant_id = $1 order by l.position, l.name, s.position, s.name, m.position, m.name, c.position, c.name, c.id`, s.plant(), s.now())
	if err != nil {
		return fmt.Errorf("read characteristics: %w", err)
	}
	// All set-ups of now in one question: a plant may have thousands.
	rows, err := q.Query(ctx, `select u.characteristic_id, u.version, u.unit, u.decimals, u.target::text, u.lower_spec::text, u.upper_spec::text, u.worse,
			u.chart, u.size, u.plan, u.control_plan, u.gauge_id, u.made_at
		from setup u join characteristic_state cs on cs.characteristic_id = u.characteristic_id and cs.setup_version = u.version
		where u.plant_id = $1`, s.plant())
	if err != nil {
		return fmt.Errorf("read set-ups: %w", err)
	}
	setups := make(map[uuid.UUID]plant.Setup, len(versions))
	if _, err := pgx.CollectRows(rows, func(r pgx.CollectableRow) (none struct{}, err error) {
		var id uuid.UUID
		v, err := scanSetupOf(r, &id)
		setups[id] = v
		return none, err
	}); err != nil {
		return fmt.Errorf("read set-ups: %w", err)
	}
	for i := range o.Characteristics {
		o.Characteristics[i].Setup = setups[o.Characteristics[i].ID]
	}
	return nil
}

func (s *Store) outlinePeople(ctx context.Context, q querier, o *plant.Outline) error {
	err := q.QueryRow(ctx, `select
			exists (select from person where plant_id = $1 and active and 'engineer' = any(roles)),
			exists (select from person where plant_id = $1 and active and roles && array['operator', 'supervisor']),
			exists (select from round where plant_id = $1)`, s.plant()).Scan(&o.People.Engineer, &o.People.RoundTaker, &o.Rounds)
	if err != nil {
		return fmt.Errorf("read who is there: %w", err)
	}
	return nil
}

// CharacteristicSetups lists every version of a characteristic's set-up, newest first.
func (s *Store) CharacteristicSetups(ctx context.Context, id uuid.UUID) ([]plant.Setup, error) {
	list, err := all(ctx, s.pool, scanSetup, selectSetup+` where characteristic_id = $1 and plant_id = $2 order by version desc`, id, s.plant())
	if err != nil {
		return nil, fmt.Errorf("read set-ups: %w", err)
	}
	if len(list) == 0 {
		return nil, plant.NotFoundf("", "There is no such characteristic.")
	}
	return list, nil
}

// SubgroupCount counts the subgroups of a characteristic that stand on record.
func (s *Store) SubgroupCount(ctx context.Context, id uuid.UUID) (n int, err error) {
	err = s.pool.QueryRow(ctx, `select count(*) from (select distinct on (taken_at, id) voided from subgroup
		where characteristic_id = $1 order by taken_at, id, version desc) v where not voided`, id).Scan(&n)
	if err != nil {
		return 0, fmt.Errorf("count subgroups: %w", err)
	}
	return n, nil
}
