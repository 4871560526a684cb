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

func newOwned(f ui.Format, st plant.StationState) ownedView {
	var v ownedView
	for _, c := range st.Characteristics {
		for _, p := range c.Protections {
			v.Protect = append(v.Protect, protectView{c.Name, f.Words.T("owner.method." + string(p.Method)), p.Instruction,
				f.Words.T("owner.since-by", f.Clock(p.From), p.DecidedBy)})
		}
		if o := c.Ownership(); o.Owner != plant.Nobody {
			v.Owners = append(v.Owners, ownedRow{c.Name, ui.OwnerWord(f.Words, o.Owner), f.OwnerSince(o), f.OwnerReason(c), o.Owner == plant.Engineering})
		}
	}
	return v
}
