package ledger

import "github.com/google/uuid"

// Protection is a statement how product of a process that is not capable is protected.
type Protection struct {
	Protection  uuid.UUID  `json:"protection"`
	Method      string     `json:"method"`
	Instruction string     `json:"instruction"`
	DecidedBy   string     `json:"decided_by"` // an office, as it was typed
	From        Time       `json:"from"`
	At          Time       `json:"at"`
	Person      *uuid.UUID `json:"person,omitempty"`
}

// Kind is "protection".
func (Protection) Kind() string { return "protection" }

// Acceptance is the signed mark on a characteristic below what counts as capable.
type Acceptance struct {
	Acceptance   uuid.UUID  `json:"acceptance"`
	SetupVersion int        `json:"setup_version"`
	Reason       string     `json:"reason"`
	Told         string     `json:"told"` // what the signer was told of the figure
	Until        Time       `json:"until"`
	Signature    *Signature `json:"signature"`
}

// Kind is "acceptance".
func (Acceptance) Kind() string { return "acceptance" }

// Ending ends a protection or an acceptance.
type Ending struct {
	Ending uuid.UUID  `json:"ending"`
	Of     uuid.UUID  `json:"of"`
	Reason string     `json:"reason"`
	At     Time       `json:"at"`
	Person *uuid.UUID `json:"person,omitempty"`
}

// Kind is "ending".
func (Ending) Kind() string { return "ending" }
