package store

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
	"holdfast/internal/plant/ledger"
	"holdfast/internal/spc/watch"
)

// locked is the state row of a characteristic while its lock is held.
type locked struct {
	id           uuid.UUID
	station      uuid.UUID
	setupVersion int
	last         position
	lastDue      time.Time
	fold         plant.FoldState
	uncounted    int // subgroups since the last checkpoint
	matter       uuid.UUID
	head         ledger.Head
}

// position is a subgroup's place in its characteristic's order.
type position struct {
	taken time.Time
	id    uuid.UUID
}

func (p position) before(o position) bool {
	if !p.taken.Equal(o.taken) {
		return p.taken.Before(o.taken)
	}
	return bytes.Compare(p.id[:], o.id[:]) < 0
}

const lockStates = `select characteristic_id, station_id, setup_version, last_taken, last_subgroup, last_due,
		segment_from, revision_id, memory, since_checkpoint, matter_id, ledger_seq, ledger_hash
	from characteristic_state where characteristic_id = any($1) and plant_id = $2
	order by characteristic_id for update`

func scanLocked(r pgx.CollectableRow) (*locked, error) {
	l := &locked{}
	var lastTaken, lastDue, segmentFrom *time.Time
	var lastSubgroup, revision, matter *uuid.UUID
	var memory, hash []byte
	err := r.Scan(&l.id, &l.station, &l.setupVersion, &lastTaken, &lastSubgroup, &lastDue,
		&segmentFrom, &revision, &memory, &l.uncounted, &matter, &l.head.Seq, &hash)
	if err != nil {
		return nil, err
	}
	l.last = position{orZero(lastTaken), orNil(lastSubgroup)}
	l.lastDue, l.matter = orZero(lastDue), orNil(matter)
	copy(l.head.Hash[:], hash)
	l.fold, err = foldFrom(segmentFrom, revision, memory)
	return l, err
}

func foldFrom(segmentFrom *time.Time, revision *uuid.UUID, memory []byte) (plant.FoldState, error) {
	f := plant.FoldState{Segment: plant.Segment{From: orZero(segmentFrom), Revision: orNil(revision)}}
	if len(memory) > 0 {
		if err := f.Memory.UnmarshalBinary(memory); err != nil {
			return f, fmt.Errorf("read fold state: %w", err)
		}
	}
	return f, nil
}

func memoryBytes(f plant.FoldState) []byte {
	b, err := f.Memory.MarshalBinary()
	if err != nil {
		panic(fmt.Sprintf("a fold state always encodes: %v", err))
	}
	return b
}

// lock takes the state rows of the characteristics in the order of their ids.
func (s *Store) lock(ctx context.Context, tx pgx.Tx, ids ...uuid.UUID) (map[uuid.UUID]*locked, error) {
	rows, err := tx.Query(ctx, lockStates, ids, s.plant())
	if err != nil {
		return nil, fmt.Errorf("lock state: %w", err)
	}
	return collectLocked(rows, ids)
}

func collectLocked(rows pgx.Rows, ids []uuid.UUID) (map[uuid.UUID]*locked, error) {
	list, err := pgx.CollectRows(rows, scanLocked)
	if err != nil {
		return nil, fmt.Errorf("lock state: %w", err)
	}
	out := make(map[uuid.UUID]*locked, len(list))
	for _, l := range list {
		out[l.id] = l
	}
	for _, id := range ids {
		if out[id] == nil {
			return nil, plant.NotFoundf("", "There is no such characteristic.")
		}
	}
	return out, nil
}

func (s *Store) lockOne(ctx context.Context, tx pgx.Tx, id uuid.UUID) (*locked, error) {
	m, err := s.lock(ctx, tx, id)
	return m[id], err
}

// seal adds a ledger entry to the characteristic's chain.
func (s *Store) seal(b *pgx.Batch, l *locked, body ledger.Body) error {
	e, head, err := ledger.Seal(l.id, l.head, body)
	if err != nil {
		return err
	}
	l.head = head
	s.queueLedger(b, e)
	return nil
}

// save writes the state row back. The id of the writing transaction goes with it, so
// that servers that missed the announcement find the change.
func (s *Store) save(b *pgx.Batch, l *locked) {
	b.Queue(`update characteristic_state set version = version + 1, changed = pg_current_xact_id(), setup_version = $2,
			last_taken = $3, last_subgroup = $4, last_due = $5, segment_from = $6, revision_id = $7, memory = $8,
			since_checkpoint = $9, matter_id = $10, ledger_seq = $11, ledger_hash = $12
		where characteristic_id = $1`,
		l.id, l.setupVersion, timeOrNull(l.last.taken), orNull(l.last.id), timeOrNull(l.lastDue),
		timeOrNull(l.fold.Segment.From), orNull(l.fold.Segment.Revision), memoryBytes(l.fold),
		l.uncounted, orNull(l.matter), l.head.Seq, l.head.Hash[:])
}

func (s *Store) checkpoint(b *pgx.Batch, l *locked, at position, f plant.FoldState) {
	b.Queue(`insert into checkpoint (characteristic_id, taken_at, subgroup_id, plant_id, segment_from, revision_id, memory)
		values ($1, $2, $3, $4, $5, $6, $7)
		on conflict (characteristic_id, taken_at, subgroup_id) do update
		set segment_from = excluded.segment_from, revision_id = excluded.revision_id, memory = excluded.memory`,
		l.id, at.taken, at.id, s.plant(), timeOrNull(f.Segment.From), orNull(f.Segment.Revision), memoryBytes(f))
}

// frozen is a revision ready to judge.
type frozen struct {
	plant.Revision
	judge *watch.Judge
}

const selectRevision = `select r.id, r.characteristic_id, r.number, r.setup_version, r.chart, r.estimator, r.center, r.sigma, r.multiple,
	r.rules, r.basis, r.reason, r.author_id, p.name, r.frozen_at, r.in_force_from from revision r join person p on p.id = r.author_id`

func scanRevision(row pgx.CollectableRow) (r plant.Revision, err error) {
	var rules, basis []byte
	err = row.Scan(&r.ID, &r.Characteristic, &r.Number, &r.SetupVersion, &r.Chart, &r.Estimator, &r.Center, &r.Sigma, &r.Multiple,
		&rules, &basis, &r.Reason, &r.Author, &r.AuthorName, &r.FrozenAt, &r.InForceFrom)
	if err != nil {
		return r, err
	}
	if err := json.Unmarshal(rules, &r.Rules); err != nil {
		return r, fmt.Errorf("read rules of revision %s: %w", r.ID, err)
	}
	if err := json.Unmarshal(basis, &r.Basis); err != nil {
		return r, fmt.Errorf("read basis of revision %s: %w", r.ID, err)
	}
	return r, nil
}

// revision reads a revision; nil for the zero id (learning). Revisions never change,
// so they are kept.
func (s *Store) revision(ctx context.Context, q querier, id uuid.UUID) (*frozen, error) {
	if id == uuid.Nil {
		return nil, nil
	}
	if f, ok := s.revisions.Load(id); ok {
		return f.(*frozen), nil
	}
	rows, err := q.Query(ctx, selectRevision+` where r.id = $1`, id)
	if err != nil {
		return nil, fmt.Errorf("read revision: %w", err)
	}
	r, err := pgx.CollectExactlyOneRow(rows, scanRevision)
	if err != nil {
		return nil, fmt.Errorf("read revision: %w", err)
	}
	return s.keep(r)
}

func (s *Store) keep(r plant.Revision) (*frozen, error) {
	judge, err := watch.NewJudge(r.Standard())
	if err != nil {
		return nil, fmt.Errorf("prepare revision %d: %w", r.Number, err)
	}
	f := &frozen{Revision: r, judge: judge}
	s.revisions.Store(r.ID, f)
	return f, nil
}

// step judges one subgroup by the segment that it lies in and returns what it does.
func (s *Store) step(ctx context.Context, q querier, characteristic uuid.UUID, f *plant.FoldState, seg plant.Segment, row *subgroupRow) ([]plant.Firing, error) {
	fz, err := s.revision(ctx, q, seg.Revision)
	if err != nil {
		return nil, err
	}
	var judge *watch.Judge
	var rules plant.Rules
	if fz != nil {
		judge, rules = fz.judge, fz.Rules
	}
	j, judged := f.Step(seg, judge, row.stats)
	if row.outside == 0 && !(judged && j.Any()) {
		return nil, nil
	}
	setup, err := s.setup(ctx, q, characteristic, row.setup)
	if err != nil {
		return nil, err
	}
	return plant.Firings(setup, row.readings, row.stats.Decimals, rules, j, judged), nil
}
