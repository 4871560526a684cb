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

const selectMatter = `select m.id, m.station_id, m.characteristic_id, m.opened_at, m.opened_taken, m.opened_subgroup, m.alarmed,
		m.taken_by, coalesce(t.name, ''), m.taken_at, m.cause, m.action, m.restart_at, m.closed_by, coalesce(c.name, ''), m.closed_at,
		m.closing, m.version
	from matter m left join person t on t.id = m.taken_by left join person c on c.id = m.closed_by`

func scanMatter(r pgx.CollectableRow) (*plant.Matter, error) {
	m := &plant.Matter{}
	var takenBy, closedBy *uuid.UUID
	var takenAt, restartAt, closedAt *time.Time
	err := r.Scan(&m.ID, &m.Station, &m.Characteristic, &m.OpenedAt, &m.OpenedTaken, &m.OpenedSubgroup, &m.Alarmed,
		&takenBy, &m.TakenByName, &takenAt, &m.Cause, &m.Action, &restartAt, &closedBy, &m.ClosedByName, &closedAt, &m.Closing, &m.Version)
	m.TakenBy, m.TakenAt = orNil(takenBy), orZero(takenAt)
	m.RestartAt, m.ClosedBy, m.ClosedAt = orZero(restartAt), orNil(closedBy), orZero(closedAt)
	return m, err
}

// selectLines gathers the signals of matters into lines, in the order in which they
// first fired. A line is withdrawn when none of its firings stands.
const selectLines = `select matter_id, panel, rule, side, min(taken_at), max(taken_at), count(*)::int, bool_or(found_late), bool_and(withdrawn)
	from signal where matter_id = any($1) group by matter_id, panel, rule, side order by matter_id, min(taken_at), panel desc, rule`

func readLines(rows pgx.Rows, matters map[uuid.UUID]*plant.Matter) error {
	var id uuid.UUID
	var l plant.MatterLine
	_, err := pgx.ForEachRow(rows, []any{&id, &l.Panel, &l.Rule, &l.Side, &l.First, &l.Last, &l.Count, &l.FoundLate, &l.Withdrawn}, func() error {
		if m := matters[id]; m != nil {
			m.Lines = append(m.Lines, l)
		}
		return nil
	})
	if err != nil {
		return fmt.Errorf("read lines of matters: %w", err)
	}
	return nil
}

// matters reads the matters that a condition picks, with their lines.
func (s *Store) matters(ctx context.Context, q querier, where string, args ...any) ([]*plant.Matter, error) {
	rows, err := q.Query(ctx, selectMatter+where, args...)
	if err != nil {
		return nil, fmt.Errorf("read matters: %w", err)
	}
	list, err := pgx.CollectRows(rows, scanMatter)
	if err != nil {
		return nil, fmt.Errorf("read matters: %w", err)
	}
	if len(list) == 0 {
		return nil, nil
	}
	byID := make(map[uuid.UUID]*plant.Matter, len(list))
	ids := make([]uuid.UUID, len(list))
	for i, m := range list {
		byID[m.ID], ids[i] = m, m.ID
	}
	rows, err = q.Query(ctx, selectLines, ids)
	if err != nil {
		return nil, fmt.Errorf("read lines of matters: %w", err)
	}
	return list, readLines(rows, byID)
}

// Matter reads one matter with what people did about it.
func (s *Store) Matter(ctx context.Context, id uuid.UUID) (plant.Matter, error) {
	m, err := s.matter(ctx, s.pool, id)
	if err != nil {
		return plant.Matter{}, err
	}
	return *m, nil
}

func (s *Store) matter(ctx context.Context, c conn, id uuid.UUID) (*plant.Matter, error) {
	list, err := s.matters(ctx, c, ` where m.id = $1 and m.plant_id = $2`, id, s.plant())
	if err != nil {
		return nil, err
	}
	if len(list) == 0 {
		return nil, plant.NotFoundf("", "There is no such matter.")
	}
	return list[0], s.progress(ctx, c, list[0])
}

// anyVersion is for what does not depend on what else people did about a matter.
const anyVersion = -1

// onMatter runs f on an open matter while its characteristic is locked. Version is the
// one that the person saw; when another was quicker it is a Conflict.
func (s *Store) onMatter(ctx context.Context, id uuid.UUID, version int, f func(tx pgx.Tx, l *locked, m *plant.Matter) error) error {
	ctx, cancel := s.saving(ctx)
	defer cancel()
	var characteristic, station uuid.UUID
	err := s.pool.QueryRow(ctx, `select characteristic_id, station_id from matter where id = $1 and plant_id = $2`, id, s.plant()).Scan(&characteristic, &station)
	if err != nil {
		return fmt.Errorf("read matter: %w", missing(err, "There is no such matter."))
	}
	err = s.inTx(ctx, func(tx pgx.Tx) error {
		l, err := s.lockOne(ctx, tx, characteristic)
		if err != nil {
			return err
		}
		m, err := s.matter(ctx, tx, id)
		if err != nil {
			return err
		}
		switch {
		case !m.Open():
			return plant.Conflictf("", "%s has closed this already.", m.ClosedByName)
		case version != anyVersion && m.Version != version:
			return plant.Conflictf("", "Somebody was quicker. This is how it stands now.")
		}
		return f(tx, l, m)
	})
	if err != nil {
		return err
	}
	s.changed(station)
	return nil
}

// TakeMatter records who took a matter. Taking over from somebody else is allowed and
// recorded as well.
func (s *Store) TakeMatter(ctx context.Context, id uuid.UUID, version int, person uuid.UUID) error {
	return s.onMatter(ctx, id, version, func(tx pgx.Tx, l *locked, m *plant.Matter) error {
		now := s.now()
		b := &pgx.Batch{}
		b.Queue(`update matter set taken_by = $2, taken_at = $3, version = version + 1 where id = $1`, id, person, now)
		if err := s.seal(b, l, ledger.Matter{Matter: id, Step: "taken", At: ledger.Time(now), Person: ledger.ID(person)}); err != nil {
			return err
		}
		s.save(b, l)
		return tx.SendBatch(ctx, b).Close()
	})
}

// CloseMatter says what was found and done and ends the matter, if its plans demand
// nothing more. A fix sets the restart mark at its instant: there the fold starts afresh,
// and what was taken since is judged again. Where a confirming round or a second person
// is demanded the fix is recorded and the matter waits; what signals behind the mark
// then shows that the fix did not hold. Once everything is there it is closed by closing
// it again, whatever is said then.
func (s *Store) CloseMatter(ctx context.Context, c plant.ClosingRequest) error {
	var err error
	if c.Cause, err = plant.CleanTextWithin("cause", c.Cause, 200); err != nil {
		return err
	}
	if c.Action, err = plant.CleanTextWithin("action", c.Action, 500); err != nil {
		return err
	}
	c.FixedAt = plant.CutTime(c.FixedAt)
	return s.onMatter(ctx, c.Matter, c.Version, func(tx pgx.Tx, l *locked, m *plant.Matter) error {
		now := s.now()
		out, err := m.Conclude(c, now)
		if err != nil {
			return err
		}
		b := &pgx.Batch{}
		fix := m.Progress().Fix
		if out.Fix != nil {
			fix = out.Fix
			if err := s.insertFix(b, l, m, fix); err != nil {
				return err
			}
		}
		if out.Closing != "" {
			if err := s.endMatter(ctx, tx, b, l, m, fix, out.Closing, c.Person, now); err != nil {
				return err
			}
		}
		if out.Fix != nil && !fix.RestartAt.IsZero() {
			if err := s.addBoundary(ctx, tx, b, l, plant.Boundary{ID: newID(), At: fix.RestartAt, Kind: plant.ByRestart}, now); err != nil {
				return err
			}
			// The refold must be written before what still stands can be read.
			if err := tx.SendBatch(ctx, b).Close(); err != nil {
				return fmt.Errorf("write restart: %w", err)
			}
			b = &pgx.Batch{}
			if out.Closing != "" {
				if err := s.carryOver(ctx, tx, b, l, m.ID, fix.RestartAt, now); err != nil {
					return err
				}
			}
		}
		s.save(b, l)
		return tx.SendBatch(ctx, b).Close()
	})
}

// insertFix records what was found and done.
func (s *Store) insertFix(b *pgx.Batch, l *locked, m *plant.Matter, f *plant.Fix) error {
	f.ID = newID()
	b.Queue(`insert into matter_fix (id, plant_id, matter_id, number, cause_id, cause, action, restart_at, at, person_id)
		values ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10)`,
		f.ID, s.plant(), m.ID, f.Number, orNull(f.CauseID), f.Cause, f.Action, timeOrNull(f.RestartAt), f.At, f.Person)
	b.Queue(`update matter set version = version + 1 where id = $1`, m.ID)
	return s.seal(b, l, ledger.MatterFix{Fix: f.ID, Matter: m.ID, Number: f.Number, Cause: f.Cause, CauseID: ledger.ID(f.CauseID), Action: f.Action,
		RestartAt: ledger.At(f.RestartAt), At: ledger.Time(f.At), Person: f.Person})
}

// endMatter closes a matter. fix is nil when it is withdrawn.
func (s *Store) endMatter(ctx context.Context, tx pgx.Tx, b *pgx.Batch, l *locked, m *plant.Matter, fix *plant.Fix, closing plant.Closing, person uuid.UUID, now time.Time) error {
	if fix == nil || closing == plant.WithdrawnBy {
		fix = &plant.Fix{Person: person, At: now}
	}
	b.Queue(`update matter set cause = $2, cause_id = $3, action = $4, described_by = $5, described_at = $6,
			restart_at = $7, closed_by = $8, closed_at = $9, closing = $10, version = version + 1 where id = $1`,
		m.ID, fix.Cause, orNull(fix.CauseID), fix.Action, fix.Person, fix.At, timeOrNull(fix.RestartAt), person, now, string(closing))
	l.matter = uuid.Nil
	setup, err := s.setup(ctx, tx, l.id, l.setupVersion)
	if err != nil {
		return err
	}
	settleWithMatter(b, m.ID, m.HoldsSuspects(setup), now)
	body := ledger.Matter{Matter: m.ID, Step: "closed", At: ledger.Time(now), Person: ledger.ID(person),
		Cause: fix.Cause, Action: fix.Action, RestartAt: ledger.At(fix.RestartAt), Closing: string(closing)}
	if closing != plant.WithdrawnBy {
		body.Plans = m.Progress().Plans
	}
	return s.seal(b, l, body)
}

// carryOver moves the signals of a closed matter that stand behind its restart mark
// into a matter of their own: the fix did not end them.
func (s *Store) carryOver(ctx context.Context, tx pgx.Tx, b *pgx.Batch, l *locked, closed uuid.UUID, restart, now time.Time) error {
	var first position
	err := tx.QueryRow(ctx, `select taken_at, subgroup_id from signal where matter_id = $1 and taken_at >= $2 and not withdrawn
		order by taken_at, subgroup_id limit 1`, closed, restart).Scan(&first.taken, &first.id)
	if missing(err, "") != err {
		return nil // nothing stands there
	}
	if err != nil {
		return fmt.Errorf("look behind the restart: %w", err)
	}
	if l.matter == uuid.Nil {
		if err := s.openMatter(b, l, first, false, now); err != nil {
			return err
		}
	}
	b.Queue(`update signal set matter_id = $2 where matter_id = $1 and taken_at >= $3 and not withdrawn`, closed, l.matter, restart)
	return nil
}
