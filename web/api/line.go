package api

import (
	"net/http"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// sentLine is a line of a gauge that its sender could not read. The sender does not
// guess what it means; the station shows it.
type sentLine struct {
	ID             uuid.UUID `json:"id"`
	Station        uuid.UUID `json:"station"`
	Characteristic string    `json:"characteristic"`
	Line           string    `json:"line"`
	Why            string    `json:"why"` // "unit", "number", "decimals" or "refused"
	At             time.Time `json:"at"`
}

func (s *Surface) line(w http.ResponseWriter, r *http.Request) error {
	var sent sentLine
	body, err := read(r, &sent)
	if err != nil {
		return s.keep(w, r, uuid.Nil, sent.ID, asText(body), err)
	}
	station, err := place(senderOf(r), sent.Station)
	if err == nil {
		err = numbered(sent.ID)
	}
	if err != nil {
		return s.keep(w, r, uuid.Nil, sent.ID, sent, err)
	}
	why := plant.Invalidf("line", "A line came that holds no reading: %q.", short(sent.Line))
	switch sent.Why {
	case "unit":
		why = plant.Invalidf("line", "A reading came in another unit: %q.", short(sent.Line))
	case "decimals":
		why = plant.Invalidf("line", "A reading came with more decimals than are measured: %q.", short(sent.Line))
	case "refused":
		why = plant.Invalidf("line", "Something that a sender brought was refused: %q.", short(sent.Line))
	}
	if err := s.keep(w, r, station, sent.ID, sent, why); err != error(why) {
		return err
	}
	return ui.RenderJSON(w, http.StatusOK, map[string]any{"id": sent.ID, "message": why.Message})
}
