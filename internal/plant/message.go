package plant

import (
	"time"

	"github.com/google/uuid"
)

// Message leaves the box: what is said to one target because of a step.
type Message struct {
	Target string // name of the target in the configuration
	Title  string // one line that says what it is about
	Body   string // as it is sent, each time the same
}

// Outgoing is a message on its way.
type Outgoing struct {
	ID uuid.UUID // the receiver knows a repetition by it
	Message
	Claim     uuid.UUID // of this attempt
	CreatedAt time.Time
	Attempts  int // this one included
}

// Undelivered is a message that could not be delivered and was given up.
type Undelivered struct {
	ID        uuid.UUID
	Target    string
	Title     string
	CreatedAt time.Time
	GivenUpAt time.Time
	Attempts  int
	LastError string // in plain words
}

// TargetState is how it stands with a target.
type TargetState struct {
	Target      string
	Waiting     int // messages
	Failures    int // in a row
	PausedUntil time.Time
	LastOK      time.Time
	FailedAt    time.Time
	LastError   string
}

// OutboxState is how much waits to leave the box.
type OutboxState struct {
	Waiting int
	Oldest  time.Time // when the longest waiting was written; zero: nothing waits
	GivenUp int
}
