package plant

import (
	"strings"

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
	DecideProduct                   // state what became of product that was kept aside
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
