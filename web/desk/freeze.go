package desk

import (
	"errors"
	"fmt"
	"net/http"
	"net/url"
	"strings"
	"time"

	"holdfast/internal/auth"
	"holdfast/internal/plant"
	"holdfast/web/ui"
	"holdfast/web/words"
)

// maxReason leaves room in the record for the three answers behind the reason.
const maxReason = 400

// questions are asked before limits are frozen.
var questions = []string{"known", "wanted", "lasting"}

// freezeForm is what is typed on the last page of a study.
type freezeForm struct {
	Answers  map[string]string // "yes", "no" or ""
	Despite  bool
	Reason   string
	From     string // in force from, "" for now
	After    int    // newest revision that was seen
	Seen     string // fingerprint of the trial that was seen
	Problems map[string]string
	Conflict string
}

// freezeView is the last page of a study.
type freezeView struct {
	Title   string
	Crumbs  string
	Study   string // back
	Action  string
	Steps   []step
	Compare comparison
	Checks  []check
	Basis   string
	Out     []outRow
	Form    freezeForm
	Hidden  []hidden
	First   bool
	Signer  string
	Next    int
}

// fingerprint tells one trial from another: what was seen must be what is frozen.
func (s *studied) fingerprint() string {
	t := s.trial.Result.Standard
	return fmt.Sprintf("%d/%d/%x/%x", s.trial.Used, len(s.h.Points), t.Center, t.Sigma)
}

// newestNumber is the number of the newest revision, also of one that is frozen and
// not yet in force.
func newestNumber(list []plant.Revision) int {
	if len(list) == 0 {
		return 0
	}
	return list[0].Number
}

// freezeInput computes the study that is about to be frozen. It is false when it was
// answered already: without trial limits the study is the place to go.
func (d *Desk) freezeInput(w http.ResponseWriter, r *http.Request, q url.Values) (*studied, []plant.Revision, bool, error) {
	id, err := idIn(r)
	if err != nil {
		return nil, nil, false, err
	}
	f := ui.FrameOf(r).Format()
	s, err := d.compute(r.Context(), f, id, readStudy(q, f))
	if err != nil {
		return nil, nil, false, err
	}
	if err := s.run(); err != nil {
		return nil, nil, false, err
	}
	if len(s.state.problems) > 0 || !s.ready() {
		ui.Redirect(w, r, withQuery(address(id, "study"), s.state.values(f.Zone)))
		return nil, nil, false, nil
	}
	if err := d.compareBasis(r.Context(), s); err != nil {
		return nil, nil, false, err
	}
	list, err := d.store.Revisions(r.Context(), id)
	return s, list, err == nil, err
}

func (d *Desk) showFreeze(w http.ResponseWriter, r *http.Request) error {
	s, list, ok, err := d.freezeInput(w, r, r.URL.Query())
	if err != nil || !ok {
		return err
	}
	form := freezeForm{Answers: map[string]string{}, Problems: map[string]string{}, After: newestNumber(list), Seen: s.fingerprint()}
	return d.renderFreeze(w, r, http.StatusOK, s, list, form)
}

func (d *Desk) renderFreeze(w http.ResponseWriter, r *http.Request, status int, s *studied, list []plant.Revision, form freezeForm) error {
	f := s.f
	shell := ui.ShellFor(r, ui.Desk, f.Words.T("desk.freeze.title-of", s.h.State.Name))
	shell.Bar = bar(f.Words, s.h.State.ID, true, "study")
	id := s.h.State.ID
	values := s.state.values(f.Zone)
	v := freezeView{Crumbs: f.Words.T("desk.crumbs-of", crumbs(shell, s.h), s.h.State.Name), Next: newestNumber(list) + 1, Form: form,
		Study: withQuery(address(id, "study"), values), Action: address(id, "study", "freeze"), Compare: s.before(), Checks: s.checks(),
		First: len(list) == 0, Signer: shell.Person.Name}
	v.Title = f.Words.T("desk.freeze.title", v.Next)
	v.Steps, _ = s.steps(v.Next)
	for i := range v.Steps {
		v.Steps[i].Here = i == len(v.Steps)-1
	}
	points := s.h.Points
	v.Basis = f.Words.T("desk.freeze.basis", s.trial.Used, f.Clock(points[0].TakenAt), f.Clock(points[len(points)-1].TakenAt))
	for i, l := range s.trial.LeftOut {
		v.Out = append(v.Out, outRow{Mark: letter(i), Taken: f.Clock(l.TakenAt), Cause: l.Cause})
	}
	for _, name := range []string{"from", "to", "estimator", "multiple", "rules", "loc", "dis", "out"} {
		for _, value := range values[name] {
			v.Hidden = append(v.Hidden, hidden{name, value})
		}
	}
	return ui.Render(w, r, status, freezePage(shell, v))
}

// readFreeze reads the form; problems are by field.
func readFreeze(q url.Values, f ui.Format) (freezeForm, time.Time) {
	w := f.Words
	form := freezeForm{Answers: map[string]string{}, Problems: map[string]string{}, Despite: q.Get("despite") != "",
		Reason: plant.CleanText(q.Get("reason")), From: strings.TrimSpace(q.Get("in-force")), Seen: q.Get("seen")}
	if _, err := fmt.Sscanf(q.Get("after"), "%d", &form.After); err != nil {
		form.After = -1 // a damaged form: never the number of a revision, so a conflict
	}
	doubt := false
	for _, name := range questions {
		a := q.Get(name)
		if a != "yes" && a != "no" {
			form.Problems[name] = w.T("desk.freeze.no-answer")
			continue
		}
		form.Answers[name] = a
		doubt = doubt || a == "no"
	}
	if doubt && !form.Despite {
		form.Problems["despite"] = w.T("desk.freeze.doubt")
	}
	switch n := len([]rune(form.Reason)); {
	case n == 0:
		form.Problems["reason"] = w.T("desk.freeze.no-reason")
	case n > maxReason:
		form.Problems["reason"] = w.T("desk.freeze.long-reason", maxReason)
	}
	var from time.Time
	if form.From != "" {
		var ok bool
		if from, ok = parseTime(form.From, f.Zone); !ok {
			form.Problems["in-force"] = w.T("desk.stretch.bad-time")
		} else if from.Before(f.Now) {
			form.Problems["in-force"] = w.T("desk.freeze.past")
		}
	}
	if q.Get("secret") == "" {
		form.Problems["secret"] = w.T("desk.freeze.no-secret")
	}
	return form, from
}

func (d *Desk) freeze(w http.ResponseWriter, r *http.Request) error {
	if err := ui.ParseForm(w, r); err != nil {
		return err
	}
	s, list, ok, err := d.freezeInput(w, r, r.PostForm)
	if err != nil || !ok {
		return err
	}
	form, from := readFreeze(r.PostForm, s.f)
	again := func(status int) error { return d.renderFreeze(w, r, status, s, list, form) }
	if form.After != newestNumber(list) || form.Seen != s.fingerprint() {
		form.Conflict = s.f.Words.T("desk.freeze.moved")
		if form.After != newestNumber(list) {
			form.Conflict = s.f.Words.T("desk.freeze.frozen-meanwhile", newestNumber(list))
		}
		// What is shown now is what has been seen when it is sent again.
		form.After, form.Seen = newestNumber(list), s.fingerprint()
		delete(form.Problems, "secret")
		return again(http.StatusConflict)
	}
	if len(form.Problems) > 0 {
		return again(http.StatusUnprocessableEntity)
	}
	status, err := d.signed(r, &form)
	if err != nil {
		return err
	}
	if status != http.StatusOK {
		return again(status)
	}
	rev, err := d.store.Freeze(r.Context(), plant.FreezeRequest{
		Characteristic: s.h.State.ID, SetupVersion: s.h.State.Setup.Version, After: form.After,
		Estimator: s.state.Estimator, Multiple: s.state.Multiple, Rules: s.state.Rules,
		From: s.state.stretch().From, To: s.state.stretch().To, LeftOut: s.trial.LeftOut,
		Reason: withAnswers(s.f, form), InForceFrom: from, Person: ui.FrameOf(r).Person.ID,
	})
	if err != nil {
		status, ok := form.refused(s.f.Words, err)
		if !ok {
			return err
		}
		if list, err = d.store.Revisions(r.Context(), s.h.State.ID); err != nil {
			return err
		}
		form.After = newestNumber(list)
		return again(status)
	}
	ui.Redirect(w, r, withQuery(address(s.h.State.ID, "revisions"), url.Values{"frozen": {itoa(rev.Number)}}))
	return nil
}

// signed checks the secret that was entered again; the person who signs is the one who
// is signed in.
func (d *Desk) signed(r *http.Request, form *freezeForm) (int, error) {
	fr := ui.FrameOf(r)
	person, err := d.signer.Check(r.Context(), fr.Person.Login, auth.Secret(r.PostForm.Get("secret")), fr.Addr)
	if pe, ok := errors.AsType[*plant.Error](err); ok {
		if pe.Kind == plant.Forbidden { // too many tries: the message says for how long
			form.Problems["secret"] = fr.Words.Problem(pe)
			return http.StatusTooManyRequests, nil
		}
		form.Problems["secret"] = fr.Words.T("desk.freeze.wrong-secret")
		return http.StatusUnprocessableEntity, nil
	}
	if err != nil {
		return 0, err
	}
	if person.ID != fr.Person.ID {
		form.Problems["secret"] = fr.Words.T("desk.freeze.wrong-secret")
		return http.StatusUnprocessableEntity, nil
	}
	return http.StatusOK, nil
}

// refused puts what the record says against freezing to its field.
func (form *freezeForm) refused(w *words.Printer, err error) (int, bool) {
	pe, ok := errors.AsType[*plant.Error](err)
	if !ok || pe.Kind != plant.Invalid && pe.Kind != plant.Conflict {
		return 0, false
	}
	problem := w.Problem(pe)
	switch pe.Field {
	case "reason":
		form.Problems["reason"] = problem
	case "in_force_from":
		form.Problems["in-force"] = problem
	default:
		form.Conflict = problem
	}
	return ui.StatusOf(pe.Kind), true
}

// withAnswers is the reason as it stands in the record.
func withAnswers(f ui.Format, form freezeForm) string {
	word := func(name string) string { return f.Words.T("desk.freeze.answer." + form.Answers[name]) }
	return f.Words.T("desk.freeze.record", form.Reason, word("known"), word("wanted"), word("lasting"))
}
