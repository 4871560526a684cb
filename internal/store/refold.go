package store

import (
	"context"
	"errors"
	"fmt"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
	"holdfast/internal/plant/ledger"
)

// subgroupRow is what the fold and its consequences need of a subgroup's version.
type subgroupRow struct {
	position
	version  int
	setup    int
	readings []int64
	stats    plant.Statistics
	outside  int
	voided   bool
}

// versionRows is a walk along the key over every version. It keeps to the key's own
// order, so that it reads no further than its limit; the newest version of each subgroup
// is picked in Go.
const versionRows = `select taken_at, id, version, setup_version, decimals, readings,
		reading_sum, reading_range, reading_sd, outside, voided
	from subgroup where characteristic_id = $1 and (taken_at, id) > ($2, $3)
	order by taken_at, id, version limit $4`

func scanSubgroupRow(r pgx.CollectableRow) (*subgroupRow, error) {
	row := &subgroupRow{}
	err := r.Scan(&row.taken, &row.id, &row.version, &row.setup, &row.stats.Decimals, &row.readings,
		&row.stats.Sum, &row.stats.Range, &row.stats.SD, &row.outside, &row.voided)
	row.stats.N = len(row.readings)
	return row, err
}

// patch says what of the past was changed. It has been written already; the refold
// works out what follows.
type patch struct {
	at       position     // from here on judgements may differ
	old      *subgroupRow // the version that counted before; nil when there was none, or it was void
	boundary uuid.UUID    // the boundary that was added at at.taken, if that is the change
}

// conn is a connection or transaction that holds the lock.
type conn interface {
	querier
	SendBatch(ctx context.Context, b *pgx.Batch) pgx.BatchResults
}

// refoldChunk is how many versions of subgroups are read at a time. Most refolds end within the
// first: a checkpoint's usual distance and the longest window.
const refoldChunk = 256 + 80

// refolding runs two folds over one characteristic: how things were and how they are.
type refolding struct {
	s        *Store
	conn     conn
	batch    *pgx.Batch
	l        *locked
	patch    patch
	now      time.Time
	was, is  plant.FoldState
	wasC     plant.Course
	isC      plant.Course
	lastFrom time.Time // the last boundary up to now: firings before it open no matter
	patched  refolded
}

// refolded is what the patched subgroup itself does now, and by what it is judged.
type refolded struct {
	firings []plant.Firing
	segment plant.Segment
}

// refold judges again what the patch may have changed and queues the outcome: signals
// found late or withdrawn, a matter that must open, checkpoints, the new fold state
// (in l). It returns what the patched subgroup itself does now.
func (s *Store) refold(ctx context.Context, c conn, b *pgx.Batch, l *locked, p patch, now time.Time) (refolded, error) {
	r := &refolding{s: s, conn: c, batch: b, l: l, patch: p, now: now}
	s.counts.refolds.Add(1)
	start, err := r.start(ctx)
	if err != nil {
		return refolded{}, err
	}
	unmarked := 0
	for last := (position{}); ; {
		rows, more, err := r.read(ctx, start)
		if err != nil {
			return refolded{}, err
		}
		signals, checkpoints, err := r.stored(ctx, rows)
		if err != nil {
			return refolded{}, err
		}
		for _, row := range rows {
			s.counts.refolded.Add(1)
			if err := r.row(ctx, row, signals[row.id]); err != nil {
				return refolded{}, err
			}
			if row.voided {
				// Nothing may stand at a void: what comes next in order may come before it.
				if checkpoints[row.position] {
					b.Queue(`delete from checkpoint where characteristic_id = $1 and taken_at = $2 and subgroup_id = $3`, l.id, row.taken, row.id)
				}
			} else {
				last = row.position
			}
			if r.converged(row) {
				return r.patched, nil
			}
			// Samples that all come late would otherwise leave ever longer ways between
			// checkpoints.
			if unmarked++; !row.voided && (checkpoints[row.position] || unmarked >= 2*s.every) {
				s.checkpoint(b, l, row.position, r.is)
				unmarked = 0
			}
			start = row.position
		}
		if !more {
			// The walk reached the end, so its state is the characteristic's.
			l.fold = r.is
			if last != (position{}) || start == (position{}) {
				l.last = last
			}
			return r.patched, nil
		}
	}
}

// start puts both folds where the past is certainly unchanged: at the last checkpoint
// before the patch, or at the beginning.
func (r *refolding) start(ctx context.Context) (position, error) {
	var at position
	var from *time.Time
	var revision *uuid.UUID
	var memory []byte
	err := r.conn.QueryRow(ctx, `select taken_at, subgroup_id, segment_from, revision_id, memory from checkpoint
		where characteristic_id = $1 and (taken_at, subgroup_id) < ($2, $3)
		order by taken_at desc, subgroup_id desc limit 1`, r.l.id, r.patch.at.taken, r.patch.at.id).
		Scan(&at.taken, &at.id, &from, &revision, &memory)
	if err != nil && !errors.Is(err, pgx.ErrNoRows) {
		return at, fmt.Errorf("read checkpoint: %w", err)
	}
	if r.is, err = foldFrom(from, revision, memory); err != nil {
		return at, err
	}
	r.was = r.is
	r.isC = plant.Course{Before: r.is.Segment}
	rows, err := r.conn.Query(ctx, selectBoundaries+` where characteristic_id = $1 and at > $2 order by at, id`, r.l.id, at.taken)
	if err != nil {
		return at, fmt.Errorf("read boundaries: %w", err)
	}
	if r.isC.Boundaries, err = pgx.CollectRows(rows, scanBoundary); err != nil {
		return at, fmt.Errorf("read boundaries: %w", err)
	}
	r.wasC = plant.Course{Before: r.isC.Before}
	r.lastFrom = r.isC.Before.From
	for _, b := range r.isC.Boundaries {
		if b.ID != r.patch.boundary {
			r.wasC.Boundaries = append(r.wasC.Boundaries, b)
		}
		if !b.At.After(r.now) {
			r.lastFrom = b.At
		}
	}
	return at, nil
}

const selectBoundaries = `select id, at, kind, revision_id from boundary`

func scanBoundary(row pgx.CollectableRow) (b plant.Boundary, err error) {
	var revision *uuid.UUID
	err = row.Scan(&b.ID, &b.At, &b.Kind, &revision)
	b.Revision = orNil(revision)
	return b, err
}

// read returns the subgroups after a position, each in its newest version, and whether
// there are more.
func (r *refolding) read(ctx context.Context, after position) (out []*subgroupRow, more bool, err error) {
	taken := any(after.taken)
	if after.taken.IsZero() {
		taken = "-infinity"
	}
	for limit := refoldChunk; ; limit *= 2 {
		rows, err := r.conn.Query(ctx, versionRows, r.l.id, taken, after.id, limit)
		if err != nil {
			return nil, false, fmt.Errorf("read subgroups to judge again: %w", err)
		}
		versions, err := pgx.CollectRows(rows, scanSubgroupRow)
		if err != nil {
			return nil, false, fmt.Errorf("read subgroups to judge again: %w", err)
		}
		out = newest(versions)
		if len(versions) < limit {
			return out, false, nil
		}
		// The last subgroup may have versions that lie beyond the limit.
		if out = out[:len(out)-1]; len(out) > 0 {
			return out, true, nil
		}
	}
}

// newest keeps the last of the versions of each subgroup, which stand together.
func newest(versions []*subgroupRow) []*subgroupRow {
	out := versions[:0]
	for _, v := range versions {
		if n := len(out); n > 0 && out[n-1].position == v.position {
			out[n-1] = v
			continue
		}
		out = append(out, v)
	}
	return out
}

// storedSignal is a signal as the record has it before the refold.
type storedSignal struct {
	plant.Firing
	withdrawn bool
	matter    uuid.UUID
}

// stored reads the signals of the rows, by subgroup, and which of them are checkpoints.
// A gauge check that failed is a fact and no judgement, so it is left alone.
func (r *refolding) stored(ctx context.Context, rows []*subgroupRow) (map[uuid.UUID][]storedSignal, map[position]bool, error) {
	signals, checkpoints := make(map[uuid.UUID][]storedSignal), make(map[position]bool)
	if len(rows) == 0 {
		return signals, checkpoints, nil
	}
	first, last := rows[0].taken, rows[len(rows)-1].taken
	found, err := r.conn.Query(ctx, `select subgroup_id, panel, rule, side, withdrawn, matter_id from signal
		where characteristic_id = $1 and taken_at between $2 and $3 and panel <> 'gauge check'`, r.l.id, first, last)
	if err != nil {
		return nil, nil, fmt.Errorf("read signals: %w", err)
	}
	var id uuid.UUID
	var g storedSignal
	var matter *uuid.UUID
	if _, err := pgx.ForEachRow(found, []any{&id, &g.Panel, &g.Rule, &g.Side, &g.withdrawn, &matter}, func() error {
		g.matter = orNil(matter)
		signals[id] = append(signals[id], g)
		return nil
	}); err != nil {
		return nil, nil, fmt.Errorf("read signals: %w", err)
	}
	marks, err := r.conn.Query(ctx, `select taken_at, subgroup_id from checkpoint
		where characteristic_id = $1 and taken_at between $2 and $3`, r.l.id, first, last)
	if err != nil {
		return nil, nil, fmt.Errorf("read checkpoints: %w", err)
	}
	var at position
	if _, err := pgx.ForEachRow(marks, []any{&at.taken, &at.id}, func() error {
		checkpoints[at] = true
		return nil
	}); err != nil {
		return nil, nil, fmt.Errorf("read checkpoints: %w", err)
	}
	return signals, checkpoints, nil
}

// row steps both folds over one subgroup and settles its signals.
func (r *refolding) row(ctx context.Context, row *subgroupRow, have []storedSignal) error {
	counted := row
	if row.position == r.patch.at && r.patch.boundary == uuid.Nil {
		counted = r.patch.old
	}
	if counted != nil && !counted.voided {
		if _, err := r.s.step(ctx, r.conn, r.l.id, &r.was, r.wasC.At(row.taken), counted); err != nil {
			return err
		}
	}
	var firings []plant.Firing
	seg := r.isC.At(row.taken)
	if !row.voided {
		var err error
		if firings, err = r.s.step(ctx, r.conn, r.l.id, &r.is, seg, row); err != nil {
			return err
		}
	}
	if row.position == r.patch.at {
		r.patched = refolded{firings, seg}
	}
	if row.before(r.patch.at) {
		return nil // its judgement stands
	}
	return r.settle(row, seg, firings, have)
}

// settle brings the stored signals of a subgroup to what it does now.
func (r *refolding) settle(row *subgroupRow, seg plant.Segment, firings []plant.Firing, have []storedSignal) error {
	stored := make(map[plant.Firing]storedSignal, len(have))
	for _, g := range have {
		stored[g.Firing] = g
	}
	for _, f := range firings {
		g, known := stored[f]
		delete(stored, f)
		if known && !g.withdrawn {
			continue
		}
		matter, err := r.matterFor(row.position, g.matter)
		if err != nil {
			return err
		}
		r.s.insertSignal(r.batch, r.l, row.position, f, seg.Revision, matter, true, r.now)
	}
	for _, g := range stored {
		if !g.withdrawn {
			r.batch.Queue(`update signal set withdrawn = true, judged_at = $6
				where characteristic_id = $1 and taken_at = $2 and subgroup_id = $3 and panel = $4 and rule = $5 and side = $7`,
				r.l.id, row.taken, row.id, string(g.Panel), g.Rule, r.now, string(g.Side))
		}
	}
	return nil
}

// matterFor is the matter that a firing found late belongs to: the open one; with none
// open a new one, without alarm, if the firing lies after the last boundary; otherwise
// none, and it only stays on the record. One that stands again before that boundary
// stays with the matter in which it was dealt with.
func (r *refolding) matterFor(at position, before uuid.UUID) (uuid.UUID, error) {
	if before != uuid.Nil && at.taken.Before(r.lastFrom) {
		return before, nil
	}
	if r.l.matter == uuid.Nil && !at.taken.Before(r.lastFrom) {
		if err := r.s.openMatter(r.batch, r.l, at, false, r.now); err != nil {
			return uuid.Nil, err
		}
	}
	return r.l.matter, nil
}

// converged reports whether both folds are in the same state and the patch is behind
// them, so that everything that follows is as it was. A void that stands behind a new
// boundary proves nothing: neither fold has stepped over the boundary there.
func (r *refolding) converged(row *subgroupRow) bool {
	if row.before(r.patch.at) || row.voided && r.patch.boundary != uuid.Nil {
		return false
	}
	return r.is.Same(r.was)
}

// openMatter opens a matter at a subgroup. alarm is false for what was found late.
func (s *Store) openMatter(b *pgx.Batch, l *locked, at position, alarm bool, now time.Time) error {
	id := newID()
	b.Queue(`insert into matter (id, plant_id, station_id, characteristic_id, opened_at, opened_taken, opened_subgroup, alarmed)
		values ($1, $2, $3, $4, $5, $6, $7, $8)`, id, s.plant(), l.station, l.id, now, at.taken, at.id, alarm)
	l.matter = id
	s.openContainment(b, l, id, now)
	return s.seal(b, l, ledger.Matter{Contained: true, Matter: id, Step: "opened", At: ledger.Time(now), Subgroup: ledger.ID(at.id)})
}

// insertSignal enters a firing, or lets one that was withdrawn stand again. The reaction
// plan that is in force when it is first entered stays with it.
func (s *Store) insertSignal(b *pgx.Batch, l *locked, at position, f plant.Firing, revision, matter uuid.UUID, late bool, now time.Time) {
	b.Queue(`insert into signal (characteristic_id, taken_at, subgroup_id, panel, rule, plant_id, side, revision_id, matter_id, found_late, judged_at, added_at, plan_id)
		values ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $11, (select id from (`+plansInForce("$1", "$12", "$6")+`) plan limit 1))
		on conflict (characteristic_id, taken_at, subgroup_id, panel, rule, side) do update
		set withdrawn = false, found_late = true, revision_id = excluded.revision_id,
			matter_id = excluded.matter_id, judged_at = excluded.judged_at`,
		l.id, at.taken, at.id, string(f.Panel), f.Rule, s.plant(), string(f.Side), orNull(revision), orNull(matter), late, now, string(f.MatterKind()))
}
