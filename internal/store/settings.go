package store

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"maps"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
	"holdfast/internal/plant/ledger"
)

// settingsFresh is how old settings may be that another server may have changed.
const settingsFresh = 2 * time.Second

// readSettings is what Settings read, and when.
type readSettings struct {
	plant.Settings
	plant uuid.UUID
	read  time.Time
}

// Settings reads the settings of the plant. They may be two seconds old where another
// server changed them.
func (s *Store) Settings(ctx context.Context) (plant.Settings, error) {
	if have := s.settings.Load(); have != nil && have.plant == s.plant() && time.Since(have.read) < settingsFresh {
		return have.Settings, nil
	}
	read := time.Now()
	list, err := s.settingsVersions(ctx, s.pool, ` where v.plant_id = $1 order by v.version desc limit 1`, s.plant())
	if err != nil {
		return plant.Settings{}, err
	}
	now := plant.DefaultSettings()
	if len(list) > 0 {
		now = list[0]
	}
	s.settings.Store(&readSettings{now, s.plant(), read})
	return now, nil
}

// SettingsVersions reads every version of the settings, newest first. The defaults of the
// program, which come before them, are not among them.
func (s *Store) SettingsVersions(ctx context.Context) ([]plant.Settings, error) {
	return s.settingsVersions(ctx, s.pool, ` where v.plant_id = $1 order by v.version desc`, s.plant())
}

func (s *Store) settingsVersions(ctx context.Context, q querier, where string, args ...any) ([]plant.Settings, error) {
	rows, err := q.Query(ctx, `select v.version, v.content, v.reason, v.made_at, v.person_id, p.name
		from plant_settings v join person p on p.id = v.person_id`+where, args...)
	if err != nil {
		return nil, fmt.Errorf("read settings: %w", err)
	}
	list, err := pgx.CollectRows(rows, func(r pgx.CollectableRow) (plant.Settings, error) {
		var v plant.Settings
		var content map[string]string
		if err := r.Scan(&v.Version, &content, &v.Reason, &v.MadeAt, &v.Person, &v.PersonName); err != nil {
			return v, err
		}
		out := plant.SettingsFrom(content)
		out.Version, out.Reason, out.MadeAt, out.Person, out.PersonName = v.Version, v.Reason, v.MadeAt, v.Person, v.PersonName
		return out, nil
	})
	if err != nil {
		return nil, fmt.Errorf("read settings: %w", err)
	}
	return list, nil
}

// ChangeSettings adds a version of the settings. Somebody who changed them meanwhile
// makes it a Conflict; the same change sent again is answered as the first time.
func (s *Store) ChangeSettings(ctx context.Context, c plant.SettingsChange) (plant.Settings, error) {
	if err := c.Clean(); err != nil {
		return plant.Settings{}, err
	}
	content := c.Settings.Content()
	encoded, err := json.Marshal(content)
	if err != nil {
		return plant.Settings{}, fmt.Errorf("encode settings: %w", err)
	}
	v := c.Settings
	err = s.inTx(ctx, func(tx pgx.Tx) error {
		// The head of the plant's chain is locked here as it is when sealing: of two who
		// change at once the second sees the first.
		if _, err := tx.Exec(ctx, `select from chain_head where chain = $1 for update`, s.plant()); err != nil {
			return fmt.Errorf("lock plant chain: %w", err)
		}
		if done, err := s.sentBefore(ctx, tx, c, content); done || err != nil {
			return err
		}
		var newest int
		if err := tx.QueryRow(ctx, `select coalesce(max(version), 0) from plant_settings where plant_id = $1`, s.plant()).Scan(&newest); err != nil {
			return fmt.Errorf("read newest settings: %w", err)
		}
		if newest != c.Replaces {
			return plant.Conflictf("", "Somebody has changed the settings meanwhile. Look at them again.")
		}
		v.Version, v.MadeAt = newest+1, s.now()
		if _, err := tx.Exec(ctx, `insert into plant_settings (plant_id, version, id, content, reason, made_at, person_id)
			values ($1, $2, $3, $4, $5, $6, $7)`, s.plant(), v.Version, c.ID, encoded, c.Reason, v.MadeAt, c.Person); err != nil {
			return fmt.Errorf("insert settings: %w", err)
		}
		return s.appendPlantChain(ctx, tx, ledger.Settings{ID: c.ID, Version: v.Version, At: ledger.Time(v.MadeAt),
			Person: ledger.ID(c.Person), Reason: c.Reason, Content: content})
	})
	if err != nil {
		return plant.Settings{}, fmt.Errorf("change settings: %w", err)
	}
	s.settings.Store(nil)
	return s.Settings(ctx)
}

// sentBefore reports whether this change is on record already; under the same id with
// other content it is a conflict.
func (s *Store) sentBefore(ctx context.Context, tx pgx.Tx, c plant.SettingsChange, content map[string]string) (bool, error) {
	var have map[string]string
	var reason string
	var by uuid.UUID
	err := tx.QueryRow(ctx, `select content, reason, person_id from plant_settings where plant_id = $1 and id = $2`, s.plant(), c.ID).Scan(&have, &reason, &by)
	if errors.Is(err, pgx.ErrNoRows) {
		return false, nil
	}
	if err != nil {
		return false, fmt.Errorf("look for the same change: %w", err)
	}
	if reason != c.Reason || by != c.Person || !maps.Equal(have, content) {
		return false, plant.Conflictf("", "Another change of the settings was sent under this number. Look at them again.")
	}
	return true, nil
}

// sealedSettings are the comparisons of the settings with what was sealed.
var sealedSettings = []string{
	`select e.chain, format('settings %s are not on record as they were sealed', b->>'version')
	from (select chain, convert_from(body, 'UTF8')::jsonb as b from ledger where kind = 'settings') e
	left join plant_settings v on v.plant_id = e.chain and v.version = (b->>'version')::int
	where v.version is null or v.id <> (b->>'id')::uuid or v.content <> b->'content' or v.reason <> b->>'reason'
		or v.made_at <> (b->>'at')::timestamptz or v.person_id is distinct from (b->>'person')::uuid`,
	`select v.plant_id, format('settings %s were never sealed', v.version) from plant_settings v
	where not exists (select from ledger e where e.chain = v.plant_id and e.kind = 'settings'
		and (convert_from(e.body, 'UTF8')::jsonb->>'version')::int = v.version)`,
}
