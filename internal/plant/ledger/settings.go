package ledger

import "github.com/google/uuid"

// Settings is one version of the numbers of a plant that an engineer may change, in the
// plant's chain.
type Settings struct {
	ID      uuid.UUID         `json:"id"`
	Version int               `json:"version"`
	At      Time              `json:"at"`
	Person  *uuid.UUID        `json:"person,omitempty"`
	Reason  string            `json:"reason"`
	Content map[string]string `json:"content"` // keys are sorted by the encoder
}

// Kind is "settings".
func (Settings) Kind() string { return "settings" }
