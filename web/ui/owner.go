package ui

import (
	"time"

	"holdfast/internal/plant"
)

// OwnerReason says in words why somebody owns a characteristic, with the numbers that it
// follows from.
func (f Format) OwnerReason(c plant.CharacteristicState) string {
	w, o, fig := f.Words, c.Ownership(), c.Standing.Figure
	switch o.Reason {
	case plant.MatterOpen: // which may be later than the station's: it settled one before
		if c.Matter != nil {
			return w.T("owner.matter-since", f.Clock(c.Matter.OpenedAt))
		}
	case plant.Settling:
		return w.T("owner.settling", c.Quiet(), c.Rules.StableSubgroups)
	case plant.TooFew:
		return f.tooFew(c)
	case plant.NotCapable:
		return w.T("owner.not-capable", f.Index(fig.Bound), f.Index(c.Rules.Capable))
	case plant.AcceptanceEnded:
		return w.T("owner.acceptance-ended", f.Index(fig.Bound), f.Clock(c.Acceptance.Ends()))
	case plant.IsCapable:
		return w.T("owner.capable", f.Index(fig.Bound))
	case plant.IsAccepted:
		return w.T("owner.accepted", f.Index(fig.Bound), f.LastDay(c.Acceptance.Until))
	}
	return w.T("owner.reason." + string(o.Reason))
}

// tooFew says what is missing: subgroups under the limits or readings for the figure.
func (f Format) tooFew(c plant.CharacteristicState) string {
	w, fig := f.Words, c.Standing.Figure
	switch quiet := c.Quiet(); {
	case quiet < c.Rules.StableSubgroups:
		return w.T("owner.too-few-subgroups", quiet, c.Rules.StableSubgroups)
	case fig.Readings < c.Rules.LeastReadings:
		return w.T("owner.too-few-readings", fig.Readings, c.Rules.LeastReadings)
	}
	return w.T("owner.too-few-subgroups", fig.Subgroups, c.Rules.LeastSubgroups)
}

// OwnerFinding says what engineering had found before the process became unstable, while
// the station owns it; "" where there is nothing.
func (f Format) OwnerFinding(o plant.Ownership) string {
	if o.Owner != plant.AtStation || o.Finding.Reason == "" {
		return ""
	}
	return f.Words.T("owner.finding", f.OwnerSince(plant.Ownership{Since: o.Finding.Since, AtLeast: o.Finding.AtLeast}))
}

// OwnerSince says since when, "since Tue 12:42", or that it is longer than the record
// that was looked at.
func (f Format) OwnerSince(o plant.Ownership) string {
	switch {
	case o.Since.IsZero():
		return ""
	case o.AtLeast:
		return f.between(f.Words.T("owner.since-before", f.Clock(o.Since)), o.Between)
	}
	return f.between(f.Words.T("owner.since", f.Clock(o.Since)), o.Between)
}

// between adds to since when somebody owns it how often the station had it meanwhile.
func (f Format) between(since string, n int) string {
	if n == 0 {
		return since
	}
	return f.Words.T("owner.between", since, n)
}

// AskedOfStation says which sample the station is asked for where it is not the owner; ""
// where none is, or where the station is the owner.
func (f Format) AskedOfStation(c plant.CharacteristicState) string {
	switch {
	case c.Owner() == plant.AtStation:
		return ""
	case c.Overdue():
		return f.Words.T("owner.round-late")
	case c.Condition() == plant.IsDue:
		return f.Words.T("owner.round-due")
	}
	return ""
}

// LastDay is the day that an instant ends: what holds until midnight holds that day.
func (f Format) LastDay(t time.Time) string { return f.Date(t.Add(-time.Second)) }

// Index writes a capability index.
func (f Format) Index(v float64) string { return f.Number(v, 2) }

// ProtectionWords says how product is protected: the method, and what is to be done.
func (f Format) ProtectionWords(p plant.Protection) string {
	return f.Words.T("owner.protection", f.Words.T("owner.method."+string(p.Method)), p.Instruction)
}
