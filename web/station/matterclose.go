package station

import (
	"errors"
	"net/http"
	"strings"
	"time"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// notFoundCause is offered beside the catalogue: it is an honest answer.
const notFoundCause = "none"

// ownCause is the choice of saying it in one's own words.
const ownCause = "own"

// fixLayout is the day and the wall time of a fix.
const fixLayout = "2006-01-02T15:04"

// fixAgo are the minutes since the fix that are one tap; fixOther is a day and a time,
// typed. Days are offered back to the signal, at most so many.
var fixAgo = []int{10, 30}

const (
	fixNow      = "now"
	fixOther    = "other"
	mostFixDays = 31
)

// closingForm is the closing as it was typed.
type closingForm struct {
	Causes        []causeView
	Own           string
	Action        string
	Nothing       bool
	Fixed         string       // fixNow, minutes ago, or fixOther
	FixedWhen     []causeView  // the same as choices
	FixedDay      string       // of fixOther
	FixedDays     []choiceView // newest first
	FixedTime     string       // of fixOther, in 24 hours
	CauseProblem  string
	ActionProblem string
	FixedProblem  string
	Rest          restForm
}

type causeView struct {
	Value  string
	Name   string
	Chosen bool
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

func typedClosing(r *http.Request) (closingForm, string) {
	p := r.PostForm
	return closingForm{Own: plant.CleanText(p.Get("own")), Action: plant.CleanText(p.Get("action")), Nothing: p.Get("done") == "nothing",
		Fixed: p.Get("fixed"), FixedDay: p.Get("fixed_day"), FixedTime: plant.CleanText(p.Get("fixed_time")), Rest: typedRest(p)}, p.Get("cause")
}

// offerTimes offers when it was fixed: now, minutes ago that lie after the signal, or a
// day since then with a time.
func (c *closingForm) offerTimes(f ui.Format, opened time.Time) {
	if c.Fixed == "" {
		c.Fixed = fixNow
	}
	offer := func(value, name string) {
		c.FixedWhen = append(c.FixedWhen, causeView{Value: value, Name: name, Chosen: c.Fixed == value})
	}
	offer(fixNow, f.Words.T("station.fixed-now"))
	for _, n := range fixAgo {
		if !f.Now.Add(-time.Duration(n) * time.Minute).Before(opened) {
			offer(itoa(n), f.Words.T("station.fixed-ago", n))
		}
	}
	offer(fixOther, f.Words.T("station.fixed-other"))
	y, m, d := f.Now.In(f.Zone).Date()
	first := opened.In(f.Zone).Format(time.DateOnly)
	for i := range mostFixDays {
		day := time.Date(y, m, d-i, 12, 0, 0, 0, f.Zone)
		value := day.Format(time.DateOnly)
		if value < first {
			break
		}
		c.FixedDays = append(c.FixedDays, choiceView{value, f.Date(day), value == c.FixedDay})
	}
}

// fixedAt is the instant of the fix as it was chosen; zero means now.
func (c closingForm) fixedAt(opened, now time.Time, zone *time.Location) (time.Time, error) {
	switch c.Fixed {
	case "", fixNow:
		return time.Time{}, nil
	case fixOther:
		return fixInstant(c.FixedDay+"T"+clockTyped(c.FixedTime), opened, now, zone)
	}
	for _, n := range fixAgo {
		if c.Fixed == itoa(n) {
			return now.Add(-time.Duration(n) * time.Minute), nil
		}
	}
	return time.Time{}, errors.New("no such choice")
}

// clockTyped is a time of the day as people type it: "9:05", "9.05" and "0905" are one.
func clockTyped(text string) string {
	text = strings.NewReplacer(".", ":", ",", ":", " ", "").Replace(text)
	if n := len(text); (n == 3 || n == 4) && strings.Trim(text, "0123456789") == "" {
		text = text[:n-2] + ":" + text[n-2:]
	}
	if strings.Index(text, ":") == 1 {
		text = "0" + text
	}
	return text
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
	rest, unsaid, err := s.restOf(r, st, m, &form.Rest)
	if err != nil {
		return err
	}
	if !bad && !unsaid {
		if err = s.stateRest(r, rest); err == nil {
			err = s.store.CloseMatter(r.Context(), req)
		}
		if err == nil {
			return s.afterClosing(w, r, st, m, rest)
		}
		if plant.IsKind(err, plant.Conflict) {
			return s.quicker(w, r, typedMatter{closing: form, cause: chosen})
		}
		pe, ok := errors.AsType[*plant.Error](err)
		if !ok || pe.Kind != plant.Invalid {
			return err
		}
		form.place(pe.Field, ui.FrameOf(r).Words.Problem(pe))
	}
	return s.renderMatter(w, r, http.StatusUnprocessableEntity, st, m, typedMatter{closing: form, cause: chosen})
}

// afterClosing leads back to the station, or to the matter when its plan asks for more
// before it is over, or says whom to tell about product that went on.
func (s *Surface) afterClosing(w http.ResponseWriter, r *http.Request, st plant.StationState, before plant.Matter, rest *plant.ContainmentEntry) error {
	m, err := s.store.Matter(r.Context(), before.ID)
	if err != nil {
		return err
	}
	if m.Open() || rest != nil && rest.Step == plant.RestGone {
		ui.Redirect(w, r, path(st.ID, "matter", m.ID.String()))
		return nil
	}
	back(w, r, st.ID, "closed")
	return nil
}

// place puts what the record said at the field that it is about.
func (c *closingForm) place(field, problem string) {
	switch field {
	case "action":
		c.ActionProblem = problem
	case "fixed_at":
		c.FixedProblem = problem
	case "note", "quantity":
		c.Rest.Problem = problem
	default:
		c.CauseProblem = problem
	}
}

// closing reads the closing from the form; bad is true when a field must be mended.
func (s *Surface) closing(r *http.Request, m plant.Matter, causes []plant.Cause, form *closingForm, chosen string) (req plant.ClosingRequest, bad bool) {
	frame := ui.FrameOf(r)
	w := frame.Words
	req = plant.ClosingRequest{Matter: m.ID, Version: number(r.PostForm.Get("version")), Person: frame.Person.ID}
	if stage := m.Progress().Stage; stage == plant.StageWithdrawn || stage == plant.StageReady {
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
		if at, err := form.fixedAt(m.OpenedTaken, frame.Now, frame.Format().Zone); err != nil {
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

// fixInstant reads the day and wall time of a fix, in whole minutes: the minute in which
// the signal was taken means the moment after it. A time that there was twice, where
// clocks were set back, means the later one that fits.
func fixInstant(text string, opened, now time.Time, zone *time.Location) (time.Time, error) {
	at, err := time.ParseInLocation(fixLayout, text, zone)
	if err != nil {
		return time.Time{}, err
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
