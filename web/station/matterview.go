package station

import (
	"strings"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/chart"
	"holdfast/web/ui"
)

// matterView is what is open, or was, on one characteristic. Of Step, Closing, Confirm,
// Verify and Ready at most one is asked for: one question at a time.
type matterView struct {
	ID      string
	Tone    string
	Symbol  string
	Title   string
	Name    string
	Since   string
	Where   string // "Step 2 of 4"
	Lines   []lineOfMatter
	TakenBy string
	Mine    bool // who looks at it has taken it
	Take    string
	Version string
	Problem string // about the whole: somebody was quicker
	Notice  string // the fix did not hold

	First     string      // what is asked once it is taken
	Step      *stepAsked  // the step that is asked, or looked back at
	Closing   bool        // cause and action are asked
	Record    bool        // saying them does not close it: it waits for more
	Withdrawn bool        // no line stands any more
	Form      closingForm // where cause and action are asked
	Close     string      // address of closing
	Confirm   *confirmView
	Verify    *verifyForm
	Fix       *fixView // what was done, while it waits
	Closed    *closedView

	Steps []stepRow // of the plans, with their answers
	After []string  // what follows the steps
	Tried []string  // fixes that did not hold

	Chart   string
	ChartOf string
	Caution bool
	Back    string
	Aside   *asideView // what to keep aside
}

type lineOfMatter struct {
	Says  string
	When  string
	Note  string
	Parts []string // of readings outside specification: which, how far, past which limit
}

// fixView is what was found and done.
type fixView struct {
	Cause     string
	Action    string
	At        string
	By        string
	Confirmed string // when a round confirmed it
}

// confirmView leads to the round that confirms the fix.
type confirmView struct {
	Name  string
	Href  string
	Start *machineView // the machine, while it stands still
	Says  string       // what comes before measuring then
}

type closedView struct {
	When     string
	By       string
	Cause    string
	Action   string
	Restart  string
	How      string
	Verified string
	Answers  []attemptView
}

// attemptView is what was answered in one walk through the plan.
type attemptView struct {
	Title string // "" when there was only one
	Steps []stepRow
}

func newMatter(f ui.Format, person plant.Person, st plant.StationState, c plant.CharacteristicState, m plant.Matter, typed typedMatter) matterView {
	w, p := f.Words, m.Progress()
	condition := ui.ConditionOf(m.Kind())
	v := matterView{ID: m.ID.String(), Tone: ui.Tone(condition), Symbol: ui.SymbolOf(condition), Title: ui.VerdictWords(w, m.Kind()), Name: c.Title(),
		Since: w.T("station.open-since", f.Clock(m.OpenedAt), f.Since(m.OpenedAt)), Where: ui.StageWords(w, p), TakenBy: m.TakenByName,
		Mine: m.TakenBy == person.ID, Version: itoa(m.Version), Back: path(st.ID), Problem: typed.problem}
	here := path(st.ID, "matter", m.ID.String())
	v.Take, v.Close = here+"/take", here+"/close"
	v.Caution = len(p.Steps) > 0 || m.Kind() == plant.Hold
	for _, l := range m.Lines {
		v.Lines = append(v.Lines, newLine(f, c, l))
	}
	v.asked(f, person, st, c, m, p, typed)
	if m.Open() {
		v.Steps = stepRows(f, p.Steps, here, p)
		v.tried(f, m, p)
	}
	lo, hi := specAxis(c.Setup)
	v.ChartOf = w.T("station.last-rounds", w.T("station.name-unit", c.Name, c.Setup.Unit))
	v.Chart = (&chart.Verdict{ID: "matter", Label: w.T("station.verdict-label", c.Name), W: verdictW, H: verdictH,
		Points: stationPoints(f, c.Points, c.Setup, c), After: eventsSince(c, c.Points), Limits: chartLimits(f, c.Revision, c.Setup), Lo: lo, Hi: hi, Words: chartWords(w)}).SVG()
	return v
}

// asked fills in the one question that the page puts.
func (v *matterView) asked(f ui.Format, person plant.Person, st plant.StationState, c plant.CharacteristicState, m plant.Matter, p plant.Progress, typed typedMatter) {
	w := f.Words
	v.Record = p.Confirm || p.Verify
	if p.Confirm && p.Stage == plant.StageWorking || p.Stage == plant.StageOpen && p.Confirm {
		v.After = append(v.After, w.T("matter.then-confirm"))
	}
	if p.Verify && p.Stage != plant.StageVerifying && m.Open() {
		v.After = append(v.After, w.T("matter.then-verify"))
	}
	if p.Fix != nil && m.Open() {
		fix := newFix(f, *p.Fix)
		v.Fix = &fix
	}
	if look := typed.step.Look; look > 0 && look <= len(p.Steps) && m.Open() && p.Steps[look-1].Answer != nil {
		v.Step = lookAt(f, c.Machine, m, p, look-1, path(st.ID, "matter", m.ID.String()))
		return
	}
	switch p.Stage {
	case plant.StageOpen:
		if len(p.Steps) > 0 {
			v.First = w.T("matter.take-first")
		}
		v.Closing = len(p.Steps) == 0 && !v.Record
	case plant.StageWorking:
		if p.Next < len(p.Steps) {
			v.Step = askStep(f, c.Machine, m, p, p.Next, path(st.ID, "matter", m.ID.String()), typed.step)
		} else {
			v.Closing = true
		}
	case plant.StageWithdrawn:
		v.Closing, v.Withdrawn, v.Fix = true, true, nil
	case plant.StageConfirming:
		v.Confirm = &confirmView{Name: c.Title(), Href: measurePath(st.ID, c.ID)}
		if !c.Machine.Running() {
			m := newMachine(f, c.Machine)
			v.Confirm.Start, v.Confirm.Says = &m, w.T("matter.confirm-start", m.Name)
		}
	case plant.StageVerifying:
		v.Verify = newVerify(f, person, m, *p.Fix, path(st.ID, "matter", m.ID.String()), typed.verify)
	case plant.StageClosed:
		v.closed(f, m, p)
	}
}

// Ready reports whether all is there and closing is one tap.
func (v matterView) Ready() bool {
	return v.Fix != nil && v.Confirm == nil && v.Verify == nil && v.Step == nil && !v.Closing
}

func newFix(f ui.Format, x plant.Fix) fixView {
	v := fixView{Cause: x.Cause, Action: x.Action, At: f.Clock(x.Since()), By: x.PersonName, Confirmed: f.Clock(x.ConfirmedAt)}
	if v.Action == "" {
		v.Action = f.Words.T("station.closing." + string(plant.NothingDone))
	}
	return v
}

// tried says what was done before and did not hold, and that the plan is walked again.
func (v *matterView) tried(f ui.Format, m plant.Matter, p plant.Progress) {
	w := f.Words
	for _, x := range m.Fixes {
		if p.Fix != nil && p.Fix.ID == x.ID {
			continue
		}
		said := w.T("matter.tried-fix", newFix(f, x).Action, f.Clock(x.Since()))
		switch {
		case !x.SignalAt.IsZero():
			said = strings.Join([]string{said, w.T("matter.tried-signal", f.Clock(x.SignalAt))}, "; ")
		case x.Word != nil:
			said = strings.Join([]string{said, w.T("matter.tried-refused", x.Word.PersonName, x.Word.Note)}, "; ")
		}
		v.Tried = append(v.Tried, said)
	}
	if p.Fix == nil && len(m.Fixes) > 0 {
		v.Notice = w.T("matter.again")
		if last := m.Fixes[len(m.Fixes)-1]; last.SignalAt.IsZero() && last.Word != nil {
			v.Notice = w.T("matter.refused-by", last.Word.PersonName, last.Word.Note)
		}
	}
}

func (v *matterView) closed(f ui.Format, m plant.Matter, p plant.Progress) {
	w := f.Words
	v.Tone, v.Symbol, v.Title = "calm", "ok", w.T("station.matter-closed")
	v.Since = w.T("station.was-open", f.Clock(m.OpenedAt), f.Clock(m.ClosedAt))
	v.Closed = &closedView{When: f.Clock(m.ClosedAt), By: m.ClosedByName, Cause: m.Cause, Action: m.Action,
		Restart: f.Clock(m.RestartAt), How: w.T("station.closing." + string(m.Closing))}
	if n := len(m.Fixes); n > 0 && m.Fixes[n-1].Word != nil && m.Fixes[n-1].Word.Accepted {
		v.Closed.Verified = m.Fixes[n-1].Word.PersonName
	}
	v.Closed.Answers = attempts(f, m)
	v.Where = ""
	v.tried(f, m, p)
	v.Notice = ""
}

// attempts gathers the answers on record, walk by walk, whatever is asked for now.
func attempts(f ui.Format, m plant.Matter) []attemptView {
	var out []attemptView
	last := 1
	for _, a := range m.Answers {
		last = max(last, a.Attempt)
	}
	for n := 1; n <= last; n++ {
		var view attemptView
		seen := map[[2]string]bool{}
		for _, a := range m.Answers {
			plan, ok := m.Plans[a.Plan]
			key := [2]string{a.Plan.String(), itoa(a.Step)}
			if !ok || a.Attempt != n || a.Remedy || seen[key] || a.Step > len(plan.Steps) {
				continue
			}
			seen[key] = true
			ws := plant.WalkStep{PlanStep: plan.Steps[a.Step-1], Kind: plan.Kind, Plan: a.Plan, Step: a.Step}
			ws.Answer, ws.Remedy = m.Answered(n, a.Plan, a.Step, false), m.Answered(n, a.Plan, a.Step, true)
			view.Steps = append(view.Steps, newStepRow(f, ws, len(view.Steps)+1))
		}
		if len(view.Steps) == 0 {
			continue
		}
		if last > 1 {
			view.Title = f.Words.T("matter.attempt", n)
		}
		out = append(out, view)
	}
	return out
}

func newLine(f ui.Format, c plant.CharacteristicState, l plant.MatterLine) lineOfMatter {
	w := f.Words
	out := lineOfMatter{Says: w.Firing(l.Firing, c.Setup), When: f.Clock(l.First)}
	if l.Count > 1 {
		out.When = w.T("station.line-times", l.Count, f.Clock(l.First), f.Clock(l.Last))
	}
	switch {
	case l.Withdrawn:
		out.Note = w.T("station.line-withdrawn")
	case l.FoundLate:
		out.Note = w.T("station.line-late")
	}
	return out
}

// newID is a number for a form, so that a double tap is one.
func newFormID() string { return uuid.Must(uuid.NewV7()).String() }
