package desk

import (
	"errors"
	"net/http"
	"net/url"
	"strconv"
	"strings"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// planView is the page of one reaction plan: its steps as they are typed, how the tablet
// will ask them, and its versions.
type planView struct {
	Title    string
	Crumbs   string
	Now      string // what counts now
	May      bool
	Scope    plant.PlanScope
	Kind     plant.MatterKind
	Version  int // that was seen; 0: none
	Steps    []stepInput
	Confirm  bool
	Verify   bool
	Flags    bool // a round and a second person can be asked for
	Own      bool // it has a plan of its own that can be withdrawn
	Problem  string
	Conflict string
	Saved    string
	Preview  []ui.StepView
	IfNot    []string // under each step of the preview
	After    []string
	Versions []planVersion
}

// stepInput is one step as it was typed.
type stepInput struct {
	N                               int
	Says, Unit, Lower, Upper, IfNot string
	Answers                         []planChoice
	Last                            bool
}

type planVersion struct {
	Title string
	By    string
	Steps []string
}

// answerKinds are how a step is answered, as the form offers it: of yes and no, either
// may be as it should be.
var answerKinds = []string{"done", "yes", "no", "value", "stop"}

// planForm is a plan as it was typed.
type planForm struct {
	plan    plant.ReactionPlan
	lower   []string
	upper   []string
	problem string
}

// planIn reads which plan the request is about.
func planIn(r *http.Request, q url.Values) (plant.PlanScope, plant.MatterKind, error) {
	scope, kind := plant.PlanScope{Family: q.Get("family")}, plant.MatterKind(q.Get("kind"))
	if text := q.Get("characteristic"); text != "" {
		id, err := uuid.Parse(text)
		if err != nil {
			return scope, kind, ui.NotFound(r)
		}
		scope.Characteristic = id
	}
	if !kind.Known() || scope.Characteristic != uuid.Nil && scope.Family != "" {
		return scope, kind, ui.NotFound(r)
	}
	return scope, kind, nil
}

// showPlan is GET /desk/plan.
func (d *Desk) showPlan(w http.ResponseWriter, r *http.Request) error {
	scope, kind, err := planIn(r, r.URL.Query())
	if err != nil {
		return err
	}
	versions, err := d.store.PlanVersions(r.Context(), scope, kind)
	if err != nil {
		return err
	}
	form := planForm{plan: plant.ReactionPlan{Scope: scope, Kind: kind}}
	if len(versions) > 0 {
		form.plan = versions[0]
	}
	if len(versions) == 0 || versions[0].Withdrawn {
		// It begins from what counts now.
		version := form.plan.Version
		if wide, err := d.widerPlan(r, scope, kind); err != nil {
			return err
		} else if wide != nil {
			form.plan = *wide
		}
		form.plan.Scope, form.plan.Kind, form.plan.Version = scope, kind, version
		if len(form.plan.Steps) == 0 {
			form.plan.Steps = []plant.PlanStep{{Kind: plant.StepDone}}
		}
	}
	return d.renderPlan(w, r, http.StatusOK, form, versions, "")
}

// widerPlan is the plan that counts where a scope has none of its own.
func (d *Desk) widerPlan(r *http.Request, scope plant.PlanScope, kind plant.MatterKind) (*plant.ReactionPlan, error) {
	plans, err := d.store.Plans(r.Context())
	if err != nil {
		return nil, err
	}
	s, err := d.scopes(r)
	if err != nil {
		return nil, err
	}
	for _, wide := range s.wider(scope) {
		if p := newestPlan(plans, wide, kind); p != nil {
			return p, nil
		}
	}
	return nil, nil
}

// editPlan is POST /desk/plan: a step is added, moved or removed, the plan is shown as
// the tablet will ask it, saved or withdrawn.
func (d *Desk) editPlan(w http.ResponseWriter, r *http.Request) error {
	if err := ui.ParseForm(w, r); err != nil {
		return err
	}
	scope, kind, err := planIn(r, r.PostForm)
	if err != nil {
		return err
	}
	frame := ui.FrameOf(r)
	form := readPlan(frame.Format(), r.PostForm, scope, kind)
	form.plan.Person = frame.Person.ID
	versions, err := d.store.PlanVersions(r.Context(), scope, kind)
	if err != nil {
		return err
	}
	do := r.PostForm.Get("do")
	if do != "save" && do != "withdraw" {
		form.change(do)
		return d.renderPlan(w, r, http.StatusOK, form, versions, "")
	}
	if do == "withdraw" {
		form.problem = ""
		form.plan.Withdrawn = true
	}
	if form.problem != "" {
		return d.renderPlan(w, r, http.StatusUnprocessableEntity, form, versions, "")
	}
	saved, err := d.store.SavePlan(r.Context(), form.plan)
	if err == nil {
		q := url.Values{"saved": {strconv.Itoa(saved.Version)}}
		ui.Redirect(w, r, planPath(scope, kind)+"&"+q.Encode())
		return nil
	}
	pe, ok := errors.AsType[*plant.Error](err)
	switch {
	case ok && pe.Kind == plant.Invalid:
		form.problem, form.plan.Withdrawn = frame.Words.Problem(pe), false
		return d.renderPlan(w, r, http.StatusUnprocessableEntity, form, versions, "")
	case ok && pe.Kind == plant.Conflict:
		// What was typed stays; it replaces what is on record now when it is sent again.
		if versions, err = d.store.PlanVersions(r.Context(), scope, kind); err != nil {
			return err
		}
		form.plan.Withdrawn = false
		if len(versions) > 0 {
			form.plan.Version = versions[0].Version
		}
		return d.renderPlan(w, r, http.StatusConflict, form, versions, frame.Words.Problem(pe))
	}
	return err
}

// readPlan reads the form. What is no number is kept as it was typed.
func readPlan(f ui.Format, q url.Values, scope plant.PlanScope, kind plant.MatterKind) planForm {
	form := planForm{plan: plant.ReactionPlan{Scope: scope, Kind: kind, Confirm: q.Get("confirm") != "", Verify: q.Get("verify") != ""}}
	var err error
	if form.plan.Version, err = strconv.Atoi(q.Get("version")); err != nil || form.plan.Version < 0 {
		form.plan.Version = -1 // a damaged form: never a version, so a conflict
	}
	at := func(name string, i int) string {
		if list := q[name]; i < len(list) {
			return strings.TrimSpace(list[i])
		}
		return ""
	}
	for i := range min(len(q["says"]), plant.MaxPlanSteps+1) {
		s := plant.PlanStep{Says: at("says", i), Unit: at("unit", i), IfNot: at("if-not", i), Kind: plant.StepDone}
		switch at("answer", i) {
		case "yes", "no":
			s.Kind, s.ExpectNo = plant.StepYesNo, at("answer", i) == "no"
		case "value":
			s.Kind = plant.StepValue
		case "stop":
			s.Kind = plant.StepStop
		}
		lower, upper := at("lower", i), at("upper", i)
		form.lower, form.upper = append(form.lower, lower), append(form.upper, upper)
		if s.Kind == plant.StepValue {
			var ok [2]bool
			s.Lower, ok[0] = limit(lower)
			s.Upper, ok[1] = limit(upper)
			if !ok[0] || !ok[1] {
				form.problem = f.Words.T("plan.bad-limit", i+1)
			}
		}
		form.plan.Steps = append(form.plan.Steps, s)
	}
	return form
}

// limit reads a limit, nil for none; ok is false when it is no number.
func limit(text string) (d *plant.Decimal, ok bool) {
	if text == "" {
		return nil, true
	}
	v, err := plant.ParseDecimal(text)
	return &v, err == nil
}

// change adds, moves or removes a step.
func (form *planForm) change(do string) {
	what, text, _ := strings.Cut(do, "-")
	n, err := strconv.Atoi(text)
	i, steps := n-1, form.plan.Steps
	form.problem = ""
	if what == "add" {
		form.plan.Steps = append(steps, plant.PlanStep{Kind: plant.StepDone})
		return
	}
	if err != nil || i < 0 || i >= len(steps) {
		return
	}
	swap := func(a, b int) {
		if a < 0 || b >= len(steps) {
			return
		}
		steps[a], steps[b] = steps[b], steps[a]
		form.lower[a], form.lower[b] = form.lower[b], form.lower[a]
		form.upper[a], form.upper[b] = form.upper[b], form.upper[a]
	}
	switch what {
	case "up":
		swap(i-1, i)
	case "down":
		swap(i, i+1)
	case "remove":
		form.plan.Steps = append(steps[:i], steps[i+1:]...)
		form.lower, form.upper = append(form.lower[:i], form.lower[i+1:]...), append(form.upper[:i], form.upper[i+1:]...)
	}
}

func (d *Desk) renderPlan(w http.ResponseWriter, r *http.Request, status int, form planForm, versions []plant.ReactionPlan, conflict string) error {
	s, err := d.scopes(r)
	if err != nil {
		return err
	}
	frame := ui.FrameOf(r)
	f, p := frame.Format(), form.plan
	name := s.name(f, p.Scope)
	if name == "" {
		return ui.NotFound(r)
	}
	t := f.Words
	v := planView{Title: t.T("plan.title-of", ui.MatterKindWord(t, p.Kind)), Crumbs: t.T("plan.crumbs", frame.Plant.Name, name), May: frame.Person.May(plant.SetLimits),
		Scope: p.Scope, Kind: p.Kind, Version: p.Version, Confirm: p.Confirm, Verify: p.Verify, Flags: p.Kind != plant.MatterOverdue, Problem: form.problem, Conflict: conflict}
	v.Own = len(versions) > 0 && !versions[0].Withdrawn
	v.Now = t.T("plan.now-none")
	if v.Own {
		v.Now = t.T("plan.now-own", versions[0].Version, f.Clock(versions[0].MadeAt), versions[0].PersonName)
	} else if wide, err := d.widerPlan(r, p.Scope, p.Kind); err != nil {
		return err
	} else if wide != nil {
		v.Now = t.T("plan.now-wider", s.name(f, wide.Scope))
	}
	if n := r.URL.Query().Get("saved"); len(versions) > 0 && n == strconv.Itoa(versions[0].Version) {
		v.Saved = t.T("plan.saved", versions[0].Version)
		if versions[0].Withdrawn {
			v.Saved = t.T("plan.saved-withdrawn")
		}
	}
	v.fill(f, form)
	for _, old := range versions {
		v.Versions = append(v.Versions, newPlanVersion(f, old))
	}
	shell := ui.ShellFor(r, ui.Desk, v.Title)
	shell.Bar = bar(t, uuid.Nil, false, "plans")
	shell.Styles = append(shell.Styles, "css/reaction.css")
	return ui.Render(w, r, status, planPage(shell, v))
}

// fill puts the steps into the form and into the preview.
func (v *planView) fill(f ui.Format, form planForm) {
	t, p := f.Words, form.plan
	for i, s := range p.Steps {
		in := stepInput{N: i + 1, Says: s.Says, Unit: s.Unit, IfNot: s.IfNot, Last: i == len(p.Steps)-1}
		if s.Lower != nil {
			in.Lower = f.Decimal(*s.Lower)
		}
		if s.Upper != nil {
			in.Upper = f.Decimal(*s.Upper)
		}
		if i < len(form.lower) {
			in.Lower, in.Upper = form.lower[i], form.upper[i]
		}
		chosen := string(s.Kind)
		if s.Kind == plant.StepYesNo {
			if chosen = "yes"; s.ExpectNo {
				chosen = "no"
			}
		}
		for _, k := range answerKinds {
			in.Answers = append(in.Answers, planChoice{Value: k, Name: t.T("plan.answer." + k), Chosen: k == chosen})
		}
		v.Steps = append(v.Steps, in)
	}
	for i, s := range p.Clean().Steps {
		step := ui.NewStep(f, s)
		// Of how many cannot be said here: a matter of several kinds asks the steps of all their plans.
		step.Count, step.About, step.Preview = t.T("plan.step", i+1), ui.MatterKindWord(t, p.Kind), true
		v.Preview, v.IfNot = append(v.Preview, step), append(v.IfNot, ifNotWords(f, s))
	}
	if p.Confirm && v.Flags {
		v.After = append(v.After, t.T("matter.then-confirm"))
	}
	if p.Verify && v.Flags {
		v.After = append(v.After, t.T("matter.then-verify"))
	}
}

func ifNotWords(f ui.Format, s plant.PlanStep) string {
	switch {
	case s.IfNot == "":
		return ""
	case s.Kind == plant.StepValue:
		return f.Words.T("plan.if-outside", s.IfNot)
	case s.ExpectNo:
		return f.Words.T("plan.if-yes", s.IfNot)
	}
	return f.Words.T("plan.if-no", s.IfNot)
}

func newPlanVersion(f ui.Format, p plant.ReactionPlan) planVersion {
	t := f.Words
	v := planVersion{Title: t.T("plan.version", p.Version, f.Clock(p.MadeAt)), By: p.PersonName}
	if p.Withdrawn {
		v.Steps = []string{t.T("plan.withdrawn")}
	}
	for _, s := range p.Steps {
		said := s.Says
		if limits := ui.StepLimits(f, s); limits != "" {
			said = t.T("plan.step-limits", said, limits)
		}
		if not := ifNotWords(f, s); not != "" {
			said = t.T("plan.step-then", said, not)
		}
		v.Steps = append(v.Steps, said)
	}
	if p.Confirm {
		v.Steps = append(v.Steps, t.T("matter.then-confirm"))
	}
	if p.Verify {
		v.Steps = append(v.Steps, t.T("matter.then-verify"))
	}
	return v
}

// atPlant reports whether the plan is the plant's own: there is no wider one.
func (v planView) atPlant() bool { return v.Scope == (plant.PlanScope{}) }

func idText(id uuid.UUID) string {
	if id == uuid.Nil {
		return ""
	}
	return id.String()
}
