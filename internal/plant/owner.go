package plant

import "time"

// Owner is who must act on a characteristic.
type Owner string

const (
	Nobody      Owner = "nobody"
	AtStation   Owner = "station"
	Engineering Owner = "engineering"
)

// Owners lists the owners in the order in which they are offered.
var Owners = []Owner{AtStation, Engineering, Nobody}

// OwnerReason is why somebody owns a characteristic, as the last part of the key of its
// words.
type OwnerReason string

const (
	// The station finds the special cause.
	MatterOpen OwnerReason = "matter"   // a matter is open
	Settling   OwnerReason = "settling" // one was, within the last subgroups

	// Engineering changes the system, or proves it.
	NoLimits        OwnerReason = "no-limits"        // learning: no frozen limits are in force
	TooFew          OwnerReason = "too-few"          // too little data under the limits in force
	NoSpread        OwnerReason = "no-spread"        // the readings do not vary, so there is no figure
	NotCapable      OwnerReason = "not-capable"      // stable, and too wide or too far off for its specification
	AcceptanceEnded OwnerReason = "acceptance-ended" // the same, and what an engineer had accepted has run out

	// Nobody has to act.
	NoSpecification OwnerReason = "no-specification" // stable, and nothing asks how wide it is
	IsCapable       OwnerReason = "capable"
	IsAccepted      OwnerReason = "accepted" // below capable, accepted for a time by a signature
)

// OwnerReasons lists every reason.
var OwnerReasons = []OwnerReason{MatterOpen, Settling, NoLimits, TooFew, NoSpread, NotCapable, AcceptanceEnded, NoSpecification, IsCapable, IsAccepted}

// WantsProtection reports whether product leaves a process that is known not to be
// capable, so that somebody has to say how it is protected meanwhile.
func (r OwnerReason) WantsProtection() bool { return r == NotCapable || r == AcceptanceEnded }

// Ownership is who must act, why and since when. It is derived: whatever the order in
// which facts came in, it is what routing makes of them.
type Ownership struct {
	Owner   Owner       `json:"owner"`
	Reason  OwnerReason `json:"reason"`
	Since   time.Time   `json:"since"`              // it is this owner's
	For     time.Time   `json:"for"`                // since then for this reason
	AtLeast bool        `json:"at_least,omitempty"` // Since is where the record that was looked at begins
	Between int         `json:"between,omitempty"`  // times that the station had it since Since, to find a special cause first
	Unknown bool        `json:"-"`                  // long overdue or out of contact: the owner is as before

	Finding Finding `json:"finding,omitzero"` // of engineering, while the station has to find a special cause first
}

// Finding is what engineering found of a process before it became unstable: that it is not
// capable. It stands beside the station's ownership, and is engineering's again since the
// same instant once the process is stable and neither limits nor specification have changed.
type Finding struct {
	Reason  OwnerReason `json:"reason"` // "" when there is none
	Since   time.Time   `json:"since"`
	AtLeast bool        `json:"at_least,omitempty"`
	Between int         `json:"between,omitempty"`
}

// after carries the finding of engineering over from the ownership before; same is false
// where limits or specification have changed since.
func (o Ownership) after(last Ownership, same bool) Ownership {
	if !same {
		return o
	}
	found := last.Finding
	if last.Reason.WantsProtection() {
		found = Finding{last.Reason, last.Since, last.AtLeast, last.Between}
	}
	switch {
	case o.Reason == MatterOpen, o.Reason == Settling, o.Reason == TooFew:
		o.Finding = found
	case o.Reason == last.Finding.Reason:
		o.Since, o.AtLeast, o.Between = last.Finding.Since, last.Finding.AtLeast, last.Finding.Between+1
	}
	return o
}

// situation is all that routing looks at.
type situation struct {
	matter      bool // one is open
	limits      bool // frozen ones are in force
	afterMatter bool // a matter that counts was open under these limits
	quiet       int  // subgroups since, or since the limits came into force
	asked       bool // there is a specification
	readings    int  // that the figure is computed from
	subgroups   int
	grade       Grade
	mark        Mark
}

// Mark is how it stands with the acceptance of what is below capable.
type Mark uint8

const (
	NoMark    Mark = iota
	Marked         // accepted, and the time has not run out
	MarkEnded      // it was, until its end
)

// Grade is what the figure says, when there is one.
type Grade uint8

const (
	Ungraded   Grade = iota // the readings do not vary
	BelowAll                // the bound is below what may be accepted
	AtAccepted              // it may be accepted
	AtCapable               // it is capable
)

// route sends a characteristic to exactly one owner.
func route(s situation, o OwnerSettings) (Owner, OwnerReason) {
	switch {
	case s.matter:
		return AtStation, MatterOpen
	case !s.limits:
		return Engineering, NoLimits
	case s.quiet < o.StableSubgroups && s.afterMatter:
		return AtStation, Settling
	case s.quiet < o.StableSubgroups:
		return Engineering, TooFew
	case !s.asked:
		return Nobody, NoSpecification
	case s.readings < o.LeastReadings || s.subgroups < o.LeastSubgroups:
		return Engineering, TooFew
	}
	switch {
	case s.grade == Ungraded:
		return Engineering, NoSpread
	case s.grade == AtCapable:
		return Nobody, IsCapable
	case s.grade == AtAccepted && s.mark == Marked:
		return Nobody, IsAccepted
	case s.grade == AtAccepted && s.mark == MarkEnded:
		return Engineering, AcceptanceEnded
	}
	return Engineering, NotCapable
}

// Owner is who must act on the characteristic now.
func (c CharacteristicState) Owner() Owner { return c.Ownership().Owner }

// Ownership routes the characteristic as it stands now. What needs the newest subgroups
// comes from its Standing, which may be a few subgroups old; an open matter, limits and
// acceptance are those of this moment.
func (c CharacteristicState) Ownership() Ownership {
	known := c.known()
	s := situation{matter: c.Matter != nil, limits: c.Revision != nil, afterMatter: known.AfterMatter, quiet: known.Quiet,
		asked: c.Setup.Lower != nil || c.Setup.Upper != nil, readings: known.Figure.Readings, subgroups: known.Figure.Subgroups,
		grade: known.Figure.Grade, mark: c.Acceptance.markAt(c.ReadAt, c.Setup)}
	owner, reason := route(s, c.Rules)
	out := Ownership{Owner: owner, Reason: reason, Unknown: c.Due.State == TooLate}
	last := c.Standing.Last
	if last.Owner == owner && last.Reason == reason {
		out.Since, out.For, out.AtLeast, out.Between = last.Since, last.For, last.AtLeast, last.Between
		if c.sameLimits() {
			out.Finding = last.Finding
		}
		return out
	}
	out.For = c.reasonSince(reason)
	// What runs out was accepted before, and then nobody owned it.
	if out.Since = out.For; last.Owner == owner && reason != AcceptanceEnded {
		out.Since, out.AtLeast, out.Between = last.Since, last.AtLeast, last.Between
	}
	return out.after(last, c.sameLimits())
}

// sameLimits reports whether the limits in force are those that the standing knows.
func (c CharacteristicState) sameLimits() bool {
	return c.Revision != nil && c.Standing.Revision == c.Revision.ID
}

// known is what the standing knows of the limits that are in force now.
func (c CharacteristicState) known() Standing {
	if c.Revision == nil || c.Standing.Revision != c.Revision.ID {
		return Standing{Last: c.Standing.Last}
	}
	return c.Standing
}

// Quiet is how many subgroups were taken under the limits in force since the last matter
// that counts, up to what stable asks.
func (c CharacteristicState) Quiet() int { return c.known().Quiet }

// reasonSince is from when on a reason holds that the standing does not know of yet.
func (c CharacteristicState) reasonSince(r OwnerReason) time.Time {
	switch r {
	case MatterOpen:
		return c.Matter.OpenedAt
	case NoLimits:
		if c.Segment.From.IsZero() {
			return c.Setup.MadeAt
		}
		return c.Segment.From
	case IsAccepted:
		return c.Acceptance.AcceptedAt
	case AcceptanceEnded:
		return c.Acceptance.Ends()
	case TooFew:
		return c.Revision.InForceFrom
	}
	return c.LastTaken
}

// WantsProtection reports whether product of this characteristic has to be protected
// and nobody has said how.
func (c CharacteristicState) WantsProtection() bool {
	o := c.Ownership()
	return (o.Reason.WantsProtection() || o.Finding.Reason.WantsProtection()) && len(c.Protections) == 0
}
