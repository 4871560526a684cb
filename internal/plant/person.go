package plant

import (
	"strings"
	"time"

	"github.com/google/uuid"
)

// Role is one of the four things a person may be; a person holds any set.
type Role string

const (
	Operator      Role = "operator"      // takes rounds, records changes, takes and closes matters
	Supervisor    Role = "supervisor"    // all an operator may, and voids and verifies
	Engineer      Role = "engineer"      // sets up, freezes, revises, approves
	Administrator Role = "administrator" // manages people and the installation, nothing else
)

// AllRoles lists the roles in the order in which they are shown.
var AllRoles = []Role{Operator, Supervisor, Engineer, Administrator}

// Roles is a set of roles.
type Roles []Role

// Has reports whether the set holds r.
func (rs Roles) Has(r Role) bool {
	for _, have := range rs {
		if have == r {
			return true
		}
	}
	return false
}

// Person is somebody who may sign in. The secret's hash is not part of it: only
// the store and internal/auth ever hold that.
type Person struct {
	ID     uuid.UUID
	Login  string // what is typed at sign-in, lower case, unique in the plant
	Name   string // what is printed, such as "Operator 1"
	Roles  Roles
	Active bool

	Language string // in which pages speak to this person, "" when that is left to the device

	Badge         string    // what the scanner types; "" when there is none
	HasSecret     bool      // may sign in by login and secret, and sign records
	HasPIN        bool      // may sign in by badge and PIN on an enrolled tablet
	ErasedAt      time.Time // when the name was erased; zero while it is there
	SessionsSince time.Time // sessions that began before are over
}

// AtTablet is the person as a PIN lets them in. A PIN is short, so it opens the work at
// the station and what a supervisor does there, and nothing that sets limits or manages;
// that takes the secret.
func (p Person) AtTablet() Person {
	var kept Roles
	for _, r := range p.Roles {
		if r == Operator || r == Supervisor {
			kept = append(kept, r)
		}
	}
	p.Roles = kept
	return p
}

// Action is something a person may or may not do. Pages and handlers ask for
// actions, never for roles, so that the table below is the one place that
// knows who may do what.
type Action uint8

const (
	TakeRounds    Action = iota + 1 // enter and correct rounds, machine states, changes; take and close matters
	VoidRecords                     // void a subgroup, verify a closed matter
	SetLimits                       // set up characteristics, study, freeze and revise limits
	SeeBoard                        // the board
	SeeDesk                         // charts, revisions and records, read only
	Manage                          // people, devices, the installation
	AnswerCalls                     // be called about what nobody takes; quiet a known matter
	HandOver                        // write and clear notes for the next shift, confirm having read a handover
	DecideProduct                   // state what became of product that was kept aside

	// ArrangePlant is for what the plant has: lines, stations, machines, parts, shifts, its
	// name and time zone. Engineers may too, since it is they who find a machine missing
	// when they describe what is measured on it.
	ArrangePlant
)

var mayDo = map[Action]Roles{
	TakeRounds:    {Operator, Supervisor},
	VoidRecords:   {Supervisor},
	SetLimits:     {Engineer},
	SeeBoard:      {Operator, Supervisor, Engineer},
	SeeDesk:       {Supervisor, Engineer},
	Manage:        {Administrator},
	AnswerCalls:   {Supervisor},
	DecideProduct: {Supervisor, Engineer},
	ArrangePlant:  {Engineer, Administrator},
	HandOver:      {Operator, Supervisor},
}

// May reports whether this person may do a. Somebody who is not active may do
// nothing.
func (p Person) May(a Action) bool {
	if !p.Active {
		return false
	}
	for _, r := range mayDo[a] {
		if p.Roles.Has(r) {
			return true
		}
	}
	return false
}

// CleanLogin brings a login into the form in which it is stored.
func CleanLogin(s string) string { return strings.ToLower(strings.TrimSpace(s)) }

// MaxBadge is the most characters that a badge may hold.
const MaxBadge = 64

// CleanBadge brings what a scanner or a person typed into the form in which badges are
// kept. Scanners differ in case and in what they put around it.
func CleanBadge(s string) string {
	return strings.ToUpper(strings.Join(strings.Fields(CleanText(s)), ""))
}

// CleanRoles keeps each known role once, in the order of AllRoles, and refuses others
// and none at all.
func CleanRoles(rs Roles) (Roles, error) {
	var out Roles
	for _, r := range AllRoles {
		if rs.Has(r) {
			out = append(out, r)
		}
	}
	for _, r := range rs {
		if !out.Has(r) {
			return nil, Invalidf("roles", "There is no such role.")
		}
	}
	if len(out) == 0 {
		return nil, Invalidf("roles", "A person needs at least one role.")
	}
	return out, nil
}

// FormerName is a name under which somebody was printed before.
type FormerName struct {
	Name  string
	Until time.Time
}
