package store

import (
	"context"
	"fmt"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
	"holdfast/internal/plant/ledger"
)

const (
	selectMissed = `select id, station_id, characteristic_id, after_taken, due_at, found_at from overdue_round
		where station_id = any($1) and ended_at is null`
	// $2 are matters and $3 overdue rounds.
	selectSteps = `select matter_id, overdue_id, turn, step, fired_at from escalation_step
		where plant_id = $1 and matter_id = any($2) or overdue_id = any($3) order by turn, step`
	selectQuiets = `select distinct on (q.matter_id) q.id, q.matter_id, q.kind, q.at, q.until, q.reason, q.person_id, p.name,
			count(*) over (partition by q.matter_id)::int
		from quieting q join person p on p.id = q.person_id where q.matter_id = any($1) order by q.matter_id, q.at desc, q.id desc`
	selectAlarms = `select station_id, opened_at from matter where station_id = any($1) and alarmed and opened_at > $2 and opened_at <= $3
		order by opened_at`
)

// readEscalation reads how far the program has gone to find somebody for what is open at
// the stations, and how often they alarmed of late.
func (g *gathering) readEscalation(ctx context.Context, tx pgx.Tx, stations []uuid.UUID) error {
	var matters []uuid.UUID
	for _, c := range g.characteristics {
		if c.Matter != nil {
			matters = append(matters, c.Matter.ID)
		}
	}
	b := &pgx.Batch{}
	b.Queue(selectMissed, stations)
	b.Queue(selectQuiets, matters)
	b.Queue(selectAlarms, stations, g.now.Add(-plant.AlarmSpan), g.now)
	r := tx.SendBatch(ctx, b)
	missed, err := g.scanMissed(r)
	if err == nil {
		err = g.scanQuiets(r)
	}
	if err == nil {
		err = g.scanAlarms(r)
	}
	if e := r.Close(); err == nil {
		err = e
	}
	if err != nil {
		return fmt.Errorf("read escalation: %w", err)
	}
	for _, st := range g.stations {
		st.EscalationPlan = g.settings.Escalation.EscalationPlan
	}
	if len(matters)+len(missed) == 0 {
		return nil
	}
	return g.readSteps(ctx, tx, matters, missed)
}

func (g *gathering) scanMissed(r pgx.BatchResults) (ids []uuid.UUID, err error) {
	rows, err := r.Query()
	if err != nil {
		return nil, err
	}
	var o plant.OverdueRound
	var after *time.Time
	_, err = pgx.ForEachRow(rows, []any{&o.ID, &o.Station, &o.Characteristic, &after, &o.DueAt, &o.FoundAt}, func() error {
		v := o
		v.After = orZero(after)
		g.byStation[v.Station].Missed = &v
		ids = append(ids, v.ID)
		return nil
	})
	return ids, err
}

func (g *gathering) scanQuiets(r pgx.BatchResults) error {
	rows, err := r.Query()
	if err != nil {
		return err
	}
	var q plant.Quiet
	var turns int
	_, err = pgx.ForEachRow(rows, []any{&q.ID, &q.Matter, &q.Kind, &q.At, &q.Until, &q.Reason, &q.Person, &q.PersonName, &turns}, func() error {
		for _, c := range g.characteristics {
			if c.Matter != nil && c.Matter.ID == q.Matter {
				c.Escalation.Quiet, c.Escalation.Turn = q, turns
			}
		}
		return nil
	})
	return err
}

func (g *gathering) scanAlarms(r pgx.BatchResults) error {
	rows, err := r.Query()
	if err != nil {
		return err
	}
	var station uuid.UUID
	var at time.Time
	_, err = pgx.ForEachRow(rows, []any{&station, &at}, func() error {
		st := g.byStation[station]
		st.Alarms = append(st.Alarms, at)
		return nil
	})
	return err
}

func (g *gathering) readSteps(ctx context.Context, tx pgx.Tx, matters, missed []uuid.UUID) error {
	fired, err := readSteps(ctx, tx, g.s.plant(), matters, missed)
	if err != nil {
		return err
	}
	for _, st := range g.stations {
		if st.Missed != nil {
			st.Missed.Escalation.Fired = fired[st.Missed.ID]
		}
	}
	for _, c := range g.characteristics {
		if c.Matter != nil {
			c.Escalation.Fired = fired[c.Matter.ID]
		}
	}
	return nil
}

// readSteps reads the fired steps of matters and overdue rounds by their ids.
func readSteps(ctx context.Context, q querier, plantID uuid.UUID, matters, missed []uuid.UUID) (map[uuid.UUID][]plant.FiredStep, error) {
	rows, err := q.Query(ctx, selectSteps, plantID, matters, missed)
	if err != nil {
		return nil, fmt.Errorf("read escalation steps: %w", err)
	}
	out := map[uuid.UUID][]plant.FiredStep{}
	var matter, overdue *uuid.UUID
	var f plant.FiredStep
	_, err = pgx.ForEachRow(rows, []any{&matter, &overdue, &f.Turn, &f.Step, &f.At}, func() error {
		of := orNil(matter)
		if matter == nil {
			of = orNil(overdue)
		}
		out[of] = append(out[of], f)
		return nil
	})
	if err != nil {
		return nil, fmt.Errorf("read escalation steps: %w", err)
	}
	return out, nil
}

// escalationOf reads how far one matter has escalated.
func (s *Store) escalationOf(ctx context.Context, q querier, matter uuid.UUID) (plant.Escalation, error) {
	var e plant.Escalation
	fired, err := readSteps(ctx, q, s.plant(), []uuid.UUID{matter}, nil)
	if err != nil {
		return e, err
	}
	e.Fired = fired[matter]
	rows, err := q.Query(ctx, selectQuiets, []uuid.UUID{matter})
	if err != nil {
		return e, fmt.Errorf("read quieting: %w", err)
	}
	v := &e.Quiet
	_, err = pgx.ForEachRow(rows, []any{&v.ID, &v.Matter, &v.Kind, &v.At, &v.Until, &v.Reason, &v.Person, &v.PersonName, &e.Turn}, func() error { return nil })
	if err != nil {
		return e, fmt.Errorf("read quieting: %w", err)
	}
	return e, nil
}

// KeepOverdue brings the record of overdue rounds in line with what the states say: a
// round that is missed and not on record is found, one on record that is missed no longer
// has ended. Several servers may do this at once.
func (s *Store) KeepOverdue(ctx context.Context, states []plant.StationState) error {
	now := s.now()
	for i := range states {
		st := &states[i]
		found, missing := st.OverdueNow(now)
		switch {
		case st.Missed != nil && (!missing || found.ID != st.Missed.ID):
			if _, err := s.pool.Exec(ctx, `update overdue_round set ended_at = $2 where id = $1 and ended_at is null`, st.Missed.ID, now); err != nil {
				return fmt.Errorf("end overdue round: %w", err)
			}
			s.changed(st.ID)
		case missing && st.Missed == nil:
			// The same sample missed again, after the machine made something else for a
			// while, goes on where it was.
			_, err := s.pool.Exec(ctx, `insert into overdue_round (id, plant_id, station_id, characteristic_id, after_taken, due_at, found_at)
				values ($1, $2, $3, $4, $5, $6, $7)
				on conflict on constraint overdue_round_once do update set ended_at = null where overdue_round.ended_at is not null`,
				newID(), s.plant(), st.ID, found.Characteristic, timeOrNull(found.After), found.DueAt, now)
			if violates(err, "overdue_round_one_open") {
				continue // another server has found a round here
			}
			if err != nil {
				return fmt.Errorf("note overdue round: %w", err)
			}
			s.changed(st.ID)
		}
	}
	return nil
}

// FireStep fires a step that is due, with the messages that leave because of it, in one
// transaction, and reports whether it was this call that fired it. Whatever has happened
// since the call was read counts: what was taken, closed, quieted or fired meanwhile is
// left alone.
func (s *Store) FireStep(ctx context.Context, c plant.Call, messages []plant.Message) (fired bool, err error) {
	ctx, cancel := s.saving(ctx)
	defer cancel()
	set, err := s.Settings(ctx)
	if err != nil {
		return false, err
	}
	err = s.inTx(ctx, func(tx pgx.Tx) error {
		now := s.now()
		matter, overdue := uuid.Nil, uuid.Nil
		var stillOn bool
		if c.Matter != nil {
			matter = c.Matter.ID
			stillOn, err = s.matterCalls(ctx, tx, c, now)
		} else {
			overdue = c.Overdue.ID
			stillOn, err = s.roundCalls(ctx, tx, c)
		}
		if err != nil || !stillOn {
			return err
		}
		id := newID()
		tag, err := tx.Exec(ctx, `insert into escalation_step (id, plant_id, station_id, matter_id, overdue_id, turn, step, kind, fired_at)
			values ($1, $2, $3, $4, $5, $6, $7, $8, $9) on conflict on constraint escalation_step_once do nothing`,
			id, s.plant(), c.Station.ID, orNull(matter), orNull(overdue), c.Turn, c.Step, string(c.Kind), now)
		if err != nil {
			return fmt.Errorf("insert escalation step: %w", err)
		}
		if fired = tag.RowsAffected() == 1; !fired {
			return nil
		}
		body := ledger.EscalationStep{Step: id, Station: c.Station.ID, Characteristic: c.Characteristic.ID, Matter: ledger.ID(matter),
			Overdue: ledger.ID(overdue), Calls: string(c.Kind), Turn: c.Turn, Number: int(c.Step), At: ledger.Time(now)}
		if c.Overdue != nil {
			body.DueAt = ledger.At(c.Overdue.DueAt)
		}
		for _, m := range messages {
			body.Targets = append(body.Targets, m.Target)
		}
		if err := s.putOut(ctx, tx, id, messages, now, set.Escalation.GiveUp()); err != nil {
			return err
		}
		return s.appendPlantChain(ctx, tx, body)
	})
	if err != nil {
		return false, fmt.Errorf("fire step %d: %w", c.Step, err)
	}
	if fired {
		s.changed(c.Station.ID)
	}
	return fired, nil
}

// matterCalls locks the matter against being taken, closed or quieted and reports whether
// it still calls as it did. The lock leaves its signals free to be written.
func (s *Store) matterCalls(ctx context.Context, tx pgx.Tx, c plant.Call, now time.Time) (bool, error) {
	if _, err := tx.Exec(ctx, `select from matter where id = $1 for no key update`, c.Matter.ID); err != nil {
		return false, fmt.Errorf("lock matter: %w", err)
	}
	m, err := s.matter(ctx, tx, c.Matter.ID)
	if err != nil {
		return false, err
	}
	e, err := s.escalationOf(ctx, tx, m.ID)
	if err != nil {
		return false, err
	}
	_, on := m.EscalatesFrom(e, now)
	return on && e.Turn == c.Turn, nil
}

// roundCalls locks the overdue round and reports whether its sample is still missing.
func (s *Store) roundCalls(ctx context.Context, tx pgx.Tx, c plant.Call) (on bool, err error) {
	if _, err := tx.Exec(ctx, `select from overdue_round where id = $1 for no key update`, c.Overdue.ID); err != nil {
		return false, fmt.Errorf("lock overdue round: %w", err)
	}
	err = tx.QueryRow(ctx, `select exists (select from overdue_round o join characteristic_state cs on cs.characteristic_id = o.characteristic_id
		where o.id = $1 and o.ended_at is null and cs.last_taken is not distinct from o.after_taken)`, c.Overdue.ID).Scan(&on)
	if err != nil {
		return false, fmt.Errorf("look at overdue round: %w", err)
	}
	return on, nil
}

// QuietMatter keeps a matter quiet until a stated time, or ends a quiet. Sent again with
// the same id it changes nothing.
func (s *Store) QuietMatter(ctx context.Context, r plant.QuietRequest) error {
	var err error
	if r.Reason, err = plant.CleanTextWithin("reason", r.Reason, 200); err != nil {
		return err
	}
	var there bool
	if err := s.pool.QueryRow(ctx, `select exists (select from quieting where id = $1 and matter_id = $2)`, r.ID, r.Matter).Scan(&there); err != nil {
		return fmt.Errorf("look for quieting: %w", err)
	}
	if there {
		return nil
	}
	set, err := s.Settings(ctx)
	if err != nil {
		return err
	}
	return s.onMatter(ctx, r.Matter, r.Version, func(tx pgx.Tx, _ *locked, m *plant.Matter) error {
		e, err := s.escalationOf(ctx, tx, m.ID)
		if err != nil {
			return err
		}
		q, err := m.Quieten(r, e, set.Escalation.LongestQuiet(), s.now())
		if err != nil {
			return err
		}
		// The version changes with it, so that a step that is being fired waits and sees it.
		if _, err := tx.Exec(ctx, `update matter set version = version + 1 where id = $1`, m.ID); err != nil {
			return fmt.Errorf("quiet matter: %w", err)
		}
		if _, err := tx.Exec(ctx, `insert into quieting (id, plant_id, matter_id, kind, at, until, reason, person_id)
			values ($1, $2, $3, $4, $5, $6, $7, $8)`, q.ID, s.plant(), m.ID, string(q.Kind), q.At, q.Until, q.Reason, q.Person); err != nil {
			return fmt.Errorf("insert quieting: %w", err)
		}
		return s.appendPlantChain(ctx, tx, ledger.Quieting{Quieting: q.ID, Matter: m.ID, Calls: string(q.Kind),
			At: ledger.Time(q.At), Until: ledger.Time(q.Until), Reason: q.Reason, Person: q.Person})
	})
}
