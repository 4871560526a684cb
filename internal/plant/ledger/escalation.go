package ledger

import "github.com/google/uuid"

// EscalationStep is a step that was fired because nobody took something.
type EscalationStep struct {
	Step           uuid.UUID  `json:"escalation_step"`
	Station        uuid.UUID  `json:"station"`
	Characteristic uuid.UUID  `json:"characteristic"`
	Matter         *uuid.UUID `json:"matter,omitempty"`
	Overdue        *uuid.UUID `json:"overdue,omitempty"`
	DueAt          *Time      `json:"due_at,omitempty"` // of an overdue round
	Calls          string     `json:"calls"`            // "look", "hold" or "round"
	Turn           int        `json:"turn"`
	Number         int        `json:"number"` // of the step, from 1
	At             Time       `json:"at"`
	Targets        []string   `json:"targets,omitempty"` // names of what messages were addressed to
}

// Kind is "escalation".
func (EscalationStep) Kind() string { return "escalation" }

// Quieting is a matter kept quiet until a stated time, or a quiet ended early (Until is
// then At).
type Quieting struct {
	Quieting uuid.UUID `json:"quieting"`
	Matter   uuid.UUID `json:"matter"`
	Calls    string    `json:"calls"` // "look" or "hold", of the matter then
	At       Time      `json:"at"`
	Until    Time      `json:"until"`
	Reason   string    `json:"reason,omitempty"`
	Person   uuid.UUID `json:"person"`
}

// Kind is "quieting".
func (Quieting) Kind() string { return "quieting" }
