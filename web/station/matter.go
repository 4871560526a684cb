package station

import (
	"net/http"

	"holdfast/internal/plant"
	"holdfast/web/chart"
	"holdfast/web/ui"
)

// reactionStyles is the style sheet of what shows a reaction plan.
const reactionStyles = "css/reaction.css"

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

// typedMatter is what somebody typed on the page, to be shown again.
type typedMatter struct {
	closing closingForm
	cause   string // chosen
	step    stepForm
	verify  verifyForm
	problem string // about the whole: somebody was quicker
}

// showMatter is GET /station/{station}/matter/{matter}.
func (s *Surface) showMatter(w http.ResponseWriter, r *http.Request) error {
	st, m, err := s.matterIn(r)
	if err != nil {
		return err
	}
	typed := typedMatter{}
	typed.step.Look = number(r.URL.Query().Get("step"))
	return s.renderMatter(w, r, http.StatusOK, st, m, typed)
}

func (s *Surface) renderMatter(w http.ResponseWriter, r *http.Request, status int, st plant.StationState, m plant.Matter, typed typedMatter) error {
	frame := ui.FrameOf(r)
	f := frame.Format()
	c, ok := characteristicOf(st, m.Characteristic)
	if !ok {
		return notFound(r)
	}
	v := newMatter(f, frame.Person, st, c, m, typed)
	if err := s.nameParts(r, f, c, m, &v); err != nil {
		return err
	}
	if v.Closing {
		causes, err := s.store.Causes(r.Context(), st.Family)
		if err != nil {
			return err
		}
		v.Form = typed.closing
		v.Form.Causes = causeChoices(f, causes, typed.cause)
		v.Form.offerTimes(f, m.OpenedTaken)
	}
	var err error
	if v.Aside, _, err = s.asideOf(r, st, m); err != nil {
		return err
	}
	if v.Aside != nil && (v.Closing || v.Ready()) {
		v.Form.Rest = typed.closing.Rest.asked(f, v.Aside.Asks)
	}
	shell := s.shell(r, st, v.Title)
	shell.Styles = append(shell.Styles, reactionStyles)
	return ui.Render(w, r, status, matterPage(shell, v))
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
		return s.quicker(w, r, typedMatter{})
	}
	if err != nil {
		return err
	}
	ui.Redirect(w, r, here)
	return nil
}

// quicker shows how a matter stands now, after somebody else was quicker.
func (s *Surface) quicker(w http.ResponseWriter, r *http.Request, typed typedMatter) error {
	st, m, err := s.matterIn(r)
	if err != nil {
		return err
	}
	frame := ui.FrameOf(r)
	f, words := frame.Format(), frame.Words
	switch {
	case typed.problem != "":
	case !m.Open():
		typed.problem = words.T("station.closed-quicker", m.ClosedByName, f.Clock(m.ClosedAt))
	case m.TakenByName != "" && m.TakenBy != frame.Person.ID && m.Version == number(r.PostForm.Get("version"))+1:
		typed.problem = words.T("station.taken-quicker", m.TakenByName, f.Clock(m.TakenAt))
	default:
		typed.problem = words.T("station.somebody-quicker")
	}
	return s.renderMatter(w, r, ui.StatusOf(plant.Conflict), st, m, typed)
}

// Of a long matter the newest subgroups are looked at, and of those the newest readings
// are named.
const (
	mostLooked = 200
	mostNamed  = 6
)

// nameParts names the readings outside specification behind the lines of a matter.
func (s *Surface) nameParts(r *http.Request, f ui.Format, c plant.CharacteristicState, m plant.Matter, v *matterView) error {
	for i, l := range m.Lines {
		if l.Panel != plant.Reading || l.Withdrawn {
			continue
		}
		h, err := s.store.History(r.Context(), c.ID, plant.Stretch{From: l.First, To: l.Last, Last: mostLooked})
		if err != nil {
			return err
		}
		said := ui.SayOutside(f, c, m, h.Points, h.Setups)
		if more := len(said) - mostNamed; more > 0 {
			said = append(said[more:], f.Words.T("ui.outside-part.more", more))
		}
		v.Lines[i].Parts = said
		return nil // the lines of both sides tell of the same readings
	}
	return nil
}
