package store

import (
	"context"
	"encoding/json"
	"fmt"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
	"holdfast/internal/plant/ledger"
)

// Freeze computes limits from the chosen stretch of the record and freezes them as the
// next revision, signed by the person. The caller has checked that the secret was
// entered again. Somebody who froze meanwhile, or changed the set-up, makes it a
// Conflict.
//
// The study is read before the lock is taken, so that a long one holds up no saving.
func (s *Store) Freeze(ctx context.Context, f plant.FreezeRequest) (plant.Revision, error) {
	if err := f.Check(s.now()); err != nil {
		return plant.Revision{}, err
	}
	h, err := s.History(ctx, f.Characteristic, plant.Stretch{From: f.From, To: f.To})
	if err != nil {
		return plant.Revision{}, err
	}
	if h.Clipped {
		return plant.Revision{}, plant.Invalidf("from", "The stretch holds more than %d subgroups. Choose a shorter one.", MaxStretch)
	}
	if h.State.Setup.Version != f.SetupVersion {
		return plant.Revision{}, plant.Conflictf("", "The set-up was changed meanwhile. Look at the study again.")
	}
	for _, old := range h.Setups {
		if old.Unit != h.State.Setup.Unit {
			return plant.Revision{}, plant.Invalidf("from", "The stretch holds subgroups that were measured in another unit. Begin it later.")
		}
	}
	study := plant.Study{Setup: h.State.Setup, Points: h.Points, LeftOut: f.LeftOut, Estimator: f.Estimator, Multiple: f.Multiple, Rules: f.Rules}
	if err := study.Run(h.Course); err != nil {
		return plant.Revision{}, err
	}
	if !study.CanFreeze() {
		return plant.Revision{}, plant.Invalidf("from", "The readings do not vary within subgroups, so there are no limits to freeze.")
	}
	r := study.Revision()
	r.ID, r.Characteristic, r.Reason, r.Author = newID(), f.Characteristic, f.Reason, f.Person
	if err := s.freeze(ctx, &r, f); err != nil {
		return plant.Revision{}, fmt.Errorf("freeze: %w", err)
	}
	s.measured.Delete(h.State.StationID)
	s.changed(h.State.StationID)
	return r, nil
}

func (s *Store) freeze(ctx context.Context, r *plant.Revision, f plant.FreezeRequest) error {
	rules, err := json.Marshal(r.Rules)
	if err != nil {
		return fmt.Errorf("encode rules: %w", err)
	}
	basis, err := json.Marshal(r.Basis)
	if err != nil {
		return fmt.Errorf("encode basis: %w", err)
	}
	return s.inTx(ctx, func(tx pgx.Tx) error {
		l, err := s.lockOne(ctx, tx, r.Characteristic)
		if err != nil {
			return err
		}
		var newest int
		if err := tx.QueryRow(ctx, `select coalesce(max(number), 0) from revision where characteristic_id = $1`, l.id).Scan(&newest); err != nil {
			return fmt.Errorf("read newest revision: %w", err)
		}
		if newest != f.After || l.setupVersion != f.SetupVersion {
			return plant.Conflictf("", "Somebody has frozen limits or changed the set-up meanwhile. Look at the study again.")
		}
		// Now is read under the lock: a save that went before was told by the old limits and
		// is to stay judged by them, however long the study took.
		now := s.now()
		r.Number, r.FrozenAt = newest+1, now
		if r.InForceFrom = plant.CutTime(f.InForceFrom); r.InForceFrom.Before(now) {
			r.InForceFrom = now
		}
		signature, err := s.signature(ctx, tx, f.Person, "freeze")
		if err != nil {
			return err
		}
		if _, err := tx.Exec(ctx, `insert into revision (id, plant_id, characteristic_id, number, setup_version, chart, estimator, center, sigma, multiple,
				rules, basis, reason, author_id, frozen_at, in_force_from)
			values ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12, $13, $14, $15, $16)`,
			r.ID, s.plant(), l.id, r.Number, r.SetupVersion, string(r.Chart), string(r.Estimator), r.Center, r.Sigma, r.Multiple,
			rules, basis, r.Reason, r.Author, r.FrozenAt, r.InForceFrom); err != nil {
			return fmt.Errorf("insert revision: %w", err)
		}
		b := &pgx.Batch{}
		if err := s.seal(b, l, revisionBody(*r, signature)); err != nil {
			return err
		}
		if err := s.addBoundary(ctx, tx, b, l, plant.Boundary{ID: newID(), At: r.InForceFrom, Kind: plant.ByRevision, Revision: r.ID}, r.FrozenAt); err != nil {
			return err
		}
		s.save(b, l)
		return tx.SendBatch(ctx, b).Close()
	})
}

func revisionBody(r plant.Revision, signature *ledger.Signature) ledger.Revision {
	body := ledger.Revision{
		Revision: r.ID, Number: r.Number, SetupVersion: r.SetupVersion, Chart: string(r.Chart), Estimator: string(r.Estimator),
		Center: ledger.Number(r.Center), Sigma: ledger.Number(r.Sigma), Multiple: ledger.Number(r.Multiple),
		From: ledger.At(r.Basis.From), To: ledger.At(r.Basis.To), Subgroups: r.Basis.Subgroups, Given: r.Basis.Given, Reason: r.Reason,
		InForceFrom: ledger.Time(r.InForceFrom), Signature: signature, Location: []string{}, Dispersion: []string{},
	}
	for _, rule := range r.Rules.Location {
		body.Location = append(body.Location, plant.RuleKey(rule))
	}
	for _, rule := range r.Rules.Dispersion {
		body.Dispersion = append(body.Dispersion, plant.RuleKey(rule))
	}
	for _, l := range r.Basis.LeftOut {
		body.LeftOut = append(body.LeftOut, ledger.LeftOut{Subgroup: l.Subgroup, Cause: l.Cause})
	}
	return body
}

// learnAgain lets a characteristic learn from now on. Limits that wait to come into force
// were frozen for the set-up before and are cancelled at their instant: of boundaries at
// one instant the last rules.
func (s *Store) learnAgain(ctx context.Context, tx pgx.Tx, b *pgx.Batch, l *locked, now time.Time) error {
	rows, err := tx.Query(ctx, `select distinct at from boundary where characteristic_id = $1 and at > $2 and kind = 'revision' order by at`, l.id, now)
	if err != nil {
		return fmt.Errorf("read boundaries: %w", err)
	}
	ends, err := pgx.CollectRows(rows, pgx.RowTo[time.Time])
	if err != nil {
		return fmt.Errorf("read boundaries: %w", err)
	}
	for _, at := range append([]time.Time{now}, ends...) {
		if err := s.addBoundary(ctx, tx, b, l, plant.Boundary{ID: newID(), At: at, Kind: plant.BySetup}, now); err != nil {
			return err
		}
		// What this changed must be written before it can be read again.
		if err := tx.SendBatch(ctx, b).Close(); err != nil {
			return fmt.Errorf("write boundary: %w", err)
		}
		*b = pgx.Batch{}
	}
	return nil
}

// ChangeSetup adds a version of a characteristic's set-up. Where limits of the old one
// mean nothing under it, the characteristic is learning from here on.
func (s *Store) ChangeSetup(ctx context.Context, characteristic uuid.UUID, setup plant.Setup, replaces int, by uuid.UUID) error {
	if err := setup.Validate(); err != nil {
		return err
	}
	var station uuid.UUID
	err := s.inTx(ctx, func(tx pgx.Tx) error {
		l, err := s.lockOne(ctx, tx, characteristic)
		if err != nil {
			return err
		}
		now := s.now()
		station = l.station
		if l.setupVersion != replaces {
			return plant.Conflictf("", "Somebody has changed the set-up meanwhile. Look at it again.")
		}
		old, err := s.setup(ctx, tx, l.id, l.setupVersion)
		if err != nil {
			return err
		}
		setup.Version, setup.MadeAt = replaces+1, now
		b := &pgx.Batch{}
		if err := s.queueSetup(b, l.id, setup, by); err != nil {
			return err
		}
		l.setupVersion = setup.Version
		if err := s.seal(b, l, setupBody(l.id, setup, by)); err != nil {
			return err
		}
		if setup.NeedsNewLimits(old) {
			if err := s.learnAgain(ctx, tx, b, l, now); err != nil {
				return err
			}
		}
		s.save(b, l)
		return tx.SendBatch(ctx, b).Close()
	})
	if err != nil {
		return fmt.Errorf("change set-up: %w", err)
	}
	s.measured.Delete(station)
	s.changed(station)
	return nil
}
