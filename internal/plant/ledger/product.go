package ledger

import "github.com/google/uuid"

// GaugeCheck is one check of a gauge against its master.
type GaugeCheck struct {
	Check      uuid.UUID  `json:"check"`
	Gauge      uuid.UUID  `json:"gauge"`
	At         Time       `json:"at"`
	Good       bool       `json:"good"`
	Master     string     `json:"master,omitempty"`
	Reading    string     `json:"reading,omitempty"`
	Note       string     `json:"note,omitempty"`
	NextCheck  string     `json:"next_check,omitempty"` // a day
	RecordedAt Time       `json:"recorded_at"`
	Person     *uuid.UUID `json:"person,omitempty"`
}

// Kind is "gauge check".
func (GaugeCheck) Kind() string { return "gauge check" }

// Containment is one statement about product in doubt, in the chain of its
// characteristic.
type Containment struct {
	Entry       uuid.UUID  `json:"entry"`
	Containment uuid.UUID  `json:"containment"`
	Step        string     `json:"step"`
	Quantity    int        `json:"quantity"`
	Delta       int        `json:"delta"`
	Place       string     `json:"place,omitempty"`
	Tag         string     `json:"tag,omitempty"`
	Note        string     `json:"note,omitempty"`
	Opens       bool       `json:"opens,omitempty"`
	RecordedAt  Time       `json:"recorded_at"`
	Person      *uuid.UUID `json:"person,omitempty"`
	Signature   *Signature `json:"signature,omitempty"`
}

// Kind is "containment".
func (Containment) Kind() string { return "containment" }
