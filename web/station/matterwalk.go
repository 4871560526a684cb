package station

import (
	"errors"
	"net/http"
	"strconv"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// stepForm is an answer as it was typed, or which step is looked back at.
type stepForm struct {
	Look        int // from 1; 0: none
	Value       string
	Note        string
	Problem     string
	NoteProblem string
}

// stepAsked is one step as the page puts it.
type stepAsked struct {
	ui.StepView
	Action   string
	ID       string // of the answer
	OtherID  string // of leaving it out
	Plan     string
	Attempt  string
	Step     string
	Seq      string
	Remedy   string // "1" when what is to be done then is asked
	Looking  bool   // it was answered; Given says how
	Answer   bool   // it may be answered, again when it was
	Note     string
	NoteNo   string   // what is wrong with the reason
	Reasons  []string // for leaving it out
	GoOn     string   // address of the step that is asked
	GoOnSays string
}

// stepRow is one step in the list beside the question.
type stepRow struct {
	Number string
	Says   string
	Answer string // how it was answered; "": not yet
	Off    string // that it was not as it should be, and what came of it
	Here   bool   // it is the one that is asked
	Href   string // looks back at it
}

// leaveOut are the reasons for which a step is left out, by word.
var leaveOut = []string{"found", "impossible", "not-here"}

func askStep(f ui.Format, machine plant.MachineNow, m plant.Matter, p plant.Progress, i int, here string, typed stepForm) *stepAsked {
	w, step := f.Words, p.Steps[i]
	v := &stepAsked{StepView: ui.NewStep(f, step.PlanStep), Action: here + "/step", ID: newFormID(), OtherID: newFormID(), Plan: step.Plan.String(),
		Attempt: itoa(p.Attempt), Step: itoa(step.Step), Seq: "1", Answer: true, Note: typed.Note, NoteNo: typed.NoteProblem}
	v.Count, v.About = w.T("matter.step-of", i+1, len(p.Steps)), ui.MatterKindWord(w, step.Kind)
	v.Raw, v.Problem = typed.Value, typed.Problem
	if step.PlanStep.Kind == plant.StepStop && !machine.Running() {
		v.Stopped = w.T("matter.stopped-already", machine.Name, f.Clock(machine.State.At))
	}
	for _, r := range leaveOut {
		v.Reasons = append(v.Reasons, w.T("matter.leave-out-reason."+r))
	}
	if step.Answer != nil { // the first answer was not as it should be
		v.Remedy, v.Says, v.Kind = "1", step.IfNot, plant.StepDone
		v.Given = w.T("matter.you-answered", saidWords(f, step.PlanStep, *step.Answer))
		v.About = step.Says
	}
	return v
}

// lookAt shows a step that was answered. While the plan is walked it may be answered
// again: both answers stay.
func lookAt(f ui.Format, machine plant.MachineNow, m plant.Matter, p plant.Progress, i int, here string) *stepAsked {
	step := p.Steps[i]
	v := askStep(f, machine, m, p, i, here, stepForm{})
	stopped := v.Stopped
	v.StepView = ui.NewStep(f, step.PlanStep)
	v.Stopped = stopped
	v.Count, v.About = f.Words.T("matter.step-of", i+1, len(p.Steps)), ui.MatterKindWord(f.Words, step.Kind)
	v.Given = answerWords(f, step)
	v.Remedy, v.Seq, v.Looking = "", itoa(step.Answer.Seq+1), true
	v.Answer = p.Stage == plant.StageWorking
	v.GoOn, v.GoOnSays = here, f.Words.T("matter.go-on")
	if p.Stage == plant.StageWorking && p.Next < len(p.Steps) {
		v.GoOnSays = f.Words.T("matter.back-to-step", p.Next+1)
	}
	return v
}

// again is the question of a step that is answered again: its text stands above already.
func again(v ui.StepView) ui.StepView {
	v.Given = ""
	return v
}

// saidWords is an answer in words: "no", "17.5 bar", "left out: not possible now".
func saidWords(f ui.Format, s plant.PlanStep, a plant.StepAnswer) string {
	switch a.Said {
	case plant.SaidValue:
		if a.Value != nil {
			return f.WithUnit(f.Decimal(*a.Value), s.Unit)
		}
	case plant.SaidSkipped:
		return f.Words.T("matter.left-out", a.Note)
	}
	return f.Words.T("matter.said." + string(a.Said))
}

// answerWords is how a step was answered, by whom and when, with what was done then.
func answerWords(f ui.Format, step plant.WalkStep) string {
	w := f.Words
	said := w.T("matter.answered", saidWords(f, step.PlanStep, *step.Answer), step.Answer.PersonName, f.Clock(step.Answer.At))
	if step.Remedy != nil {
		said = w.T("matter.then-done", said, w.T("matter.answered", saidWords(f, step.PlanStep, *step.Remedy), step.Remedy.PersonName, f.Clock(step.Remedy.At)))
	}
	return said
}

func newStepRow(f ui.Format, step plant.WalkStep, n int) stepRow {
	row := stepRow{Number: itoa(n), Says: step.Says}
	if step.Answer != nil {
		row.Answer = answerWords(f, step)
		if step.Off(*step.Answer) {
			row.Off = f.Words.T("matter.not-so")
		}
		if r := step.Remedy; r != nil && r.Said == plant.SaidDone {
			alone := step
			alone.Remedy = nil
			row.Answer, row.Off = answerWords(f, alone), f.Words.T("matter.put-right", r.PersonName, f.Clock(r.At))
		}
	}
	return row
}

func stepRows(f ui.Format, steps []plant.WalkStep, here string, p plant.Progress) []stepRow {
	var out []stepRow
	for i, step := range steps {
		row := newStepRow(f, step, i+1)
		row.Here = i == p.Next && p.Stage == plant.StageWorking
		if step.Answer != nil && !row.Here {
			row.Href = here + "?step=" + strconv.Itoa(i+1)
		}
		out = append(out, row)
	}
	return out
}

// answerStep is POST .../step.
func (s *Surface) answerStep(w http.ResponseWriter, r *http.Request) error {
	st, m, err := s.matterIn(r)
	if err != nil {
		return err
	}
	a, typed, err := readAnswer(r, m)
	if err == nil {
		err = s.store.AnswerStep(r.Context(), a)
	}
	if err == nil {
		err = s.stopFor(r, st, m, a)
	}
	if err == nil {
		ui.Redirect(w, r, path(st.ID, "matter", m.ID.String()))
		return nil
	}
	pe, ok := errors.AsType[*plant.Error](err)
	switch {
	case !ok:
		return err
	case pe.Kind == plant.Conflict:
		return s.stepQuicker(w, r, a, pe)
	case pe.Kind != plant.Invalid:
		return err
	case pe.Field == "note":
		typed.NoteProblem = ui.FrameOf(r).Words.Problem(pe)
	default:
		typed.Problem = ui.FrameOf(r).Words.Problem(pe)
	}
	return s.renderMatter(w, r, http.StatusUnprocessableEntity, st, m, typedMatter{step: typed})
}

// readAnswer reads an answer from the form.
func readAnswer(r *http.Request, m plant.Matter) (plant.StepAnswer, stepForm, error) {
	p, w := r.PostForm, ui.FrameOf(r).Words
	typed := stepForm{Value: shorten(plant.CleanText(p.Get("value"))), Note: plant.CleanText(p.Get("note"))}
	a := plant.StepAnswer{Matter: m.ID, Attempt: number(p.Get("attempt")), Step: number(p.Get("step")), Seq: number(p.Get("seq")),
		Remedy: p.Get("remedy") != "", Said: plant.Said(p.Get("said")), Note: typed.Note, Person: ui.FrameOf(r).Person.ID}
	var err error
	if a.ID, err = uuid.Parse(p.Get("id")); err != nil {
		return a, typed, plant.Invalidf("said", "Answer yes or no.")
	}
	if a.Plan, err = uuid.Parse(p.Get("plan")); err != nil {
		return a, typed, notFound(r)
	}
	if reason := p.Get("reason"); a.Said == plant.SaidSkipped && contains(leaveOut, reason) {
		a.Note = w.T("matter.leave-out-reason." + reason)
	}
	if a.Said == plant.SaidValue && typed.Value != "" {
		value, err := plant.ParseDecimal(typed.Value)
		if err != nil {
			return a, typed, plant.Invalidf("value", "Type the value that you read.").Because(err)
		}
		a.Value = &value
	}
	return a, typed, nil
}

// stepQuicker shows how the matter stands after somebody else has answered the step.
func (s *Surface) stepQuicker(w http.ResponseWriter, r *http.Request, a plant.StepAnswer, conflict *plant.Error) error {
	m, err := s.store.Matter(r.Context(), a.Matter)
	if err != nil {
		return err
	}
	f := ui.FrameOf(r).Format()
	typed := typedMatter{}
	if m.Open() {
		typed.problem = f.Words.Problem(conflict)
	}
	have := m.Answered(a.Attempt, a.Plan, a.Step, a.Remedy)
	if plan, ok := m.Plans[a.Plan]; ok && have != nil && have.Seq >= a.Seq && have.ID != a.ID && a.Step <= len(plan.Steps) {
		typed.problem = f.Words.T("matter.step-quicker", have.PersonName, saidWords(f, plan.Steps[a.Step-1], *have))
	}
	return s.quicker(w, r, typed)
}

// stopFor records that the machine stands still where the answer says so, as its button
// does. Its number follows from the answer, so that a double tap is one stop.
func (s *Surface) stopFor(r *http.Request, st plant.StationState, m plant.Matter, a plant.StepAnswer) error {
	plan, ok := m.Plans[a.Plan]
	c, found := characteristicOf(st, m.Characteristic)
	if !ok || !found || a.Said != plant.SaidDone || a.Step < 1 || a.Step > len(plan.Steps) || plan.Steps[a.Step-1].Kind != plant.StepStop || !c.Machine.Running() {
		return nil
	}
	now := c.Machine.State
	return s.store.SetMachine(r.Context(), plant.MachineState{ID: uuid.NewSHA1(a.ID, []byte("stop")), Machine: c.Machine.ID, Part: now.Part, Lot: now.Lot, Person: a.Person, At: ui.FrameOf(r).Now})
}
