package store

import (
	"context"
	"encoding/json"
	"fmt"
	"log/slog"
	"slices"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
)

// OwnerCourse follows the owner of a characteristic through the newest part of its
// record: how it stands now, and every change of owner or reason, oldest first. It reads
// a bounded number of subgroups, however long the record is.
func (s *Store) OwnerCourse(ctx context.Context, characteristic uuid.UUID) (now plant.Standing, course []plant.Ownership, err error) {
	err = pgx.BeginTxFunc(ctx, s.pool, pgx.TxOptions{IsoLevel: pgx.RepeatableRead, AccessMode: pgx.ReadOnly}, func(tx pgx.Tx) error {
		r, err := s.ownerRecord(ctx, tx, characteristic)
		if err == nil {
			now, course = r.Fold()
		}
		return err
	})
	if err != nil {
		return now, nil, fmt.Errorf("follow the owner: %w", err)
	}
	return now, course, nil
}

// ownerRecord reads what routing follows from.
func (s *Store) ownerRecord(ctx context.Context, q querier, id uuid.UUID) (plant.OwnerRecord, error) {
	r := plant.OwnerRecord{Until: s.now()}
	versions, err := s.settingsVersions(ctx, q, ` where v.plant_id = $1 order by v.version`, s.plant())
	if err != nil {
		return r, err
	}
	r.Settings = versions
	window := plant.DefaultSettings().Owner.Window
	for _, v := range versions {
		window = max(window, v.Owner.Window)
	}
	if err := s.ownerSubgroups(ctx, q, id, plant.OwnerReach+window, &r); err != nil {
		return r, err
	}
	from := time.Time{}
	if r.Cut {
		from = r.Subgroups[0].TakenAt
	}
	if r.Course, err = s.course(ctx, q, id, from, r.Until); err != nil {
		return r, err
	}
	var setups int
	if err := q.QueryRow(ctx, `select setup_version from characteristic_state where characteristic_id = $1`, id).Scan(&setups); err != nil {
		return r, fmt.Errorf("read set-up version: %w", missing(err, "There is no such characteristic."))
	}
	for v := 1; v <= setups; v++ {
		setup, err := s.setup(ctx, q, id, v)
		if err != nil {
			return r, err
		}
		r.Setups = append(r.Setups, setup)
	}
	matters, err := s.matters(ctx, q, ` where m.characteristic_id = $1 and (m.closed_at is null or m.closed_at >= $2) order by m.opened_taken`, id, from)
	if err != nil {
		return r, err
	}
	for _, m := range matters {
		r.Matters = append(r.Matters, *m)
	}
	r.Acceptances, err = s.acceptances(ctx, q, id)
	return r, err
}

func (s *Store) ownerSubgroups(ctx context.Context, q querier, id uuid.UUID, most int, r *plant.OwnerRecord) error {
	rows, err := q.Query(ctx, `select taken_at, n, reading_sum, reading_sd, decimals from (
			select distinct on (taken_at, id) taken_at, id, cardinality(readings) as n, reading_sum, reading_sd, decimals, voided
			from subgroup where characteristic_id = $1 order by taken_at desc, id desc, version desc) newest
		where not voided limit $2`, id, most+1)
	if err != nil {
		return fmt.Errorf("read subgroups: %w", err)
	}
	r.Subgroups, err = pgx.CollectRows(rows, func(row pgx.CollectableRow) (g plant.OwnerSubgroup, err error) {
		err = row.Scan(&g.TakenAt, &g.Stats.N, &g.Stats.Sum, &g.Stats.SD, &g.Stats.Decimals)
		return g, err
	})
	if err != nil {
		return fmt.Errorf("read subgroups: %w", err)
	}
	if r.Cut = len(r.Subgroups) > most; r.Cut {
		r.Subgroups = r.Subgroups[:most]
	}
	slices.Reverse(r.Subgroups)
	return nil
}

// staleAfter is how old a standing may be while subgroups come in. A matter that opened
// or closed, and new settings, make it stale at once.
const staleAfter = time.Minute

// standingsAtOnce bounds what one pass takes on, so that a pass is short.
const standingsAtOnce = 64

// RefreshStandings computes anew how the characteristics stand whose record has moved on,
// and returns how many it took on: fewer than all in one pass when there are many. With
// all set, also those that were computed a moment ago. Nothing here locks what a save
// needs; another server that does the same writes the same.
func (s *Store) RefreshStandings(ctx context.Context, all bool) (int, error) {
	settings, err := s.Settings(ctx)
	if err != nil {
		return 0, err
	}
	before := s.now().Add(-staleAfter)
	if all {
		before = s.now().Add(time.Hour)
	}
	rows, err := s.pool.Query(ctx, `select cs.characteristic_id, cs.station_id from characteristic_state cs
		left join owner_standing o on o.characteristic_id = cs.characteristic_id
		where cs.plant_id = $1 and (o.characteristic_id is null or o.settings_version <> $2
			or o.state_version <> cs.version and (o.computed_at < $3 or o.matter_id is distinct from cs.matter_id))
		order by o.computed_at nulls first, cs.characteristic_id limit $4`, s.plant(), settings.Version, before, standingsAtOnce)
	if err != nil {
		return 0, fmt.Errorf("look for stale standings: %w", err)
	}
	type stale struct{ id, station uuid.UUID }
	list, err := pgx.CollectRows(rows, func(r pgx.CollectableRow) (v stale, err error) {
		err = r.Scan(&v.id, &v.station)
		return v, err
	})
	if err != nil {
		return 0, fmt.Errorf("look for stale standings: %w", err)
	}
	for i, v := range list {
		moved, err := s.refreshStanding(ctx, v.id)
		if err != nil {
			return i, err
		}
		if moved {
			s.changed(v.station)
		}
	}
	return len(list), nil
}

// refreshStanding reports whether anything that people see of it has changed.
func (s *Store) refreshStanding(ctx context.Context, id uuid.UUID) (moved bool, err error) {
	var version int64
	var matter *uuid.UUID
	var settings int
	var now plant.Standing
	err = pgx.BeginTxFunc(ctx, s.pool, pgx.TxOptions{IsoLevel: pgx.RepeatableRead, AccessMode: pgx.ReadOnly}, func(tx pgx.Tx) error {
		if err := tx.QueryRow(ctx, `select version, matter_id from characteristic_state where characteristic_id = $1`, id).Scan(&version, &matter); err != nil {
			return fmt.Errorf("read state: %w", err)
		}
		r, err := s.ownerRecord(ctx, tx, id)
		if err != nil {
			return err
		}
		if n := len(r.Settings); n > 0 {
			settings = r.Settings[n-1].Version
		}
		now, _ = r.Fold()
		return nil
	})
	if err != nil {
		return false, fmt.Errorf("refresh a standing: %w", err)
	}
	encoded, err := json.Marshal(now)
	if err != nil {
		return false, fmt.Errorf("encode a standing: %w", err)
	}
	// Of two servers the one that saw more wins.
	err = s.pool.QueryRow(ctx, `with old as (select standing from owner_standing where characteristic_id = $1),
		put as (insert into owner_standing (characteristic_id, plant_id, state_version, settings_version, matter_id, computed_at, standing)
			values ($1, $2, $3, $4, $5, $6, $7)
			on conflict (characteristic_id) do update set state_version = excluded.state_version, settings_version = excluded.settings_version,
				matter_id = excluded.matter_id, computed_at = excluded.computed_at, standing = excluded.standing
			where owner_standing.state_version <= excluded.state_version)
		select coalesce((select standing from old) <> $7, true)`,
		id, s.plant(), version, settings, matter, s.now(), encoded).Scan(&moved)
	if err != nil {
		return false, fmt.Errorf("keep a standing: %w", err)
	}
	return moved, nil
}

// Between two passes the keeper rests, and after a long one longer: it takes a fifth of
// one processor at most, however much comes in.
const (
	keeperRest  = 3 * time.Second
	keeperShare = 4
)

// KeepStandings keeps the standings fresh until ctx ends.
func (s *Store) KeepStandings(ctx context.Context, log *slog.Logger) {
	for {
		began := time.Now()
		n, err := s.RefreshStandings(ctx, false)
		if err != nil && ctx.Err() == nil {
			log.Warn("how characteristics stand could not be refreshed", "error", err)
		}
		rest := time.Since(began) * keeperShare
		if n < standingsAtOnce {
			rest = max(rest, keeperRest)
		}
		select {
		case <-ctx.Done():
			return
		case <-time.After(rest):
		}
	}
}
