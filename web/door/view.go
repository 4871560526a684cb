package door

import (
	"holdfast/internal/plant"
	"holdfast/web/words"
)

// signIn is what the sign-in page shows.
type signIn struct {
	Login           string // as typed
	LoginProblem    string
	PasswordProblem string
	To              string // local path to go on to
	TimedOut        bool
	Revoked         bool // this browser was a device once
	Nobody          bool // there is nobody who could sign in
	Demo            []demoPerson
}

type demoPerson struct {
	ID, Name, Does string
}

// does says in one phrase what a person of the demonstration is for.
func does(w *words.Printer, p plant.Person) string {
	for _, role := range []plant.Role{plant.Supervisor, plant.Engineer, plant.Operator, plant.Administrator} {
		if p.Roles.Has(role) {
			return w.T("door.does." + string(role))
		}
	}
	return ""
}
