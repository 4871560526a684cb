package station

import (
	"cmp"
	"errors"
	"net/http"
	"net/url"
	"slices"
	"strings"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/chart"
	"holdfast/web/ui"
)

// changeView is the list of what may have been done: one tap records it.
type changeView struct {
	Action   string
	Machines []changeMachine
	Note     string
	Problem  string
	Back     string
}

type changeMachine struct {
	ID      string
	Name    string
	Token   string
	Kinds   []kindView
	Adjusts []taskView // characteristics that an adjustment may be meant to move
}

type kindView struct {
	Value string
	Name  string
}

// adjustView is the page of one adjustment.
type adjustView struct {
	Action    string
	Token     string
	Machine   string
	ID        string
	Name      string
	Knob      string // number of what is turned, "" for something that is not described
	Turnables []turnable
	Unit      string // of the scale on which the size is typed
	Decimals  int    // of that scale
	By        int64  // one step of it, in its last decimal
	Steps     string
	Up, Down  string // the two directions, and what each does where that is not the same
	UpDoes    string
	DownDoes  string
	Size      string
	Direction string // "up", "down" or ""
	Problem   string
	SizeSays  string // problem
	SideSays  string // problem
	Open      bool
	Kind      string // of the advice
	Condition string // tone of what is open
	Symbol    string
	State     string
	Title     string
	Says      []string
	Spread    string // what correcting after every round does, with its drawing
	Twin      string
	Record    string // what adjusting did here before
	Foot      string
	Measure   string // where another round is taken
	Check     string // where the gauge is checked, while that is overdue
	Cause     string // where the cause is looked for, while that is not done
	Last      string
	Chart     string
	Note      string
	Back      string
}

func (s *Surface) showChange(w http.ResponseWriter, r *http.Request) error {
	st, err := s.stationIn(r, 1)
	if err != nil {
		return err
	}
	return s.renderChange(w, r, http.StatusOK, st, "", "")
}

func (s *Surface) renderChange(w http.ResponseWriter, r *http.Request, status int, st plant.StationState, note, problem string) error {
	f := ui.FrameOf(r).Format()
	v := changeView{Action: path(st.ID, "change"), Note: note, Problem: problem, Back: path(st.ID)}
	for _, m := range st.Machines {
		cm := changeMachine{ID: m.ID.String(), Name: m.Name, Token: uuid.Must(uuid.NewV7()).String()}
		for _, k := range plant.ChangeKinds {
			if k != plant.Adjustment {
				cm.Kinds = append(cm.Kinds, kindView{Value: string(k), Name: f.Words.T("station.change." + string(k))})
			}
		}
		for _, c := range st.Characteristics {
			if c.MachineID == m.ID {
				cm.Adjusts = append(cm.Adjusts, taskView{Href: path(st.ID, "change", c.ID.String()), Name: c.Name})
			}
		}
		v.Machines = append(v.Machines, cm)
	}
	shell := s.shell(r, st, f.Words.T("station.log-change"))
	shell.Scripts = []string{"js/station-sent.js"}
	return ui.Render(w, r, status, changePage(shell, v))
}

// showAdjustment is GET /station/{station}/change/{characteristic}.
func (s *Surface) showAdjustment(w http.ResponseWriter, r *http.Request) error {
	st, err := s.stationIn(r, chart.FallsLength)
	if err != nil {
		return err
	}
	id, err := idIn(r, "characteristic")
	if err != nil {
		return err
	}
	c, ok := characteristicOf(st, id)
	if !ok {
		return notFound(r)
	}
	a, err := s.adviser(r.Context(), ui.FrameOf(r).Format(), st, c, r.URL.Query().Get("knob"))
	if err != nil {
		return err
	}
	v, err := a.view()
	if err != nil {
		return err
	}
	return s.renderAdjustment(w, r, http.StatusOK, st, v)
}

func (s *Surface) renderAdjustment(w http.ResponseWriter, r *http.Request, status int, st plant.StationState, v adjustView) error {
	shell := s.shell(r, st, v.Title)
	shell.Scripts = []string{"js/station-sent.js", "js/station-step.js"}
	shell.Styles = []string{"css/station-adjust.css"}
	if r.Method == http.MethodPost { // to the address of all changes, from this page
		shell.Path = path(st.ID, "change", v.ID) + "?" + url.Values{"knob": {cmp.Or(v.Knob, noKnob)}}.Encode()
	}
	return ui.Render(w, r, status, adjustPage(shell, v))
}

// logChange is POST /station/{station}/change, for every kind.
func (s *Surface) logChange(w http.ResponseWriter, r *http.Request) error {
	st, err := s.stationIn(r, chart.FallsLength)
	if err != nil {
		return err
	}
	frame := ui.FrameOf(r)
	form, words := r.PostForm, frame.Words
	note := plant.CleanText(form.Get("note"))
	c := plant.Change{Station: st.ID, Kind: plant.ChangeKind(form.Get("kind")), Note: note, Person: frame.Person.ID}
	if c.ID, err = uuid.Parse(form.Get("id")); err != nil || c.ID == uuid.Nil {
		return plant.Invalidf("id", "%s", words.T("station.no-number"))
	}
	if !slices.Contains(plant.ChangeKinds, c.Kind) {
		return s.renderChange(w, r, http.StatusUnprocessableEntity, st, note, words.T("station.say-what-changed"))
	}
	if c.Machine, err = uuid.Parse(form.Get("machine")); err != nil {
		return notFound(r)
	}
	if _, ok := machineOf(st, c.Machine); !ok {
		return &plant.Error{Kind: plant.NotFound, Message: words.T("station.machine-not-here")}
	}
	var adjust *adjustView
	if c.Kind == plant.Adjustment {
		of, err := adjusted(r, st, c.Machine)
		if err != nil {
			return err
		}
		knob := form.Get("knob")
		if knob == "" {
			knob = noKnob
		}
		a, err := s.adviser(r.Context(), frame.Format(), st, of, knob)
		if err != nil {
			return err
		}
		v, err := a.view()
		if err != nil {
			return err
		}
		v.Token, v.Size, v.Direction, v.Note = c.ID.String(), shorten(plant.CleanText(form.Get("size"))), form.Get("direction"), note
		c.Characteristic = of.ID
		size := v.read(frame.Format(), of.Setup)
		switch {
		case a.knob == nil && knob != noKnob:
			v.Problem = words.T("adjusting.gone")
		case size == nil:
		case a.knob != nil:
			c.Knob, c.Turned = a.knob.ID, size
		default:
			c.Size = size
		}
		if size == nil || v.Problem != "" {
			return s.renderAdjustment(w, r, http.StatusUnprocessableEntity, st, v)
		}
		adjust = &v
	}
	taken, skew, own, err := sentTime(form, frame.Now)
	if err == nil {
		at := frame.Now
		if own {
			at = taken.Add(skew)
		}
		c.HappenedAt = s.stamps.as(c.ID, frame.Now, at)
		err = s.store.LogChange(r.Context(), c)
	}
	if err == nil {
		back(w, r, st.ID, "change")
		return nil
	}
	s.stamps.forget(c.ID)
	pe, ok := errors.AsType[*plant.Error](err)
	if !ok || pe.Kind != plant.Invalid && pe.Kind != plant.Conflict {
		return err
	}
	problem := ui.FrameOf(r).Words.Problem(pe)
	if adjust != nil {
		adjust.Problem = problem
		return s.renderAdjustment(w, r, ui.StatusOf(pe.Kind), st, *adjust)
	}
	return s.renderChange(w, r, ui.StatusOf(pe.Kind), st, note, problem)
}

// adjusted is the characteristic that an adjustment is meant to move; it must be one
// of the machine's.
func adjusted(r *http.Request, st plant.StationState, machine uuid.UUID) (plant.CharacteristicState, error) {
	id, err := uuid.Parse(r.PostForm.Get("characteristic"))
	if err != nil {
		return plant.CharacteristicState{}, notFound(r)
	}
	c, ok := characteristicOf(st, id)
	if !ok || c.MachineID != machine {
		return c, &plant.Error{Kind: plant.NotFound, Message: ui.FrameOf(r).Words.T("station.not-of-here")}
	}
	return c, nil
}

// read takes the signed size from what was typed, or says what is wrong and returns
// nil. The direction is its own choice, so a sign in the size is refused.
func (v *adjustView) read(f ui.Format, s plant.Setup) *plant.Decimal {
	s.Decimals = v.Decimals // those of the scale on which it is typed
	if v.Direction != "up" && v.Direction != "down" {
		v.Direction, v.SideSays = "", f.Words.T("station.say-direction")
	}
	units, err := plant.ParseReading(v.Size, s.Decimals)
	switch {
	case err != nil && v.Size == "":
		v.SizeSays = f.Words.T("station.say-size")
	case err != nil:
		v.SizeSays = readingProblem(f.Words, v.Size, s, false)
	case strings.ContainsAny(v.Size, "+-\u2212"):
		v.SizeSays = f.Words.T("station.size-without-sign")
	case units == 0:
		v.SizeSays = f.Words.T("station.say-size")
	}
	if v.SizeSays != "" || v.SideSays != "" {
		return nil
	}
	if v.Direction == "down" {
		units = -units
	}
	return &plant.Decimal{Units: units, Decimals: s.Decimals}
}
