package store

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
)

// MaxStretch is the largest number of subgroups that a history holds; asked for more,
// it returns the newest so many and says that it was clipped.
const MaxStretch = 20_000

// History reads a stretch of one characteristic's record with all that a chart of it
// shows. Its cost depends on the stretch, not on the record.
func (s *Store) History(ctx context.Context, characteristic uuid.UUID, stretch plant.Stretch) (plant.History, error) {
	h := plant.History{Revisions: map[uuid.UUID]plant.Revision{}, Setups: map[int]plant.Setup{}}
	var station uuid.UUID
	err := s.pool.QueryRow(ctx, `select station_id from characteristic where id = $1 and plant_id = $2`, characteristic, s.plant()).Scan(&station)
	if err != nil {
		return h, fmt.Errorf("read characteristic: %w", missing(err, "There is no such characteristic."))
	}
	st, err := s.stationStateWith(ctx, station, 25, characteristic) // its record stays when it is retired
	if err != nil {
		return h, err
	}
	h.Station, h.Line = st.Station, st.Line
	for _, c := range st.Characteristics {
		if c.ID == characteristic {
			h.State = c
		}
	}
	err = pgx.BeginTxFunc(ctx, s.pool, pgx.TxOptions{IsoLevel: pgx.RepeatableRead, AccessMode: pgx.ReadOnly}, func(tx pgx.Tx) error {
		if err := s.historyPoints(ctx, tx, &h, stretch); err != nil {
			return err
		}
		return s.historyAround(ctx, tx, &h, stretch)
	})
	if err != nil {
		return h, fmt.Errorf("read history: %w", err)
	}
	return h, nil
}

func (s *Store) historyPoints(ctx context.Context, tx pgx.Tx, h *plant.History, stretch plant.Stretch) error {
	limit := stretch.Last
	if limit <= 0 || limit > MaxStretch {
		limit = MaxStretch
	}
	from, to := any("-infinity"), any("infinity")
	if !stretch.From.IsZero() {
		from = stretch.From
	}
	if !stretch.To.IsZero() {
		to = stretch.To
	}
	rows, err := tx.Query(ctx, `select p.*, coalesce(n.name, '') from (
			select * from (select distinct on (taken_at, id) characteristic_id, `+pointColumns+`
				from subgroup where characteristic_id = $1 and taken_at between $2 and $3 order by taken_at desc, id desc, version desc) newest
			where not voided limit $4) p left join person n on n.id = p.person_id order by p.taken_at, p.id`,
		h.State.ID, from, to, limit+1)
	if err != nil {
		return fmt.Errorf("read points: %w", err)
	}
	h.Points, err = pgx.CollectRows(rows, func(r pgx.CollectableRow) (p plant.Point, err error) {
		var part, person *uuid.UUID
		err = r.Scan(&p.Characteristic, &p.TakenAt, &p.Subgroup, &p.Version, &p.Round, &p.Setup, &p.Stats.Decimals, &p.Readings, &p.Streams,
			&p.Stats.Sum, &p.Stats.Range, &p.Stats.SD, &p.Outside, &part, &p.Lot, &p.RecordedAt, &person, &p.ShortReason, &p.Reason, &p.Voided, &p.PersonName)
		p.Stats.N, p.Part, p.Person = len(p.Readings), orNil(part), orNil(person)
		return p, err
	})
	if err != nil {
		return fmt.Errorf("read points: %w", err)
	}
	if len(h.Points) > limit {
		h.Points = h.Points[1:]
		h.Clipped = stretch.Last == 0 || stretch.Last > MaxStretch
	}
	for _, p := range h.Points {
		if _, ok := h.Setups[p.Setup]; !ok {
			if h.Setups[p.Setup], err = s.setup(ctx, tx, h.State.ID, p.Setup); err != nil {
				return err
			}
		}
	}
	return nil
}

// historyAround reads what stands on a chart besides the points: signals, boundaries,
// revisions, changes and matters.
func (s *Store) historyAround(ctx context.Context, tx pgx.Tx, h *plant.History, stretch plant.Stretch) error {
	from, to := stretch.From, stretch.To
	if to.IsZero() {
		to = s.now()
		if n := len(h.Points); n > 0 && h.Points[n-1].TakenAt.After(to) {
			to = h.Points[n-1].TakenAt // a tablet's clock may be ahead by a little
		}
	}
	if len(h.Points) > 0 && (from.IsZero() || from.Before(h.Points[0].TakenAt)) {
		from = h.Points[0].TakenAt
	}
	id := h.State.ID
	rows, err := tx.Query(ctx, selectSignals+` from signal g where g.characteristic_id = $1 and g.taken_at between $2 and $3`, id, from, to)
	if err != nil {
		return fmt.Errorf("read signals: %w", err)
	}
	signals, err := scanSignals(rows)
	if err != nil {
		return err
	}
	attach(h.Points, signals)
	if h.Course, err = s.course(ctx, tx, id, from, to); err != nil {
		return err
	}
	want := []uuid.UUID{h.Course.Before.Revision}
	for _, b := range h.Course.Boundaries {
		want = append(want, b.Revision)
	}
	for _, rev := range want {
		fz, err := s.revision(ctx, tx, rev)
		if err != nil {
			return err
		}
		if fz != nil {
			h.Revisions[rev] = fz.Revision
		}
	}
	if h.Changes, err = s.changesOf(ctx, tx, h.State.MachineID, from, to); err != nil {
		return err
	}
	// Besides those that opened within the stretch there is at most the one that was open
	// when it begins.
	list, err := s.matters(ctx, tx, ` where m.id in (
			select id from matter where characteristic_id = $1 and opened_taken between $2 and $3
			union all select b.id from (select id, closed_at from matter where characteristic_id = $1 and opened_taken < $2 order by opened_taken desc limit 3) b
			where b.closed_at is null or b.closed_at >= $2) order by m.opened_taken`, id, from, to)
	for _, m := range list {
		h.Matters = append(h.Matters, *m)
	}
	return err
}

// course reads what is in force at from and the boundaries after it, up to and with to.
func (s *Store) course(ctx context.Context, q querier, id uuid.UUID, from, to time.Time) (plant.Course, error) {
	var c plant.Course
	var begun *time.Time
	var revision *uuid.UUID
	err := q.QueryRow(ctx, `select
		(select at from boundary where characteristic_id = $1 and at <= $2 order by at desc, id desc limit 1),
		(select revision_id from boundary where characteristic_id = $1 and at <= $2 and kind in ('revision', 'setup') order by at desc, id desc limit 1)`,
		id, from).Scan(&begun, &revision)
	if err != nil {
		return c, fmt.Errorf("read boundaries: %w", err)
	}
	c.Before = plant.Segment{From: orZero(begun), Revision: orNil(revision)}
	rows, err := q.Query(ctx, selectBoundaries+` where characteristic_id = $1 and at > $2 and at <= $3 order by at, id`, id, from, to)
	if err != nil {
		return c, fmt.Errorf("read boundaries: %w", err)
	}
	if c.Boundaries, err = pgx.CollectRows(rows, scanBoundary); err != nil {
		return c, fmt.Errorf("read boundaries: %w", err)
	}
	return c, nil
}

const selectChange = `select h.id, h.station_id, h.machine_id, h.characteristic_id, h.kind, h.size::text, h.note, h.prompted, h.happened_at,
		h.recorded_at, h.person_id, coalesce(p.name, ''), h.knob_id, h.knob_version, h.turned::text, h.moves, coalesce(k.name, ''), coalesce(k.unit, '')
	from change h left join person p on p.id = h.person_id left join knob k on k.id = h.knob_id and k.version = h.knob_version`

func scanChange(r pgx.CollectableRow) (c plant.Change, err error) {
	var characteristic, person, knob *uuid.UUID
	var size, turned *string
	var version *int
	var moves []byte
	if err = r.Scan(&c.ID, &c.Station, &c.Machine, &characteristic, &c.Kind, &size, &c.Note, &c.Prompted, &c.HappenedAt,
		&c.RecordedAt, &person, &c.PersonName, &knob, &version, &turned, &moves, &c.KnobName, &c.KnobUnit); err != nil {
		return c, err
	}
	c.Characteristic, c.Person, c.Knob = orNil(characteristic), orNil(person), orNil(knob)
	if version != nil {
		c.KnobVersion = *version
	}
	if moves != nil {
		if err := json.Unmarshal(moves, &c.Moves); err != nil {
			return c, err
		}
	}
	return c, errors.Join(into(&c.Size, size), into(&c.Turned, turned))
}

func (s *Store) changesOf(ctx context.Context, q querier, machine uuid.UUID, from, to time.Time) ([]plant.Change, error) {
	rows, err := q.Query(ctx, selectChange+` where h.machine_id = $1 and h.happened_at between $2 and $3 order by h.happened_at, h.id`, machine, from, to)
	if err != nil {
		return nil, fmt.Errorf("read changes: %w", err)
	}
	return pgx.CollectRows(rows, scanChange)
}

// Revisions lists the revisions of a characteristic, newest first.
func (s *Store) Revisions(ctx context.Context, characteristic uuid.UUID) ([]plant.Revision, error) {
	rows, err := s.pool.Query(ctx, selectRevision+` where r.characteristic_id = $1 order by r.number desc`, characteristic)
	if err != nil {
		return nil, fmt.Errorf("read revisions: %w", err)
	}
	return pgx.CollectRows(rows, scanRevision)
}

// RevisionAt reads what was in force at an instant; NotFound while it was learning.
func (s *Store) RevisionAt(ctx context.Context, characteristic uuid.UUID, at time.Time) (plant.Revision, error) {
	c, err := s.course(ctx, s.pool, characteristic, at, at)
	if err != nil {
		return plant.Revision{}, err
	}
	fz, err := s.revision(ctx, s.pool, c.Before.Revision)
	if err != nil {
		return plant.Revision{}, err
	}
	if fz == nil {
		return plant.Revision{}, plant.NotFoundf("", "No limits were in force then: the characteristic was learning.")
	}
	return fz.Revision, nil
}

// LastRound reads the newest round that was recorded at a station.
func (s *Store) LastRound(ctx context.Context, station uuid.UUID) (plant.RoundRecord, error) {
	var r plant.RoundRecord
	var person *uuid.UUID
	err := s.pool.QueryRow(ctx, `select r.id, r.taken_at, r.recorded_at, r.person_id, coalesce(p.name, '') from round r left join person p on p.id = r.person_id
		where r.station_id = $1 and r.plant_id = $2 order by r.taken_at desc, r.id desc limit 1`, station, s.plant()).
		Scan(&r.ID, &r.TakenAt, &r.RecordedAt, &person, &r.PersonName)
	if err != nil {
		return r, fmt.Errorf("read last round: %w", missing(err, "No round has been taken here yet."))
	}
	r.Station, r.Person = station, orNil(person)
	rows, err := s.pool.Query(ctx, `select distinct on (characteristic_id) characteristic_id, `+pointColumns+` from subgroup
		where characteristic_id in (select id from characteristic where station_id = $1) and taken_at = $2 and round_id = $3
		order by characteristic_id, version desc`, station, r.TakenAt, r.ID)
	if err != nil {
		return r, fmt.Errorf("read last round: %w", err)
	}
	return r, scanPoints(rows, func(p plant.Point) { r.Points = append(r.Points, p) })
}
