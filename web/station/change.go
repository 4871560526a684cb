package station

import (
	"errors"
	"net/http"
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
	Unit      string
	Step      string // one last digit, "0.001"
	Decimals  int
	Size      string
	Direction string // "up", "down" or ""
	Problem   string
	SizeSays  string // problem
	SideSays  string // problem
	Open      bool
	Condition string // tone of what is open
	Symbol    string
	State     string
	Title     string
	Says      []string
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
	return s.renderAdjustment(w, r, http.StatusOK, st, newAdjust(ui.FrameOf(r).Format(), st, c))
}

func (s *Surface) renderAdjustment(w http.ResponseWriter, r *http.Request, status int, st plant.StationState, v adjustView) error {
	shell := s.shell(r, st, v.Title)
	shell.Scripts = []string{"js/station-sent.js", "js/station-step.js"}
	return ui.Render(w, r, status, adjustPage(shell, v))
}

func newAdjust(f ui.Format, st plant.StationState, c plant.CharacteristicState) adjustView {
	w, s := f.Words, c.Setup
	v := adjustView{Action: path(st.ID, "change"), Token: uuid.Must(uuid.NewV7()).String(), Machine: c.MachineID.String(), ID: c.ID.String(),
		Name: c.Name, Unit: s.Unit, Step: plant.FormatUnits(1, s.Decimals), Decimals: s.Decimals, Size: plant.FormatUnits(1, s.Decimals),
		Open: c.Matter != nil, Back: path(st.ID)}
	switch {
	case c.Matter != nil:
		condition := ui.ConditionOf(c.Matter.Kind())
		v.Condition, v.Symbol, v.State = ui.Tone(condition), ui.SymbolOf(condition), w.T("station.signal-open")
		v.Title = w.T("station.adjust-open")
		v.Says = []string{w.T("station.adjust-open-text", f.Clock(c.Matter.OpenedTaken))}
	case c.Revision == nil:
		v.Condition, v.Symbol, v.State = "calm", "learning", w.T("station.signal-none")
		v.Title = w.T("station.adjust-learning")
		v.Says = []string{w.T("station.adjust-learning-text"), w.T("station.adjust-unprompted")}
	default:
		v.Condition, v.Symbol, v.State = "calm", "leave", w.T("station.signal-none")
		v.Title = w.T("station.adjust-leave")
		v.Says = []string{w.T("station.adjust-leave-text"), w.T("station.adjust-unprompted")}
	}
	if n := len(c.Points); n > 0 {
		last := c.Points[n-1]
		v.Last = w.T("station.last-was", f.Clock(last.TakenAt), f.Mean(last.Stats.Mean(), s))
		if s.Target != nil {
			v.Last = w.T("station.last-was-target", f.Clock(last.TakenAt), f.Mean(last.Stats.Mean(), s), f.Decimal(*s.Target))
		}
	}
	lo, hi := specAxis(s)
	v.Chart = (&chart.Verdict{ID: "adjust", Label: w.T("station.verdict-label", c.Name), W: adjustW, H: adjustH,
		Points: stationPoints(f, c.Points, s, c.Segment), Limits: chartLimits(f, c.Revision, s), Lo: lo, Hi: hi, Words: chartWords(w)}).SVG()
	return v
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
		v := newAdjust(frame.Format(), st, of)
		v.Token, v.Size, v.Direction, v.Note = c.ID.String(), shorten(plant.CleanText(form.Get("size"))), form.Get("direction"), note
		c.Characteristic = of.ID
		if c.Size = v.read(frame.Format(), of.Setup); c.Size == nil {
			return s.renderAdjustment(w, r, http.StatusUnprocessableEntity, st, v)
		}
		adjust = &v
	}
	taken, skew, own, err := sentTime(form, frame.Now)
	if err == nil {
		if c.HappenedAt = taken.Add(skew); !own {
			c.HappenedAt = s.stamps.of(c.ID, frame.Now)
		}
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
