package demo

import (
	"context"
	"crypto/rand"
	"crypto/sha256"
	"fmt"
	"time"

	"holdfast/internal/plant"
	"holdfast/internal/store"
)

// badges of the works and their PINs. They are no secret: the demo's sign-in page shows
// them, so that a tablet can be tried.
var badges = []struct{ login, badge, pin string }{
	{"operator1", "KR1001", "274913"},
	{"operator2", "KR1002", "608135"},
	{"supervisor1", "KR1003", "391742"},
}

// A Badge is a badge of somebody of the works, with its PIN.
type Badge struct{ Name, Badge, PIN string }

// Badges lists the badges of the works.
func Badges() []Badge {
	var out []Badge
	for _, b := range badges {
		for _, p := range people {
			if p.login == b.login {
				out = append(out, Badge{p.name, b.badge, b.pin})
			}
		}
	}
	return out
}

// HashPIN makes the hash that is stored of a PIN.
type HashPIN func(ctx context.Context, pin string) (string, error)

// equip gives people their badges and enrols what stands in the works: a tablet at each
// station, a wall screen over the hall and a gauge that sends by itself. Nobody has the
// secrets of these; a browser becomes a tablet by a code of its own.
func (b *builder) equip(ctx context.Context, st *store.Store, hashPIN HashPIN) error {
	administrator := b.people[plant.Administrator][0]
	for _, one := range badges {
		p, err := st.PersonByLogin(ctx, one.login)
		if err != nil {
			return err
		}
		hash, err := hashPIN(ctx, one.pin)
		if err != nil {
			return err
		}
		if err := st.SetBadge(ctx, p.ID, one.badge, hash, administrator); err != nil {
			return err
		}
	}
	devices := []plant.Device{{Kind: plant.Wall, Name: "Wall screen, hall"}}
	for _, w := range b.walkers {
		devices = append(devices, plant.Device{Kind: plant.Tablet, Name: "Tablet " + w.place.name, Station: w.station.ID})
	}
	devices = append(devices, plant.Device{Kind: plant.Sender, Name: "Test bench sender", Station: b.walkers[len(b.walkers)-1].station.ID})
	for _, d := range devices {
		code, err := st.MakeDeviceCode(ctx, d, administrator)
		if err != nil {
			return err
		}
		secret := sha256.Sum256([]byte(rand.Text()))
		if _, err := st.Enrol(ctx, code.Code, secret[:]); err != nil {
			return fmt.Errorf("enrol %s: %w", d.Name, err)
		}
	}
	return nil
}

// contacts says when the devices were last heard of: just now, but for the wall screen,
// which somebody switched off two days ago.
func (b *builder) contacts(ctx context.Context) error {
	all, err := b.store.Devices(ctx)
	if err != nil {
		return err
	}
	for i, d := range all {
		ago := time.Duration(i%4) * time.Minute
		if d.Kind == plant.Wall {
			ago = 47 * time.Hour
		}
		if err := b.store.WithClock(func() time.Time { return b.end.Add(-ago) }).NoteContact(ctx, d.ID); err != nil {
			return err
		}
	}
	return nil
}
