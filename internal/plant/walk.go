package plant

import "slices"

// holdsFirst puts the kinds that hold product before the others: whoever protects the
// product must not wait for the look at the process.
func holdsFirst(kinds []KindAdded) []KindAdded {
	out := slices.Clone(kinds)
	slices.SortStableFunc(out, func(a, b KindAdded) int { return a.Kind.rank() - b.Kind.rank() })
	return out
}

// HoldsProduct reports whether a matter of the kind puts the product itself in doubt.
func (k MatterKind) HoldsProduct() bool { return k == MatterReading || k == MatterGauge }

func (k MatterKind) rank() int {
	if k.HoldsProduct() {
		return 0
	}
	return 1
}

// walkStep is a step of the plan of a kind, with its answer. Where it is asked once, an
// identical step of another plan that was answered in this attempt is the same step, and
// keeps its place there.
func (m Matter) walkStep(attempt int, k KindAdded, n int, s PlanStep, once bool) WalkStep {
	w := WalkStep{PlanStep: s, Kind: k.Kind, Plan: k.Plan, Step: n}
	w.Answer, w.Remedy = m.Answered(attempt, k.Plan, n, false), m.Answered(attempt, k.Plan, n, true)
	if once && (s.Kind != StepStop || w.Answer == nil) {
		w.Answer, w.Remedy = m.answerAlike(attempt, k, n, s, false), m.answerAlike(attempt, k, n, s, true)
	}
	if a := w.Answer; a != nil && (a.Plan != k.Plan || a.Step != n) {
		w.Kind, w.Plan, w.Step = m.Plans[a.Plan].Kind, a.Plan, a.Step
	}
	return w
}

// answerAlike is the answer that counts for a step of a kind's plan: the last that was
// given to it or to an identical step of another plan. What was left out, or a machine
// that was stopped, before the kind was added does not count for it: a reason to leave it
// out may not hold any more, and the machine may run again.
func (m Matter) answerAlike(attempt int, k KindAdded, n int, s PlanStep, remedy bool) *StepAnswer {
	var last *StepAnswer
	for i := range m.Answers {
		a := &m.Answers[i]
		if a.Attempt != attempt || a.Remedy != remedy || last != nil && a.Seq < last.Seq {
			continue
		}
		own := a.Plan == k.Plan && a.Step == n
		stale := (s.Kind == StepStop || a.Said == SaidSkipped) && a.At.Before(k.AddedAt)
		steps := m.Plans[a.Plan].Steps
		if own || !stale && a.Plan != k.Plan && a.Step >= 1 && a.Step <= len(steps) && steps[a.Step-1].alike(s) {
			last = a
		}
	}
	return last
}

// alike reports whether both ask for the same, as they are kept.
func (s PlanStep) alike(o PlanStep) bool {
	same := func(a, b *Decimal) bool { return a == nil && b == nil || a != nil && b != nil && *a == *b }
	return s.Says == o.Says && s.Kind == o.Kind && s.ExpectNo == o.ExpectNo && s.Unit == o.Unit && s.IfNot == o.IfNot && same(s.Lower, o.Lower) && same(s.Upper, o.Upper)
}

// sameAs reports whether both are to be done once.
func (w WalkStep) sameAs(o WalkStep) bool { return w.Answer == o.Answer && w.alike(o.PlanStep) }

// begun is the place of a step's first answer in the attempt among all answers, behind
// them all when it has none.
func (m Matter) begun(attempt int, w WalkStep) int {
	i := slices.IndexFunc(m.Answers, func(a StepAnswer) bool {
		return a.Attempt == attempt && a.Plan == w.Plan && a.Step == w.Step && !a.Remedy
	})
	if i < 0 {
		return len(m.Answers)
	}
	return i
}

// nextStep is the place of the first step that is not done, of those that hold product
// before any other: also before what is half done.
func nextStep(steps []WalkStep) int {
	next := len(steps)
	for i, w := range steps {
		if w.Done() {
			continue
		}
		if w.Kind.HoldsProduct() {
			return i
		}
		next = min(next, i)
	}
	return next
}
