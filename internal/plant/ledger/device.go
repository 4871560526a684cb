package ledger

import "github.com/google/uuid"

// Device is a step in the life of a tablet, wall screen or sender: enrolled, changed or
// revoked. Enrolled and changed say what holds from then on.
type Device struct {
	Device      uuid.UUID  `json:"device"`
	Step        string     `json:"step"`
	At          Time       `json:"at"`
	Person      *uuid.UUID `json:"person,omitempty"` // who made the code, changed or revoked
	Sort        string     `json:"kind,omitempty"`
	Name        string     `json:"name,omitempty"`
	Station     *uuid.UUID `json:"station,omitempty"`
	Line        *uuid.UUID `json:"line,omitempty"`
	LockMinutes int        `json:"lock_minutes,omitempty"`
}

// Kind is "device".
func (Device) Kind() string { return "device" }
