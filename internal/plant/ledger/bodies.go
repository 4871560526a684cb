package ledger

import (
	"strconv"
	"time"

	"github.com/google/uuid"
)

// Time is a time as encoding 1 writes it.
type Time time.Time

// MarshalText writes UTC with six decimals, cut to the microsecond.
func (t Time) MarshalText() ([]byte, error) {
	return []byte(time.Time(t).UTC().Truncate(time.Microsecond).Format("2006-01-02T15:04:05.000000Z")), nil
}

// Number is a number that may have a fraction, as encoding 1 writes it: text in
// the shortest form that reads back as the same float64.
type Number float64

// MarshalText writes the shortest form.
func (n Number) MarshalText() ([]byte, error) {
	return strconv.AppendFloat(nil, float64(n), 'g', -1, 64), nil
}

// At returns t for an optional field, nil when t is zero.
func At(t time.Time) *Time {
	if t.IsZero() {
		return nil
	}
	v := Time(t)
	return &v
}

// ID returns id for an optional field, nil when it is the zero id.
func ID(id uuid.UUID) *uuid.UUID {
	if id == uuid.Nil {
		return nil
	}
	return &id
}

// Signature is a secret entered again by a person, at a time, with a meaning. The
// printed name stands as a salted hash, so that a name can be erased without
// breaking the chain.
type Signature struct {
	Person   uuid.UUID `json:"person"`
	NameHash string    `json:"name_hash"` // SHA-256(salt, name) in hex
	At       Time      `json:"at"`
	Meaning  string    `json:"meaning"`
}

// Subgroup is one version of one subgroup, as it was entered, and the answer told.
type Subgroup struct {
	Subgroup     uuid.UUID   `json:"subgroup"`
	Version      int         `json:"version"`
	Round        uuid.UUID   `json:"round"`
	Station      uuid.UUID   `json:"station"`
	SetupVersion int         `json:"setup_version"`
	TakenAt      Time        `json:"taken_at"`
	TakenRaw     Time        `json:"taken_raw"`
	SkewMS       int64       `json:"skew_ms"`
	RecordedAt   Time        `json:"recorded_at"`
	Machine      uuid.UUID   `json:"machine"`
	Part         *uuid.UUID  `json:"part,omitempty"`
	Lot          string      `json:"lot,omitempty"`
	Gauge        *uuid.UUID  `json:"gauge,omitempty"`
	Source       string      `json:"source"`
	Device       *uuid.UUID  `json:"device,omitempty"`
	Person       *uuid.UUID  `json:"person,omitempty"`
	Decimals     int         `json:"decimals"`
	Readings     []int64     `json:"readings"`
	KeyedBy      []uuid.UUID `json:"keyed_by"`
	Streams      []uuid.UUID `json:"streams,omitempty"`
	Retyped      []Retyped   `json:"retyped,omitempty"`
	ShortReason  string      `json:"short_reason,omitempty"`
	Voided       bool        `json:"voided,omitempty"`
	Reason       string      `json:"reason,omitempty"`
	Answer       string      `json:"answer"`
	Signature    *Signature  `json:"signature,omitempty"`
}

// Retyped is a first typing that was looked at and typed again.
type Retyped struct {
	Index int    `json:"index"`
	First string `json:"first"`
}

// Kind is "subgroup": a first version, a correction or a void, told apart by
// Version and Voided.
func (Subgroup) Kind() string { return "subgroup" }

// Revision is one frozen version of limits and rules.
type Revision struct {
	Revision     uuid.UUID  `json:"revision"`
	Number       int        `json:"number"`
	SetupVersion int        `json:"setup_version"`
	Chart        string     `json:"chart"`
	Estimator    string     `json:"estimator"`
	Center       Number     `json:"center"`
	Sigma        Number     `json:"sigma"`
	Multiple     Number     `json:"multiple"`
	Location     []string   `json:"location"`
	Dispersion   []string   `json:"dispersion"`
	From         *Time      `json:"basis_from,omitempty"`
	To           *Time      `json:"basis_to,omitempty"`
	Subgroups    int        `json:"basis_subgroups"`
	LeftOut      []LeftOut  `json:"left_out,omitempty"`
	Given        bool       `json:"given,omitempty"` // centre and sigma were stated, not computed
	Reason       string     `json:"reason"`
	InForceFrom  Time       `json:"in_force_from"`
	Signature    *Signature `json:"signature,omitempty"`
}

// LeftOut is a subgroup kept out of a limit study, with its cause.
type LeftOut struct {
	Subgroup uuid.UUID `json:"subgroup"`
	Cause    string    `json:"cause"`
}

// Kind is "revision".
func (Revision) Kind() string { return "revision" }

// Matter is a step in the life of a matter: opened, taken, described or closed.
type Matter struct {
	Matter    uuid.UUID  `json:"matter"`
	Step      string     `json:"step"`
	At        Time       `json:"at"`
	Person    *uuid.UUID `json:"person,omitempty"`
	Subgroup  *uuid.UUID `json:"subgroup,omitempty"`
	Cause     string     `json:"cause,omitempty"`
	Action    string     `json:"action,omitempty"`
	RestartAt *Time      `json:"restart_at,omitempty"`
	Closing   string     `json:"closing,omitempty"`

	Plans     []uuid.UUID `json:"plans,omitempty"`     // of a closing: the plan versions that were walked
	Contained bool        `json:"contained,omitempty"` // its containment was opened with it
}

// Kind is "matter".
func (Matter) Kind() string { return "matter" }

// Setup is one version of a characteristic's set-up.
type Setup struct {
	Characteristic uuid.UUID      `json:"characteristic"`
	Version        int            `json:"version"`
	At             Time           `json:"at"`
	Person         *uuid.UUID     `json:"person,omitempty"`
	Content        map[string]any `json:"content"` // keys are sorted by the encoder
}

// Kind is "setup".
func (Setup) Kind() string { return "setup" }

// Change is something done to the process.
type Change struct {
	Change         uuid.UUID  `json:"change"`
	Machine        uuid.UUID  `json:"machine"`
	Characteristic *uuid.UUID `json:"characteristic,omitempty"`
	What           string     `json:"what"`
	Size           string     `json:"size,omitempty"`
	Note           string     `json:"note,omitempty"`
	Prompted       bool       `json:"prompted"`
	HappenedAt     Time       `json:"happened_at"`
	RecordedAt     Time       `json:"recorded_at"`
	Person         *uuid.UUID `json:"person,omitempty"`
	Turn           *Turn      `json:"turn,omitempty"`
}

// Kind is "change".
func (Change) Kind() string { return "change" }

// MachineState is a machine that started, stopped or changed what it makes.
type MachineState struct {
	State      uuid.UUID  `json:"state"`
	Machine    uuid.UUID  `json:"machine"`
	At         Time       `json:"at"`
	Running    bool       `json:"running"`
	Part       *uuid.UUID `json:"part,omitempty"`
	Lot        string     `json:"lot,omitempty"`
	Counter    *int64     `json:"counter,omitempty"`
	RecordedAt Time       `json:"recorded_at"`
	Person     *uuid.UUID `json:"person,omitempty"`
}

// Kind is "machine state".
func (MachineState) Kind() string { return "machine state" }

// Arrangement is a change to people or to what the plant has, in the plant's chain.
type Arrangement struct {
	What    string         `json:"what"` // such as "person added"
	Subject uuid.UUID      `json:"subject"`
	At      Time           `json:"at"`
	Person  *uuid.UUID     `json:"person,omitempty"`
	Content map[string]any `json:"content,omitempty"` // no names of people; keys are sorted by the encoder
}

// Kind is "arrangement".
func (Arrangement) Kind() string { return "arrangement" }
