package plant

import (
	"slices"
	"time"

	"github.com/google/uuid"
)

// Stage is where a matter stands. It is always in exactly one.
type Stage string

const (
	StageOpen       Stage = "open"       // nobody has taken it
	StageWorking    Stage = "working"    // its plan is walked, then cause and action are said
	StageConfirming Stage = "confirming" // fixed; a round after the fix must confirm it
	StageVerifying  Stage = "verifying"  // a second person must verify the fix
	StageReady      Stage = "ready"      // all that was demanded is there: it can be closed
	StageWithdrawn  Stage = "withdrawn"  // no line stands: it waits to be closed as withdrawn
	StageClosed     Stage = "closed"
)

// KindAdded is a kind of matter with the plan that was in force when it was added.
type KindAdded struct {
	Kind    MatterKind
	Plan    uuid.UUID // Nil: none was in force
	AddedAt time.Time
	Stands  bool // any of its firings
}

// MergeKinds makes one entry of each kind: added when its first firing was, with the plan
// of that time, standing when any firing does. They come in the order in which they were
// added, the gravest first.
func MergeKinds(kinds []KindAdded) []KindAdded {
	var out []KindAdded
	for _, k := range kinds {
		i := slices.IndexFunc(out, func(o KindAdded) bool { return o.Kind == k.Kind })
		if i < 0 {
			out = append(out, k)
			continue
		}
		o := &out[i]
		o.Stands = o.Stands || k.Stands
		if k.AddedAt.Before(o.AddedAt) {
			o.AddedAt, o.Plan = k.AddedAt, k.Plan
		}
	}
	slices.SortStableFunc(out, func(a, b KindAdded) int {
		if n := a.AddedAt.Compare(b.AddedAt); n != 0 {
			return n
		}
		return slices.Index(MatterKinds, a.Kind) - slices.Index(MatterKinds, b.Kind)
	})
	return out
}

// Fix is what was found and done, and what came of it. With nothing done the action is
// empty.
type Fix struct {
	ID         uuid.UUID
	Number     int // from 1
	Cause      string
	CauseID    uuid.UUID
	Action     string
	RestartAt  time.Time // where the chart starts afresh; zero: nowhere
	At         time.Time // recorded
	Person     uuid.UUID
	PersonName string

	ConfirmedAt time.Time     // taken at of the first subgroup after it that stands; zero: none yet
	SignalAt    time.Time     // taken at of the first subgroup after it that signals; zero: none
	Word        *Verification // a second person's; nil: none yet
}

// Since is from when on subgroups are taken after the fix.
func (f Fix) Since() time.Time {
	if f.RestartAt.IsZero() {
		return f.At
	}
	return f.RestartAt
}

// Stands reports whether the fix has held so far: nothing signals after it and nobody
// refused it.
func (f Fix) Stands() bool { return f.SignalAt.IsZero() && (f.Word == nil || f.Word.Accepted) }

// Verification is a second person's word on a fix.
type Verification struct {
	ID         uuid.UUID
	Fix        uuid.UUID
	Accepted   bool
	Note       string
	Person     uuid.UUID
	PersonName string
	At         time.Time
}

// WalkStep is a step of a matter's plans with how it was answered in this attempt.
type WalkStep struct {
	PlanStep
	Kind   MatterKind
	Plan   uuid.UUID
	Step   int         // of its plan, from 1
	Answer *StepAnswer // nil: not yet
	Remedy *StepAnswer // nil: not yet, or not asked for
}

// AsksRemedy reports whether the answer was not as it should be and the step says what
// to do then.
func (w WalkStep) AsksRemedy() bool {
	return w.IfNot != "" && w.Answer != nil && w.Off(*w.Answer)
}

// Done reports whether the step is behind.
func (w WalkStep) Done() bool {
	return w.Answer != nil && (!w.AsksRemedy() || w.Remedy != nil)
}

// Progress is how far a matter is.
type Progress struct {
	Stage   Stage
	Attempt int // from 1: a fix that did not hold begins the next
	// Steps of the plans of all kinds that stand, each once: what was answered keeps its
	// place, in the order in which it was; then what is left of the kinds that hold product,
	// then of the others, as they were added.
	Steps   []WalkStep
	Next    int  // place of the step that is to be done; len(Steps) when all are
	Confirm bool // a round must confirm the fix
	Verify  bool // a second person must verify it
	Fix     *Fix // the one that stands
	Plans   []uuid.UUID
}

// Progress works out how far the matter is, from its lines and from what people did
// about it. It needs the kinds, answers and fixes to have been read.
func (m Matter) Progress() Progress {
	p := Progress{Attempt: 1}
	if n := len(m.Fixes); n > 0 {
		p.Attempt = n + 1
		if last := &m.Fixes[n-1]; last.Stands() {
			p.Attempt, p.Fix = n, last
		}
	}
	for _, k := range holdsFirst(m.Kinds) {
		plan, ok := m.Plans[k.Plan]
		if !ok || !k.Stands || slices.Contains(p.Plans, plan.ID) {
			continue
		}
		p.Plans = append(p.Plans, plan.ID)
		p.Confirm, p.Verify = p.Confirm || plan.Confirm, p.Verify || plan.Verify
		for i, s := range plan.Steps {
			once := slices.IndexFunc(plan.Steps, s.alike) == i // a plan may ask the same twice, and means it
			if w := m.walkStep(p.Attempt, k, i+1, s, once); !once || !slices.ContainsFunc(p.Steps, w.sameAs) {
				p.Steps = append(p.Steps, w)
			}
		}
	}
	slices.SortStableFunc(p.Steps, func(a, b WalkStep) int { return m.begun(p.Attempt, a) - m.begun(p.Attempt, b) })
	p.Next = nextStep(p.Steps)
	p.Stage = m.stage(p)
	return p
}

func (m Matter) stage(p Progress) Stage {
	switch {
	case !m.Open():
		return StageClosed
	case m.AllWithdrawn():
		return StageWithdrawn
	case m.TakenBy == uuid.Nil:
		return StageOpen
	case p.Next < len(p.Steps) || p.Fix == nil:
		return StageWorking
	case p.Confirm && p.Fix.ConfirmedAt.IsZero():
		return StageConfirming
	case p.Verify:
		return StageVerifying
	}
	return StageReady
}

// Answered is the answer to a step that counts in an attempt: the last that was given;
// nil when there is none.
func (m Matter) Answered(attempt int, plan uuid.UUID, step int, remedy bool) *StepAnswer {
	var last *StepAnswer
	for i := range m.Answers {
		a := &m.Answers[i]
		if a.Attempt == attempt && a.Plan == plan && a.Step == step && a.Remedy == remedy && (last == nil || a.Seq > last.Seq) {
			last = a
		}
	}
	return last
}

// CheckAnswer says whether an answer may be given now and returns it as it is recorded.
func (m Matter) CheckAnswer(a StepAnswer, now time.Time) (StepAnswer, error) {
	p := m.Progress()
	switch p.Stage {
	case StageOpen:
		return a, Conflictf("", "Somebody has to take this first.")
	case StageWorking:
	case StageClosed, StageWithdrawn:
		return a, Conflictf("", "This is over: no step is asked for any more.")
	default:
		return a, Conflictf("", "What was done is on record already. Its steps stand.")
	}
	i := slices.IndexFunc(p.Steps, func(w WalkStep) bool { return w.Plan == a.Plan && w.Step == a.Step })
	if i < 0 || a.Attempt != p.Attempt {
		return a, Conflictf("", "The plan has moved on. This is how it stands now.")
	}
	w := p.Steps[i]
	have := w.Answer
	if a.Remedy {
		have = w.Remedy
	}
	seq := 1
	if have != nil {
		seq = have.Seq + 1
	}
	switch {
	case i > p.Next:
		return a, Conflictf("", "The steps are walked in their order. An earlier one is not answered yet.")
	case a.Seq != seq:
		return a, Conflictf("", "Somebody has answered this step already.")
	case a.Remedy && !w.AsksRemedy():
		return a, Conflictf("", "The plan has moved on. This is how it stands now.")
	}
	if a.Said != SaidSkipped {
		a.Note = ""
	}
	if a.Said != SaidValue {
		a.Value = nil
	}
	a.At = now
	return a, w.check(a)
}

// Outcome is what follows from somebody saying what was found and done, or closing.
type Outcome struct {
	Fix     *Fix    // to be recorded; nil: the one that stands, or none
	Closing Closing // how the matter ends; "": it goes on waiting
}

// Conclude says what follows from a closing. Nothing ends a matter without what its
// plans demand: with a step open it is refused; with a confirming round or a second
// person missing the fix is recorded and the matter waits.
func (m Matter) Conclude(c ClosingRequest, now time.Time) (Outcome, error) {
	p := m.Progress()
	switch p.Stage {
	case StageClosed:
		return Outcome{}, Conflictf("", "Somebody has closed this already.")
	case StageWithdrawn:
		return Outcome{Closing: WithdrawnBy}, nil
	case StageReady:
		return Outcome{Closing: p.Fix.closing()}, nil
	case StageConfirming:
		return Outcome{}, Conflictf("", "A round after the fix has to confirm it first.")
	case StageVerifying:
		return Outcome{}, Conflictf("", "A second person has to verify this first.")
	case StageOpen:
		if len(p.Steps) > 0 || p.Confirm || p.Verify {
			return Outcome{}, Conflictf("", "Somebody has to take this first.")
		}
	}
	switch {
	case p.Next < len(p.Steps):
		return Outcome{}, Invalidf("steps", "Step %d of %d is not answered yet.", p.Next+1, len(p.Steps))
	case p.Fix != nil:
		return Outcome{}, Conflictf("", "What was done is on record already.")
	}
	closing, restart, err := m.Resolve(c, now)
	if err != nil {
		return Outcome{}, err
	}
	out := Outcome{Closing: closing, Fix: &Fix{Number: len(m.Fixes) + 1, Cause: c.Cause, CauseID: c.CauseID, Action: c.Action,
		RestartAt: restart, At: now, Person: c.Person}}
	if p.Confirm || p.Verify {
		out.Closing = ""
	}
	return out, nil
}

func (f Fix) closing() Closing {
	if f.Action == "" {
		return NothingDone
	}
	return Fixed
}

// VerifyRequest is a second person's word on the fix that stands. The caller has checked
// that the secret was entered again.
type VerifyRequest struct {
	Matter   uuid.UUID
	Version  int // that the person saw
	Fix      uuid.UUID
	Accepted bool
	Note     string // why it was refused
	Person   uuid.UUID
}

// CheckVerify says whether the person may give a word on the fix now. How the matter
// ends follows from the fix.
func (m Matter) CheckVerify(v VerifyRequest) (Closing, error) {
	p := m.Progress()
	switch {
	case p.Stage == StageClosed:
		return "", Conflictf("", "Somebody has closed this already.")
	case p.Stage != StageVerifying || p.Fix.ID != v.Fix:
		return "", Conflictf("", "There is nothing to verify now. This is how it stands.")
	case p.Fix.Person == v.Person:
		return "", Forbiddenf("", "Who recorded the fix cannot verify it: a second person does.")
	case !v.Accepted && v.Note == "":
		return "", Invalidf("note", "Say what is still to be done.")
	case !v.Accepted:
		return "", nil
	}
	return p.Fix.closing(), nil
}
