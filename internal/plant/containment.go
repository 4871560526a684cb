package plant

import (
	"crypto/sha256"
	"fmt"
	"slices"
	"time"

	"github.com/google/uuid"
)

// ContainmentStep is what a person states about product in doubt.
type ContainmentStep string

const (
	KeptAside     ContainmentStep = "kept"     // so many were put aside
	CountedAgain  ContainmentStep = "recount"  // there are so many: corrects what was stated before
	NothingToKeep ContainmentStep = "none"     // nothing was made that is in doubt, and why
	Released      ContainmentStep = "released" // after a check
	Reworked      ContainmentStep = "reworked"
	Scrapped      ContainmentStep = "scrapped"
	Returned      ContainmentStep = "returned"
	OtherEnd      ContainmentStep = "other" // with its reason
)

// Dispositions are what may become of product that was kept aside.
var Dispositions = []ContainmentStep{Released, Reworked, Scrapped, Returned, OtherEnd}

// Disposes reports whether the step says what became of product.
func (s ContainmentStep) Disposes() bool { return slices.Contains(Dispositions, s) }

// Decides reports whether the step lets product out of the containment, or says that
// there is none: that is for people who are authorised to, and a signature.
func (s ContainmentStep) Decides() bool { return s != KeptAside && !s.OfRest() }

// maxKept keeps sums far within what an integer holds.
const maxKept = 100_000_000

// ContainmentEntry is one statement about product in doubt, a fact. Quantity is in
// parts; of a recount it is how many there are, and Delta what that changes.
type ContainmentEntry struct {
	ID          uuid.UUID
	Containment uuid.UUID
	Step        ContainmentStep
	Quantity    int
	Delta       int // change of the quantity that is kept aside; set when recorded
	Place       string
	Tag         string // label or tag on it
	Note        string
	Opens       uuid.UUID // the characteristic for which a person opens the containment by this entry; Nil: it is open
	RecordedAt  time.Time
	Person      uuid.UUID
	PersonName  string
}

// Digest tells a repeated send from another statement under the same id.
func (e ContainmentEntry) Digest() [32]byte {
	return sha256.Sum256(fmt.Appendf(nil, "%s\x00%s\x00%d\x00%s\x00%s\x00%s\x00%s", e.Containment, e.Step, e.Quantity, e.Place, e.Tag, e.Note, e.Opens))
}

// Clean is the entry with its text as it is kept.
func (e ContainmentEntry) Clean() ContainmentEntry {
	e.Place, e.Tag, e.Note = CleanText(e.Place), CleanText(e.Tag), CleanText(e.Note)
	return e
}

// Containment is product that is, or was, kept aside. It is opened with a matter, or by a
// person, and stays open after the matter until somebody states what became of it.
type Containment struct {
	ID             uuid.UUID
	Matter         uuid.UUID // Nil: a person opened it
	Station        Station
	Line           Line
	Characteristic Characteristic
	OpenedAt       time.Time
	MatterClosed   time.Time // zero: the matter is open
	SettledAt      time.Time // zero: open
	Entries        []ContainmentEntry
}

// Kept is how many parts were put aside in all, as people stated it.
func (c Containment) Kept() (n int) {
	for _, e := range c.Entries {
		if !e.Step.Disposes() {
			n += e.Delta
		}
	}
	return n
}

// Disposed is of how many it was stated what became of them.
func (c Containment) Disposed() (n int) {
	for _, e := range c.Entries {
		if e.Step.Disposes() {
			n -= e.Delta
		}
	}
	return n
}

// Left is how many are still kept aside.
func (c Containment) Left() int { return c.Kept() - c.Disposed() }

// Stated reports whether anybody has stated yet what was put aside. Where the rest is says
// nothing about that: product of which nothing was put aside still waits for a person.
func (c Containment) Stated() bool {
	return slices.ContainsFunc(c.Entries, func(e ContainmentEntry) bool { return !e.Step.OfRest() })
}

// Settled reports whether nothing is left to be stated: the matter is closed, somebody
// stated what was put aside, and of all of it what became of it.
func (c Containment) Settled() bool {
	return (c.Matter == uuid.Nil || !c.MatterClosed.IsZero()) && c.Stated() && c.Left() == 0
}

// Where is where the product lies, by the newest statement that says it.
func (c Containment) Where() (place, tag string) {
	for _, e := range slices.Backward(c.Entries) {
		if e.Step == KeptAside && (e.Place != "" || e.Tag != "") {
			return e.Place, e.Tag
		}
	}
	return "", ""
}

// Admit checks a statement against what was stated before and returns it with its
// Delta. What became of product can be stated of no more than is kept aside, so the
// quantities always add up.
func (c Containment) Admit(e ContainmentEntry) (ContainmentEntry, error) {
	e = e.Clean()
	left := c.Left()
	for _, text := range []struct{ field, value string }{{"place", e.Place}, {"tag", e.Tag}, {"note", e.Note}} {
		if len([]rune(text.value)) > 200 {
			return e, Invalidf(text.field, "Please use at most %d characters here.", 200)
		}
	}
	switch {
	case e.Quantity < 0 || e.Quantity > maxKept:
		return e, Invalidf("quantity", "Type how many parts, in whole numbers.")
	case e.Step == KeptAside:
		if e.Quantity == 0 {
			return e, Invalidf("quantity", "Say how many parts were put aside.")
		}
		if e.Place == "" {
			return e, Invalidf("place", "Say where they were put.")
		}
		if left+e.Quantity > maxKept {
			return e, Invalidf("quantity", "Type how many parts, in whole numbers.")
		}
		e.Delta = e.Quantity
	case e.Step == CountedAgain:
		if e.Note == "" {
			return e, Invalidf("note", "Say why the count differs.")
		}
		e.Delta = e.Quantity - left
		if e.Delta == 0 {
			return e, Invalidf("quantity", "That is the number on record already.")
		}
	case e.Step == NothingToKeep:
		if left > 0 {
			return e, Invalidf("", "%d parts are kept aside. Say what became of them.", left)
		}
		if e.Note == "" {
			return e, Invalidf("note", "Say why no product is in doubt.")
		}
		e.Quantity, e.Delta = 0, 0
	case e.Step.OfRest():
		if e.Quantity == 0 {
			return e, Invalidf("quantity", "Say of how many parts.")
		}
		e.Delta = 0
	case !e.Step.Disposes():
		return e, Invalidf("step", "Say what became of the product.")
	case e.Quantity == 0:
		return e, Invalidf("quantity", "Say of how many parts.")
	case e.Quantity > left:
		return e, Invalidf("quantity", "Only %d parts are still kept aside. Count again if there are more.", left)
	case e.Step == OtherEnd && e.Note == "":
		return e, Invalidf("note", "Say what became of the product.")
	case e.Step == Released && e.Note == "":
		return e, Invalidf("note", "Say how it was checked.")
	default:
		e.Delta = -e.Quantity
	}
	return e, nil
}

// Contained is a containment that is still open, as lists show it.
type Contained struct {
	Containment
	Lines   []MatterLine // of its matter
	Setup   Setup
	Reach   *Reach // derived; nil where it was not asked for
	Suspect Suspect
}
