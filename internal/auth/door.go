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
	// CredentialByBadge finds who has a badge (already cleaned) and the stored hash of
	// its PIN. A badge that nobody has is a plant.NotFound.
	CredentialByBadge(ctx context.Context, badge string) (plant.Person, string, error)
	// Rehash replaces the stored hash old by fresh if it still is old.
	Rehash(ctx context.Context, person uuid.UUID, old, fresh string) error
}

// Door checks who wants to come in.
type Door struct {
	Credentials Credentials
	Hasher      *Hasher
	Throttle    *Throttle
	Pins        *Throttle // of PINs, apart: guessing one does not hold up the other
	Log         *slog.Logger
}

// Check gives the person whose login and secret these are. It answers unknown
// logins, wrong secrets and people who are no longer active alike, and in the
// same time: plant.Invalid. During a pause it answers plant.Forbidden with the
// pause in words. It also serves where a secret is entered again to sign
// something; the caller then compares the person. On an enrolled device the
// device is where the try comes from, not the address.
func (d *Door) Check(ctx context.Context, login string, s Secret, from netip.Addr) (plant.Person, error) {
	login = plant.CleanLogin(login)
	return d.check(ctx, d.Throttle, login, s, sourceOf(ctx, from), "password", d.Credentials.Credential)
}

// CheckPIN gives the person whose badge and PIN these are, as Check does. It is for an
// enrolled tablet that is let in and answers plant.Forbidden anywhere else, whatever was
// typed, so that a PIN is worth nothing there.
func (d *Door) CheckPIN(ctx context.Context, badge string, pin Secret) (plant.Person, error) {
	device, ok := DeviceFrom(ctx)
	if !ok || device.Kind != plant.Tablet {
		return plant.Person{}, plant.Forbiddenf("pin", "Badge and PIN work on an enrolled tablet only. Sign in with your name and password.")
	}
	badge = plant.CleanBadge(badge)
	p, err := d.check(ctx, d.Pins, badge, pin, DeviceSource(device.ID), "pin", d.Credentials.CredentialByBadge)
	if err == nil && len(p.AtTablet().Roles) == 0 {
		return plant.Person{}, plant.Forbiddenf("pin", "A PIN opens the work at a station, which is not yours. Sign in with your name and password.")
	}
	return p, err
}

func sourceOf(ctx context.Context, from netip.Addr) Source {
	if device, ok := DeviceFrom(ctx); ok {
		return DeviceSource(device.ID)
	}
	return AddressSource(from)
}

func (d *Door) check(ctx context.Context, t *Throttle, name string, s Secret, from Source, field string,
	find func(ctx context.Context, name string) (plant.Person, string, error)) (plant.Person, error) {
	attempt, pause := t.Try(name, from)
	if pause > 0 {
		return plant.Person{}, waitFor(field, pause)
	}
	person, stored, err := find(ctx, name)
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
		if field == "pin" {
			return plant.Person{}, plant.Invalidf(field, "Badge or PIN is wrong. Try again.")
		}
		return plant.Person{}, plant.Invalidf(field, "Name or password is wrong. Type them again.")
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
func waitFor(field string, pause time.Duration) *plant.Error {
	seconds := int((pause + time.Second - 1) / time.Second)
	switch {
	case seconds == 1:
		return plant.Forbiddenf(field, "Too many wrong tries. Try again in 1 second.")
	case seconds < 60:
		return plant.Forbiddenf(field, "Too many wrong tries. Try again in %d seconds.", seconds)
	case seconds == 60:
		return plant.Forbiddenf(field, "Too many wrong tries. Try again in 1 minute.")
	}
	return plant.Forbiddenf(field, "Too many wrong tries. Try again in %d minutes.", (seconds+59)/60)
}
