package plant

import (
	"time"

	"github.com/google/uuid"
)

// ProtectionMethod is how product of a process that is not capable is protected.
type ProtectionMethod string

const (
	InspectAll   ProtectionMethod = "inspect-all"
	SecondCheck  ProtectionMethod = "second-check"
	Sorting      ProtectionMethod = "sorting"
	Concession   ProtectionMethod = "concession"
	OtherMeasure ProtectionMethod = "other"
)

// ProtectionMethods lists the methods in the order in which they are offered.
var ProtectionMethods = []ProtectionMethod{InspectAll, SecondCheck, Sorting, Concession, OtherMeasure}

// Protection is a statement how product is protected while a characteristic is stable
// and not capable. It is a fact, and it holds until somebody ends it.
type Protection struct {
	ID             uuid.UUID // from the sender, so that sending it again is recognised
	Characteristic uuid.UUID
	Method         ProtectionMethod
	Instruction    string // what is to be done, for the station
	DecidedBy      string // who is authorised and decided it
	From           time.Time
	Person         uuid.UUID // who entered it
	PersonName     string
	RecordedAt     time.Time
	End            Ending
}

// Acceptance is the mark that an engineer accepts a characteristic whose capability is
// below what is asked, for a time, by a signature.
type Acceptance struct {
	ID             uuid.UUID
	Characteristic uuid.UUID
	SetupVersion   int
	Lower, Upper   *Decimal // specification that it was given for
	Reason         string
	Told           string // lower bound of Ppk as the signer saw it
	Until          time.Time
	Person         uuid.UUID
	PersonName     string
	AcceptedAt     time.Time
	End            Ending
}

// Ending is how a protection or an acceptance was ended by a person; the zero value: it
// was not.
type Ending struct {
	ID         uuid.UUID // from the sender
	Of         uuid.UUID
	Reason     string
	Person     uuid.UUID
	PersonName string
	At         time.Time
}

// Given reports whether there is an acceptance at all.
func (a Acceptance) Given() bool { return a.ID != uuid.Nil }

// Ends is when the acceptance ended or will.
func (a Acceptance) Ends() time.Time {
	if !a.End.At.IsZero() && a.End.At.Before(a.Until) {
		return a.End.At
	}
	return a.Until
}

// markAt is how the acceptance stands at an instant, under a set-up. A specification
// other than the one it was given for makes it void.
func (a Acceptance) markAt(at time.Time, s Setup) Mark {
	switch {
	case !a.Given() || at.Before(a.AcceptedAt) || !sameDecimal(a.Lower, s.Lower) || !sameDecimal(a.Upper, s.Upper):
		return NoMark
	case at.Before(a.Ends()):
		return Marked
	}
	return MarkEnded
}

func sameDecimal(a, b *Decimal) bool {
	if a == nil || b == nil {
		return a == b
	}
	return a.Compare(*b) == 0
}

// Bounds of what may be typed.
const (
	MaxProtectionText = 400
	MaxAcceptance     = 366 * 24 * time.Hour // an acceptance is looked at anew at least once a year
	maxProtectionBack = 366 * 24 * time.Hour
)

// Clean checks the protection against the clock and cleans its text.
func (p *Protection) Clean(now time.Time) error {
	var err error
	if p.Instruction, err = CleanTextWithin("instruction", p.Instruction, MaxProtectionText); err != nil {
		return err
	}
	if p.DecidedBy, err = CleanTextWithin("decided_by", p.DecidedBy, 100); err != nil {
		return err
	}
	if p.From = CutTime(p.From); p.From.IsZero() {
		p.From = now
	}
	known := false
	for _, m := range ProtectionMethods {
		known = known || m == p.Method
	}
	switch {
	case p.ID == uuid.Nil:
		return Invalidf("id", "This form is damaged. Load the page again.")
	case !known:
		return Invalidf("method", "Choose how the product is protected.")
	case p.Instruction == "":
		return Invalidf("instruction", "Say what is to be done with the product.")
	case p.DecidedBy == "":
		return Invalidf("decided_by", "Say who decided it.")
	case p.From.After(now.Add(time.Minute)):
		return Invalidf("from", "A protection that begins later can be stated then.")
	case p.From.Before(now.Add(-maxProtectionBack)):
		return Invalidf("from", "A protection cannot begin more than a year ago.")
	}
	return nil
}

// Clean checks the acceptance against the clock and cleans its text. Whether the figure
// allows it is Allow's question.
func (a *Acceptance) Clean(now time.Time) error {
	var err error
	if a.Reason, err = CleanTextWithin("reason", a.Reason, MaxProtectionText); err != nil {
		return err
	}
	a.Until = CutTime(a.Until)
	switch {
	case a.ID == uuid.Nil:
		return Invalidf("id", "This form is damaged. Load the page again.")
	case a.Reason == "":
		return Invalidf("reason", "Say why it is accepted.")
	case !a.Until.After(now):
		return Invalidf("until", "The end must lie in the future.")
	case a.Until.After(now.Add(MaxAcceptance)):
		return Invalidf("until", "An acceptance lasts at most a year. It can be given again.")
	}
	return nil
}

// Allow says why a characteristic that stands like this cannot be accepted, nil when it
// can.
func (s Standing) Allow(o OwnerSettings) error {
	switch {
	case s.Last.Owner == AtStation:
		return Conflictf("", "It is not stable now, so there is no figure to accept.")
	case s.Figure.Readings < o.LeastReadings || s.Figure.Subgroups < o.LeastSubgroups || s.Figure.Grade == Ungraded:
		return Conflictf("", "There is too little data for a figure that could be accepted.")
	case s.Figure.Grade == BelowAll:
		return Conflictf("", "The lower bound of Ppk is below what may be accepted. The system has to be changed.")
	case s.Figure.Grade == AtCapable:
		return Conflictf("", "It is capable, so there is nothing to accept.")
	}
	return nil
}

// Clean checks the ending and cleans its text.
func (e *Ending) Clean() error {
	var err error
	if e.Reason, err = CleanTextWithin("reason", e.Reason, MaxProtectionText); err != nil {
		return err
	}
	switch {
	case e.ID == uuid.Nil || e.Of == uuid.Nil:
		return Invalidf("id", "This form is damaged. Load the page again.")
	case e.Reason == "":
		return Invalidf("reason", "Say why it ends.")
	}
	return nil
}
