package auth

import (
	"context"
	"fmt"
	"net/netip"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
)

const annasBadge, annasPIN = "1001", "274913"

// at is the context of a request from a device.
func at(ctx context.Context, kind plant.DeviceKind) context.Context {
	return context.WithValue(ctx, visitKey{}, &visit{device: plant.Device{ID: uuid.New(), Kind: kind}})
}

func newPINDoor(t *testing.T, c *clock) *Door {
	t.Helper()
	d, b := newDoor(t, c)
	d.Pins = NewThrottle(c.now)
	hash, err := d.Hasher.Hash(t.Context(), annasPIN)
	if err != nil {
		t.Fatal(err)
	}
	p := anna()
	p.Badge = annasBadge
	b.put(p, hash)
	manager := plant.Person{ID: uuid.New(), Login: "max", Badge: "1002", Roles: plant.Roles{plant.Administrator, plant.Engineer}, Active: true}
	b.put(manager, hash)
	return d
}

func TestAPINIsWorthNothingElsewhere(t *testing.T) {
	t.Parallel()
	d := newPINDoor(t, newClock())
	tablet := at(t.Context(), plant.Tablet)
	if p, err := d.CheckPIN(tablet, " 1001 ", annasPIN); err != nil || p.ID != anna().ID {
		t.Errorf("on a tablet: %+v, %v", p, err)
	}
	for name, ctx := range map[string]context.Context{"in a browser that is no device": t.Context(), "on a wall screen": at(t.Context(), plant.Wall), "by a sender": at(t.Context(), plant.Sender)} {
		for range 50 { // it costs nothing: nothing is checked
			if _, err := d.CheckPIN(ctx, annasBadge, annasPIN); !plant.IsKind(err, plant.Forbidden) {
				t.Fatalf("%s: %v, want Forbidden", name, err)
			}
		}
	}
	if _, err := d.Check(tablet, "anna", annasPIN, netip.Addr{}); err != nil {
		// In this book PIN and secret are one; in the store they are two.
		t.Errorf("the secret at a tablet: %v", err)
	}
	if _, err := d.CheckPIN(tablet, "1002", annasPIN); !plant.IsKind(err, plant.Forbidden) {
		t.Errorf("somebody who only manages, by PIN: %v, want Forbidden", err)
	}
	if _, err := d.CheckPIN(tablet, annasBadge, "000000"); !plant.IsKind(err, plant.Invalid) {
		t.Errorf("a wrong PIN: %v, want Invalid", err)
	}
}

func TestWhichPINsMayBeChosen(t *testing.T) {
	t.Parallel()
	for pin, good := range map[Secret]bool{
		"274913": true, "908172635441": true, "27491": false, "9081726354412": false, "27a913": false, "": false,
		"111111": false, "123456": false, "654321": false, "890123": false, "121212": false, "112211": false, "123123": false,
		"004711": false, // the badge
	} {
		if err := CheckPIN(pin, "KR-004711"); (err == nil) != good {
			t.Errorf("%q: %v, want good = %v", string(pin), err, good)
		}
	}
	for range 200 {
		if pin := RandomPIN("1001"); CheckPIN(pin, "1001") != nil {
			t.Fatalf("a made PIN is refused: %s", string(pin))
		}
	}
}

// TestGuessingPINsIsSlowAndThePlantGoesOn plays a shift of eight hours. Somebody tries
// PINs for one badge every second, on one tablet and then on sixty; meanwhile two hundred
// people sign in at forty tablets every quarter of an hour, the owner of the badge too,
// and nobody of them ever waits.
func TestGuessingPINsIsSlowAndThePlantGoesOn(t *testing.T) {
	t.Parallel()
	const shift, people, tablets = 8 * time.Hour, 200, 40
	device := make([]Source, tablets+60)
	for i := range device {
		device[i] = DeviceSource(uuid.New())
	}
	for _, tc := range []struct {
		name   string
		from   []Source
		atMost int // tries in a shift; a million PINs are possible
	}{
		{"one tablet", device[tablets : tablets+1], 120},
		{"sixty tablets", device[tablets:], 1500},
		// Without a device nothing is checked at all; were it, this is what sixty addresses get.
		{"sixty addresses", addresses(60), 1500},
	} {
		c := newClock()
		th := NewThrottle(c.now)
		signIn := func(person int) (pause time.Duration) {
			a, pause := th.Try(fmt.Sprint("badge", person), device[person%tablets])
			if a != nil {
				a.Succeeded()
			}
			return pause
		}
		for p := range people {
			signIn(p) // the shift begins
		}
		tries, waited, signIns := 0, 0, 0
		for second := range int(shift / time.Second) {
			c.add(time.Second)
			if _, pause := th.Try("badge7", tc.from[second%len(tc.from)]); pause == 0 {
				tries++
			}
			if second%(15*60) < people { // one a second, so that they meet the guesser
				signIns++
				if signIn(second%(15*60)) > 0 {
					waited++
				}
			}
		}
		t.Logf("from %s: %d tries got through in %v, a chance of 1 in %d; %d sign-ins meanwhile, %d had to wait", tc.name, tries, shift, 1_000_000/tries, signIns, waited)
		if tries > tc.atMost {
			t.Errorf("from %s: %d tries in a shift, want at most %d", tc.name, tries, tc.atMost)
		}
		if waited > 0 {
			t.Errorf("from %s: %d of %d sign-ins of others had to wait", tc.name, waited, signIns)
		}
	}
}

func addresses(n int) []Source {
	out := make([]Source, n)
	for i := range out {
		out[i] = AddressSource(addr(i))
	}
	return out
}

// TestTabletsBehindOneAddressDoNotHoldUpOneAnother: the plant's tablets share an address.
func TestTabletsBehindOneAddressDoNotHoldUpOneAnother(t *testing.T) {
	t.Parallel()
	c := newClock()
	d := newPINDoor(t, c)
	noisy, calm := at(t.Context(), plant.Tablet), at(t.Context(), plant.Tablet)
	for i := range 60 {
		_, _ = d.Check(noisy, fmt.Sprint("operator", i), "wrong", tablet)
		_, _ = d.CheckPIN(noisy, fmt.Sprint("badge", i), "000000")
	}
	if _, err := d.CheckPIN(noisy, "1003", "000000"); !plant.IsKind(err, plant.Forbidden) {
		t.Errorf("after 60 wrong badges on one tablet: %v, want a pause there", err)
	}
	if _, err := d.CheckPIN(calm, annasBadge, annasPIN); err != nil {
		t.Errorf("on the tablet beside it: %v", err)
	}
}
