package store

import (
	"context"
	"maps"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/plant/ledger"
)

// endSessions changes a person's row so that every session that began before is over, and
// enters the instant with what was done. set and where continue the statement, their
// arguments from $4.
func (s *Store) endSessions(ctx context.Context, what string, id, by uuid.UUID, content map[string]any, set, where string, args ...any) error {
	now := s.now()
	sealed := map[string]any{"sessions_since": ledger.Time(now)}
	maps.Copy(sealed, content)
	return s.changePerson(ctx, what, id, by, sealed,
		`update person set sessions_since = $3, `+set+` where id = $1 and plant_id = $2 and erased_at is null `+where, append([]any{now}, args...)...)
}

// SetSecret replaces the hash of a person's secret and ends their sessions.
func (s *Store) SetSecret(ctx context.Context, id uuid.UUID, secretHash string, by uuid.UUID) error {
	return s.endSessions(ctx, "secret changed", id, by, nil, `secret = $4`, ``, secretHash)
}

// SetPIN replaces the hash of the PIN of somebody who has a badge, and ends their sessions.
func (s *Store) SetPIN(ctx context.Context, id uuid.UUID, pinHash string, by uuid.UUID) error {
	return s.endSessions(ctx, "pin changed", id, by, nil, `pin = $4`, `and badge is not null`, pinHash)
}

// SetBadge gives a person a badge and the hash of its PIN, and ends their sessions. An
// empty badge takes both away.
func (s *Store) SetBadge(ctx context.Context, id uuid.UUID, badge, pinHash string, by uuid.UUID) error {
	badge = plant.CleanBadge(badge)
	if len(badge) > plant.MaxBadge {
		return plant.Invalidf("badge", "A badge holds at most %d characters.", plant.MaxBadge)
	}
	var kept *string
	if badge != "" {
		kept = &badge
	} else {
		pinHash = ""
	}
	return s.endSessions(ctx, "badge changed", id, by, map[string]any{"badge": badge != ""}, `badge = $4, pin = $5`, ``, kept, pinHash)
}
