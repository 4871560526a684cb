package auth

import (
	"context"
	"crypto/sha256"
	"slices"
	"sync/atomic"
	"testing"
	"time"

	"github.com/alexedwards/scs/v2/memstore"
	"github.com/google/uuid"

	"holdfast/internal/plant"
)

// oneDevice is a store of a single device that is revoked at some time.
type oneDevice struct {
	plant.Device
	hash    [sha256.Size]byte
	revoked atomic.Bool
}

func (o *oneDevice) DeviceBySecret(_ context.Context, hash []byte) (plant.Device, error) {
	if !slices.Equal(hash, o.hash[:]) {
		return plant.Device{}, plant.NotFoundf("", "There is no such device.")
	}
	d := o.Device
	if o.revoked.Load() {
		d.RevokedAt = d.EnrolledAt.Add(time.Hour)
	}
	return d, nil
}

func (o *oneDevice) ActiveDevices(_ context.Context, ids []uuid.UUID) ([]uuid.UUID, error) {
	if o.revoked.Load() {
		return nil, nil
	}
	return ids, nil
}

func (o *oneDevice) Enrol(context.Context, string, []byte) (plant.Device, error) {
	return o.Device, nil
}
func (o *oneDevice) NoteContact(context.Context, ...uuid.UUID) error          { return nil }
func (o *oneDevice) NotePresence(context.Context, uuid.UUID, uuid.UUID) error { return nil }

// A socket that is ended sends its page to the server at once. Whatever was remembered of
// the device must be gone by then, also where the check of the sockets is the first to see
// that it was revoked: before, the tablet was shown its badge page and stayed there.
func TestAnEndedSocketOfADeviceFindsItRevoked(t *testing.T) {
	now := time.Date(2026, 3, 12, 12, 0, 0, 0, time.UTC)
	clock := func() time.Time { return now } // stands still: nothing that is remembered runs out
	const token = "the secret of the wall screen"
	o := &oneDevice{Device: plant.Device{ID: uuid.New(), Kind: plant.Wall, Name: "Wall", EnrolledAt: now}, hash: sha256.Sum256([]byte(token))}
	devices := NewDevices(DeviceOptions{Store: o, Now: clock})
	s := NewSessions(SessionOptions{Store: memstore.NewWithCleanupInterval(0), People: newBook(), Devices: devices, PlainHTTP: true, Now: clock})
	t.Cleanup(s.Close)
	ctx := context.Background()
	if _, err := devices.Authenticate(ctx, token); err != nil {
		t.Fatal(err)
	}
	socket := DeviceSession(o.ID)
	if ended, err := s.Ended(ctx, []string{socket}); err != nil || len(ended) != 0 {
		t.Fatalf("before: %v, %v", ended, err)
	}
	o.revoked.Store(true)
	if ended, err := s.Ended(ctx, []string{socket}); err != nil || !slices.Equal(ended, []string{socket}) {
		t.Fatalf("the socket of a revoked device goes on: %v, %v", ended, err)
	}
	if d, err := devices.Authenticate(ctx, token); !plant.IsKind(err, plant.Forbidden) {
		t.Errorf("right after its socket was ended the device is still known: %+v, %v", d, err)
	}
}
