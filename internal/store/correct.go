package store

import (
	"context"
	"crypto/sha256"
	"encoding/json"
	"errors"
	"fmt"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
	"holdfast/internal/plant/ledger"
)

// versionFacts is what a correction takes over from the version that it replaces.
type versionFacts struct {
	version  int
	voided   bool
	round    uuid.UUID
	setup    int
	decimals int
	streams  []uuid.UUID
	machine  uuid.UUID
	part     uuid.UUID
	lot      string
	gauge    uuid.UUID
	row      *subgroupRow
}

// Correct adds a version that replaces the readings of a subgroup, or voids it, and
// judges again what follows. It returns the verdict on the corrected subgroup. A
// correction of a version that is no longer the newest is a Conflict and is set aside.
func (s *Store) Correct(ctx context.Context, c plant.Correction) (plant.PartAnswer, error) {
	c.Reason, c.ShortReason = plant.CleanText(c.Reason), plant.CleanText(c.ShortReason)
	if c.Reason == "" {
		return plant.PartAnswer{}, plant.Invalidf("reason", "Say why it is corrected.")
	}
	ctx, cancel := s.saving(ctx)
	defer cancel()
	c.TakenAt = plant.CutTime(c.TakenAt)
	var part plant.PartAnswer
	var station uuid.UUID
	err := s.inTx(ctx, func(tx pgx.Tx) error {
		l, err := s.lockOne(ctx, tx, c.Characteristic)
		if err != nil {
			return err
		}
		station = l.station
		part, err = s.correct(ctx, tx, l, c)
		return err
	})
	if plant.IsKind(err, plant.Conflict) {
		pe, _ := errors.AsType[*plant.Error](err)
		body, _ := json.Marshal(c)
		if asideErr := s.setAside(ctx, plant.Aside{Station: station, About: c.Subgroup, Person: c.Person, Why: pe}, c, sha256.Sum256(body)); asideErr != nil {
			return part, asideErr
		}
	}
	if err != nil {
		return part, err
	}
	s.changed(station)
	return part, nil
}

func (s *Store) correct(ctx context.Context, tx pgx.Tx, l *locked, c plant.Correction) (plant.PartAnswer, error) {
	part := plant.PartAnswer{Characteristic: l.id, Subgroup: c.Subgroup, Late: true}
	now := s.now()
	have, err := s.newestVersion(ctx, tx, c)
	if err != nil {
		return part, err
	}
	if have.version != c.Replaces || have.voided {
		return part, plant.Conflictf("", "Somebody has corrected this already. Look at it again.")
	}
	setup, err := s.setup(ctx, tx, l.id, have.setup)
	if err != nil {
		return part, err
	}
	readings := c.Readings
	if c.Void {
		readings = have.row.readings
	} else if err := (plant.Entry{Readings: readings, KeyedBy: c.KeyedBy, ShortReason: c.ShortReason}).CheckAgainst(setup); err != nil {
		return part, err
	}
	streams := have.streams
	if len(streams) != len(readings) {
		streams = nil
	}
	keyed := c.KeyedBy
	if len(keyed) == 0 {
		keyed = []uuid.UUID{c.Person}
	}
	row := &subgroupRow{
		position: have.row.position, version: have.version + 1, setup: have.setup, readings: readings,
		stats: plant.Summarise(readings, have.decimals), outside: setup.CountOutside(readings, have.decimals), voided: c.Void,
	}
	if _, err := tx.Exec(ctx, insertSubgroup, l.id, row.taken, row.id, row.version, s.plant(), have.round, have.setup, have.decimals,
		readings, keyed, streamsOrNull(streams), nil, c.ShortReason, row.stats.Sum, row.stats.Range, row.stats.SD, row.outside,
		have.machine, orNull(have.part), have.lot, orNull(have.gauge), now, orNull(c.Person), c.Void, c.Reason); err != nil {
		return part, fmt.Errorf("insert correction: %w", err)
	}
	openBefore := l.matter != uuid.Nil
	hold, err := s.openIsHold(ctx, tx, l.matter)
	if err != nil {
		return part, err
	}
	b := &pgx.Batch{}
	again, err := s.refold(ctx, tx, b, l, patch{at: row.position, old: have.row}, now)
	if err != nil {
		return part, err
	}
	part.Firings, part.Matter, part.Opened = again.firings, l.matter, l.matter != uuid.Nil && !openBefore
	gravity := plant.Look
	if hold {
		gravity = plant.Hold
	}
	part.Verdict, part.StillOpen = plant.Decide(again.firings, again.segment.Revision == uuid.Nil, openBefore, gravity)
	body := ledger.Subgroup{
		Subgroup: row.id, Version: row.version, Round: have.round, Station: l.station, SetupVersion: have.setup,
		TakenAt: ledger.Time(row.taken), TakenRaw: ledger.Time(row.taken), RecordedAt: ledger.Time(now), Machine: have.machine,
		Part: ledger.ID(have.part), Lot: have.lot, Gauge: ledger.ID(have.gauge), Source: "correction", Person: ledger.ID(c.Person),
		Decimals: have.decimals, Readings: readings, KeyedBy: keyed, Streams: streams, ShortReason: c.ShortReason,
		Voided: c.Void, Reason: c.Reason, Answer: string(part.Verdict),
	}
	if c.Void {
		if body.Signature, err = s.signature(ctx, tx, c.Person, "void"); err != nil {
			return part, err
		}
	}
	if err := s.seal(b, l, body); err != nil {
		return part, err
	}
	s.save(b, l)
	if err := tx.SendBatch(ctx, b).Close(); err != nil {
		return part, fmt.Errorf("write correction: %w", err)
	}
	return part, nil
}

func (s *Store) newestVersion(ctx context.Context, tx pgx.Tx, c plant.Correction) (versionFacts, error) {
	v := versionFacts{row: &subgroupRow{position: position{c.TakenAt, c.Subgroup}}}
	var part, gauge *uuid.UUID
	r := v.row
	err := tx.QueryRow(ctx, `select version, voided, round_id, setup_version, decimals, streams, machine_id, part_id, lot, gauge_id,
			readings, reading_sum, reading_range, reading_sd, outside
		from subgroup where characteristic_id = $1 and taken_at = $2 and id = $3 order by version desc limit 1`,
		c.Characteristic, c.TakenAt, c.Subgroup).
		Scan(&v.version, &v.voided, &v.round, &v.setup, &v.decimals, &v.streams, &v.machine, &part, &v.lot, &gauge,
			&r.readings, &r.stats.Sum, &r.stats.Range, &r.stats.SD, &r.outside)
	if err != nil {
		return v, fmt.Errorf("read subgroup: %w", missing(err, "There is no such subgroup."))
	}
	v.part, v.gauge = orNil(part), orNil(gauge)
	r.version, r.setup, r.voided = v.version, v.setup, v.voided
	r.stats.N, r.stats.Decimals = len(r.readings), v.decimals
	return v, nil
}

// openIsHold reports whether a matter has a standing line that holds the product.
func (s *Store) openIsHold(ctx context.Context, q querier, matter uuid.UUID) (hold bool, err error) {
	if matter == uuid.Nil {
		return false, nil
	}
	err = q.QueryRow(ctx, `select exists (select from signal where matter_id = $1 and panel in ('reading', 'gauge check') and not withdrawn)`, matter).Scan(&hold)
	if err != nil {
		return false, fmt.Errorf("read what is open: %w", err)
	}
	return hold, nil
}

// addBoundary enters a boundary and judges again what lies behind it.
func (s *Store) addBoundary(ctx context.Context, tx pgx.Tx, b *pgx.Batch, l *locked, bd plant.Boundary, now time.Time) error {
	_, err := tx.Exec(ctx, `insert into boundary (id, plant_id, characteristic_id, at, kind, revision_id, recorded_at)
		values ($1, $2, $3, $4, $5, $6, $7)`, bd.ID, s.plant(), l.id, bd.At, string(bd.Kind), orNull(bd.Revision), now)
	if err != nil {
		return fmt.Errorf("insert boundary: %w", err)
	}
	if bd.At.After(l.last.taken) {
		return nil // nothing was taken behind it yet; the next subgroup starts afresh by itself
	}
	_, err = s.refold(ctx, tx, b, l, patch{at: position{taken: bd.At}, boundary: bd.ID}, now)
	return err
}
