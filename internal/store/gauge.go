package store

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
	"holdfast/internal/plant/ledger"
)

// selectGauge reads gauges with how far they can be trusted.
const selectGauge = `select g.id, g.name, g.resolution::text, g.next_check, g.check_days, newest.at, good.at,
		(select min(k.at) from gauge_check k where k.gauge_id = g.id and not k.good and k.at > coalesce(good.at, '-infinity'))
	from gauge g
	left join lateral (select k.at from gauge_check k where k.gauge_id = g.id order by k.at desc, k.id desc limit 1) newest on true
	left join lateral (select k.at from gauge_check k where k.gauge_id = g.id and k.good order by k.at desc, k.id desc limit 1) good on true`

func scanGauge(r pgx.CollectableRow) (g plant.GaugeNow, err error) {
	var resolution *string
	var next, newest, good, failed *time.Time
	if err = r.Scan(&g.ID, &g.Name, &resolution, &next, &g.CheckDays, &newest, &good, &failed); err != nil {
		return g, err
	}
	g.NextCheck, g.LastCheck, g.LastGood, g.FailedSince = orZero(next), orZero(newest), orZero(good), orZero(failed)
	g.Resolution, err = decimalFrom(resolution)
	return g, err
}

// Gauges lists the gauges that are in use, with what is measured with each: at the given
// stations, or everywhere when none is given.
func (s *Store) Gauges(ctx context.Context, stations ...uuid.UUID) ([]plant.GaugeUse, error) {
	if stations == nil {
		stations = []uuid.UUID{}
	}
	rows, err := s.pool.Query(ctx, selectGauge+` where g.plant_id = $1 and exists (select from characteristic_state cs
			join setup u on u.characteristic_id = cs.characteristic_id and u.version = cs.setup_version
			where u.gauge_id = g.id and (cardinality($2::uuid[]) = 0 or cs.station_id = any($2)))
		order by g.name, g.id`, s.plant(), stations)
	if err != nil {
		return nil, fmt.Errorf("read gauges: %w", err)
	}
	found, err := pgx.CollectRows(rows, scanGauge)
	if err != nil {
		return nil, fmt.Errorf("read gauges: %w", err)
	}
	out := make([]plant.GaugeUse, len(found))
	ids, at := make([]uuid.UUID, len(found)), make(map[uuid.UUID]int, len(found))
	for i, g := range found {
		out[i].GaugeNow, ids[i], at[g.ID] = g, g.ID, i
	}
	rows, err = s.pool.Query(ctx, `select u.gauge_id, c.id, c.machine_id, c.name, st.id, st.line_id, st.name
		from characteristic_state cs join setup u on u.characteristic_id = cs.characteristic_id and u.version = cs.setup_version
		join characteristic c on c.id = cs.characteristic_id join station st on st.id = c.station_id join line l on l.id = st.line_id
		where u.gauge_id = any($1) order by l.position, l.name, st.position, st.name, c.position, c.name`, ids)
	if err != nil {
		return nil, fmt.Errorf("read use of gauges: %w", err)
	}
	var gauge uuid.UUID
	var c plant.Characteristic
	var st plant.Station
	_, err = pgx.ForEachRow(rows, []any{&gauge, &c.ID, &c.MachineID, &c.Name, &st.ID, &st.LineID, &st.Name}, func() error {
		g := &out[at[gauge]]
		c.StationID = st.ID
		g.Characteristics = append(g.Characteristics, c)
		if n := len(g.Stations); n == 0 || g.Stations[n-1].ID != st.ID {
			g.Stations = append(g.Stations, st)
		}
		return nil
	})
	if err != nil {
		return nil, fmt.Errorf("read use of gauges: %w", err)
	}
	return out, nil
}

// GaugeChecks reads the newest checks of a gauge, newest first.
func (s *Store) GaugeChecks(ctx context.Context, gauge uuid.UUID, most int) ([]plant.GaugeCheckRecord, error) {
	rows, err := s.pool.Query(ctx, selectChecks+` where k.gauge_id = $1 and k.plant_id = $2 order by k.at desc, k.id desc limit $3`, gauge, s.plant(), most)
	if err != nil {
		return nil, fmt.Errorf("read gauge checks: %w", err)
	}
	return pgx.CollectRows(rows, scanCheck)
}

const selectChecks = `select k.id, k.gauge_id, k.at, k.good, k.master::text, k.reading::text, k.note, k.next_check, k.recorded_at, k.person_id, coalesce(p.name, '')
	from gauge_check k left join person p on p.id = k.person_id`

func scanCheck(r pgx.CollectableRow) (c plant.GaugeCheckRecord, err error) {
	var master, reading *string
	var next *time.Time
	var person *uuid.UUID
	if err = r.Scan(&c.ID, &c.Gauge, &c.At, &c.Good, &master, &reading, &c.Note, &next, &c.RecordedAt, &person, &c.PersonName); err != nil {
		return c, err
	}
	c.NextCheck, c.Person = orZero(next), orNil(person)
	return c, errors.Join(into(&c.Master, master), into(&c.Reading, reading))
}

// CheckGauge records a check of a gauge. A good one moves the day of the next; a failed
// one puts a line on the matter of each characteristic that is measured with the gauge,
// and opens one where none is open. The same check sent again is no error; the same id
// with other content is a Conflict.
func (s *Store) CheckGauge(ctx context.Context, c plant.GaugeCheckRecord) error {
	now := s.now()
	c = c.Clean()
	digest := c.Digest() // as it was sent: without a time a double tap is one check
	if c.RecordedAt = now; c.At.IsZero() {
		c.At = now
	}
	if err := c.Check(now); err != nil {
		return err
	}
	ctx, cancel := s.saving(ctx)
	defer cancel()
	p, err := s.Plant(ctx)
	if err != nil {
		return err
	}
	var stations []uuid.UUID
	err = s.inTx(ctx, func(tx pgx.Tx) error {
		rows, err := tx.Query(ctx, `select cs.characteristic_id from characteristic_state cs
			join setup u on u.characteristic_id = cs.characteristic_id and u.version = cs.setup_version
			where u.gauge_id = $1 and cs.plant_id = $2 order by cs.characteristic_id`, c.Gauge, s.plant())
		if err != nil {
			return fmt.Errorf("read use of gauge: %w", err)
		}
		ids, err := pgx.CollectRows(rows, pgx.RowTo[uuid.UUID])
		if err != nil {
			return fmt.Errorf("read use of gauge: %w", err)
		}
		held, err := s.lock(ctx, tx, ids...)
		if err != nil {
			return err
		}
		entered, err := s.enterCheck(ctx, tx, c, digest, p.Location)
		if err != nil || !entered {
			return err
		}
		b := &pgx.Batch{}
		for _, id := range ids {
			l := held[id]
			stations = append(stations, l.station)
			if !c.Good {
				at := position{c.At, c.ID}
				if l.matter == uuid.Nil {
					if err := s.openMatter(b, l, at, true, now); err != nil {
						return err
					}
				}
				s.insertSignal(b, l, at, plant.Firing{Panel: plant.GaugeCheck, Rule: plant.GaugeFailed}, uuid.Nil, l.matter, false, now)
			}
			s.save(b, l)
		}
		if err := tx.SendBatch(ctx, b).Close(); err != nil {
			return fmt.Errorf("write gauge check: %w", err)
		}
		return s.appendPlantChain(ctx, tx, checkBody(c))
	})
	if err == nil && len(stations) > 0 {
		s.changed(stations...)
	}
	return err
}

// enterCheck writes the check and the day of the next; false when it is on record.
func (s *Store) enterCheck(ctx context.Context, tx pgx.Tx, c plant.GaugeCheckRecord, digest [32]byte, zone *time.Location) (bool, error) {
	tag, err := tx.Exec(ctx, `insert into gauge_check (id, plant_id, gauge_id, at, good, master, reading, note, next_check, recorded_at, person_id, digest)
		select $1, $2, g.id, $4, $5, $6::text::numeric, $7::text::numeric, $8, $9, $10, $11, $12 from gauge g where g.id = $3 and g.plant_id = $2
		on conflict (id) do nothing`,
		c.ID, s.plant(), c.Gauge, c.At, c.Good, decimalOrNull(c.Master), decimalOrNull(c.Reading), c.Note, timeOrNull(c.NextCheck), c.RecordedAt, orNull(c.Person), digest[:])
	if err != nil {
		return false, fmt.Errorf("insert gauge check: %w", err)
	}
	if tag.RowsAffected() == 0 {
		var have []byte
		if err := tx.QueryRow(ctx, `select digest from gauge_check where id = $1`, c.ID).Scan(&have); err != nil {
			return false, fmt.Errorf("read gauge: %w", missing(err, "There is no such gauge."))
		}
		if !bytes.Equal(have, digest[:]) {
			return false, &plant.Error{Kind: plant.Conflict, Message: "Another check was sent under this number. Look at the list of checks."}
		}
		return false, nil
	}
	if !c.Good {
		return true, nil
	}
	var g plant.Gauge
	if err := tx.QueryRow(ctx, `select check_days from gauge where id = $1`, c.Gauge).Scan(&g.CheckDays); err != nil {
		return false, fmt.Errorf("read gauge: %w", err)
	}
	// Of checks that are recorded out of order the newest says when the next is.
	_, err = tx.Exec(ctx, `update gauge set next_check = $2 where id = $1
		and not exists (select from gauge_check k where k.gauge_id = $1 and k.good and k.at > $3)`,
		c.Gauge, timeOrNull(g.NextAfter(c, zone)), c.At)
	if err != nil {
		return false, fmt.Errorf("move next gauge check: %w", err)
	}
	return true, nil
}

func checkBody(c plant.GaugeCheckRecord) ledger.GaugeCheck {
	body := ledger.GaugeCheck{Check: c.ID, Gauge: c.Gauge, At: ledger.Time(c.At), Good: c.Good, Note: c.Note,
		RecordedAt: ledger.Time(c.RecordedAt), Person: ledger.ID(c.Person)}
	if c.Master != nil {
		body.Master = c.Master.String()
	}
	if c.Reading != nil {
		body.Reading = c.Reading.String()
	}
	if !c.NextCheck.IsZero() {
		body.NextCheck = c.NextCheck.Format(time.DateOnly)
	}
	return body
}
