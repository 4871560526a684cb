package store

import (
	"context"
	"fmt"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
)

// gathering collects what StationStates reads, by id.
type gathering struct {
	s               *Store
	settings        plant.Settings
	now             time.Time
	stations        []*plant.StationState
	byStation       map[uuid.UUID]*plant.StationState
	characteristics map[uuid.UUID]*plant.CharacteristicState
	setupVersions   map[uuid.UUID]int
	inForce         map[uuid.UUID]uuid.UUID
	machines        map[uuid.UUID]*plant.MachineNow
	changes         map[uuid.UUID][]plant.Change
	parts           map[uuid.UUID]plant.Part
	also            uuid.UUID // a characteristic that is read although it is retired
}

// StationStates reads how it stands now at the given stations, or at all of them when
// none is given, with the newest so many points of each characteristic. Its cost does
// not depend on how long the history is.
func (s *Store) StationStates(ctx context.Context, points int, ids ...uuid.UUID) ([]plant.StationState, error) {
	return s.stationStates(ctx, points, uuid.Nil, ids...)
}

// stationStates is StationStates with one characteristic more, which may be retired.
func (s *Store) stationStates(ctx context.Context, points int, also uuid.UUID, ids ...uuid.UUID) ([]plant.StationState, error) {
	set, err := s.Settings(ctx) // before the transaction: it may take a connection of its own
	if err != nil {
		return nil, err
	}
	var out []plant.StationState
	err = pgx.BeginTxFunc(ctx, s.pool, pgx.TxOptions{IsoLevel: pgx.RepeatableRead, AccessMode: pgx.ReadOnly}, func(tx pgx.Tx) error {
		g := &gathering{s: s, settings: set, now: s.now(), byStation: map[uuid.UUID]*plant.StationState{},
			characteristics: map[uuid.UUID]*plant.CharacteristicState{}, setupVersions: map[uuid.UUID]int{},
			inForce: map[uuid.UUID]uuid.UUID{}, machines: map[uuid.UUID]*plant.MachineNow{}, changes: map[uuid.UUID][]plant.Change{},
			parts: map[uuid.UUID]plant.Part{}, also: also}
		var err error
		out, err = g.gather(ctx, tx, points, ids)
		return err
	})
	if err != nil {
		return nil, fmt.Errorf("read stations: %w", err)
	}
	return out, nil
}

// StationState reads one station.
func (s *Store) StationState(ctx context.Context, id uuid.UUID, points int) (plant.StationState, error) {
	return s.stationStateWith(ctx, id, points, uuid.Nil)
}

func (s *Store) stationStateWith(ctx context.Context, id uuid.UUID, points int, also uuid.UUID) (plant.StationState, error) {
	list, err := s.stationStates(ctx, points, also, id)
	if err != nil {
		return plant.StationState{}, err
	}
	if len(list) == 0 {
		return plant.StationState{}, plant.NotFoundf("", "There is no such station.")
	}
	return list[0], nil
}

func (g *gathering) gather(ctx context.Context, tx pgx.Tx, points int, ids []uuid.UUID) ([]plant.StationState, error) {
	if ids == nil {
		ids = []uuid.UUID{}
	}
	if err := g.readStations(ctx, tx, ids); err != nil {
		return nil, err
	}
	stationIDs := make([]uuid.UUID, len(g.stations))
	for i, st := range g.stations {
		stationIDs[i] = st.ID
	}
	for _, read := range []func(context.Context, pgx.Tx, []uuid.UUID) error{
		g.readMachines, g.readCharacteristics, g.readMatters, g.readEscalation, g.readLogs, g.readAsides,
	} {
		if err := read(ctx, tx, stationIDs); err != nil {
			return nil, err
		}
	}
	if err := g.readPoints(ctx, tx, points); err != nil {
		return nil, err
	}
	if err := g.readChanges(ctx, tx); err != nil {
		return nil, err
	}
	states, err := g.assemble(ctx, tx)
	if err != nil {
		return nil, err
	}
	return states, g.product(ctx, tx, states)
}

func (g *gathering) readStations(ctx context.Context, tx pgx.Tx, ids []uuid.UUID) error {
	rows, err := tx.Query(ctx, `select s.id, s.name, s.family, s.position, l.id, l.name, l.position
		from station s join line l on l.id = s.line_id
		where s.plant_id = $1 and (cardinality($2::uuid[]) = 0 and s.retired_at is null or s.id = any($2)) order by l.position, l.name, s.position, s.name`, g.s.plant(), ids)
	if err != nil {
		return fmt.Errorf("read stations: %w", err)
	}
	g.stations, err = pgx.CollectRows(rows, func(r pgx.CollectableRow) (*plant.StationState, error) {
		st := &plant.StationState{}
		err := r.Scan(&st.ID, &st.Name, &st.Family, &st.Station.Position, &st.Line.ID, &st.Line.Name, &st.Line.Position)
		st.LineID = st.Line.ID
		g.byStation[st.ID] = st
		return st, err
	})
	return err
}

func (g *gathering) readMachines(ctx context.Context, tx pgx.Tx, stations []uuid.UUID) error {
	rows, err := tx.Query(ctx, `select m.id, m.station_id, m.name, m.position, m.parts_per_hour,
			coalesce((select array_agg(t.id order by t.position) from stream t where t.machine_id = m.id and t.retired_at is null), '{}'),
			coalesce((select array_agg(t.name order by t.position) from stream t where t.machine_id = m.id and t.retired_at is null), '{}'),
			p.id, p.name, p.family, m.retired_at is not null
		from machine m
		left join lateral (select x.part_id from machine_state x where x.machine_id = m.id and x.at <= $2 order by x.at desc, x.id desc limit 1) x on true
		left join part p on p.id = x.part_id
		where m.station_id = any($1) order by m.position, m.name`, stations, g.now)
	if err != nil {
		return fmt.Errorf("read machines: %w", err)
	}
	var m plant.Machine
	var streamIDs []uuid.UUID
	var streamNames []string
	var part *uuid.UUID
	var partName, partFamily *string
	var order []uuid.UUID
	_, err = pgx.ForEachRow(rows, []any{&m.ID, &m.StationID, &m.Name, &m.Position, &m.PartsPerHour, &streamIDs, &streamNames, &part, &partName, &partFamily, &m.Retired}, func() error {
		now := &plant.MachineNow{Machine: m}
		now.Streams = nil
		for i := range streamIDs {
			now.Streams = append(now.Streams, plant.Stream{ID: streamIDs[i], Name: streamNames[i]})
		}
		if part != nil {
			now.Part = plant.Part{ID: *part, Name: *partName, Family: *partFamily}
		}
		g.machines[m.ID] = now
		order = append(order, m.ID)
		return nil
	})
	return err
}

func (g *gathering) readCharacteristics(ctx context.Context, tx pgx.Tx, stations []uuid.UUID) error {
	rows, err := tx.Query(ctx, `select c.id, c.station_id, c.machine_id, c.part_id, c.family, c.name, c.position,
			cs.version, cs.setup_version, cs.last_taken, cs.last_due, segment.at, force.revision_id, c.retired_at is not null, `+ownerColumns+`
		from characteristic c join characteristic_state cs on cs.characteristic_id = c.id
		left join lateral (select b.at from boundary b where b.characteristic_id = c.id and b.at <= $2 order by b.at desc, b.id desc limit 1) segment on true
		left join lateral (select b.revision_id from boundary b where b.characteristic_id = c.id and b.at <= $2 and b.kind in ('revision', 'setup')
			order by b.at desc, b.id desc limit 1) force on true
		where c.station_id = any($1) and (c.retired_at is null or c.id = $3) order by c.position, c.name, c.id`, stations, g.now, g.also)
	if err != nil {
		return fmt.Errorf("read characteristics: %w", err)
	}
	var c plant.CharacteristicState
	var part, revision *uuid.UUID
	var lastTaken, lastDue, from *time.Time
	var setup int
	var owner ownerRow
	_, err = pgx.ForEachRow(rows, append([]any{&c.ID, &c.StationID, &c.MachineID, &part, &c.Family, &c.Name, &c.Position,
		&c.Version, &setup, &lastTaken, &lastDue, &from, &revision, &c.Retired}, owner.targets()...), func() error {
		v := c
		if err := owner.into(&v, g.settings.Owner, g.now); err != nil {
			return err
		}
		v.PartID, v.LastTaken, v.LastDue = orNil(part), orZero(lastTaken), orZero(lastDue)
		v.Segment = plant.Segment{From: orZero(from), Revision: orNil(revision)}
		st := g.byStation[v.StationID]
		st.Characteristics = append(st.Characteristics, v)
		g.setupVersions[v.ID], g.inForce[v.ID] = setup, orNil(revision)
		return nil
	})
	for _, st := range g.stations {
		for i := range st.Characteristics {
			g.characteristics[st.Characteristics[i].ID] = &st.Characteristics[i]
		}
	}
	return err
}

func (g *gathering) readMatters(ctx context.Context, tx pgx.Tx, stations []uuid.UUID) error {
	list, err := g.s.matters(ctx, tx, ` where m.station_id = any($1) and m.closed_at is null`, stations)
	if err != nil {
		return err
	}
	for _, m := range list {
		if c := g.characteristics[m.Characteristic]; c != nil {
			c.Matter = m
		}
	}
	return g.s.progress(ctx, tx, list...)
}

// readLogs reads what each machine did since the oldest of its newest samples, and the
// row before that.
func (g *gathering) readLogs(ctx context.Context, tx pgx.Tx, stations []uuid.UUID) error {
	rows, err := tx.Query(ctx, `with since as (
			select m.id, coalesce(min(least(cs.last_taken, cs.last_due)), min(u.made_at), 'infinity') as at
			from machine m left join characteristic c on c.machine_id = m.id
			left join characteristic_state cs on cs.characteristic_id = c.id
			left join setup u on u.characteristic_id = c.id and u.version = cs.setup_version and cs.last_taken is null
			where m.station_id = any($1) group by m.id)
		select l.id, l.machine_id, l.at, l.running, l.part_id, l.lot, l.counter, l.recorded_at
		from since s cross join lateral (
			(select * from machine_state x where x.machine_id = s.id and x.at <= s.at and x.at <= $2 order by x.at desc, x.id desc limit 1)
			union all
			(select * from machine_state x where x.machine_id = s.id and x.at > s.at and x.at <= $2 order by x.at desc, x.id desc limit 2000)
		) l order by l.machine_id, l.at, l.id`, stations, g.now)
	if err != nil {
		return fmt.Errorf("read machine logs: %w", err)
	}
	var m plant.MachineState
	var part *uuid.UUID
	_, err = pgx.ForEachRow(rows, []any{&m.ID, &m.Machine, &m.At, &m.Running, &part, &m.Lot, &m.Counter, &m.RecordedAt}, func() error {
		v := m
		v.Part = orNil(part)
		now := g.machines[v.Machine]
		now.Log, now.State, now.Known = append(now.Log, v), v, true
		return nil
	})
	return err
}

// assemble adds what follows from what was read: set-ups, revisions, what is due.
func (g *gathering) assemble(ctx context.Context, tx pgx.Tx) ([]plant.StationState, error) {
	out := make([]plant.StationState, len(g.stations))
	for i, st := range g.stations {
		for _, m := range g.machines {
			if m.StationID == st.ID && !m.Retired {
				st.Machines = append(st.Machines, *m)
			}
		}
		sortMachines(st.Machines)
		for j := range st.Characteristics {
			c := &st.Characteristics[j]
			var err error
			if c.Setup, err = g.s.setup(ctx, tx, c.ID, g.setupVersions[c.ID]); err != nil {
				return nil, err
			}
			fz, err := g.s.revision(ctx, tx, g.inForce[c.ID])
			if err != nil {
				return nil, err
			}
			if fz != nil {
				c.Revision = &fz.Revision
			} else if c.Collected, err = g.collected(ctx, tx, c); err != nil {
				return nil, err
			}
			c.Machine = *g.machines[c.MachineID]
			c.Beside = len(st.Machines) > 1
			g.due(c)
		}
		out[i] = *st
	}
	return out, g.overduePlans(ctx, tx)
}

// collected counts the subgroups since learning began, as far as it matters.
func (g *gathering) collected(ctx context.Context, tx pgx.Tx, c *plant.CharacteristicState) (n int, err error) {
	from := any(c.Segment.From)
	if c.Segment.From.IsZero() {
		from = "-infinity"
	}
	err = tx.QueryRow(ctx, `select count(*) from (select from (select distinct on (taken_at, id) voided from subgroup
		where characteristic_id = $1 and taken_at >= $2 order by taken_at, id, version desc) v where not voided limit 1000) n`, c.ID, from).Scan(&n)
	if err != nil {
		return 0, fmt.Errorf("count subgroups: %w", err)
	}
	return n, nil
}

func (g *gathering) due(c *plant.CharacteristicState) {
	m := c.Machine
	if c.PartID != uuid.Nil && m.Known && m.State.Part != c.PartID || c.Family != "" && m.Known && m.Part.Family != c.Family {
		c.Due = plant.Due{State: plant.Paused} // the machine makes something else
		return
	}
	c.Due = c.Setup.Plan.Next(c.LastTaken, c.LastDue, c.Setup.MadeAt, m.Machine, m.Log, plant.Happenings(m.Log, g.changes[m.ID]), g.now)
}

func sortMachines(ms []plant.MachineNow) {
	for i := 1; i < len(ms); i++ {
		for j := i; j > 0 && (ms[j].Position < ms[j-1].Position || ms[j].Position == ms[j-1].Position && ms[j].Name < ms[j-1].Name); j-- {
			ms[j], ms[j-1] = ms[j-1], ms[j]
		}
	}
}
