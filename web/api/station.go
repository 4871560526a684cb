package api

import (
	"net/http"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// stationNow is what a station measures, for a sender to find its way.
type stationNow struct {
	Station         uuid.UUID   `json:"station"`
	Name            string      `json:"name"`
	Now             time.Time   `json:"now"`
	Machines        []machine   `json:"machines"`
	Characteristics []toMeasure `json:"characteristics"`
}

type machine struct {
	ID      uuid.UUID `json:"id"`
	Name    string    `json:"name"`
	Running bool      `json:"running"`
	Part    string    `json:"part"`
	Lot     string    `json:"lot"`
	Streams []string  `json:"streams,omitempty"`
}

type toMeasure struct {
	ID       uuid.UUID      `json:"id"`
	Name     string         `json:"name"`
	Machine  uuid.UUID      `json:"machine"`
	Unit     string         `json:"unit"`
	Decimals int            `json:"decimals"`
	Size     int            `json:"size"`
	Setup    int            `json:"setup"`
	DueAt    time.Time      `json:"due_at,omitzero"`
	Due      bool           `json:"due"`
	Occasion plant.Occasion `json:"occasion,omitempty"`
}

func (s *Surface) station(w http.ResponseWriter, r *http.Request) error {
	var named uuid.UUID
	if text := r.URL.Query().Get("station"); text != "" {
		var err error
		if named, err = uuid.Parse(text); err != nil {
			return ui.NotFound(r)
		}
	}
	id, err := place(senderOf(r), named)
	if err != nil {
		return err
	}
	st, err := s.Store.StationState(r.Context(), id, 1)
	if err != nil {
		return err
	}
	streams, err := s.Store.StationStreams(r.Context(), id)
	if err != nil {
		return err
	}
	out := stationNow{Station: st.ID, Name: st.Name, Now: ui.FrameOf(r).Now, Machines: []machine{}, Characteristics: []toMeasure{}}
	for _, m := range st.Machines {
		one := machine{ID: m.ID, Name: m.Name, Running: m.Running(), Part: m.Part.Name, Lot: m.State.Lot}
		for _, x := range streams[m.ID] {
			if !x.Retired {
				one.Streams = append(one.Streams, x.Name)
			}
		}
		out.Machines = append(out.Machines, one)
	}
	for _, c := range st.Characteristics {
		out.Characteristics = append(out.Characteristics, toMeasure{ID: c.ID, Name: c.Name, Machine: c.MachineID, Unit: c.Setup.Unit,
			Decimals: c.Setup.Decimals, Size: c.Setup.Size, Setup: c.Setup.Version, DueAt: c.Due.At, Due: c.Due.State >= plant.DueNow, Occasion: c.Due.Occasion})
	}
	return ui.RenderJSON(w, http.StatusOK, out)
}
