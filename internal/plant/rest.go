package plant

import "slices"

// Where product is that is suspect and was not put aside, as a person answers it once
// when the matter is closed. It changes nothing that is kept aside and settles nothing.
const (
	RestGone       ContainmentStep = "gone"       // it went on to the next step, or left the plant
	RestUsed       ContainmentStep = "used"       // used up, built in or thrown away
	RestUnmade     ContainmentStep = "unmade"     // so many were not made: the record reckons with too much
	RestMiscounted ContainmentStep = "miscounted" // what was put aside was counted wrong
	RestUnknown    ContainmentStep = "unknown"    // an honest answer, so that nobody is held up for ever
)

// RestAnswers lists the answers in the order in which they are offered.
var RestAnswers = []ContainmentStep{RestGone, RestUsed, RestUnmade, RestMiscounted, RestUnknown}

// OfRest reports whether the step says where product is that was not put aside.
func (s ContainmentStep) OfRest() bool { return slices.Contains(RestAnswers, s) }

// Rest is the answer to where the product is that was not put aside.
func (c Containment) Rest() (e ContainmentEntry, ok bool) {
	i := slices.IndexFunc(c.Entries, func(e ContainmentEntry) bool { return e.Step.OfRest() })
	if i < 0 {
		return e, false
	}
	return c.Entries[i], true
}

// aboutShare is how much of a number of parts that is not known exactly may be missing
// without a question: a tenth, since it is said to two figures.
const aboutShare = 10

// Missing is how many of the suspect parts were not put aside, where somebody has to be
// asked about them; 0 where nothing is missing, where how much was made is not known, and
// where it was answered or an authorised person has said that there is nothing to keep.
func (c Containment) Missing(s Suspect) int {
	missing := s.Parts - c.Kept()
	if !s.Known || missing <= 0 || s.About && missing*aboutShare <= s.Parts {
		return 0
	}
	if slices.ContainsFunc(c.Entries, func(e ContainmentEntry) bool { return e.Step.OfRest() || e.Step == NothingToKeep }) {
		return 0
	}
	return missing
}
