package api

import (
	"net/http"
	"time"

	"github.com/go-chi/chi/v5"
	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// sentMachine is what a machine says of itself. What is left out stays as it is.
type sentMachine struct {
	ID      uuid.UUID `json:"id"`
	Station uuid.UUID `json:"station"`
	At      time.Time `json:"at"`
	SentAt  time.Time `json:"sent_at"`
	Running *bool     `json:"running"`
	Part    *string   `json:"part"` // id or name; "" for none
	Lot     *string   `json:"lot"`
	Counter *int64    `json:"counter"`
}

func (s *Surface) machine(w http.ResponseWriter, r *http.Request) error {
	var sent sentMachine
	body, err := read(r, &sent)
	if err != nil {
		return s.keep(w, r, uuid.Nil, sent.ID, asText(body), err)
	}
	station, err := place(senderOf(r), sent.Station)
	if err != nil {
		return s.keep(w, r, uuid.Nil, sent.ID, sent.content(), err)
	}
	state, err := s.machineState(r, sent, station)
	if err == nil {
		err = s.Store.SetMachine(r.Context(), state)
	}
	if err != nil {
		return s.keep(w, r, station, sent.ID, sent.content(), err)
	}
	return ui.RenderJSON(w, http.StatusOK, map[string]any{"id": sent.ID, "machine": state.Machine})
}

func (sent sentMachine) content() sentMachine {
	sent.SentAt = time.Time{}
	return sent
}

// machineState fills what was left out with what is known.
func (s *Surface) machineState(r *http.Request, sent sentMachine, station uuid.UUID) (plant.MachineState, error) {
	if err := numbered(sent.ID); err != nil {
		return plant.MachineState{}, err
	}
	id, err := uuid.Parse(chi.URLParam(r, "machine"))
	if err != nil {
		return plant.MachineState{}, ui.NotFound(r)
	}
	st, err := s.Store.StationState(r.Context(), station, 1)
	if err != nil {
		return plant.MachineState{}, err
	}
	var m plant.MachineNow
	for _, have := range st.Machines {
		if have.ID == id {
			m = have
		}
	}
	if m.ID == uuid.Nil {
		return plant.MachineState{}, plant.NotFoundf("", "This station has no such machine.")
	}
	if sent.Counter != nil && *sent.Counter < 0 {
		return plant.MachineState{}, plant.Invalidf("counter", "A counter does not go below zero.")
	}
	now := ui.FrameOf(r).Now
	state := plant.MachineState{ID: sent.ID, Machine: id, At: now, Running: m.Running(), Part: m.Part.ID, Lot: m.State.Lot, Counter: sent.Counter}
	if !sent.At.IsZero() {
		state.At = plant.CutTime(sent.At.Add(skewOf(sent.SentAt, now)))
	}
	if m.Known && state.At.Before(m.State.At) && (sent.Running == nil || sent.Part == nil || sent.Lot == nil) {
		return plant.MachineState{}, plant.Invalidf("at", "%s was changed since then. Send running, part and lot as they were.", m.Name)
	}
	if sent.Running != nil {
		state.Running = *sent.Running
	}
	if sent.Lot != nil {
		state.Lot = *sent.Lot
	}
	if sent.Part != nil {
		state.Part, err = s.part(r, *sent.Part)
	}
	return state, err
}

// part finds a part by its id or name; none has neither.
func (s *Surface) part(r *http.Request, text string) (uuid.UUID, error) {
	if text == "" {
		return uuid.Nil, nil
	}
	parts, err := s.Store.Parts(r.Context())
	if err != nil {
		return uuid.Nil, err
	}
	for _, p := range parts {
		if p.Name == text || p.ID.String() == text {
			return p.ID, nil
		}
	}
	return uuid.Nil, plant.Invalidf("part", "There is no part %q here.", short(text))
}
