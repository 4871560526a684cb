package auth

import (
	"context"
	"fmt"
	"log/slog"
	"net/netip"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
)

// Credentials is where logins and the hashes of secrets are kept.
type Credentials interface {
	// Credential finds who signs in by a login (already cleaned) and the stored
	// hash. A login that nobody has is a plant.NotFound.
	Credential(ctx context.Context, login string) (plant.Person, string, error)
	// Rehash replaces the stored hash old by fresh if it still is old.
	Rehash(ctx context.Context, person uuid.UUID, old, fresh string) error
}

// Door checks who wants to come in.
type Door struct {
	Credentials Credentials
	Hasher      *Hasher
	Throttle    *Throttle
	Log         *slog.Logger
}

// Check gives the person whose login and secret these are. It answers unknown
// logins, wrong secrets and people who are no longer active alike, and in the
// same time: plant.Invalid. During a pause it answers plant.Forbidden with the
// pause in words. It also serves where a secret is entered again to sign
// something; the caller then compares the person.
func (d *Door) Check(ctx context.Context, login string, s Secret, from netip.Addr) (plant.Person, error) {
	login = plant.CleanLogin(login)
	attempt, pause := d.Throttle.Try(login, from)
	if pause > 0 {
		return plant.Person{}, waitFor(pause)
	}
	person, stored, err := d.Credentials.Credential(ctx, login)
	if err != nil && !plant.IsKind(err, plant.NotFound) {
		attempt.Void()
		return plant.Person{}, fmt.Errorf("find who signs in: %w", err)
	}
	if err != nil {
		person, stored = plant.Person{}, ""
	}
	right, err := d.Hasher.Verify(ctx, stored, s)
	if err != nil {
		attempt.Void()
		return plant.Person{}, fmt.Errorf("check a secret: %w", err)
	}
	if !right || !person.Active {
		return plant.Person{}, plant.Invalidf("password", "Name or password is wrong. Type them again.")
	}
	attempt.Succeeded()
	if d.Hasher.NeedsRehash(stored) {
		d.rehash(ctx, person.ID, stored, s)
	}
	return person, nil
}

// rehash brings an old hash up to the present cost. That it fails is no reason
// to keep somebody out.
func (d *Door) rehash(ctx context.Context, person uuid.UUID, old string, s Secret) {
	fresh, err := d.Hasher.Hash(ctx, s)
	if err == nil {
		err = d.Credentials.Rehash(ctx, person, old, fresh)
	}
	if err != nil {
		d.Log.ErrorContext(ctx, "auth: renew a stored hash", "person", person, "error", err)
	}
}

// waitFor says how long the pause is, rounded up, so that waiting as long as told is
// enough.
func waitFor(pause time.Duration) *plant.Error {
	seconds := int((pause + time.Second - 1) / time.Second)
	switch {
	case seconds == 1:
		return plant.Forbiddenf("password", "Too many wrong tries. Try again in 1 second.")
	case seconds < 60:
		return plant.Forbiddenf("password", "Too many wrong tries. Try again in %d seconds.", seconds)
	case seconds == 60:
		return plant.Forbiddenf("password", "Too many wrong tries. Try again in 1 minute.")
	}
	return plant.Forbiddenf("password", "Too many wrong tries. Try again in %d minutes.", (seconds+59)/60)
}
