package station

import (
	"errors"
	"net/http"
	"strings"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
	"holdfast/web/words"
)

// checksShown is how many checks of a gauge the tablet lists.
const checksShown = 5

// gaugesView is the gauges of a station.
type gaugesView struct {
	Done   string
	Failed bool // what was done is a failed check
	List   []taskView
	Back   string
}

// gaugeView is the page on which a check is recorded.
type gaugeView struct {
	Name     string
	Of       string
	Says     string
	Tone     string
	Symbol   string
	Action   string
	ID       string
	Result   string // "good", "failed" or ""
	Master   string
	Reading  string
	Note     string
	Why      string // of a failed check, tapped
	Whys     []choiceView
	Next     string
	NextBy   string // how the next day is found; "" when it is asked for
	Off      string // how far off it is, when it is asked whether it is good all the same
	OffAs    string // the values that a yes to this is about
	Problems map[string]string
	Checks   []checkView
	Back     string
}

// gaugeWhys are what is usually wrong with a gauge that failed, by word: one tap instead
// of typing.
var gaugeWhys = []string{"off", "worn", "not-set"}

// failedNote joins what was tapped and what was typed.
func failedNote(w *words.Printer, note, why string) string {
	if !contains(gaugeWhys, why) {
		return note
	}
	if why = w.T("reach.check-why." + why); note == "" {
		return why
	}
	return w.T("station.cause-and-words", why, note)
}

type checkView struct {
	When, Result, Saw, Note, By string
	Failed                      bool
}

// showGauges is GET /station/{station}/gauges.
func (s *Surface) showGauges(w http.ResponseWriter, r *http.Request) error {
	st, err := s.stationIn(r, 1)
	if err != nil {
		return err
	}
	list, err := s.store.Gauges(r.Context(), st.ID)
	if err != nil {
		return err
	}
	f := ui.FrameOf(r).Format()
	v := gaugesView{Back: path(st.ID)}
	switch r.URL.Query().Get("checked") {
	case "good":
		v.Done = f.Words.T("reach.checked.good")
	case "failed":
		v.Done, v.Failed = f.Words.T("reach.checked.failed"), true
	}
	for _, g := range list {
		t := taskView{Href: path(st.ID, "gauge", g.ID.String()), Name: g.Name, Sub: namesOf(g)}
		var tone string
		t.Says, tone, t.Symbol = ui.SayGauge(f, g.GaugeNow)
		t.State = tone
		switch tone {
		case "hold":
			t.Tone = "open hold"
		case "due":
			t.Tone = "now"
		}
		v.List = append(v.List, t)
	}
	return ui.Render(w, r, http.StatusOK, gaugesPage(s.shell(r, st, f.Words.T("reach.gauges")), v))
}

// namesOf lists what is measured with a gauge.
func namesOf(g plant.GaugeUse) string {
	var names []string
	for _, c := range g.Characteristics {
		names = append(names, c.Name)
	}
	return strings.Join(names, ", ")
}

// gaugeIn finds the gauge that the address names among those of its station.
func (s *Surface) gaugeIn(r *http.Request) (plant.StationState, plant.GaugeUse, error) {
	st, err := s.stationIn(r, 1)
	if err != nil {
		return st, plant.GaugeUse{}, err
	}
	id, err := idIn(r, "gauge")
	if err != nil {
		return st, plant.GaugeUse{}, err
	}
	list, err := s.store.Gauges(r.Context(), st.ID)
	if err != nil {
		return st, plant.GaugeUse{}, err
	}
	for _, g := range list {
		if g.ID == id {
			return st, g, nil
		}
	}
	return st, plant.GaugeUse{}, notFound(r)
}

// showGauge is GET /station/{station}/gauge/{gauge}.
func (s *Surface) showGauge(w http.ResponseWriter, r *http.Request) error {
	st, g, err := s.gaugeIn(r)
	if err != nil {
		return err
	}
	return s.renderGauge(w, r, http.StatusOK, st, g, gaugeView{ID: uuid.Must(uuid.NewV7()).String()})
}

func (s *Surface) renderGauge(w http.ResponseWriter, r *http.Request, status int, st plant.StationState, g plant.GaugeUse, v gaugeView) error {
	f := ui.FrameOf(r).Format()
	checks, err := s.store.GaugeChecks(r.Context(), g.ID, checksShown)
	if err != nil {
		return err
	}
	words := f.Words
	v.Name, v.Of = g.Name, words.T("reach.check-of", namesOf(g))
	v.Says, v.Tone, v.Symbol = ui.SayGauge(f, g.GaugeNow)
	v.Action, v.Back = path(st.ID, "gauge", g.ID.String()), path(st.ID, "gauges")
	if g.CheckDays > 0 {
		v.NextBy = words.T("reach.check-next-by", g.CheckDays)
	}
	for _, why := range gaugeWhys {
		v.Whys = append(v.Whys, choiceView{why, words.T("reach.check-why." + why), why == v.Why})
	}
	for _, c := range checks {
		v.Checks = append(v.Checks, newCheck(f, c))
	}
	return ui.Render(w, r, status, gaugePage(s.shell(r, st, g.Name), v))
}

func newCheck(f ui.Format, c plant.GaugeCheckRecord) checkView {
	v := checkView{When: f.Clock(c.At), Note: c.Note, By: c.PersonName, Failed: !c.Good, Result: f.Words.T("reach.check-good")}
	if v.Failed {
		v.Result = f.Words.T("reach.check-failed")
	}
	switch {
	case c.Master != nil && c.Reading != nil:
		v.Saw = f.Words.T("reach.check-saw", f.Decimal(*c.Reading), f.Decimal(*c.Master))
	case c.Reading != nil:
		v.Saw = f.Decimal(*c.Reading)
	}
	return v
}

// checkGauge is POST /station/{station}/gauge/{gauge}.
func (s *Surface) checkGauge(w http.ResponseWriter, r *http.Request) error {
	st, g, err := s.gaugeIn(r)
	if err != nil {
		return err
	}
	frame, p := ui.FrameOf(r), r.PostForm
	words := frame.Words
	v := gaugeView{ID: p.Get("id"), Result: p.Get("result"), Master: strings.TrimSpace(p.Get("master")), Reading: strings.TrimSpace(p.Get("reading")),
		Note: plant.CleanText(p.Get("note")), Why: p.Get("why"), Next: strings.TrimSpace(p.Get("next")), Problems: map[string]string{}}
	c := plant.GaugeCheckRecord{Gauge: g.ID, Good: v.Result == "good", Note: v.Note, Person: frame.Person.ID}
	if !c.Good {
		c.Note = failedNote(words, c.Note, v.Why)
	}
	if c.ID, err = uuid.Parse(v.ID); err != nil || c.ID == uuid.Nil {
		return plant.Invalidf("id", "%s", words.T("station.no-number"))
	}
	if v.Result != "good" && v.Result != "failed" {
		v.Problems["result"] = words.T("reach.check-say")
	}
	var ok bool
	if c.Master, ok = decimalIn(v.Master); !ok {
		v.Problems["master"] = words.T("reach.check-number")
	}
	if c.Reading, ok = decimalIn(v.Reading); !ok {
		v.Problems["reading"] = words.T("reach.check-number")
	}
	if v.Next != "" && c.Good {
		if c.NextCheck, err = time.Parse(time.DateOnly, v.Next); err != nil {
			v.Problems["next"] = words.T("reach.check-date")
		}
	}
	if len(v.Problems) == 0 && c.Good {
		if err := s.askIfOff(r, g, c, &v); err != nil {
			return err
		}
	}
	if len(v.Problems) > 0 {
		return s.renderGauge(w, r, http.StatusUnprocessableEntity, st, g, v)
	}
	err = s.store.CheckGauge(r.Context(), c)
	if pe, ok := errors.AsType[*plant.Error](err); ok && pe.Kind != plant.NotFound {
		v.Problems[pe.Field] = words.Problem(pe)
		return s.renderGauge(w, r, ui.StatusOf(pe.Kind), st, g, v)
	}
	if err != nil {
		return err
	}
	ui.Redirect(w, r, path(st.ID, "gauges")+"?checked="+v.Result)
	return nil
}

// askIfOff asks about a check that is called good and is far from its master: once good is
// on record, it shortens what is suspect later. A yes counts for the values that it was
// asked about and for no others.
func (s *Surface) askIfOff(r *http.Request, g plant.GaugeUse, c plant.GaugeCheckRecord, v *gaugeView) error {
	var at []uuid.UUID
	for _, st := range g.Stations {
		at = append(at, st.ID)
	}
	states, err := s.store.StationStates(r.Context(), 1, at...)
	if err != nil {
		return err
	}
	var measures []plant.Setup
	for _, st := range states {
		for _, ch := range st.Characteristics {
			if ch.Setup.GaugeID == g.ID {
				measures = append(measures, ch.Setup)
			}
		}
	}
	off := c.Off(g.Gauge, measures)
	if off == nil {
		return nil
	}
	v.OffAs = c.Reading.String() + " / " + c.Master.String()
	if r.PostForm.Get("good-as") == v.OffAs {
		return nil
	}
	f := ui.FrameOf(r).Format()
	v.Off = f.Words.T("reach.check-off-steps", f.Words.Number(off.By))
	if off.Tolerance != nil {
		v.Off = f.Words.T("reach.check-off", f.Words.Number(off.By), f.Decimal(*off.Tolerance))
	}
	v.Problems["off"] = f.Words.T("reach.check-off-ask")
	return nil
}

// decimalIn reads a number that may be left out.
func decimalIn(text string) (*plant.Decimal, bool) {
	if text == "" {
		return nil, true
	}
	d, err := plant.ParseDecimal(text)
	return &d, err == nil
}

// gaugesWaiting counts the gauges of a station whose check is overdue or that failed.
func gaugesWaiting(f ui.Format, st plant.StationState) (n int, named bool) {
	seen := map[uuid.UUID]bool{}
	for _, c := range st.Characteristics {
		if g := c.Gauge; g != nil && !seen[g.ID] {
			seen[g.ID], named = true, true
			if g.Failed() || g.Overdue(f.Now, f.Zone) {
				n++
			}
		}
	}
	return n, named
}
