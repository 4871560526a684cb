package store

import (
	"context"
	"fmt"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
)

// mostReaches is how many reaches one reading of stations finds anew. A plant with more
// open matters than that, read for the first time, has the others a moment later.
const mostReaches = 32

// reachAsk is a matter whose reach is asked for.
type reachAsk struct {
	matter  *plant.Matter
	machine uuid.UUID
	setup   plant.Setup
	version int64 // of the characteristic
}

// reachesOf finds the reach of matters, from what is kept or in four readings for all of
// them; it finds at most so many anew.
func (s *Store) reachesOf(ctx context.Context, tx pgx.Tx, asks []reachAsk, most int) (map[uuid.UUID]*plant.Reach, error) {
	out := make(map[uuid.UUID]*plant.Reach, len(asks))
	var cold []*reachFinding
	for _, a := range asks {
		if r, ok := s.reaches.get(a.matter.ID, a.version); ok {
			out[a.matter.ID] = r
		} else if len(cold) < most {
			cold = append(cold, &reachFinding{reachAsk: a, evidence: plant.ReachEvidence{Matter: *a.matter,
				Setups: map[int]plant.Setup{}, Segments: map[plant.Panel]plant.Segment{}, Revisions: map[uuid.UUID]plant.Revision{}}})
		}
	}
	if len(cold) == 0 {
		return out, nil
	}
	for _, read := range []func(context.Context, pgx.Tx, []*reachFinding) error{s.reachAround, s.reachWindows} {
		if err := read(ctx, tx, cold); err != nil {
			return nil, err
		}
	}
	for _, f := range cold {
		r := plant.ReachOf(f.evidence, f.setup)
		f.reach = &r
	}
	if err := s.reachLogs(ctx, tx, cold); err != nil {
		return nil, err
	}
	for _, f := range cold {
		s.reaches.put(f.matter.ID, f.version, f.reach)
		out[f.matter.ID] = f.reach
	}
	return out, nil
}

type reachFinding struct {
	reachAsk
	evidence plant.ReachEvidence
	reach    *plant.Reach
}

// lookPanels are those on which a rule's firing tells of a change.
var lookPanels = [...]plant.Panel{plant.Location, plant.Dispersion}

// reachAround reads what surrounds the matters: the segments that their first firings lie
// in, boundaries, changes and gauge checks.
func (s *Store) reachAround(ctx context.Context, tx pgx.Tx, fs []*reachFinding) error {
	n := len(fs)
	matters, ids, machines := make([]uuid.UUID, n), make([]uuid.UUID, n), make([]uuid.UUID, n)
	opened, place := make([]time.Time, n), make(map[uuid.UUID]*reachFinding, n)
	var firedIn []uuid.UUID // characteristics of first firings, and when
	var firedAt []time.Time
	type fired struct {
		f     *reachFinding
		panel plant.Panel
	}
	var firings []fired
	for i, f := range fs {
		matters[i], ids[i], machines[i], opened[i] = f.matter.ID, f.matter.Characteristic, f.machine, f.matter.OpenedTaken
		place[f.matter.ID] = f
		for _, p := range lookPanels {
			if first := f.matter.FirstSuspect(p, f.setup); !first.IsZero() {
				firedIn, firedAt = append(firedIn, f.matter.Characteristic), append(firedAt, first)
				firings = append(firings, fired{f, p})
			}
		}
	}
	now := s.now()
	b := &pgx.Batch{}
	b.Queue(`select a.i, segment.at, force.revision_id from unnest($1::uuid[], $2::timestamptz[]) with ordinality a (id, at, i)
		left join lateral (select b.at from boundary b where b.characteristic_id = a.id and b.at <= a.at order by b.at desc, b.id desc limit 1) segment on true
		left join lateral (select b.revision_id from boundary b where b.characteristic_id = a.id and b.at <= a.at and b.kind in ('revision', 'setup')
			order by b.at desc, b.id desc limit 1) force on true`, firedIn, firedAt)
	b.Queue(`select a.matter, b.at, b.kind from unnest($1::uuid[], $2::uuid[], $3::timestamptz[]) a (matter, id, opened)
		cross join lateral (select x.at, x.kind from boundary x where x.characteristic_id = a.id and x.at > a.opened and x.at <= $4 order by x.at limit 1000) b`,
		matters, ids, opened, now)
	b.Queue(`select a.matter, h.kind, h.characteristic_id, h.happened_at from unnest($1::uuid[], $2::uuid[], $3::timestamptz[]) a (matter, machine, opened)
		cross join lateral (select * from change x where x.machine_id = a.machine and x.happened_at > a.opened order by x.happened_at limit 1000) h`,
		matters, machines, opened)
	b.Queue(`select f.matter_id, k.id, k.gauge_id, k.at, k.good from (
			select g.matter_id, c.gauge_id, min(g.taken_at) as first from signal g join gauge_check c on c.id = g.subgroup_id
			where g.matter_id = any($1) and g.panel = 'gauge check' and not g.withdrawn group by g.matter_id, c.gauge_id) f
		cross join lateral (
			(select * from gauge_check x where x.gauge_id = f.gauge_id and x.good and x.at < f.first order by x.at desc, x.id desc limit 1)
			union all
			(select * from gauge_check x where x.gauge_id = f.gauge_id and x.at >= f.first order by x.at limit 1000)) k`, matters)
	results := tx.SendBatch(ctx, b)
	defer results.Close()
	revisions := make([]uuid.UUID, len(firings))
	{
		rows, _ := results.Query() // an error shows when the rows are read
		var i int
		var from *time.Time
		var revision *uuid.UUID
		if _, err := pgx.ForEachRow(rows, []any{&i, &from, &revision}, func() error {
			at := firings[i-1]
			at.f.evidence.Segments[at.panel] = plant.Segment{From: orZero(from), Revision: orNil(revision)}
			revisions[i-1] = orNil(revision)
			return nil
		}); err != nil {
			return fmt.Errorf("read segments: %w", err)
		}
	}
	var matter uuid.UUID
	{
		rows, _ := results.Query()
		var bd plant.Boundary
		if _, err := pgx.ForEachRow(rows, []any{&matter, &bd.At, &bd.Kind}, func() error {
			e := &place[matter].evidence
			e.Boundaries = append(e.Boundaries, bd)
			return nil
		}); err != nil {
			return fmt.Errorf("read boundaries: %w", err)
		}
	}
	{
		rows, _ := results.Query()
		var c plant.Change
		var characteristic *uuid.UUID
		if _, err := pgx.ForEachRow(rows, []any{&matter, &c.Kind, &characteristic, &c.HappenedAt}, func() error {
			e := &place[matter].evidence
			c.Characteristic = orNil(characteristic)
			e.Changes = append(e.Changes, c)
			return nil
		}); err != nil {
			return fmt.Errorf("read changes: %w", err)
		}
	}
	{
		rows, _ := results.Query()
		var k plant.GaugeCheckRecord
		if _, err := pgx.ForEachRow(rows, []any{&matter, &k.ID, &k.Gauge, &k.At, &k.Good}, func() error {
			e := &place[matter].evidence
			e.Checks = append(e.Checks, k)
			return nil
		}); err != nil {
			return fmt.Errorf("read gauge checks: %w", err)
		}
	}
	if err := results.Close(); err != nil {
		return fmt.Errorf("read what surrounds a matter: %w", err)
	}
	for i, at := range firings {
		fz, err := s.revision(ctx, tx, revisions[i])
		if err != nil {
			return err
		}
		if fz != nil {
			at.f.evidence.Revisions[fz.ID] = fz.Revision
		}
	}
	return nil
}

// Reaches finds the reach of matters, open or closed, and counts what each holds now.
func (s *Store) Reaches(ctx context.Context, matters ...uuid.UUID) (map[uuid.UUID]plant.Contained, error) {
	out := make(map[uuid.UUID]plant.Contained, len(matters))
	err := pgx.BeginTxFunc(ctx, s.pool, pgx.TxOptions{IsoLevel: pgx.RepeatableRead, AccessMode: pgx.ReadOnly}, func(tx pgx.Tx) error {
		list, err := s.matters(ctx, tx, ` where m.id = any($1) and m.plant_id = $2`, matters, s.plant())
		if err != nil || len(list) == 0 {
			return err
		}
		of := make(map[uuid.UUID]*plant.Matter, len(list))
		ids := make([]uuid.UUID, len(list))
		for i, m := range list {
			of[m.ID], ids[i] = m, m.ID
		}
		rows, err := tx.Query(ctx, `select t.id, cs.version, cs.setup_version, c.part_id, m.id, m.parts_per_hour,
				coalesce((select array_agg(x.id order by x.position) from stream x where x.machine_id = m.id), '{}')
			from matter t join characteristic c on c.id = t.characteristic_id join characteristic_state cs on cs.characteristic_id = c.id
			join machine m on m.id = c.machine_id where t.id = any($1)`, ids)
		if err != nil {
			return fmt.Errorf("read machines of matters: %w", err)
		}
		type around struct {
			reachAsk
			part         uuid.UUID
			on           plant.Machine
			setupVersion int
		}
		found, err := pgx.CollectRows(rows, func(r pgx.CollectableRow) (a around, err error) {
			var id uuid.UUID
			var part *uuid.UUID
			var streams []uuid.UUID
			err = r.Scan(&id, &a.version, &a.setupVersion, &part, &a.on.ID, &a.on.PartsPerHour, &streams)
			for _, st := range streams {
				a.on.Streams = append(a.on.Streams, plant.Stream{ID: st})
			}
			a.matter, a.machine, a.part = of[id], a.on.ID, orNil(part)
			return a, err
		})
		if err != nil {
			return fmt.Errorf("read machines of matters: %w", err)
		}
		asks := make([]reachAsk, len(found))
		for i := range found {
			if found[i].setup, err = s.setup(ctx, tx, found[i].matter.Characteristic, found[i].setupVersion); err != nil {
				return err
			}
			asks[i] = found[i].reachAsk
		}
		reach, err := s.reachesOf(ctx, tx, asks, len(asks))
		if err != nil {
			return err
		}
		now := s.now()
		for _, a := range found {
			r := reach[a.matter.ID]
			out[a.matter.ID] = plant.Contained{Lines: a.matter.Lines, Setup: a.setup, Reach: r, Suspect: r.Suspects(a.on, a.part, now)}
		}
		return nil
	})
	if err != nil {
		return nil, fmt.Errorf("find reach: %w", err)
	}
	return out, nil
}

// product adds to the states of stations what is in doubt: the reach of open matters, how
// far the gauges can be trusted, and what is still kept aside.
func (g *gathering) product(ctx context.Context, tx pgx.Tx, states []plant.StationState) error {
	stations := make([]uuid.UUID, len(states))
	of := map[uuid.UUID]*plant.CharacteristicState{}
	byGauge := map[uuid.UUID][]*plant.CharacteristicState{}
	gauges := []uuid.UUID{}
	var asks []reachAsk
	for i := range states {
		stations[i] = states[i].ID
		for j := range states[i].Characteristics {
			c := &states[i].Characteristics[j]
			of[c.ID] = c
			if id := c.Setup.GaugeID; id != uuid.Nil {
				if byGauge[id] == nil {
					gauges = append(gauges, id)
				}
				byGauge[id] = append(byGauge[id], c)
			}
			if c.Matter != nil {
				asks = append(asks, reachAsk{c.Matter, c.MachineID, c.Setup, c.Version})
			}
		}
	}
	b := &pgx.Batch{}
	b.Queue(selectGauge+` where g.id = any($1)`, gauges)
	b.Queue(selectContainment+` where c.plant_id = $1 and c.station_id = any($2) and c.settled_at is null
		order by c.opened_at, c.id limit $3`, g.s.plant(), stations, mostContained)
	results := tx.SendBatch(ctx, b)
	defer results.Close()
	rows, _ := results.Query() // an error shows when the rows are read
	list, err := pgx.CollectRows(rows, scanGauge)
	if err != nil {
		return fmt.Errorf("read gauges: %w", err)
	}
	rows, _ = results.Query()
	contained, err := pgx.CollectRows(rows, scanContainment)
	if err != nil {
		return fmt.Errorf("read containments: %w", err)
	}
	if err := results.Close(); err != nil {
		return fmt.Errorf("read what is in doubt: %w", err)
	}
	if err := g.s.addEntries(ctx, tx, "infinity", contained); err != nil {
		return err
	}
	for i := range list {
		for _, c := range byGauge[list[i].ID] {
			c.Gauge = &list[i]
		}
	}
	for _, k := range contained {
		if c := of[k.Characteristic.ID]; c != nil {
			c.Contained = append(c.Contained, k)
		}
	}
	reach, err := g.s.reachesOf(ctx, tx, asks, mostReaches)
	if err != nil {
		return err
	}
	for _, a := range asks {
		of[a.matter.Characteristic].Reach = reach[a.matter.ID]
	}
	return nil
}
