package station

import (
	"errors"
	"net/http"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// machinePage says what a machine makes.
type machinePageView struct {
	Action      string
	Name        string
	Says        string
	Token       string
	Parts       []choiceView
	Lot         string
	PartProblem string
	LotProblem  string
	Problem     string
	Back        string
}

// machineIn reads the machine that the address names, at its station.
func (s *Surface) machineIn(r *http.Request) (plant.StationState, plant.MachineNow, error) {
	st, err := s.stationIn(r, 1)
	if err != nil {
		return st, plant.MachineNow{}, err
	}
	id, err := idIn(r, "machine")
	if err != nil {
		return st, plant.MachineNow{}, err
	}
	m, ok := machineOf(st, id)
	if !ok {
		return st, m, notFound(r)
	}
	return st, m, nil
}

func (s *Surface) showMachine(w http.ResponseWriter, r *http.Request) error {
	st, m, err := s.machineIn(r)
	if err != nil {
		return err
	}
	v := machinePageView{Lot: m.State.Lot}
	return s.renderMachine(w, r, http.StatusOK, st, m, v, m.Part.ID.String())
}

func (s *Surface) renderMachine(w http.ResponseWriter, r *http.Request, status int, st plant.StationState, m plant.MachineNow, v machinePageView, chosen string) error {
	parts, err := s.store.Parts(r.Context())
	if err != nil {
		return err
	}
	now := newMachine(ui.FrameOf(r).Format(), m)
	v.Action, v.Name, v.Says, v.Back = path(st.ID, "machine", m.ID.String()), m.Name, now.Says, path(st.ID)
	v.Token = uuid.Must(uuid.NewV7()).String()
	for _, p := range parts {
		v.Parts = append(v.Parts, choiceView{p.ID.String(), p.Name, p.ID.String() == chosen})
	}
	return ui.Render(w, r, status, machinePage(s.shell(r, st, m.Name), v))
}

// setMachine is POST /station/{station}/machine/{machine}: it stopped, it started, or
// it makes something else.
func (s *Surface) setMachine(w http.ResponseWriter, r *http.Request) error {
	st, m, err := s.machineIn(r)
	if err != nil {
		return err
	}
	frame, form := ui.FrameOf(r), r.PostForm
	state := plant.MachineState{Machine: m.ID, Running: m.Running(), Part: m.State.Part, Lot: m.State.Lot, Person: frame.Person.ID, At: frame.Now}
	if state.ID, err = uuid.Parse(form.Get("id")); err != nil || state.ID == uuid.Nil {
		return plant.Invalidf("id", "%s", frame.Words.T("station.no-number"))
	}
	do := form.Get("do")
	switch do {
	case "stop":
		state.Running = false
	case "start":
		state.Running = true
	case "changeover":
		v := machinePageView{Lot: plant.CleanText(form.Get("lot"))}
		parts, err := s.store.Parts(r.Context())
		if err != nil {
			return err
		}
		if state.Part, v.PartProblem = partOf(frame, parts, form.Get("part")); v.PartProblem == "" {
			state.Lot, err = plant.CleanTextWithin("lot", v.Lot, 60)
			v.LotProblem = ui.ProblemOf(frame.Words, err, "lot")
		}
		if v.PartProblem != "" || v.LotProblem != "" {
			return s.renderMachine(w, r, http.StatusUnprocessableEntity, st, m, v, form.Get("part"))
		}
	default:
		return plant.Invalidf("do", "%s", frame.Words.T("station.say-machine"))
	}
	err = s.store.SetMachine(r.Context(), state)
	if pe, ok := errors.AsType[*plant.Error](err); ok && pe.Kind == plant.Invalid {
		return s.renderMachine(w, r, http.StatusUnprocessableEntity, st, m, machinePageView{Lot: state.Lot, Problem: frame.Words.Problem(pe)}, state.Part.String())
	}
	if err != nil {
		return err
	}
	if matter, err := uuid.Parse(form.Get("matter")); err == nil { // where it was started
		ui.Redirect(w, r, path(st.ID, "matter", matter.String()))
		return nil
	}
	back(w, r, st.ID, do)
	return nil
}

// partOf finds the part that was chosen, or says what is wrong.
func partOf(frame ui.Frame, parts []plant.Part, id string) (uuid.UUID, string) {
	for _, p := range parts {
		if p.ID.String() == id {
			return p.ID, ""
		}
	}
	if id == "" {
		return uuid.Nil, frame.Words.T("station.say-part")
	}
	return uuid.Nil, frame.Words.T("station.say-part-known")
}
