package store

import (
	"context"
	"fmt"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"
)

// NoteContact keeps when devices were last heard of.
func (s *Store) NoteContact(ctx context.Context, ids ...uuid.UUID) error {
	if _, err := s.pool.Exec(ctx, `update device set last_contact = $2 where id = any($1) and revoked_at is null`, ids, s.now()); err != nil {
		return fmt.Errorf("note contact of devices: %w", err)
	}
	return nil
}

// NotePresence keeps that somebody signed in on a device.
func (s *Store) NotePresence(ctx context.Context, device, person uuid.UUID) error {
	_, err := s.pool.Exec(ctx, `insert into device_presence (device_id, person_id, plant_id, at) values ($1, $2, $3, $4)
		on conflict (device_id, person_id) do update set at = excluded.at`, device, person, s.plant(), s.now())
	if err != nil {
		return fmt.Errorf("note who is at a device: %w", err)
	}
	return nil
}

// Present gives who signed in on a device since then.
func (s *Store) Present(ctx context.Context, device uuid.UUID, since time.Time) ([]uuid.UUID, error) {
	rows, err := s.pool.Query(ctx, `select person_id from device_presence where device_id = $1 and at >= $2`, device, since)
	if err != nil {
		return nil, fmt.Errorf("read who was at a device: %w", err)
	}
	return pgx.CollectRows(rows, pgx.RowTo[uuid.UUID])
}
