package store

import (
	"context"
	"fmt"
	"sort"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
)

// A Difference is a judgement on record that is not what one fold over the finished
// history gives.
type Difference struct {
	Characteristic uuid.UUID
	What           string
}

// CheckJudgements folds the whole record of every characteristic anew, from its facts
// alone, and compares: the signals that stand, the checkpoints, the state row. An empty
// answer means that whatever the order of arrivals, corrections and restarts was, the
// stored judgement is that of one fold. It writes nothing.
func (s *Store) CheckJudgements(ctx context.Context) (subgroups int64, out []Difference, err error) {
	err = pgx.BeginTxFunc(ctx, s.pool, pgx.TxOptions{IsoLevel: pgx.RepeatableRead, AccessMode: pgx.ReadOnly}, func(tx pgx.Tx) error {
		rows, err := tx.Query(ctx, `select characteristic_id from characteristic_state order by characteristic_id`)
		if err != nil {
			return fmt.Errorf("list characteristics: %w", err)
		}
		ids, err := pgx.CollectRows(rows, pgx.RowTo[uuid.UUID])
		if err != nil {
			return fmt.Errorf("list characteristics: %w", err)
		}
		for _, id := range ids {
			c := &judgementCheck{s: s, id: id}
			if err := c.run(ctx, tx); err != nil {
				return err
			}
			subgroups += c.subgroups
			out = append(out, c.differences...)
		}
		return nil
	})
	return subgroups, out, err
}

type judgementCheck struct {
	s           *Store
	id          uuid.UUID
	subgroups   int64
	differences []Difference
}

func (c *judgementCheck) differs(format string, args ...any) {
	c.differences = append(c.differences, Difference{c.id, fmt.Sprintf(format, args...)})
}

func (c *judgementCheck) run(ctx context.Context, tx pgx.Tx) error {
	rows, err := tx.Query(ctx, selectBoundaries+` where characteristic_id = $1 order by at, id`, c.id)
	if err != nil {
		return fmt.Errorf("read boundaries: %w", err)
	}
	var course plant.Course
	if course.Boundaries, err = pgx.CollectRows(rows, scanBoundary); err != nil {
		return fmt.Errorf("read boundaries: %w", err)
	}
	standing, err := c.standing(ctx, tx)
	if err != nil {
		return err
	}
	checkpoints, err := c.checkpoints(ctx, tx)
	if err != nil {
		return err
	}
	var fold plant.FoldState
	var last position
	r := &refolding{s: c.s, conn: tx, l: &locked{id: c.id}}
	for after := (position{}); ; {
		chunk, more, err := r.read(ctx, after)
		if err != nil {
			return err
		}
		for _, row := range chunk {
			after = row.position
			var firings []plant.Firing
			if !row.voided {
				c.subgroups++
				last = row.position
				if firings, err = c.s.step(ctx, tx, c.id, &fold, course.At(row.taken), row); err != nil {
					return err
				}
			}
			have, ok := standing[row.position]
			if !ok {
				have = spell(nil)
			}
			if want := spell(firings); want != have {
				c.differs("subgroup of %s: %q stands on record, %q is what it does", row.taken, have, want)
			}
			delete(standing, row.position)
			if have, ok := checkpoints[row.position]; ok && (row.voided || !have.Same(fold)) {
				c.differs("checkpoint at %s is not the state of the fold there", row.taken)
			}
			delete(checkpoints, row.position)
		}
		if !more {
			break
		}
	}
	for at, have := range standing {
		c.differs("signals %q stand at %s where there is no subgroup", have, at.taken)
	}
	for at := range checkpoints {
		c.differs("a checkpoint stands at %s where there is no subgroup", at.taken)
	}
	return c.state(ctx, tx, fold, last)
}

// state compares the state row.
func (c *judgementCheck) state(ctx context.Context, tx pgx.Tx, fold plant.FoldState, last position) error {
	rows, err := tx.Query(ctx, `select characteristic_id, station_id, setup_version, last_taken, last_subgroup, last_due,
		segment_from, revision_id, memory, since_checkpoint, matter_id, ledger_seq, ledger_hash
		from characteristic_state where characteristic_id = $1`, c.id)
	if err != nil {
		return fmt.Errorf("read state: %w", err)
	}
	l, err := pgx.CollectExactlyOneRow(rows, scanLocked)
	if err != nil {
		return fmt.Errorf("read state: %w", err)
	}
	// A state whose last subgroup was voided may keep its place; a fold behind it is the same.
	if !l.fold.Same(fold) {
		c.differs("the state row is not the state of the fold: segment from %s (fold: %s)", l.fold.Segment.From, fold.Segment.From)
	}
	if l.last.before(last) {
		c.differs("the state row ends at %s, the record at %s", l.last.taken, last.taken)
	}
	var open *uuid.UUID
	if err := tx.QueryRow(ctx, `select (select id from matter where characteristic_id = $1 and closed_at is null)`, c.id).Scan(&open); err != nil {
		return fmt.Errorf("read open matter: %w", err)
	}
	if orNil(open) != l.matter {
		c.differs("the state row says that matter %s is open, the record says %s", l.matter, orNil(open))
	}
	return c.matters(ctx, tx)
}

// matters compares matters and signals: what is open has a line, and what stands after
// the last boundary belongs to a matter, open or closed.
func (c *judgementCheck) matters(ctx context.Context, tx pgx.Tx) error {
	var empty, loose int
	err := tx.QueryRow(ctx, `select
		(select count(*) from matter m where m.characteristic_id = $1 and m.closed_at is null
			and not exists (select from signal g where g.matter_id = m.id)),
		(select count(*) from signal g where g.characteristic_id = $1 and g.matter_id is null and not g.withdrawn
			and g.taken_at >= coalesce((select max(at) from boundary b where b.characteristic_id = $1 and b.at <= $2), '-infinity'))`,
		c.id, c.s.now()).Scan(&empty, &loose)
	if err != nil {
		return fmt.Errorf("read matters: %w", err)
	}
	if empty > 0 {
		c.differs("an open matter has no line")
	}
	if loose > 0 {
		c.differs("%d signals stand after the last boundary without a matter", loose)
	}
	return nil
}

func (c *judgementCheck) standing(ctx context.Context, tx pgx.Tx) (map[position]string, error) {
	rows, err := tx.Query(ctx, `select taken_at, subgroup_id, panel, rule, side from signal
		where characteristic_id = $1 and not withdrawn and panel <> 'gauge check'`, c.id)
	if err != nil {
		return nil, fmt.Errorf("read signals: %w", err)
	}
	byPosition := map[position][]plant.Firing{}
	var at position
	var f plant.Firing
	if _, err := pgx.ForEachRow(rows, []any{&at.taken, &at.id, &f.Panel, &f.Rule, &f.Side}, func() error {
		byPosition[at] = append(byPosition[at], f)
		return nil
	}); err != nil {
		return nil, fmt.Errorf("read signals: %w", err)
	}
	out := make(map[position]string, len(byPosition))
	for at, fs := range byPosition {
		out[at] = spell(fs)
	}
	return out, nil
}

func (c *judgementCheck) checkpoints(ctx context.Context, tx pgx.Tx) (map[position]plant.FoldState, error) {
	rows, err := tx.Query(ctx, `select taken_at, subgroup_id, segment_from, revision_id, memory from checkpoint where characteristic_id = $1`, c.id)
	if err != nil {
		return nil, fmt.Errorf("read checkpoints: %w", err)
	}
	type mark struct {
		position
		fold plant.FoldState
	}
	marks, err := pgx.CollectRows(rows, func(r pgx.CollectableRow) (m mark, err error) {
		var from *time.Time
		var revision *uuid.UUID
		var memory []byte
		if err = r.Scan(&m.taken, &m.id, &from, &revision, &memory); err != nil {
			return m, err
		}
		m.fold, err = foldFrom(from, revision, memory)
		return m, err
	})
	if err != nil {
		return nil, fmt.Errorf("read checkpoints: %w", err)
	}
	out := make(map[position]plant.FoldState, len(marks))
	for _, m := range marks {
		out[m.position] = m.fold
	}
	return out, nil
}

// spell writes firings in one order, for comparing.
func spell(fs []plant.Firing) string {
	texts := make([]string, len(fs))
	for i, f := range fs {
		texts[i] = fmt.Sprintf("%s %s %s", f.Panel, f.Rule, f.Side)
	}
	sort.Strings(texts)
	return fmt.Sprint(texts)
}
