package plant_test

import (
	"slices"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
)

// walked builds matters in every state that facts can bring about.
type walked struct {
	plant.Matter
	plan plant.ReactionPlan
}

func walk(confirm, verify bool) *walked {
	lower := plant.Decimal{Units: 17, Decimals: 0}
	plan := plant.ReactionPlan{ID: uuid.New(), Kind: plant.MatterUp, Version: 1, Confirm: confirm, Verify: verify, Steps: []plant.PlanStep{
		{Says: "Is the insert whole?", Kind: plant.StepYesNo, IfNot: "Change it."},
		{Says: "Read the pressure.", Kind: plant.StepValue, Unit: "bar", Lower: &lower},
	}}
	w := &walked{plan: plan}
	w.ID, w.OpenedTaken = uuid.New(), at(0)
	w.Lines = []plant.MatterLine{{Firing: plant.Firing{Panel: plant.Location, Side: plant.High}}}
	w.Kinds = []plant.KindAdded{{Kind: plant.MatterUp, Plan: plan.ID, AddedAt: at(0), Stands: true}}
	w.Plans = map[uuid.UUID]plant.ReactionPlan{plan.ID: plan}
	return w
}

func (w *walked) take() *walked { w.TakenBy = uuid.New(); return w }

func (w *walked) say(t *testing.T, step int, said plant.Said, value string, remedy bool) *walked {
	t.Helper()
	p := w.Progress()
	a := plant.StepAnswer{ID: uuid.New(), Matter: w.ID, Plan: w.plan.ID, Attempt: p.Attempt, Step: step, Seq: 1, Remedy: remedy, Said: said, Note: "not possible now"}
	if value != "" {
		d, err := plant.ParseDecimal(value)
		if err != nil {
			t.Fatal(err)
		}
		a.Value = &d
	}
	a, err := w.CheckAnswer(a, at(5))
	if err != nil {
		t.Fatal(err)
	}
	w.Answers = append(w.Answers, a)
	return w
}

func (w *walked) answered(t *testing.T) *walked {
	t.Helper()
	return w.say(t, 1, plant.SaidYes, "", false).say(t, 2, plant.SaidValue, "17,0", false)
}

func (w *walked) fix(t *testing.T, minute float64) *walked {
	t.Helper()
	out, err := w.Conclude(plant.ClosingRequest{Cause: "c", Action: "a", Person: w.TakenBy}, at(minute))
	if err != nil || out.Fix == nil {
		t.Fatalf("no fix: %+v, %v", out, err)
	}
	out.Fix.ID = uuid.New()
	w.Fixes = append(w.Fixes, *out.Fix)
	return w
}

func (w *walked) round(minute float64) *walked {
	w.Fixes[len(w.Fixes)-1].ConfirmedAt = at(minute)
	return w
}
func (w *walked) signal(minute float64) *walked {
	w.Fixes[len(w.Fixes)-1].SignalAt = at(minute)
	return w.round(minute)
}
func (w *walked) refuse() *walked {
	w.Fixes[len(w.Fixes)-1].Word = &plant.Verification{}
	return w
}

func TestStagesOfAMatter(t *testing.T) {
	t.Parallel()
	for _, tc := range []struct {
		name    string
		m       *walked
		stage   plant.Stage
		next    int
		attempt int
	}{
		{"nobody took it", walk(true, true), plant.StageOpen, 0, 1},
		{"taken", walk(true, true).take(), plant.StageWorking, 0, 1},
		{"one step answered", walk(true, true).take().say(t, 1, plant.SaidYes, "", false), plant.StageWorking, 1, 1},
		{"a step that is not as it should be asks for more", walk(true, true).take().say(t, 1, plant.SaidNo, "", false), plant.StageWorking, 0, 1},
		{"and goes on when that is done", walk(true, true).take().say(t, 1, plant.SaidNo, "", false).say(t, 1, plant.SaidDone, "", true), plant.StageWorking, 1, 1},
		{"a step left out with a reason", walk(true, true).take().say(t, 1, plant.SaidSkipped, "", false), plant.StageWorking, 1, 1},
		{"a value outside its limits without words for it", walk(true, true).take().say(t, 1, plant.SaidYes, "", false).say(t, 2, plant.SaidValue, "16.9", false), plant.StageWorking, 2, 1},
		{"all answered", walk(true, true).take().answered(t), plant.StageWorking, 2, 1},
		{"fixed", walk(true, true).take().answered(t).fix(t, 6), plant.StageConfirming, 2, 1},
		{"confirmed", walk(true, true).take().answered(t).fix(t, 6).round(8), plant.StageVerifying, 2, 1},
		{"confirmed, and nobody else is asked for", walk(true, false).take().answered(t).fix(t, 6).round(8), plant.StageReady, 2, 1},
		{"fixed, and only a second person is asked for", walk(false, true).take().answered(t).fix(t, 6), plant.StageVerifying, 2, 1},
		{"the round after the fix signals", walk(true, true).take().answered(t).fix(t, 6).signal(8), plant.StageWorking, 0, 2},
		{"a signal refutes also where no round was asked for", walk(false, true).take().answered(t).fix(t, 6).signal(8), plant.StageWorking, 0, 2},
		{"refused", walk(false, true).take().answered(t).fix(t, 6).refuse(), plant.StageWorking, 0, 2},
		{"walked again", walk(true, true).take().answered(t).fix(t, 6).signal(8).answered(t).fix(t, 10), plant.StageConfirming, 2, 2},
	} {
		if p := tc.m.Progress(); p.Stage != tc.stage || p.Next != tc.next || p.Attempt != tc.attempt {
			t.Errorf("%s: %s, next %d, attempt %d; want %s, %d, %d", tc.name, p.Stage, p.Next, p.Attempt, tc.stage, tc.next, tc.attempt)
		}
	}
	m := walk(true, true).take().answered(t).fix(t, 6).signal(8)
	m.Fixes[0].SignalAt = time.Time{} // the reading that signalled was a typing slip
	if p := m.Progress(); p.Stage != plant.StageVerifying || p.Attempt != 1 {
		t.Errorf("after the slip was corrected: %s, attempt %d", p.Stage, p.Attempt)
	}
	m = walk(true, true).take()
	m.Lines[0].Withdrawn, m.Kinds[0].Stands = true, false
	if p := m.Progress(); p.Stage != plant.StageWithdrawn || len(p.Steps) != 0 {
		t.Errorf("withdrawn: %+v", p)
	}
	m = walk(true, true)
	m.ClosedAt = at(1)
	if s := m.Progress().Stage; s != plant.StageClosed {
		t.Errorf("closed: %s", s)
	}
}

// TestThePlanOfAnAddedKindIsAsked, and that of one that no longer stands is not.
func TestThePlanOfAnAddedKindIsAsked(t *testing.T) {
	t.Parallel()
	w := walk(false, false).take().answered(t)
	hold := plant.ReactionPlan{ID: uuid.New(), Kind: plant.MatterReading, Confirm: true, Steps: []plant.PlanStep{{Says: "Sort the box.", Kind: plant.StepDone}}}
	w.Plans[hold.ID] = hold
	w.Kinds = append(w.Kinds, plant.KindAdded{Kind: plant.MatterReading, Plan: hold.ID, AddedAt: at(7), Stands: true})
	if p := w.Progress(); p.Stage != plant.StageWorking || p.Next != 2 || len(p.Steps) != 3 || p.Steps[2].Kind != plant.MatterReading || !p.Confirm {
		t.Errorf("%+v", p)
	}
	if _, err := w.Conclude(plant.ClosingRequest{Cause: "c", Action: "a"}, at(8)); !plant.IsKind(err, plant.Invalid) {
		t.Errorf("closing with a step open: %v", err)
	}
	w.Kinds[1].Stands = false
	if out, err := w.Conclude(plant.ClosingRequest{Cause: "c", Action: "a"}, at(8)); err != nil || out.Closing != plant.Fixed || w.Progress().Confirm {
		t.Errorf("closing once it no longer stands: %+v, %v", out, err)
	}
	merged := plant.MergeKinds([]plant.KindAdded{
		{Kind: plant.MatterUp, Plan: hold.ID, AddedAt: at(3), Stands: true}, {Kind: plant.MatterUp, Plan: w.plan.ID, AddedAt: at(1)},
		{Kind: plant.MatterReading, AddedAt: at(1), Stands: true},
	})
	if len(merged) != 2 || merged[0].Kind != plant.MatterReading || merged[1].Plan != w.plan.ID || !merged[1].Stands || !merged[1].AddedAt.Equal(at(1)) {
		t.Errorf("merged: %+v", merged)
	}
}

// TestWhatHoldsProductComesNext: when a kind that holds product joins, its steps come
// before what is left of the others, and what was answered keeps its place.
func TestWhatHoldsProductComesNext(t *testing.T) {
	t.Parallel()
	said := func(p plant.Progress) (out []string) {
		for _, s := range p.Steps {
			out = append(out, s.Says)
		}
		return out
	}
	want := func(w *walked, next int, steps ...string) {
		t.Helper()
		if p := w.Progress(); !slices.Equal(said(p), steps) || p.Next != next {
			t.Errorf("next %d of %q, want %d of %q", p.Next, said(p), next, steps)
		}
	}
	whole, pressure := "Is the insert whole?", "Read the pressure."
	joined := func(w *walked, steps ...plant.PlanStep) plant.ReactionPlan {
		hold := plant.ReactionPlan{ID: uuid.New(), Kind: plant.MatterReading, Steps: steps}
		w.Plans[hold.ID] = hold
		w.Kinds = append(w.Kinds, plant.KindAdded{Kind: hold.Kind, Plan: hold.ID, AddedAt: at(7), Stands: true})
		return hold
	}
	stop, aside := plant.PlanStep{Says: "Stop it.", Kind: plant.StepStop}, plant.PlanStep{Says: "Tag them.", Kind: plant.StepDone}

	w := walk(false, false).take().say(t, 1, plant.SaidYes, "", false)
	look := w.plan
	w.plan = joined(w, stop, aside)
	want(w, 1, whole, stop.Says, aside.Says, pressure)
	w.say(t, 1, plant.SaidDone, "", false)
	want(w, 2, whole, stop.Says, aside.Says, pressure)
	w.say(t, 2, plant.SaidDone, "", false)
	w.plan = look
	w.say(t, 2, plant.SaidValue, "18", false)
	want(w, 4, whole, stop.Says, aside.Says, pressure)

	// What is half done keeps its place, and waits.
	w = walk(false, false).take().say(t, 1, plant.SaidNo, "", false)
	look = w.plan
	w.plan = joined(w, stop)
	want(w, 1, whole, stop.Says, pressure)
	w.say(t, 1, plant.SaidDone, "", false)
	want(w, 0, whole, stop.Says, pressure)
	w.plan = look
	w.say(t, 1, plant.SaidDone, "", true)
	want(w, 2, whole, stop.Says, pressure)

	// What both ask is asked once, answered before or not; a stop and what was left out
	// before it joined are asked again. A plan that asks the same twice means it.
	w = walk(false, false)
	joined(w, aside, w.plan.Steps[1], aside)
	want(w, 0, aside.Says, pressure, aside.Says, whole)
	w = walk(false, false).take().answered(t)
	joined(w, aside, w.plan.Steps[1])
	want(w, 2, whole, pressure, aside.Says)
	if a := w.Progress().Steps[1]; a.Plan != w.plan.ID || a.Answer == nil {
		t.Errorf("the answer to what both ask: %+v", a)
	}
	w.Kinds[0].Stands = false // its answer counts all the same
	want(w, 1, pressure, aside.Says)
	w = walk(false, false).take().say(t, 1, plant.SaidSkipped, "", false)
	joined(w, w.plan.Steps[0])
	want(w, 1, whole, whole, pressure)
	w = walk(false, false)
	w.plan.Steps = []plant.PlanStep{stop}
	w.Plans[w.plan.ID] = w.plan
	w.take().say(t, 1, plant.SaidDone, "", false)
	w.plan = joined(w, stop)
	want(w, 1, stop.Says, stop.Says)
	w.say(t, 1, plant.SaidDone, "", false)
	want(w, 2, stop.Says, stop.Says)
}

func TestWhoMayVerify(t *testing.T) {
	t.Parallel()
	w := walk(false, true).take().answered(t).fix(t, 6)
	other, fix := uuid.New(), w.Fixes[0].ID
	for _, tc := range []struct {
		name    string
		v       plant.VerifyRequest
		closing plant.Closing
		kind    plant.Kind
	}{
		{"a second person", plant.VerifyRequest{Fix: fix, Accepted: true, Person: other}, plant.Fixed, 0},
		{"who fixed it", plant.VerifyRequest{Fix: fix, Accepted: true, Person: w.TakenBy}, "", plant.Forbidden},
		{"another fix", plant.VerifyRequest{Fix: uuid.New(), Accepted: true, Person: other}, "", plant.Conflict},
		{"refused without a word", plant.VerifyRequest{Fix: fix, Person: other}, "", plant.Invalid},
		{"refused", plant.VerifyRequest{Fix: fix, Note: "still loose", Person: other}, "", 0},
	} {
		closing, err := w.CheckVerify(tc.v)
		if closing != tc.closing || (err == nil) != (tc.kind == 0) || err != nil && !plant.IsKind(err, tc.kind) {
			t.Errorf("%s: %q, %v", tc.name, closing, err)
		}
	}
	if _, err := w.Conclude(plant.ClosingRequest{Cause: "c", Action: "a"}, at(9)); !plant.IsKind(err, plant.Conflict) {
		t.Errorf("closing past the second person: %v", err)
	}
}

func TestWhatAPlanMayBe(t *testing.T) {
	t.Parallel()
	two, one := plant.Decimal{Units: 2}, plant.Decimal{Units: 1}
	step := func(s plant.PlanStep) []plant.PlanStep { return []plant.PlanStep{s} }
	for name, p := range map[string]plant.ReactionPlan{
		"no steps":          {Kind: plant.MatterUp},
		"no such kind":      {Kind: "weather", Steps: step(plant.PlanStep{Says: "x", Kind: plant.StepDone})},
		"two scopes":        {Kind: plant.MatterUp, Scope: plant.PlanScope{Characteristic: uuid.New(), Family: "turning"}, Steps: step(plant.PlanStep{Says: "x", Kind: plant.StepDone})},
		"a step of nothing": {Kind: plant.MatterUp, Steps: step(plant.PlanStep{Says: " \n", Kind: plant.StepDone})},
		"no answer":         {Kind: plant.MatterUp, Steps: step(plant.PlanStep{Says: "x"})},
		"no limits":         {Kind: plant.MatterUp, Steps: step(plant.PlanStep{Says: "x", Kind: plant.StepValue})},
		"limits turned":     {Kind: plant.MatterUp, Steps: step(plant.PlanStep{Says: "x", Kind: plant.StepValue, Lower: &two, Upper: &one})},
		"too many":          {Kind: plant.MatterUp, Steps: make([]plant.PlanStep, plant.MaxPlanSteps+1)},
	} {
		if err := p.Clean().Validate(); !plant.IsKind(err, plant.Invalid) {
			t.Errorf("%s: %v", name, err)
		}
	}
	p := plant.ReactionPlan{Kind: plant.MatterOverdue, Confirm: true, Verify: true,
		Steps: step(plant.PlanStep{Says: " Take it  now ", Kind: plant.StepDone, IfNot: "x", Unit: "bar", Lower: &one, ExpectNo: true})}.Clean()
	if s := p.Steps[0]; p.Confirm || p.Verify || s.IfNot != "" || s.Unit != "" || s.Lower != nil || s.ExpectNo || p.Validate() != nil {
		t.Errorf("clean: %+v", p)
	}
}
