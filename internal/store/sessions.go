package store

import (
	"context"
	"fmt"

	"github.com/jackc/pgx/v5"
)

// The session library keeps the table sessions; these are the two things that it does
// not do by itself.

// FindSessions reads many stored sessions by their keys; what is not there or has
// expired is left out.
func (s *Store) FindSessions(ctx context.Context, keys []string) (map[string][]byte, error) {
	rows, err := s.pool.Query(ctx, `select token, data from sessions where token = any($1) and expiry > current_timestamp`, keys)
	if err != nil {
		return nil, fmt.Errorf("read sessions: %w", err)
	}
	out := make(map[string][]byte, len(keys))
	var token string
	var data []byte
	_, err = pgx.ForEachRow(rows, []any{&token, &data}, func() error {
		out[token] = data
		data = nil
		return nil
	})
	if err != nil {
		return nil, fmt.Errorf("read sessions: %w", err)
	}
	return out, nil
}

// SessionEnded tells every server that somebody's session was ended by another than its own
// browser.
func (s *Store) SessionEnded(ctx context.Context) { s.admissionChanged(ctx) }

// DeleteExpiredSessions clears away what has expired.
func (s *Store) DeleteExpiredSessions(ctx context.Context) error {
	if _, err := s.pool.Exec(ctx, `delete from sessions where expiry < current_timestamp`); err != nil {
		return fmt.Errorf("clear away sessions: %w", err)
	}
	return nil
}
