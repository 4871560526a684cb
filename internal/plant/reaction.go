package plant

import (
	"slices"
	"time"

	"github.com/google/uuid"
)

// MatterKind is what a matter, or a part of it, is about. Each kind has its own
// reaction plan.
type MatterKind string

const (
	MatterReading    MatterKind = "reading"          // a reading outside specification
	MatterGauge      MatterKind = "gauge check"      // the gauge failed its check
	MatterUp         MatterKind = "location up"      // the location moved up
	MatterDown       MatterKind = "location down"    // the location moved down
	MatterPattern    MatterKind = "location pattern" // a pattern of the location that has no direction
	MatterDispersion MatterKind = "dispersion"       // the dispersion changed
	MatterOverdue    MatterKind = "overdue"          // a round was not taken; ends with the round and is never a line
)

// MatterKinds lists the kinds, the gravest first.
var MatterKinds = []MatterKind{MatterReading, MatterGauge, MatterUp, MatterDown, MatterPattern, MatterDispersion, MatterOverdue}

// Known reports whether k is one of the kinds.
func (k MatterKind) Known() bool { return slices.Contains(MatterKinds, k) }

// MatterKind is the kind of matter that the firing makes.
func (f Firing) MatterKind() MatterKind {
	switch f.Panel {
	case Reading:
		return MatterReading
	case GaugeCheck:
		return MatterGauge
	case Dispersion:
		return MatterDispersion
	}
	switch f.Side {
	case High:
		return MatterUp
	case Low:
		return MatterDown
	}
	return MatterPattern
}

// PlanScope is what a reaction plan is written for: one characteristic, the stations
// of a family, or, as the zero value, the whole plant. Of the plans in force the
// narrowest counts, so that a plant need not write one for each characteristic.
type PlanScope struct {
	Characteristic uuid.UUID
	Family         string
}

// ReactionPlan is one version of what to do about one kind of matter.
type ReactionPlan struct {
	ID         uuid.UUID // of this version
	Scope      PlanScope
	Kind       MatterKind
	Version    int
	Withdrawn  bool // from here on the next wider plan counts again
	Steps      []PlanStep
	Confirm    bool // a round after the fix must confirm it before the matter is closed
	Verify     bool // a second person must verify it with a signature
	MadeAt     time.Time
	Person     uuid.UUID
	PersonName string
}

// StepKind is how a step is answered.
type StepKind string

const (
	StepDone  StepKind = "done"   // with "done"
	StepYesNo StepKind = "yes no" // with yes or no, one of which is as it should be
	StepValue StepKind = "value"  // with a number that should lie within limits
	StepStop  StepKind = "stop"   // with "done", which records as well that the machine stands still
)

// StepKinds lists the kinds of answers in the order in which they are offered.
var StepKinds = []StepKind{StepDone, StepYesNo, StepValue, StepStop}

// PlanStep is one step of a plan.
type PlanStep struct {
	Says     string   `json:"says"`
	Kind     StepKind `json:"kind"`
	ExpectNo bool     `json:"expect_no,omitempty"` // of yes and no, no is as it should be
	Unit     string   `json:"unit,omitempty"`      // of the value
	Lower    *Decimal `json:"lower,omitempty"`     // limits of the value, either or both
	Upper    *Decimal `json:"upper,omitempty"`
	IfNot    string   `json:"if_not,omitempty"` // what to do when the answer is not as it should be
}

// Bounds of what a plan may hold: a person at a machine reads it with gloves on.
const (
	MaxPlanSteps = 20
	maxStepText  = 200
	maxStepUnit  = 12
)

// Clean brings the plan's text into the form in which it is kept and drops what its
// kinds of answers do not use.
func (p ReactionPlan) Clean() ReactionPlan {
	steps := make([]PlanStep, 0, len(p.Steps))
	for _, s := range p.Steps {
		s.Says, s.IfNot, s.Unit = CleanText(s.Says), CleanText(s.IfNot), CleanText(s.Unit)
		if s.Kind != StepYesNo {
			s.ExpectNo = false
		}
		if s.Kind != StepValue {
			s.Unit, s.Lower, s.Upper = "", nil, nil
		}
		if s.Kind == StepDone || s.Kind == StepStop {
			s.IfNot = ""
		}
		steps = append(steps, s)
	}
	p.Steps = steps
	if p.Withdrawn {
		p.Steps, p.Confirm, p.Verify = nil, false, false
	}
	if p.Kind == MatterOverdue {
		p.Confirm, p.Verify = false, false // it ends with the round
	}
	return p
}

// Validate says what in a clean plan cannot be, in words for who made it.
func (p ReactionPlan) Validate() error {
	switch {
	case !p.Kind.Known():
		return Invalidf("kind", "There is no such kind of matter.")
	case p.Scope.Characteristic != uuid.Nil && p.Scope.Family != "":
		return Invalidf("scope", "A plan is for a characteristic, for a family of stations or for the plant.")
	case p.Withdrawn:
		return nil
	case len(p.Steps) == 0:
		return Invalidf("steps", "A plan needs at least one step.")
	case len(p.Steps) > MaxPlanSteps:
		return Invalidf("steps", "A plan has at most %d steps.", MaxPlanSteps)
	}
	for i, s := range p.Steps {
		if err := s.validate(i + 1); err != nil {
			return err
		}
	}
	return nil
}

func (s PlanStep) validate(n int) error {
	switch {
	case s.Says == "":
		return Invalidf("steps", "Step %d does not say what to do.", n)
	case len([]rune(s.Says)) > maxStepText || len([]rune(s.IfNot)) > maxStepText:
		return Invalidf("steps", "Step %d is too long: at most %d characters are read at a machine.", n, maxStepText)
	case !slices.Contains(StepKinds, s.Kind):
		return Invalidf("steps", "Say how step %d is answered.", n)
	case s.Kind != StepValue:
		return nil
	case s.Lower == nil && s.Upper == nil:
		return Invalidf("steps", "Step %d asks for a value and needs a lower or an upper limit.", n)
	case s.Lower != nil && s.Upper != nil && s.Lower.Compare(*s.Upper) > 0:
		return Invalidf("steps", "The limits of step %d are the wrong way round.", n)
	case len([]rune(s.Unit)) > maxStepUnit:
		return Invalidf("steps", "The unit of step %d is too long.", n)
	}
	return nil
}

// Said is what somebody answered to a step.
type Said string

const (
	SaidDone    Said = "done"
	SaidYes     Said = "yes"
	SaidNo      Said = "no"
	SaidValue   Said = "value"
	SaidSkipped Said = "skipped" // with a reason
)

// StepAnswer is an answer to a step as it was given. An answer given again supersedes
// the one before; both stay.
type StepAnswer struct {
	ID         uuid.UUID // from the sender: a repeated send is recognised
	Matter     uuid.UUID
	Plan       uuid.UUID // the version that was walked
	Attempt    int       // of the matter, from 1
	Step       int       // of the plan, from 1
	Remedy     bool      // the answer to what is to be done when the first was not as it should be
	Seq        int       // from 1: answered again
	Said       Said
	Value      *Decimal
	Note       string // why it was skipped
	Person     uuid.UUID
	PersonName string
	At         time.Time
}

// Off reports whether an answer to the step is not as it should be.
func (s PlanStep) Off(a StepAnswer) bool {
	switch a.Said {
	case SaidYes:
		return s.ExpectNo
	case SaidNo:
		return !s.ExpectNo
	case SaidValue:
		return a.Value == nil || s.Lower != nil && a.Value.Compare(*s.Lower) < 0 || s.Upper != nil && a.Value.Compare(*s.Upper) > 0
	}
	return false
}

// check says what in an answer does not answer the step.
func (s PlanStep) check(a StepAnswer) error {
	if a.Said == SaidSkipped {
		if a.Note == "" {
			return Invalidf("note", "Say why this step is left out.")
		}
		return nil
	}
	if a.Remedy {
		if a.Said != SaidDone {
			return Invalidf("said", "This is answered with done.")
		}
		return nil
	}
	switch s.Kind {
	case StepDone, StepStop:
		if a.Said != SaidDone {
			return Invalidf("said", "This is answered with done.")
		}
	case StepYesNo:
		if a.Said != SaidYes && a.Said != SaidNo {
			return Invalidf("said", "Answer yes or no.")
		}
	case StepValue:
		if a.Said != SaidValue || a.Value == nil {
			return Invalidf("value", "Type the value that you read.")
		}
	}
	return nil
}
