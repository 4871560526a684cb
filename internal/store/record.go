package store

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgxpool"

	"holdfast/internal/plant"
	"holdfast/internal/plant/ledger"
)

// roundContext is what must be known, besides the state row, to judge a subgroup
// taken at $2: the segment it lies in, what the machine was making, and whether what
// is open is a Hold. It is read under the lock, in a statement of its own.
const roundContext = `select c.id, c.machine_id, segment.at, force.revision_id, making.part_id, coalesce(making.lot, ''),
		exists (select from signal g where g.matter_id = cs.matter_id and g.panel in ('reading', 'gauge check') and not g.withdrawn)
	from characteristic c
	join characteristic_state cs on cs.characteristic_id = c.id
	left join lateral (select b.at from boundary b where b.characteristic_id = c.id and b.at <= $2
		order by b.at desc, b.id desc limit 1) segment on true
	left join lateral (select b.revision_id from boundary b where b.characteristic_id = c.id and b.at <= $2 and b.kind in ('revision', 'setup')
		order by b.at desc, b.id desc limit 1) force on true
	left join lateral (select m.part_id, m.lot from machine_state m where m.machine_id = c.machine_id and m.at <= $2
		order by m.at desc, m.id desc limit 1) making on true
	where c.id = any($1)`

type roundAround struct {
	machine uuid.UUID
	segment plant.Segment
	part    uuid.UUID
	lot     string
	hold    bool // what is open has a standing line that holds the product
}

func scanAround(rows pgx.Rows) (map[uuid.UUID]roundAround, error) {
	out := make(map[uuid.UUID]roundAround)
	var id uuid.UUID
	var a roundAround
	var from *time.Time
	var revision, part *uuid.UUID
	_, err := pgx.ForEachRow(rows, []any{&id, &a.machine, &from, &revision, &part, &a.lot, &a.hold}, func() error {
		a.segment, a.part = plant.Segment{From: orZero(from), Revision: orNil(revision)}, orNil(part)
		out[id] = a
		return nil
	})
	if err != nil {
		return nil, fmt.Errorf("read what surrounds the round: %w", err)
	}
	return out, nil
}

const selectRound = `select digest, answer from round where id = $1`

// recording is one round on its way into the record.
type recording struct {
	s      *Store
	round  plant.Round
	digest [32]byte
	now    time.Time
	conn   *pgxpool.Conn
	batch  *pgx.Batch
	answer plant.Answer
}

// Record stores a round, judges it and returns the answer, which is durable when it
// returns. The same round sent again gets the stored answer and writes nothing. The
// same id with other content is a Conflict, and a time that cannot be believed is
// Invalid; both are set aside for a person.
func (s *Store) Record(ctx context.Context, r plant.Round) (plant.Answer, error) {
	began := time.Now() // of the machine: the store's own clock may stand still
	answer, err := s.record(ctx, r)
	s.counts.saved(err)
	if err == nil {
		s.onSave(time.Since(began))
	}
	return answer, err
}

func (s *Store) record(ctx context.Context, r plant.Round) (plant.Answer, error) {
	if err := r.Check(); err != nil {
		return plant.Answer{}, err
	}
	r = r.Clean()
	ctx, cancel := s.saving(ctx)
	defer cancel()
	rec := &recording{s: s, round: r, digest: r.Digest(), now: s.now()}
	answer, err := rec.run(ctx)
	if errors.Is(err, errSameID) || violates(err, "round_pkey") {
		// Two sends of one id that lock different rows meet only at the key.
		answer, err = s.storedAnswer(ctx, r, rec.digest)
	}
	if pe, ok := errors.AsType[*plant.Error](err); ok && (pe.Kind == plant.Conflict || pe.Field == "taken_at") {
		if err := s.setAside(ctx, plant.Aside{Station: r.Station, About: r.ID, Person: r.Person, Device: r.Device, Why: pe}, r, rec.digest); err != nil {
			return answer, err
		}
	}
	if err = s.noticeRoom(err); err == nil {
		s.changed(r.Station)
	}
	return answer, err
}

var errSameID = errors.New("a round of this id is stored")

func (rec *recording) run(ctx context.Context) (plant.Answer, error) {
	conn, err := rec.s.pool.Acquire(ctx)
	if err != nil {
		return plant.Answer{}, fmt.Errorf("acquire connection: %w", err)
	}
	defer conn.Release()
	rec.conn = conn
	err = rec.write(ctx)
	if err != nil && conn.Conn().PgConn().TxStatus() != 'I' {
		// Where this fails the pool throws the connection away, and the server rolls back.
		_, _ = conn.Exec(ctx, "rollback")
	}
	return rec.answer, err
}

func (rec *recording) write(ctx context.Context) error {
	held, around, err := rec.open(ctx)
	if err != nil {
		return err
	}
	if err := rec.round.CheckClock(rec.now); err != nil {
		return err
	}
	for _, e := range rec.round.Entries {
		if held[e.Characteristic].station != rec.round.Station {
			// Its machine may have moved while the round was on its way.
			return plant.Conflictf("", "This is measured at another station now. The round was set aside for a person; nothing was lost.")
		}
	}
	rec.batch = &pgx.Batch{}
	rec.answer = plant.Answer{Round: rec.round.ID, Station: rec.round.Station, TakenAt: rec.round.TakenAt(), Verdict: plant.Leave}
	for _, e := range rec.round.Entries {
		part, err := rec.entry(ctx, e, held[e.Characteristic], around[e.Characteristic])
		if err != nil {
			return err
		}
		rec.answer.Parts = append(rec.answer.Parts, part)
		rec.answer.Verdict = rec.answer.Verdict.Graver(part.Verdict)
	}
	return rec.commit(ctx)
}

// open begins the transaction, locks the state rows and reads what is needed to judge,
// all in one batch.
func (rec *recording) open(ctx context.Context) (map[uuid.UUID]*locked, map[uuid.UUID]roundAround, error) {
	ids := make([]uuid.UUID, len(rec.round.Entries))
	for i, e := range rec.round.Entries {
		ids[i] = e.Characteristic
	}
	b := &pgx.Batch{}
	b.Queue("begin")
	b.Queue(lockStates, ids, rec.s.plant())
	b.Queue(roundContext, ids, rec.round.TakenAt())
	b.Queue(selectRound, rec.round.ID)
	results := rec.conn.SendBatch(ctx, b)
	defer results.Close()
	if _, err := results.Exec(); err != nil {
		return nil, nil, fmt.Errorf("begin: %w", err)
	}
	rows, _ := results.Query() // an error shows when the rows are read
	held, lockErr := collectLocked(rows, ids)
	rows, _ = results.Query()
	around, err := scanAround(rows)
	if err != nil {
		return nil, nil, err
	}
	var digest, answer []byte
	switch err := results.QueryRow().Scan(&digest, &answer); {
	case err == nil:
		return nil, nil, errSameID
	case !errors.Is(err, pgx.ErrNoRows):
		return nil, nil, fmt.Errorf("look for the round: %w", err)
	}
	if err := results.Close(); err != nil {
		return nil, nil, fmt.Errorf("open round: %w", err)
	}
	return held, around, lockErr
}

// entry judges one subgroup and queues all that follows from it.
func (rec *recording) entry(ctx context.Context, e plant.Entry, l *locked, a roundAround) (plant.PartAnswer, error) {
	setup, err := rec.s.setup(ctx, rec.conn, l.id, l.setupVersion)
	if err != nil {
		return plant.PartAnswer{}, err
	}
	if e.SetupVersion != l.setupVersion {
		return plant.PartAnswer{}, plant.Conflictf("", "How this is measured was changed meanwhile. The round was set aside; please measure again.")
	}
	if err := e.CheckAgainst(setup); err != nil {
		return plant.PartAnswer{}, err
	}
	if err := checkStreams(ctx, rec.conn, e, a.machine); err != nil {
		return plant.PartAnswer{}, err
	}
	if rec.round.Lot != "" {
		a.lot = rec.round.Lot
	}
	taken := rec.round.TakenAt()
	row := &subgroupRow{
		position: position{taken, plant.SubgroupID(rec.round.ID, l.id)}, version: 1, setup: setup.Version,
		readings: e.Readings, stats: plant.Summarise(e.Readings, setup.Decimals), outside: setup.CountOutside(e.Readings, setup.Decimals),
	}
	rec.insertSubgroup(e, l, a, setup, row)

	rec.s.counts.judged.Add(1)
	part := plant.PartAnswer{Characteristic: l.id, Subgroup: row.id}
	openBefore := l.matter != uuid.Nil
	var firings []plant.Firing
	if l.last.before(row.position) {
		firings, err = rec.s.step(ctx, rec.conn, l.id, &l.fold, a.segment, row)
		if err != nil {
			return part, err
		}
		if err := rec.fresh(l, a, row, firings); err != nil {
			return part, err
		}
		l.last, l.lastDue = row.position, rec.round.DueAt
		if l.uncounted++; l.uncounted >= rec.s.every {
			rec.s.checkpoint(rec.batch, l, row.position, l.fold)
			l.uncounted = 0
		}
	} else {
		part.Late = true
		if firings, err = rec.late(ctx, l, row); err != nil {
			return part, err
		}
	}
	gravity := plant.Look
	if a.hold {
		gravity = plant.Hold
	}
	part.Verdict, part.StillOpen = plant.Decide(firings, a.segment.Revision == uuid.Nil, openBefore, gravity)
	part.Firings, part.Matter, part.Opened = firings, l.matter, l.matter != uuid.Nil && !openBefore
	if err := rec.s.seal(rec.batch, l, rec.ledgerBody(e, a, setup, row, part)); err != nil {
		return part, err
	}
	rec.s.save(rec.batch, l)
	return part, nil
}

// fresh enters the signals of a subgroup that came in order. The first opens a matter
// and alarms; with one open they join it.
func (rec *recording) fresh(l *locked, a roundAround, row *subgroupRow, firings []plant.Firing) error {
	if len(firings) == 0 {
		return nil
	}
	if l.matter == uuid.Nil {
		if err := rec.s.openMatter(rec.batch, l, row.position, true, rec.now); err != nil {
			return err
		}
	}
	for _, f := range firings {
		rec.s.insertSignal(rec.batch, l, row.position, f, a.segment.Revision, l.matter, false, rec.now)
	}
	return nil
}

// late puts a subgroup that came after later ones in its place: it is written, and
// what follows it is judged again.
func (rec *recording) late(ctx context.Context, l *locked, row *subgroupRow) ([]plant.Firing, error) {
	if err := rec.conn.SendBatch(ctx, rec.batch).Close(); err != nil {
		return nil, fmt.Errorf("insert late subgroup: %w", err)
	}
	rec.batch = &pgx.Batch{}
	again, err := rec.s.refold(ctx, rec.conn, rec.batch, l, patch{at: row.position}, rec.now)
	return again.firings, err
}

func (rec *recording) commit(ctx context.Context) error {
	answer, err := json.Marshal(rec.answer)
	if err != nil {
		return fmt.Errorf("encode answer: %w", err)
	}
	r := rec.round
	rec.batch.Queue(`insert into round (id, plant_id, station_id, due_at, occasion, taken_at, taken_raw, skew_ms, recorded_at, person_id, source, digest, answer, device_id)
		values ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12, $13, $14)`,
		r.ID, rec.s.plant(), r.Station, timeOrNull(r.DueAt), string(r.Occasion), r.TakenAt(), r.TakenRaw, r.Skew.Milliseconds(),
		rec.now, orNull(r.Person), r.Source, rec.digest[:], answer, orNull(r.Device))
	rec.batch.Queue("commit")
	if err := rec.conn.SendBatch(ctx, rec.batch).Close(); err != nil {
		return fmt.Errorf("write round: %w", err)
	}
	return nil
}

func (rec *recording) insertSubgroup(e plant.Entry, l *locked, a roundAround, setup plant.Setup, row *subgroupRow) {
	keyed := e.KeyedBy
	if len(keyed) == 0 {
		keyed = []uuid.UUID{rec.round.Person}
	}
	rec.batch.Queue(insertSubgroup, l.id, row.taken, row.id, row.version, rec.s.plant(), rec.round.ID, setup.Version, setup.Decimals,
		row.readings, keyed, streamsOrNull(e.Streams), retypedOrNull(e.Retyped), e.ShortReason,
		row.stats.Sum, row.stats.Range, row.stats.SD, row.outside, a.machine, orNull(a.part), a.lot, orNull(setup.GaugeID),
		rec.now, orNull(rec.round.Person), false, "")
}

const insertSubgroup = `insert into subgroup (characteristic_id, taken_at, id, version, plant_id, round_id, setup_version, decimals,
		readings, keyed_by, streams, retyped, short_reason, reading_sum, reading_range, reading_sd, outside, machine_id, part_id, lot,
		gauge_id, recorded_at, person_id, voided, reason)
	values ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12, $13, $14, $15, $16, $17, $18, $19, $20, $21, $22, $23, $24, $25)`

func streamsOrNull(ids []uuid.UUID) []uuid.UUID {
	if len(ids) == 0 {
		return nil
	}
	return ids
}

func retypedOrNull(rs []plant.Retyped) any {
	if len(rs) == 0 {
		return nil
	}
	return rs
}

func (rec *recording) ledgerBody(e plant.Entry, a roundAround, setup plant.Setup, row *subgroupRow, part plant.PartAnswer) ledger.Subgroup {
	r := rec.round
	body := ledger.Subgroup{
		Subgroup: row.id, Version: row.version, Round: r.ID, Station: r.Station, SetupVersion: setup.Version,
		TakenAt: ledger.Time(row.taken), TakenRaw: ledger.Time(r.TakenRaw), SkewMS: r.Skew.Milliseconds(), RecordedAt: ledger.Time(rec.now),
		Machine: a.machine, Part: ledger.ID(a.part), Lot: a.lot, Gauge: ledger.ID(setup.GaugeID), Source: r.Source, Device: ledger.ID(r.Device), Person: ledger.ID(r.Person),
		Decimals: setup.Decimals, Readings: e.Readings, KeyedBy: e.KeyedBy, Streams: e.Streams, ShortReason: e.ShortReason,
		Answer: string(part.Verdict),
	}
	if len(body.KeyedBy) == 0 {
		body.KeyedBy = []uuid.UUID{r.Person}
	}
	for _, t := range e.Retyped {
		body.Retyped = append(body.Retyped, ledger.Retyped(t))
	}
	return body
}

// storedAnswer answers a round whose id is known: as before when it is the same round,
// with a Conflict when it is another.
func (s *Store) storedAnswer(ctx context.Context, r plant.Round, digest [32]byte) (plant.Answer, error) {
	var have, raw []byte
	var answer plant.Answer
	if err := s.pool.QueryRow(ctx, selectRound, r.ID).Scan(&have, &raw); err != nil {
		return answer, fmt.Errorf("read stored round: %w", err)
	}
	if !bytes.Equal(have, digest[:]) {
		return answer, plant.Conflictf("", "Another round is on record under this number. This one was set aside for a person; nothing was lost.")
	}
	if err := json.Unmarshal(raw, &answer); err != nil {
		return answer, fmt.Errorf("read stored answer: %w", err)
	}
	return answer, nil
}

// Answer reads what the sender of a round was told.
func (s *Store) Answer(ctx context.Context, round uuid.UUID) (plant.Answer, error) {
	var digest, raw []byte
	var answer plant.Answer
	if err := s.pool.QueryRow(ctx, selectRound, round).Scan(&digest, &raw); err != nil {
		return answer, fmt.Errorf("read round: %w", missing(err, "There is no such round."))
	}
	if err := json.Unmarshal(raw, &answer); err != nil {
		return answer, fmt.Errorf("read answer: %w", err)
	}
	return answer, nil
}
