package plant

import (
	"time"

	"github.com/google/uuid"
)

// Aside is something that came and could not be taken as it came. It was kept as it
// was, and the station shows it until a person has seen it.
type Aside struct {
	ID         uuid.UUID
	Station    uuid.UUID // Nil when it named none that there is
	About      uuid.UUID // the number it came under
	Device     uuid.UUID // that sent it; Nil: a page did
	DeviceName string
	Person     uuid.UUID // who sent it; Nil: a device did by itself
	CameAt     time.Time
	Why        *Error
}

// Restore gives it the reason back that was found when it came.
func (a *Aside) Restore(message, format string, args []any) {
	a.Why = &Error{Kind: Invalid, Message: message, Format: format, Args: args}
}

// ShownAsides is how many of what was set aside a station shows at once, the newest
// first.
const ShownAsides = 3

// Asides is what was set aside at a station and was not cleared yet.
type Asides struct {
	Newest []Aside // at most ShownAsides
	More   bool    // there are older ones
}
