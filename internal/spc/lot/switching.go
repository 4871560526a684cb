package lot

// Severity is how strictly lots are inspected.
type Severity string

const (
	NormalInspection    Severity = "normal"
	TightenedInspection Severity = "tightened"
	ReducedInspection   Severity = "reduced"
	// Discontinued: no lots are accepted under these plans until the supplier has
	// improved and Resume is called.
	Discontinued Severity = "discontinued"
)

// Reason tells why the severity changed.
type Reason string

const (
	NoChange          Reason = ""
	TwoOfFiveRejected Reason = "two-of-five-rejected" // normal to tightened
	FiveAccepted      Reason = "five-accepted"        // tightened to normal
	FiveRejected      Reason = "five-rejected"        // tightened to discontinued
	ScoreReached      Reason = "score-reached"        // normal to reduced
	LotRejected       Reason = "lot-rejected"         // reduced to normal
	Irregular         Reason = "irregular-production" // reduced to normal
	Called            Reason = "called"               // by somebody, see Resume and ToNormal
)

const (
	// ScoreForReduced is the switching score at which reduced inspection may start.
	ScoreForReduced   = 30
	rejectedToStop    = 5 // on tightened inspection, in all
	acceptedToRelax   = 5 // on tightened inspection, in a row
	window            = 5 // lots in which rejections tighten
	rejectedToTighten = 2 // in that window
)

// Switching is the state of the switching between severities. The zero value starts
// with normal inspection; its fields may be stored and restored.
type Switching struct {
	Severity Severity // "" is normal
	// Recent are the last lots on normal inspection, the newest last, at most five:
	// true where the lot was rejected.
	Recent []bool
	Score  int // switching score on normal inspection
	// On tightened inspection: lots accepted in a row, and rejected in all.
	Accepted, Rejected int
}

// Result is the verdict on one lot on original inspection; a lot that is submitted
// again after it was rejected does not count and is not given to Next.
type Result struct {
	Accepted bool
	// AcceptanceNumber of the plan in use, and whether the lot would also have been
	// accepted with the plan one step tighter in AQL. Both matter on normal
	// inspection only.
	AcceptanceNumber int
	AcceptedTighter  bool
	// Irregular production, or another condition that warrants normal inspection.
	Irregular bool
	// ReducedAllowed tells that production is steady and the responsible authority
	// wants reduced inspection.
	ReducedAllowed bool
}

// Next takes the verdict on one lot and returns the state for the following lot, with
// the reason when the severity changed.
//
//	normal → tightened      2 of 5 or fewer lots in a row rejected
//	tightened → normal      5 lots in a row accepted
//	tightened → discontinued  5 lots rejected in all
//	normal → reduced        switching score 30, production steady, and wanted
//	reduced → normal        a lot rejected, or production irregular
//
// The score gains 3 for a lot that would have been accepted one step tighter when the
// acceptance number is 2 or more, 2 for an accepted lot when it is 0 or 1; any other
// lot sets it to 0. Counts start afresh whenever the severity changes.
//
// Source: ISO 2859-1, switching rules (from memory; confirm against a copy of the
// standard before relying on it).
func (s Switching) Next(r Result) (Switching, Reason, error) {
	if err := s.check(); err != nil {
		return s, NoChange, err
	}
	if r.AcceptanceNumber < 0 || r.AcceptanceNumber > MaxSample {
		return s, NoChange, invalid("the acceptance number must be 0 or above, got %d", r.AcceptanceNumber)
	}
	if r.AcceptedTighter && !r.Accepted {
		return s, NoChange, invalid("a rejected lot cannot have been accepted by a tighter plan")
	}
	switch s.Severity {
	case Discontinued:
		return s, NoChange, invalid("inspection is discontinued: no lots are taken until it is resumed")
	case TightenedInspection:
		return s.tightened(r)
	case ReducedInspection:
		switch {
		case !r.Accepted:
			return Switching{Severity: NormalInspection}, LotRejected, nil
		case r.Irregular:
			return Switching{Severity: NormalInspection}, Irregular, nil
		}
		return s, NoChange, nil
	}
	return s.normal(r)
}

func (s Switching) normal(r Result) (Switching, Reason, error) {
	recent := s.Recent[max(0, len(s.Recent)-(window-1)):]
	next := Switching{Severity: NormalInspection, Score: s.Score}
	// A new slice: the state before stays as it was.
	next.Recent = append(append(make([]bool, 0, window), recent...), !r.Accepted)
	rejected := 0
	for _, v := range next.Recent {
		if v {
			rejected++
		}
	}
	if rejected >= rejectedToTighten {
		return Switching{Severity: TightenedInspection}, TwoOfFiveRejected, nil
	}
	switch {
	case r.AcceptanceNumber >= 2 && r.AcceptedTighter:
		next.Score += 3
	case r.AcceptanceNumber < 2 && r.Accepted:
		next.Score += 2
	default:
		next.Score = 0
	}
	if next.Score >= ScoreForReduced {
		next.Score = min(next.Score, 2*ScoreForReduced)
		if r.ReducedAllowed && !r.Irregular {
			return Switching{Severity: ReducedInspection}, ScoreReached, nil
		}
	}
	return next, NoChange, nil
}

func (s Switching) tightened(r Result) (Switching, Reason, error) {
	if r.Accepted {
		s.Accepted++
	} else {
		s.Accepted = 0
		s.Rejected++
	}
	switch {
	case s.Accepted >= acceptedToRelax:
		return Switching{Severity: NormalInspection}, FiveAccepted, nil
	case s.Rejected >= rejectedToStop:
		return Switching{Severity: Discontinued}, FiveRejected, nil
	}
	return s, NoChange, nil
}

// Resume starts again with tightened inspection after the supplier has improved.
func (s Switching) Resume() (Switching, Reason, error) {
	if s.Severity != Discontinued {
		return s, NoChange, invalid("inspection is not discontinued: there is nothing to resume")
	}
	return Switching{Severity: TightenedInspection}, Called, nil
}

// ToNormal ends reduced inspection because a condition warrants it.
func (s Switching) ToNormal() (Switching, Reason, error) {
	if s.Severity != ReducedInspection {
		return s, NoChange, invalid("inspection is not reduced: there is nothing to end")
	}
	return Switching{Severity: NormalInspection}, Called, nil
}

// check guards against a state that was stored wrongly.
func (s Switching) check() error {
	switch s.Severity {
	case "", NormalInspection, TightenedInspection, ReducedInspection, Discontinued:
	default:
		return invalid("there is no severity %q", s.Severity)
	}
	if len(s.Recent) > window || s.Score < 0 || s.Score > 2*ScoreForReduced ||
		s.Accepted < 0 || s.Accepted >= acceptedToRelax || s.Rejected < 0 || s.Rejected >= rejectedToStop {
		return invalid("the stored state of the switching is not one it can reach")
	}
	return nil
}
