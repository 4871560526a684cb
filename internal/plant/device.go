package plant

import (
	"time"

	"github.com/google/uuid"
)

// DeviceKind is what a device is for.
type DeviceKind string

const (
	Tablet DeviceKind = "tablet" // stands at a station; people sign in there by badge and PIN
	Wall   DeviceKind = "wall"   // shows the board, read only, without a person
	Sender DeviceKind = "sender" // a gauge or a machine that sends rounds by itself
)

// DeviceKinds lists the kinds in the order in which they are shown.
var DeviceKinds = []DeviceKind{Tablet, Wall, Sender}

// Known reports whether k is one of the kinds.
func (k DeviceKind) Known() bool {
	for _, have := range DeviceKinds {
		if k == have {
			return true
		}
	}
	return false
}

// Device is something that was let into the plant by a code and is known by a secret
// since. Its secret is not part of it.
type Device struct {
	ID          uuid.UUID
	Kind        DeviceKind
	Name        string
	Station     uuid.UUID     // of a tablet; of a sender that belongs to one place, else Nil
	Line        uuid.UUID     // of a wall screen; Nil is the whole plant
	LockAfter   time.Duration // of a tablet: it locks after so long without a touch
	Language    string        // of a tablet: what it speaks to whoever has no language of their own; "" leaves it to its browser
	EnrolledAt  time.Time
	EnrolledBy  uuid.UUID
	LastContact time.Time // to the minute or so
	RevokedAt   time.Time // zero while it is let in
}

// Active reports whether the device is let in.
func (d Device) Active() bool { return d.ID != uuid.Nil && d.RevokedAt.IsZero() }

// May reports what a device may do without a person: a wall screen sees the board, and
// that is all. What a sender may send is decided where it is taken.
func (d Device) May(a Action) bool { return d.Active() && d.Kind == Wall && a == SeeBoard }

// DeviceCode is the short-lived code that lets one device in.
type DeviceCode struct {
	ID        uuid.UUID
	Code      string // CodeDigits digits
	Device    Device // what it becomes: kind, name, place, lock
	MadeAt    time.Time
	MadeBy    uuid.UUID
	ExpiresAt time.Time
}

// Facts about codes. Eight digits can be typed with gloves; with the pauses that wrong
// ones cost and ten minutes to live, guessing one is hopeless.
const (
	CodeDigits   = 8
	CodeLifetime = 10 * time.Minute
)

// Bounds of the time after which a tablet locks, and what it is unless somebody
// chooses.
const (
	DefaultLock = 10 * time.Minute
	MinLock     = time.Minute
	MaxLock     = 4 * time.Hour
)

const maxDeviceName = 60

// Clean brings what was typed about a device into the form in which it is kept, or says
// what is wrong with it. Whether its place exists is not looked at.
func (d Device) Clean() (Device, error) {
	var err error
	if d.Name, err = CleanTextWithin("name", d.Name, maxDeviceName); err != nil {
		return d, err
	}
	switch {
	case !d.Kind.Known():
		return d, Invalidf("kind", "Say what kind of device it is.")
	case d.Name == "":
		return d, Invalidf("name", "Give the device a name that people will know it by.")
	case d.Kind == Tablet && d.Station == uuid.Nil:
		return d, Invalidf("station", "Say at which station the tablet stands.")
	}
	switch d.Kind {
	case Tablet:
		d.Line = uuid.Nil
		if d.LockAfter == 0 {
			d.LockAfter = DefaultLock
		}
		if d.LockAfter < MinLock || d.LockAfter > MaxLock {
			return d, Invalidf("lock", "A tablet locks after 1 to 240 minutes.")
		}
	case Wall:
		d.Station, d.LockAfter, d.Language = uuid.Nil, 0, ""
	case Sender:
		d.Line, d.LockAfter, d.Language = uuid.Nil, 0, ""
	}
	return d, nil
}
