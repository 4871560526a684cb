package api

import (
	"fmt"
	"net/http"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// sentRound is a round as it is sent.
type sentRound struct {
	ID       uuid.UUID   `json:"id"`
	Station  uuid.UUID   `json:"station"`
	TakenAt  time.Time   `json:"taken_at"`
	SentAt   time.Time   `json:"sent_at"`
	DueAt    time.Time   `json:"due_at"`
	Occasion string      `json:"occasion"`
	Entries  []sentEntry `json:"entries"`
}

// sentEntry is the subgroup of one characteristic. A reading that is null is a part
// that was lost.
type sentEntry struct {
	Characteristic string    `json:"characteristic"` // id or name
	Unit           string    `json:"unit"`
	Setup          int       `json:"setup"`
	Readings       []*string `json:"readings"`
	Short          string    `json:"short"`
}

func (s *Surface) round(w http.ResponseWriter, r *http.Request) error {
	var sent sentRound
	body, err := read(r, &sent)
	if err != nil {
		return s.keep(r, uuid.Nil, sent.ID, asText(body), err)
	}
	station, err := place(senderOf(r), sent.Station)
	if err != nil {
		return s.keep(r, uuid.Nil, sent.ID, sent.content(), err)
	}
	round, err := s.understand(r, sent, station)
	if err != nil {
		return s.keep(r, station, sent.ID, sent.content(), err)
	}
	answer, err := s.Store.Record(r.Context(), round)
	if err != nil {
		if pe := problemOf(err); pe != nil && pe.Field == "taken_at" {
			return err // the record has set it aside
		}
		return s.keep(r, station, sent.ID, sent.content(), err)
	}
	return ui.RenderJSON(w, http.StatusOK, answer)
}

// content is what is kept of a round that could not be taken: all but when it was sent,
// so that sending it again keeps nothing twice.
func (sent sentRound) content() sentRound {
	sent.SentAt = time.Time{}
	return sent
}

// understand brings what was sent into the round that it means.
func (s *Surface) understand(r *http.Request, sent sentRound, station uuid.UUID) (plant.Round, error) {
	if err := numbered(sent.ID); err != nil {
		return plant.Round{}, err
	}
	occasion, ok := occasionOf(sent.Occasion)
	switch {
	case !ok:
		return plant.Round{}, plant.Invalidf("occasion", "There is no such occasion.")
	case sent.TakenAt.IsZero():
		return plant.Round{}, plant.Invalidf("taken_at", "Say when the round was taken.")
	case len(sent.Entries) == 0:
		return plant.Round{}, plant.Invalidf("entries", "The round holds no readings.")
	case len(sent.Entries) > 50:
		return plant.Round{}, plant.Invalidf("entries", "A round holds at most 50 characteristics.")
	}
	st, err := s.Store.StationSetups(r.Context(), station)
	if plant.IsKind(err, plant.NotFound) {
		return plant.Round{}, plant.Invalidf("station", "There is no such station.")
	}
	if err != nil {
		return plant.Round{}, err
	}
	known, err := s.Store.RoundSetups(r.Context(), sent.ID)
	if err != nil {
		return plant.Round{}, err
	}
	round := plant.Round{ID: sent.ID, Station: station, DueAt: sent.DueAt, Occasion: occasion, TakenRaw: sent.TakenAt,
		Skew: skewOf(sent.SentAt, ui.FrameOf(r).Now), Source: "api", Device: senderOf(r).ID}
	for i, e := range sent.Entries {
		entry, err := e.understand(fmt.Sprintf("entries[%d]", i), st, known)
		if err != nil {
			return plant.Round{}, err
		}
		round.Entries = append(round.Entries, entry)
	}
	return round, nil
}

func (e sentEntry) understand(at string, st plant.StationState, known map[uuid.UUID]plant.Setup) (plant.Entry, error) {
	c, ok := find(st, e.Characteristic)
	if !ok {
		return plant.Entry{}, plant.Invalidf(at+".characteristic", "This station measures no %q.", short(e.Characteristic))
	}
	setup := c.Setup
	if stored, ok := known[c.ID]; ok {
		setup = stored // it is sent again: it means what it meant
	}
	switch {
	case e.Unit == "":
		return plant.Entry{}, plant.Invalidf(at+".unit", "State the unit of the readings: %s is measured in %s.", c.Name, setup.Unit)
	case e.Unit != setup.Unit:
		return plant.Entry{}, plant.Invalidf(at+".unit", "Readings in %s came where %s is measured in %s. They were not taken.", short(e.Unit), c.Name, setup.Unit)
	case len(e.Readings) > setup.Size:
		return plant.Entry{}, plant.Invalidf(at+".readings", "There are %d readings where %d are asked.", len(e.Readings), setup.Size)
	}
	out := plant.Entry{Characteristic: c.ID, SetupVersion: setup.Version, ShortReason: e.Short}
	if e.Setup != 0 {
		out.SetupVersion = e.Setup
	}
	for i, text := range e.Readings {
		if text == nil {
			continue
		}
		v, err := plant.ParseReading(*text, setup.Decimals)
		if err != nil {
			return plant.Entry{}, plant.Invalidf(fmt.Sprintf("%s.readings[%d]", at, i), "%q came as a reading of %s, which is measured in %s with %d decimals.",
				short(*text), c.Name, setup.Unit, setup.Decimals).Because(err)
		}
		out.Readings = append(out.Readings, v)
	}
	if len(out.Readings) < setup.Size && out.ShortReason == "" {
		return plant.Entry{}, plant.Invalidf(at+".short", "Say why there are only %d of %d readings.", len(out.Readings), setup.Size)
	}
	return out, nil
}

// find looks for a characteristic by its id or by its name, which must be the name of
// one only.
func find(st plant.StationState, text string) (found plant.CharacteristicState, ok bool) {
	id, err := uuid.Parse(text)
	for _, c := range st.Characteristics {
		if err == nil && c.ID == id {
			return c, true
		}
		if err != nil && c.Name == text {
			if ok {
				return plant.CharacteristicState{}, false
			}
			found, ok = c, true
		}
	}
	return found, ok
}

func occasionOf(text string) (plant.Occasion, bool) {
	switch o := plant.Occasion(text); o {
	case plant.Unplanned, plant.ByTime, plant.ByParts, plant.StartUp, plant.Changeover, plant.ToolChange, plant.AfterAdjustment, plant.FirstPiece, plant.LastPiece:
		return o, true
	}
	return "", false
}

// short is text that stands in a sentence.
func short(text string) string {
	const most = 60
	text = plant.CleanText(text)
	if r := []rune(text); len(r) > most {
		return string(r[:most]) + "…"
	}
	return text
}
