package ledger

import "github.com/google/uuid"

// ReactionPlan is one version of what to do about one kind of matter.
type ReactionPlan struct {
	Plan           uuid.UUID  `json:"plan"` // of this version
	Characteristic *uuid.UUID `json:"characteristic,omitempty"`
	Family         string     `json:"family,omitempty"`
	About          string     `json:"about"` // kind of matter
	Version        int        `json:"version"`
	Withdrawn      bool       `json:"withdrawn,omitempty"`
	Steps          []any      `json:"steps"`
	Confirm        bool       `json:"confirm"`
	Verify         bool       `json:"verify"`
	At             Time       `json:"at"`
	Person         *uuid.UUID `json:"person,omitempty"`
}

// Kind is "reaction plan".
func (ReactionPlan) Kind() string { return "reaction plan" }

// MatterAnswer is an answer to a step of the plan that a matter walks.
type MatterAnswer struct {
	Answer  uuid.UUID `json:"answer"`
	Matter  uuid.UUID `json:"matter"`
	Plan    uuid.UUID `json:"plan"`
	Attempt int       `json:"attempt"`
	Step    int       `json:"step"`
	Remedy  bool      `json:"remedy,omitempty"`
	Seq     int       `json:"seq"`
	Said    string    `json:"said"`
	Value   string    `json:"value,omitempty"`
	Note    string    `json:"note,omitempty"`
	At      Time      `json:"at"`
	Person  uuid.UUID `json:"person"`
}

// Kind is "matter answer".
func (MatterAnswer) Kind() string { return "matter answer" }

// MatterFix is what was found and done about a matter.
type MatterFix struct {
	Fix       uuid.UUID  `json:"fix"`
	Matter    uuid.UUID  `json:"matter"`
	Number    int        `json:"number"`
	Cause     string     `json:"cause"`
	CauseID   *uuid.UUID `json:"cause_id,omitempty"`
	Action    string     `json:"action,omitempty"`
	RestartAt *Time      `json:"restart_at,omitempty"`
	At        Time       `json:"at"`
	Person    uuid.UUID  `json:"person"`
}

// Kind is "matter fix".
func (MatterFix) Kind() string { return "matter fix" }

// MatterVerification is a second person's word on a fix, signed.
type MatterVerification struct {
	Verification uuid.UUID  `json:"verification"`
	Matter       uuid.UUID  `json:"matter"`
	Fix          uuid.UUID  `json:"fix"`
	Accepted     bool       `json:"accepted"`
	Note         string     `json:"note,omitempty"`
	At           Time       `json:"at"`
	Signature    *Signature `json:"signature"`
}

// Kind is "matter verification".
func (MatterVerification) Kind() string { return "matter verification" }
