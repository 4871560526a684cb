package calls

import (
	"net/url"
	"strconv"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// entry is what was typed into the form.
type entry struct {
	ID, Version, Until, At, Reason, End string
}

func entryOf(f url.Values) entry {
	return entry{ID: f.Get("id"), Version: f.Get("version"), Until: f.Get("until"), At: f.Get("at"), Reason: f.Get("reason"), End: f.Get("end")}
}

// otherTime is the choice of a time that is typed.
const otherTime = "at"

// request reads the form: until is one of the offered instants or a time that is typed.
func (e entry) request(now time.Time, zone *time.Location) (plant.QuietRequest, error) {
	r := plant.QuietRequest{Reason: e.Reason}
	var err error
	if r.ID, err = uuid.Parse(e.ID); err != nil || r.ID == uuid.Nil {
		return r, plant.Invalidf("id", "This form is damaged. Load the page again.")
	}
	if r.Version, err = strconv.Atoi(e.Version); err != nil {
		return r, plant.Invalidf("id", "This form is damaged. Load the page again.")
	}
	switch {
	case e.End != "":
		return r, nil
	case e.Until == otherTime:
		r.Until, err = nextTime(e.At, now, zone)
		return r, err
	case e.Until == "":
		return r, plant.Invalidf("until", "Choose until when it is kept quiet.")
	}
	seconds, err := strconv.ParseInt(e.Until, 10, 64)
	if err != nil {
		return r, plant.Invalidf("until", "Choose until when it is kept quiet.")
	}
	r.Until = time.Unix(seconds, 0)
	return r, nil
}

// nextTime is the next instant at which the plant's clocks show a wall time.
func nextTime(text string, now time.Time, zone *time.Location) (time.Time, error) {
	at, err := time.Parse("15:04", text)
	if err != nil {
		return time.Time{}, plant.Invalidf("until", "Type a time such as 14:30.")
	}
	local := now.In(zone)
	t := time.Date(local.Year(), local.Month(), local.Day(), at.Hour(), at.Minute(), 0, 0, zone)
	if !t.After(now) {
		t = time.Date(local.Year(), local.Month(), local.Day()+1, at.Hour(), at.Minute(), 0, 0, zone)
	}
	return t, nil
}

// quietView is the form.
type quietView struct {
	What, Why, Since string
	Tone, Symbol     string
	Link             string // to the matter
	Address          string // of the form
	In               entry
	Choices          []choice
	Other            bool
	Kept             string // quiet now: until when and why; empty: it is not
	Longest          string
	Problem          string // about the whole
	UntilProblem     string
	ReasonProblem    string
}

type choice struct {
	Value, Text string
	Chosen      bool
}

func newQuiet(f ui.Format, st *plant.StationState, c *plant.CharacteristicState, longest time.Duration, in entry, problem error) (quietView, error) {
	m := c.Matter
	if !m.TakenAt.IsZero() {
		return quietView{}, plant.Conflictf("", "Somebody has taken this meanwhile. Nothing calls any more.")
	}
	w := f.Words
	call := plant.Call{Kind: m.CallKind(), Matter: m, Station: st.Station, Characteristic: *c, Since: m.OpenedAt}
	condition := conditionOf(call.Kind)
	v := quietView{
		What: w.T("calls.what", ui.ConditionWord(w, condition), st.Name, c.Title()), Why: capital(whyOf(f, call)) + ".",
		Since: w.T("calls.since", f.Clock(m.OpenedAt), f.Since(m.OpenedAt)), Tone: ui.Tone(condition), Symbol: ui.SymbolOf(condition),
		Link: linkOf(call), Address: quietAddress(m.ID), In: in, Longest: w.T("calls.quiet-longest", span(f, longest)),
		UntilProblem: ui.ProblemOf(w, problem, "until"), ReasonProblem: ui.ProblemOf(w, problem, "reason"), Problem: ui.ProblemOf(w, problem, "id"),
	}
	if v.In.Version == "" {
		v.In.Version = strconv.Itoa(m.Version)
	}
	if from, on := m.EscalatesFrom(c.Escalation, f.Now); !on && c.Escalation.Quiet.Set() {
		v.Kept = w.T("calls.quiet-kept", f.Clock(from), c.Escalation.Quiet.PersonName, c.Escalation.Quiet.Reason)
	}
	for _, d := range []time.Duration{30 * time.Minute, time.Hour, 2 * time.Hour, 4 * time.Hour, 8 * time.Hour} {
		if until := f.Now.Add(d).Truncate(time.Minute); d <= longest {
			value := strconv.FormatInt(until.Unix(), 10)
			v.Choices = append(v.Choices, choice{Value: value, Text: w.T("calls.quiet-choice", span(f, d), f.Clock(until)), Chosen: value == in.Until})
		}
	}
	v.Other = in.Until == otherTime
	return v, nil
}

// span is a length of time as a limit is said: "30 min", "4 h".
func span(f ui.Format, d time.Duration) string { return f.Age(d) }

func quietAddress(matter uuid.UUID) string { return ui.CallsAddress + "/quiet/" + matter.String() }
