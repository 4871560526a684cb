package ledger

import "github.com/google/uuid"

// ShiftNote is a note for the shifts that follow, written or cleared.
type ShiftNote struct {
	Note   uuid.UUID `json:"note"`
	Line   uuid.UUID `json:"line"`
	Step   string    `json:"step"` // "written" or "cleared"
	Text   string    `json:"text,omitempty"`
	At     Time      `json:"at"`
	Person uuid.UUID `json:"person"`
}

// Kind is "shift note".
func (ShiftNote) Kind() string { return "shift note" }

// HandoverRead is somebody's word that they have read what a shift handed over.
type HandoverRead struct {
	Line      uuid.UUID `json:"line"`
	ShiftFrom Time      `json:"shift_from"`
	At        Time      `json:"at"`
	Person    uuid.UUID `json:"person"`
}

// Kind is "handover read".
func (HandoverRead) Kind() string { return "handover read" }

// DailyRoot is the hash over all heads on one day of the plant.
type DailyRoot struct {
	Day    string `json:"day"`
	At     Time   `json:"at"`
	Chains int    `json:"chains"`
	Root   string `json:"root"` // in hexadecimal digits
}

// Kind is "daily root".
func (DailyRoot) Kind() string { return "daily root" }
