package admin

import (
	"net/http"
	"net/url"
	"time"

	"github.com/go-chi/chi/v5"
	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

const (
	startAddress  = home + "/start"
	startLearning = startAddress + "?learn=yes" // Learning was chosen; the first round keeps the choice
)

// startView is the first run.
type startView struct {
	Steps        []stepRow
	Title, Text  string
	At           stepName
	Form         *form
	Other        []link // other ways on
	Station      string // where the first round is taken, and whether this person may
	Measure      string
	MayTake      bool
	StationName  string
	StationID    string
	Judged       *judgedView
	Wait         bool   // this step is the engineer's, and this person is none
	Learn, Here  string // where it goes on with Learning; this page as it stands
	Unit         string
	Specified    bool
	Characterist string
	Tablet       tabletStep
}

// tabletStep is how a tablet comes to the station.
type tabletStep struct {
	Offered bool // this person may enrol one
	Name    string
	Codes   []codeView // of tablets that wait to be enrolled there
}

type stepRow struct {
	N                   int
	Title, Answer, Back string
	Done, Here          bool
	HereWord, StateWord string
}

type link struct{ Text, Href string }

// judgedView is the first round and what it was told.
type judgedView struct {
	At     string
	Learns bool
}

// showStart shows the step that the first run stands at. ?learn=yes goes on from the
// limits with Learning.
func (a *Admin) showStart(w http.ResponseWriter, r *http.Request) error {
	o, err := a.store.Outline(r.Context())
	if err != nil {
		return err
	}
	return a.renderStart(w, r, http.StatusOK, o, newAsking(ui.FrameOf(r).Words, nil), r.URL.Query().Get("learn") == "yes")
}

func (a *Admin) renderStart(w http.ResponseWriter, r *http.Request, status int, o plant.Outline, q *asking, learn bool) error {
	f := ui.FrameOf(r)
	steps := stepsOf(f, o)
	v := startView{Here: startAddress}
	if learn && steps[3].Done && !steps[4].Done {
		steps[4].Done, steps[4].Answer, steps[4].Back = true, q.w.T("setup.limits-learning"), startAddress
		v.Here = startLearning
	}
	at := current(steps)
	for i, s := range steps {
		row := stepRow{N: i + 1, Title: s.Title, Answer: s.Answer, Back: s.Back, Done: s.Done, Here: i == at, StateWord: q.w.T("setup.start.open")}
		switch {
		case s.Done:
			row.StateWord = q.w.T("setup.start.done")
		case i == at:
			row.StateWord = q.w.T("setup.start.here")
		}
		v.Steps = append(v.Steps, row)
	}
	if at == len(steps) {
		v.At = "finished"
		v.Title, v.Text = q.w.T("setup.finished.title"), q.w.T("setup.finished.text")
		v.Other = []link{{q.w.T("setup.finished.describe"), describeAddress}, {q.w.T("setup.finished.more"), measureAddress}, {q.w.T("setup.finished.overview"), home}}
	} else {
		v.At = steps[at].Name
		v.Title, v.Text = steps[at].Title, q.w.T("setup.ask."+string(v.At))
	}
	if err := a.ask(r, &v, o, q); err != nil {
		return err
	}
	if v.Station != "" {
		ui.RememberStation(w, r, idOf(v.Station[len("/station/"):])) // whoever signs in here next lands there
	}
	s := shellFor(r, q.w.T("setup.start.title"))
	s.Styles, s.Scripts = append(s.Styles, "css/admin-staff.css"), append(s.Scripts, zoneScript)
	if len(v.Tablet.Codes) > 0 {
		s.Scripts = append(s.Scripts, "js/admin-codes.js")
	}
	return ui.Render(w, r, status, startRunPage(s, v))
}

// ask fills in what the step asks.
func (a *Admin) ask(r *http.Request, v *startView, o plant.Outline, q *asking) error {
	f, w, at := ui.FrameOf(r), q.w, firstOf(o)
	engineer := f.Person.May(plant.SetLimits)
	v.Wait = !engineer && (v.At == stepMeasure || v.At == stepLimits)
	v.Unit, v.Characterist = at.characteristic.Setup.Unit, at.characteristic.Name
	v.Specified = at.characteristic.Setup.Lower != nil || at.characteristic.Setup.Upper != nil
	groups := []group(nil)
	preset := func(values url.Values) {
		if q.values == nil {
			q.values = values
		}
	}
	switch v.At {
	case stepPlant:
		preset(url.Values{"plant": {f.Plant.Name}, "zone": {f.Plant.Location.String()}})
		groups = []group{{Fields: plantFields(q, f.Now, f.Plant.Location != time.UTC || len(r.PostForm) > 0)}}
	case stepEngineer:
		preset(url.Values{"who": {"me"}})
		groups = []group{{Fields: append([]field{q.field(radio, "who").among([]option{{Value: "me", Text: w.T("setup.who.me-engineer"), Hint: w.T("setup.who.me-engineer-hint")}, {Value: "other", Text: w.T("setup.who.other-engineer")}})}, personFields(q)...)}}
	case stepFloor:
		preset(url.Values{})
		groups = []group{{Fields: []field{q.field(text, "line_name"), q.field(text, "station_name"), q.field(text, "machine_name"), q.field(decimal, "rate").optional()}}}
	case stepMeasure:
		preset(url.Values{"size": {"5"}, "minutes": {"60"}, "decimals": {"2"}})
		groups = []group{{Fields: []field{q.field(text, "name"), q.field(text, "unit").short(), q.field(whole, "decimals"), q.field(decimal, "lower").optional(),
			q.field(decimal, "target").optional(), q.field(decimal, "upper").optional(), q.field(whole, "size"), q.field(whole, "minutes")}}}
		v.Other = []link{{w.T("setup.start.choose-chart"), home + "/chart-choice"}, {w.T("setup.start.describe"), describeAddress}}
	case stepLimits:
		preset(url.Values{})
		v.Learn = startLearning
		if v.Wait { // no limits are stated by going on
			v.Other = []link{{w.T("setup.learn.go"), v.Learn}}
		} else {
			known := knownForm(q, at.characteristic, startAddress+"/limits", "")
			v.Form = &known
		}
		return nil
	case stepOperator:
		preset(url.Values{"who": {"other"}})
		groups = []group{{Fields: append([]field{q.field(radio, "who").among([]option{{Value: "other", Text: w.T("setup.who.other-operator")}, {Value: "me", Text: w.T("setup.who.me-operator"), Hint: w.T("setup.who.me-operator-hint")}})}, personFields(q)...)}}
		v.Wait = !f.Person.May(plant.Manage)
	case stepRound, "finished":
		v.Station, v.StationID, v.StationName = "/station/"+at.station.ID.String(), at.station.ID.String(), at.station.Name
		v.Measure = v.Station + "?measure=" + at.characteristic.ID.String()
		v.MayTake = f.Person.May(plant.TakeRounds)
		if err := a.tabletStep(r, v, at); err != nil {
			return err
		}
		return a.judged(r, v, at)
	}
	if v.At == stepEngineer {
		v.Wait = !f.Person.May(plant.Manage)
	}
	if v.Wait || groups == nil {
		return nil
	}
	v.Form = &form{Action: startAddress + "/" + string(v.At), Button: w.T("setup.start.next"), Groups: groups, Problem: q.rest(groups), Testid: "step"}
	return nil
}

func personFields(q *asking) []field {
	return []field{q.field(text, "person_name"), q.field(text, "login").short(), q.field(fresh, "password")}
}

// tabletStep offers a code for a tablet at the station, and shows those that wait.
func (a *Admin) tabletStep(r *http.Request, v *startView, at first) error {
	f := ui.FrameOf(r)
	if a.staff == nil || !f.Person.May(plant.Manage) || at.station.ID == uuid.Nil {
		return nil
	}
	codes, err := a.staff.Store.DeviceCodes(r.Context())
	if err != nil {
		return err
	}
	v.Tablet = tabletStep{Offered: true, Name: f.Words.T("setup.tablet.name", at.station.Name)}
	s := shellFor(r, "")
	for _, c := range codes {
		if c.Device.Kind == plant.Tablet && c.Device.Station == at.station.ID {
			v.Tablet.Codes = append(v.Tablet.Codes, a.codeOf(r, s, c))
		}
	}
	return nil
}

// judged says what the first round was told.
func (a *Admin) judged(r *http.Request, v *startView, at first) error {
	if v.At != "finished" || at.station.ID == uuid.Nil {
		return nil
	}
	round, err := a.store.LastRound(r.Context(), at.station.ID)
	if plant.IsKind(err, plant.NotFound) {
		return nil
	}
	if err != nil {
		return err
	}
	v.Judged = &judgedView{At: ui.FrameOf(r).Format().Clock(round.TakenAt), Learns: at.characteristic.Revision == 0}
	return nil
}

// doStart takes the answer of a step and leads on to the next one.
func (a *Admin) doStart(w http.ResponseWriter, r *http.Request) error {
	o, err := a.store.Outline(r.Context())
	if err != nil {
		return err
	}
	q := newAsking(ui.FrameOf(r).Words, r.PostForm)
	status := http.StatusUnprocessableEntity
	switch stepName(chi.URLParam(r, "step")) {
	case stepPlant:
		if p := plantOf(q); q.ok() {
			err = a.storePlant(r, p)
		}
	case stepEngineer:
		err = a.startPerson(r, q, plant.Engineer)
	case stepFloor:
		err = a.startFloor(r, o, q)
	case stepMeasure:
		err = a.startMeasure(r, o, q)
	case stepLimits:
		status, err = a.startLimits(r, o, q)
	case stepOperator:
		err = a.startPerson(r, q, plant.Operator)
	default:
		return ui.NotFound(r)
	}
	if err != nil && !q.refused(err) {
		return err
	}
	if !q.ok() {
		return a.renderStart(w, r, status, o, q, stepName(chi.URLParam(r, "step")) == stepOperator)
	}
	to := startAddress
	if stepName(chi.URLParam(r, "step")) == stepOperator {
		to = startLearning
	}
	ui.Redirect(w, r, to)
	return nil
}
