package store

import (
	"context"
	"fmt"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
)

// mostOfShift is how many changes and corrections of a line's shift are read; more are not
// read by anybody either, and the counts come from the lists.
const mostOfShift = 500

// ShiftSummaries reads what a shift hands over, line by line in the order of the floor; all
// lines when none is given. The cost depends on the shift and not on the history.
func (s *Store) ShiftSummaries(ctx context.Context, span plant.ShiftSpan, lines ...uuid.UUID) ([]plant.ShiftSummary, error) {
	var out []plant.ShiftSummary
	err := pgx.BeginTxFunc(ctx, s.pool, pgx.TxOptions{IsoLevel: pgx.RepeatableRead, AccessMode: pgx.ReadOnly}, func(tx pgx.Tx) error {
		g := &shiftReading{s: s, tx: tx, span: span, until: span.To}
		if now := s.now(); now.Before(span.To) {
			g.until = now.Add(time.Microsecond) // what was recorded at this instant is in it
		}
		var err error
		out, err = g.read(ctx, lines)
		return err
	})
	if err != nil {
		return nil, fmt.Errorf("read a shift: %w", err)
	}
	return out, nil
}

// shiftReading is one reading of a shift.
type shiftReading struct {
	s     *Store
	tx    pgx.Tx
	span  plant.ShiftSpan
	until time.Time

	list       []plant.ShiftSummary
	lines      map[uuid.UUID]*plant.ShiftSummary // by line
	stationIDs []uuid.UUID
	stations   map[uuid.UUID]plant.Station
	all        []*ofShift // characteristics
	byID       map[uuid.UUID]*ofShift
	byMachine  map[uuid.UUID][]*ofShift
}

// ofShift is a characteristic with what its plan is held against.
type ofShift struct {
	plant.Characteristic
	setup   plant.Setup
	machine plant.Machine
	log     plant.MachineLog // running counts only while it makes what is measured here
	changes []plant.Change
	before  plant.Sample
	samples []plant.Sample
}

func (g *shiftReading) read(ctx context.Context, lines []uuid.UUID) ([]plant.ShiftSummary, error) {
	for _, step := range []func(context.Context) error{
		func(ctx context.Context) error { return g.readFloor(ctx, lines) },
		g.readCharacteristics, g.readSamples, g.readLogs, g.readChanges, g.readMatters, g.readCorrections, g.readNotes, g.readReaders, g.readContained, g.readGauges,
	} {
		if err := step(ctx); err != nil {
			return nil, err
		}
	}
	kept := map[uuid.UUID]plant.Kept{}
	for _, c := range g.all {
		k := c.setup.Plan.Keep(g.span.From, g.until, c.before, c.samples, c.setup.MadeAt, c.machine, c.log, plant.Happenings(c.log, c.changes))
		if g.until.Equal(g.span.To) { // the shift is over
			k = k.Ended()
		}
		kept[c.StationID] = kept[c.StationID].Add(k)
	}
	for i := range g.list {
		for j := range g.list[i].Stations {
			st := &g.list[i].Stations[j]
			st.Kept = kept[st.Station.ID]
		}
	}
	return g.list, nil
}

func (g *shiftReading) readFloor(ctx context.Context, lines []uuid.UUID) error {
	if lines == nil {
		lines = []uuid.UUID{}
	}
	rows, err := g.tx.Query(ctx, `select l.id, l.name, l.position, s.id, s.name, s.family, s.position from line l left join station s on s.line_id = l.id
		where l.plant_id = $1 and (cardinality($2::uuid[]) = 0 or l.id = any($2)) order by l.position, l.name, s.position, s.name`, g.s.plant(), lines)
	if err != nil {
		return fmt.Errorf("read the floor: %w", err)
	}
	g.stations = map[uuid.UUID]plant.Station{}
	var l plant.Line
	var id *uuid.UUID
	var name, family *string
	var position *int
	_, err = pgx.ForEachRow(rows, []any{&l.ID, &l.Name, &l.Position, &id, &name, &family, &position}, func() error {
		if n := len(g.list); n == 0 || g.list[n-1].Line.ID != l.ID {
			g.list = append(g.list, plant.ShiftSummary{Line: l, Span: g.span, Until: g.until})
		}
		if id != nil {
			st := plant.Station{ID: *id, LineID: l.ID, Name: *name, Family: *family, Position: *position}
			g.stations[st.ID], g.stationIDs = st, append(g.stationIDs, st.ID)
			last := &g.list[len(g.list)-1]
			last.Stations = append(last.Stations, plant.StationKept{Station: st})
		}
		return nil
	})
	g.lines = make(map[uuid.UUID]*plant.ShiftSummary, len(g.list))
	for i := range g.list {
		g.lines[g.list[i].Line.ID] = &g.list[i]
	}
	return err
}

// at is the summary that a station belongs to.
func (g *shiftReading) at(station uuid.UUID) *plant.ShiftSummary {
	return g.lines[g.stations[station].LineID]
}

func (g *shiftReading) readCharacteristics(ctx context.Context) error {
	rows, err := g.tx.Query(ctx, `select c.id, c.station_id, c.machine_id, c.part_id, c.family, c.name, cs.setup_version, m.name, m.parts_per_hour
		from characteristic c join characteristic_state cs on cs.characteristic_id = c.id join machine m on m.id = c.machine_id
		where c.station_id = any($1) order by c.position, c.name, c.id`, g.stationIDs)
	if err != nil {
		return fmt.Errorf("read characteristics: %w", err)
	}
	g.byID, g.byMachine = map[uuid.UUID]*ofShift{}, map[uuid.UUID][]*ofShift{}
	versions := map[uuid.UUID]int{}
	var c ofShift
	var part *uuid.UUID
	var version int
	if _, err := pgx.ForEachRow(rows, []any{&c.ID, &c.StationID, &c.MachineID, &part, &c.Family, &c.Name, &version, &c.machine.Name, &c.machine.PartsPerHour}, func() error {
		v := c
		v.PartID, v.machine.ID = orNil(part), v.MachineID
		g.all = append(g.all, &v)
		g.byID[v.ID], g.byMachine[v.MachineID] = &v, append(g.byMachine[v.MachineID], &v)
		versions[v.ID] = version
		return nil
	}); err != nil {
		return fmt.Errorf("read characteristics: %w", err)
	}
	for _, c := range g.all {
		if c.setup, err = g.s.setup(ctx, g.tx, c.ID, versions[c.ID]); err != nil {
			return err
		}
	}
	return nil
}

func (g *shiftReading) ids() []uuid.UUID {
	out := make([]uuid.UUID, len(g.all))
	for i, c := range g.all {
		out[i] = c.ID
	}
	return out
}

// readSamples reads when samples were taken in the shift, and the newest before it.
func (g *shiftReading) readSamples(ctx context.Context) error {
	rows, err := g.tx.Query(ctx, `select c.id, s.taken_at, r.due_at from unnest($1::uuid[]) c (id) cross join lateral (
			(select * from (select distinct on (taken_at, id) taken_at, id, round_id, voided from subgroup
				where characteristic_id = c.id and taken_at >= $2 and taken_at < $3 order by taken_at, id, version desc) v where not voided)
			union all
			(select * from (select distinct on (taken_at, id) taken_at, id, round_id, voided from subgroup
				where characteristic_id = c.id and taken_at < $2 order by taken_at desc, id desc, version desc) v where not voided limit 1)
		) s left join round r on r.id = s.round_id order by c.id, s.taken_at, s.id`, g.ids(), g.span.From, g.until)
	if err != nil {
		return fmt.Errorf("read samples: %w", err)
	}
	var id uuid.UUID
	var taken time.Time
	var due *time.Time
	_, err = pgx.ForEachRow(rows, []any{&id, &taken, &due}, func() error {
		c, s := g.byID[id], plant.Sample{At: taken, Due: orZero(due)}
		if taken.Before(g.span.From) {
			c.before = s
		} else {
			c.samples = append(c.samples, s)
		}
		return nil
	})
	return err
}

// readLogs reads what the machines did since the newest sample before the shift, but not
// further back than a week: what was promised longer ago is not this shift's.
func (g *shiftReading) readLogs(ctx context.Context) error {
	from := g.since()
	rows, err := g.tx.Query(ctx, `select x.machine_id, x.at, x.running, x.part_id, coalesce(p.family, '') from unnest($1::uuid[]) m (id) cross join lateral (
			(select * from machine_state where machine_id = m.id and at <= $2 order by at desc, id desc limit 1)
			union all (select * from machine_state where machine_id = m.id and at > $2 and at < $3)
		) x left join part p on p.id = x.part_id order by x.machine_id, x.at, x.id`, keys(g.byMachine), from, g.until)
	if err != nil {
		return fmt.Errorf("read machine logs: %w", err)
	}
	var m plant.MachineState
	var part *uuid.UUID
	var family string
	_, err = pgx.ForEachRow(rows, []any{&m.Machine, &m.At, &m.Running, &part, &family}, func() error {
		for _, c := range g.byMachine[m.Machine] {
			v := m
			v.Part = orNil(part)
			if c.PartID != uuid.Nil && v.Part != c.PartID || c.Family != "" && family != c.Family {
				v.Running = false
			}
			c.log = append(c.log, v)
		}
		return nil
	})
	return err
}

const longestBack = 7 * 24 * time.Hour

func (g *shiftReading) since() time.Time {
	from := g.span.From
	for _, c := range g.all {
		if !c.before.At.IsZero() && c.before.At.Before(from) {
			from = c.before.At
		}
	}
	if earliest := g.span.From.Add(-longestBack); from.Before(earliest) {
		return earliest
	}
	return from
}

func keys[V any](m map[uuid.UUID]V) []uuid.UUID {
	out := make([]uuid.UUID, 0, len(m))
	for id := range m {
		out = append(out, id)
	}
	return out
}

func (g *shiftReading) readChanges(ctx context.Context) error {
	rows, err := g.tx.Query(ctx, selectChange+` where h.machine_id = any($1) and h.happened_at >= $2 and h.happened_at < $3
		order by h.happened_at, h.id limit $4`, keys(g.byMachine), g.since(), g.until, mostOfShift)
	if err != nil {
		return fmt.Errorf("read changes: %w", err)
	}
	list, err := pgx.CollectRows(rows, scanChange)
	if err != nil {
		return fmt.Errorf("read changes: %w", err)
	}
	for _, h := range list {
		on := g.byMachine[h.Machine]
		for _, c := range on {
			c.changes = append(c.changes, h)
		}
		if h.HappenedAt.Before(g.span.From) || len(on) == 0 {
			continue
		}
		v := plant.ChangeOfShift{Change: h, StationName: g.stations[on[0].StationID].Name, MachineName: on[0].machine.Name}
		if c := g.byID[h.Characteristic]; c != nil {
			v.Name, v.Unit = c.Name, c.setup.Unit
		}
		sum := g.at(on[0].StationID)
		sum.Changes = append(sum.Changes, v)
	}
	return nil
}

func (g *shiftReading) readMatters(ctx context.Context) error {
	list, err := g.s.matters(ctx, g.tx, ` where m.station_id = any($1) and m.opened_at < $3 and (m.closed_at is null or m.closed_at >= $2)
		order by m.opened_at, m.id`, g.stationIDs, g.span.From, g.until)
	if err != nil {
		return err
	}
	quiets, err := g.readQuiets(ctx, list)
	if err != nil {
		return err
	}
	if err := g.s.progress(ctx, g.tx, list...); err != nil {
		return err
	}
	for _, m := range list {
		v := plant.MatterOfShift{Matter: *m, Quiet: quiets[m.ID], StationName: g.stations[m.Station].Name}
		if c := g.byID[m.Characteristic]; c != nil {
			v.Name, v.Setup = c.Name, c.setup
		}
		sum := g.at(m.Station)
		sum.Matters = append(sum.Matters, v)
	}
	return nil
}

// readCorrections reads the corrections and voids of the shift that took a signal back:
// both are recorded in one transaction, at one instant.
func (g *shiftReading) readCorrections(ctx context.Context) error {
	rows, err := g.tx.Query(ctx, `select s.characteristic_id, s.taken_at, s.recorded_at, s.voided, s.reason, g.panel, g.rule, g.side
		from (select distinct characteristic_id, judged_at from signal where characteristic_id = any($1) and withdrawn and judged_at >= $2 and judged_at < $3) w
		join subgroup s on s.characteristic_id = w.characteristic_id and s.recorded_at = w.judged_at and s.version > 1 and s.taken_at > $2::timestamptz - interval '8 days'
		join signal g on g.characteristic_id = w.characteristic_id and g.withdrawn and g.judged_at = w.judged_at
		order by s.recorded_at, s.taken_at, s.id, g.taken_at, g.panel, g.rule limit $4`, g.ids(), g.span.From, g.until, mostOfShift)
	if err != nil {
		return fmt.Errorf("read corrections: %w", err)
	}
	var c plant.CorrectionOfShift
	var f plant.Firing
	_, err = pgx.ForEachRow(rows, []any{&c.Characteristic, &c.TakenAt, &c.RecordedAt, &c.Voided, &c.Reason, &f.Panel, &f.Rule, &f.Side}, func() error {
		of := g.byID[c.Characteristic]
		sum := g.at(of.StationID)
		if n := len(sum.Corrections); n > 0 {
			if last := &sum.Corrections[n-1]; last.Characteristic == c.Characteristic && last.RecordedAt.Equal(c.RecordedAt) && last.TakenAt.Equal(c.TakenAt) {
				last.Withdrew = append(last.Withdrew, f)
				return nil
			}
		}
		v := c
		v.StationName, v.Name, v.Withdrew = g.stations[of.StationID].Name, of.Name, []plant.Firing{f}
		sum.Corrections = append(sum.Corrections, v)
		return nil
	})
	return err
}

const selectNotes = `select n.id, n.line_id, n.text, n.at, w.name, n.person_id, c.at, coalesce(x.name, '') from shift_note n
	join person w on w.id = n.person_id left join shift_note_cleared c on c.note_id = n.id left join person x on x.id = c.person_id`

func scanNote(r pgx.CollectableRow) (n plant.ShiftNote, err error) {
	var cleared *time.Time
	err = r.Scan(&n.ID, &n.Line, &n.Text, &n.WrittenAt, &n.WrittenBy, &n.WrittenByID, &cleared, &n.ClearedBy)
	n.ClearedAt = orZero(cleared)
	return n, err
}

func (g *shiftReading) readNotes(ctx context.Context) error {
	rows, err := g.tx.Query(ctx, selectNotes+` where n.line_id = any($1) and n.at < $3 and (c.at is null or c.at >= $2) order by n.at, n.id`,
		keys(g.lines), g.span.From, g.until)
	if err != nil {
		return fmt.Errorf("read notes: %w", err)
	}
	list, err := pgx.CollectRows(rows, scanNote)
	for _, n := range list {
		sum := g.lines[n.Line]
		sum.Notes = append(sum.Notes, n)
	}
	return wrapped("read notes", err)
}

func (g *shiftReading) readReaders(ctx context.Context) error {
	rows, err := g.tx.Query(ctx, `select h.line_id, p.name, h.at from handover_read h join person p on p.id = h.person_id
		where h.line_id = any($1) and h.shift_from = $2 order by h.at, p.name`, keys(g.lines), g.span.From)
	if err != nil {
		return fmt.Errorf("read who read it: %w", err)
	}
	var line uuid.UUID
	var who plant.ShiftReader
	_, err = pgx.ForEachRow(rows, []any{&line, &who.Name, &who.At}, func() error {
		sum := g.lines[line]
		sum.Readers = append(sum.Readers, who)
		return nil
	})
	return err
}

func (g *shiftReading) readContained(ctx context.Context) error {
	list, err := g.s.containments(ctx, g.tx, g.until, ` where c.station_id = any($1) and c.opened_at <= $2 and (c.settled_at is null or c.settled_at > $2)
		order by c.opened_at, c.id limit $3`, g.stationIDs, g.until, mostContained)
	for _, c := range list {
		sum := g.at(c.Station.ID)
		sum.Contained = append(sum.Contained, c)
	}
	return err
}

// readGauges reads the gauges whose check was overdue when the summary ends: by the newest
// good check before, or as the gauge says where none came since.
func (g *shiftReading) readGauges(ctx context.Context) error {
	p, err := g.s.Plant(ctx)
	if err != nil {
		return err
	}
	rows, err := g.tx.Query(ctx, `select used.station_id, used.characteristic_id, g.id, g.name, due.day
		from (select distinct on (cs.station_id, u.gauge_id) cs.station_id, u.gauge_id, cs.characteristic_id from characteristic_state cs
			join setup u on u.characteristic_id = cs.characteristic_id and u.version = cs.setup_version
			where cs.station_id = any($1) and u.gauge_id is not null order by cs.station_id, u.gauge_id, cs.characteristic_id) used
		join gauge g on g.id = used.gauge_id
		left join lateral (select k.at, k.next_check from gauge_check k where k.gauge_id = g.id and k.good and k.recorded_at < $2
			order by k.at desc, k.id desc limit 1) good on true
		cross join lateral (select case
			when not exists (select from gauge_check k where k.gauge_id = g.id and k.good and k.recorded_at >= $2) then g.next_check
			when good.next_check is not null then good.next_check
			when g.check_days > 0 then (good.at at time zone $3)::date + g.check_days end as day) due
		where due.day < ($2 at time zone $3)::date order by due.day, g.name, g.id`, g.stationIDs, g.until, p.Location.String())
	if err != nil {
		return fmt.Errorf("read gauges: %w", err)
	}
	var station, first uuid.UUID
	var gauge plant.GaugeNow
	_, err = pgx.ForEachRow(rows, []any{&station, &first, &gauge.ID, &gauge.Name, &gauge.NextCheck}, func() error {
		sum := g.at(station)
		sum.Gauges = append(sum.Gauges, plant.GaugeOfShift{Station: g.stations[station], First: first, Gauge: gauge})
		return nil
	})
	return wrapped("read gauges", err)
}

// ClosedMatters reads the matters that were closed between two instants, for the causes of
// a stretch; those of the given lines, or of all.
func (s *Store) ClosedMatters(ctx context.Context, from, to time.Time, lines ...uuid.UUID) ([]plant.Matter, error) {
	if lines == nil {
		lines = []uuid.UUID{}
	}
	rows, err := s.pool.Query(ctx, selectMatter+` where m.station_id in (select id from station where plant_id = $1 and (cardinality($2::uuid[]) = 0 or line_id = any($2)))
		and m.closed_at >= $3 and m.closed_at < $4 order by m.closed_at, m.id`, s.plant(), lines, from, to)
	if err != nil {
		return nil, fmt.Errorf("read closed matters: %w", err)
	}
	list, err := pgx.CollectRows(rows, scanMatter)
	if err != nil {
		return nil, fmt.Errorf("read closed matters: %w", err)
	}
	out := make([]plant.Matter, len(list))
	for i, m := range list {
		out[i] = *m
	}
	return out, nil
}
