package station

import (
	"errors"
	"net/http"
	"strconv"
	"strings"
	"time"

	"holdfast/internal/plant"
	"holdfast/web/chart"
	"holdfast/web/ui"
)

// notFoundCause is offered beside the catalogue: it is an honest answer.
const notFoundCause = "none"

// ownCause is the choice of saying it in one's own words.
const ownCause = "own"

// fixLayout is how a browser sends a date and time.
const fixLayout = "2006-01-02T15:04"

// matterView is what is open, or was, on one characteristic.
type matterView struct {
	Tone      string
	Symbol    string
	Title     string
	Name      string
	Since     string
	Lines     []lineOfMatter
	Withdrawn bool // no line stands any more
	TakenBy   string
	Take      string
	Close     string
	Version   string
	Problem   string // about the whole: somebody was quicker
	Closed    *closedView
	Form      closingForm
	Chart     string
	ChartOf   string
	Hold      bool
	Back      string
}

type lineOfMatter struct {
	Says string
	When string
	Note string
}

type closedView struct {
	When    string
	By      string
	Cause   string
	Action  string
	Restart string
	How     string
}

// closingForm is the closing as it was typed.
type closingForm struct {
	Causes        []causeView
	Own           string
	Action        string
	Nothing       bool
	FixedAt       string
	Earliest      string
	Latest        string
	CauseProblem  string
	ActionProblem string
	FixedProblem  string
}

type causeView struct {
	Value  string
	Name   string
	Chosen bool
}

// matterIn reads the matter that the address names, at its station.
func (s *Surface) matterIn(r *http.Request) (plant.StationState, plant.Matter, error) {
	st, err := s.stationIn(r, chart.VerdictLength)
	if err != nil {
		return st, plant.Matter{}, err
	}
	id, err := idIn(r, "matter")
	if err != nil {
		return st, plant.Matter{}, err
	}
	m, err := s.store.Matter(r.Context(), id)
	if err != nil {
		return st, m, err
	}
	if m.Station != st.ID {
		return st, m, notFound(r)
	}
	return st, m, nil
}

// showMatter is GET /station/{station}/matter/{matter}.
func (s *Surface) showMatter(w http.ResponseWriter, r *http.Request) error {
	st, m, err := s.matterIn(r)
	if err != nil {
		return err
	}
	return s.renderMatter(w, r, http.StatusOK, st, m, closingForm{}, "", "")
}

func (s *Surface) renderMatter(w http.ResponseWriter, r *http.Request, status int, st plant.StationState, m plant.Matter, form closingForm, chosen, problem string) error {
	f := ui.FrameOf(r).Format()
	c, ok := characteristicOf(st, m.Characteristic)
	if !ok {
		return notFound(r)
	}
	causes, err := s.store.Causes(r.Context(), st.Family)
	if err != nil {
		return err
	}
	v := newMatter(f, st, c, m)
	v.Problem = problem
	v.Form = form
	v.Form.Causes = causeChoices(f, causes, chosen)
	v.Form.Earliest, v.Form.Latest = m.OpenedTaken.In(f.Zone).Format(fixLayout), f.Now.In(f.Zone).Format(fixLayout)
	return ui.Render(w, r, status, matterPage(s.shell(r, st, v.Title), v))
}

func causeChoices(f ui.Format, causes []plant.Cause, chosen string) []causeView {
	var out []causeView
	notFound := f.Words.T("station.cause-not-found")
	listed := false // the plant's own catalogue has it
	for _, c := range causes {
		out = append(out, causeView{Value: c.ID.String(), Name: c.Name, Chosen: chosen == c.ID.String()})
		listed = listed || strings.EqualFold(c.Name, notFound)
	}
	if !listed {
		out = append(out, causeView{Value: notFoundCause, Name: notFound, Chosen: chosen == notFoundCause})
	}
	return append(out, causeView{Value: ownCause, Name: f.Words.T("station.cause-own"), Chosen: chosen == ownCause})
}

func newMatter(f ui.Format, st plant.StationState, c plant.CharacteristicState, m plant.Matter) matterView {
	w := f.Words
	condition := ui.ConditionOf(m.Kind())
	v := matterView{Tone: ui.Tone(condition), Symbol: ui.SymbolOf(condition), Title: ui.VerdictWords(w, m.Kind()), Name: c.Name,
		Since: w.T("station.open-since", f.Clock(m.OpenedAt), f.Since(m.OpenedAt)), TakenBy: m.TakenByName, Withdrawn: m.AllWithdrawn(),
		Version: strconv.Itoa(m.Version), Back: path(st.ID), Hold: m.Kind() == plant.Hold}
	here := path(st.ID, "matter", m.ID.String())
	v.Take, v.Close = here+"/take", here+"/close"
	for _, l := range m.Lines {
		v.Lines = append(v.Lines, newLine(f, c, l))
	}
	if !m.Open() {
		v.Tone, v.Symbol, v.Title = "calm", "ok", w.T("station.matter-closed")
		v.Since = w.T("station.was-open", f.Clock(m.OpenedAt), f.Clock(m.ClosedAt))
		v.Closed = &closedView{When: f.Clock(m.ClosedAt), By: m.ClosedByName, Cause: m.Cause, Action: m.Action,
			Restart: f.Clock(m.RestartAt), How: w.T("station.closing." + string(m.Closing))}
	}
	lo, hi := specAxis(c.Setup)
	v.ChartOf = w.T("station.last-rounds", w.T("station.name-unit", c.Name, c.Setup.Unit))
	v.Chart = (&chart.Verdict{ID: "matter", Label: w.T("station.verdict-label", c.Name), W: verdictW, H: verdictH,
		Points: stationPoints(f, c.Points, c.Setup, c.Segment), Limits: chartLimits(f, c.Revision, c.Setup), Lo: lo, Hi: hi, Words: chartWords(w)}).SVG()
	return v
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

// takeMatter is POST .../take.
func (s *Surface) takeMatter(w http.ResponseWriter, r *http.Request) error {
	st, m, err := s.matterIn(r)
	if err != nil {
		return err
	}
	person := ui.FrameOf(r).Person.ID
	here := path(st.ID, "matter", m.ID.String())
	if m.Open() && m.TakenBy == person {
		ui.Redirect(w, r, here) // a double tap
		return nil
	}
	err = s.store.TakeMatter(r.Context(), m.ID, number(r.PostForm.Get("version")), person)
	if plant.IsKind(err, plant.Conflict) {
		return s.quicker(w, r, err)
	}
	if err != nil {
		return err
	}
	ui.Redirect(w, r, here)
	return nil
}

// quicker shows how a matter stands now, after somebody else was quicker.
func (s *Surface) quicker(w http.ResponseWriter, r *http.Request, conflict error) error {
	st, m, err := s.matterIn(r)
	if err != nil {
		return err
	}
	words, who := ui.FrameOf(r).Words, m.TakenByName
	said := words.T("station.somebody-quicker")
	switch {
	case !m.Open():
		said = words.T("station.closed-quicker", m.ClosedByName, ui.FrameOf(r).Format().Clock(m.ClosedAt))
	case who != "":
		said = words.T("station.taken-quicker", who, ui.FrameOf(r).Format().Clock(m.TakenAt))
	}
	form, chosen := typedClosing(r)
	return s.renderMatter(w, r, ui.StatusOf(plant.Conflict), st, m, form, chosen, said)
}

func typedClosing(r *http.Request) (closingForm, string) {
	p := r.PostForm
	return closingForm{Own: plant.CleanText(p.Get("own")), Action: plant.CleanText(p.Get("action")), Nothing: p.Get("done") == "nothing",
		FixedAt: p.Get("fixed_at")}, p.Get("cause")
}

// closeMatter is POST .../close.
func (s *Surface) closeMatter(w http.ResponseWriter, r *http.Request) error {
	st, m, err := s.matterIn(r)
	if err != nil {
		return err
	}
	form, chosen := typedClosing(r)
	causes, err := s.store.Causes(r.Context(), st.Family)
	if err != nil {
		return err
	}
	req, bad := s.closing(r, m, causes, &form, chosen)
	if !bad {
		err = s.store.CloseMatter(r.Context(), req)
		if err == nil {
			back(w, r, st.ID, "closed")
			return nil
		}
		if plant.IsKind(err, plant.Conflict) {
			return s.quicker(w, r, err)
		}
		pe, ok := errors.AsType[*plant.Error](err)
		if !ok || pe.Kind != plant.Invalid {
			return err
		}
		form.place(pe.Field, ui.FrameOf(r).Words.Problem(pe))
	}
	return s.renderMatter(w, r, http.StatusUnprocessableEntity, st, m, form, chosen, "")
}

// place puts what the record said at the field that it is about.
func (c *closingForm) place(field, problem string) {
	switch field {
	case "action":
		c.ActionProblem = problem
	case "fixed_at":
		c.FixedProblem = problem
	default:
		c.CauseProblem = problem
	}
}

// closing reads the closing from the form; bad is true when a field must be mended.
func (s *Surface) closing(r *http.Request, m plant.Matter, causes []plant.Cause, form *closingForm, chosen string) (req plant.ClosingRequest, bad bool) {
	frame := ui.FrameOf(r)
	w := frame.Words
	req = plant.ClosingRequest{Matter: m.ID, Version: number(r.PostForm.Get("version")), Person: frame.Person.ID}
	if m.AllWithdrawn() {
		return req, false
	}
	switch chosen {
	case ownCause:
		if req.Cause = form.Own; req.Cause == "" {
			form.CauseProblem = w.T("station.say-cause-own")
		}
	case notFoundCause:
		req.Cause = w.T("station.cause-not-found")
	case "":
		form.CauseProblem = w.T("station.say-cause")
	default:
		if c, ok := causeOf(causes, chosen); ok {
			req.Cause, req.CauseID = c.Name, c.ID
			if form.Own != "" {
				req.Cause = w.T("station.cause-and-words", c.Name, form.Own)
			}
		} else {
			form.CauseProblem = w.T("station.say-cause-known")
		}
	}
	switch {
	case form.Nothing:
		if form.Action != "" {
			form.ActionProblem = w.T("station.nothing-or-something")
		}
	case form.Action == "":
		form.ActionProblem = w.T("station.say-action")
	default:
		req.Action = form.Action
		if at, err := fixInstant(form.FixedAt, m.OpenedTaken, frame.Now, frame.Format().Zone); err != nil {
			form.FixedProblem = w.T("station.no-time")
		} else {
			req.FixedAt = at
		}
	}
	return req, form.CauseProblem != "" || form.ActionProblem != "" || form.FixedProblem != ""
}

func causeOf(causes []plant.Cause, id string) (plant.Cause, bool) {
	for _, c := range causes {
		if c.ID.String() == id {
			return c, true
		}
	}
	return plant.Cause{}, false
}

// fixInstant reads the wall time of a fix; empty means now. A browser sends whole
// minutes, so the minute in which the signal was taken means the moment after it. Where
// clocks were set back an hour has two instants: the later one that fits is meant.
func fixInstant(text string, opened, now time.Time, zone *time.Location) (time.Time, error) {
	if text == "" {
		return time.Time{}, nil
	}
	at, err := time.ParseInLocation(fixLayout, text, zone)
	if err != nil {
		if at, err = time.ParseInLocation(fixLayout+":05", text, zone); err != nil {
			return time.Time{}, err
		}
	}
	at = afterSignal(at, opened, now)
	if !at.After(opened) && at.Equal(opened.Truncate(time.Minute)) {
		at = opened.Add(time.Microsecond)
	}
	return at.UTC(), nil
}

// afterSignal is the latest instant of at's wall time that lies between the minute of
// the signal and now, or at itself when none does.
func afterSignal(at, opened, now time.Time) time.Time {
	best, found := at, false
	_, offset := at.Zone()
	for _, by := range []time.Duration{0, -3 * time.Hour, 3 * time.Hour} { // no zone sets its clock by more
		_, other := at.Add(by).Zone()
		twin := at.Add(time.Duration(offset-other) * time.Second)
		if _, o := twin.Zone(); o != other || twin.Before(opened.Truncate(time.Minute)) || twin.After(now) {
			continue
		}
		if !found || twin.After(best) {
			best, found = twin, true
		}
	}
	return best
}
