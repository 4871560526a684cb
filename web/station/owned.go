package station

import (
	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// ownedView is who must act on what is measured here, and what is to be done with the
// product meanwhile.
type ownedView struct {
	Protect []protectView
	Owners  []ownedRow
}

// protectView is a protection as the station carries it out.
type protectView struct{ Name, Method, Instruction, By string }

// ownedRow is a characteristic that somebody must act on.
type ownedRow struct {
	Name, Owner, Since, Reason string
	Strong                     bool // engineering
}

// actedOn reports whether somebody has to do something now. Soon after a matter the
// station owns it still, for the board and the desk, and has nothing to do but go on.
func actedOn(o plant.Ownership) bool {
	return o.Owner != plant.Nobody && o.Reason != plant.Settling
}

func newOwned(f ui.Format, st plant.StationState) ownedView {
	var v ownedView
	for _, c := range st.Characteristics {
		for _, p := range c.Protections {
			v.Protect = append(v.Protect, protectView{c.Title(), f.Words.T("owner.method." + string(p.Method)), p.Instruction,
				f.Words.T("owner.since-by", f.Clock(p.From), p.DecidedBy)})
		}
		if o := c.Ownership(); actedOn(o) {
			v.Owners = append(v.Owners, ownedRow{c.Title(), ui.OwnerWord(f.Words, o.Owner), f.OwnerSince(o), f.OwnerReason(c), o.Owner == plant.Engineering})
			if found := f.OwnerFinding(o); found != "" {
				v.Owners = append(v.Owners, ownedRow{Name: c.Title(), Owner: ui.OwnerWord(f.Words, plant.Engineering), Reason: found, Strong: true})
			}
		}
	}
	return v
}
