package api

import (
	"fmt"
	"net/http"
	"strings"
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
	Lot      string      `json:"lot"`
	Entries  []sentEntry `json:"entries"`
}

// sentEntry is the subgroup of one characteristic. A reading that is null is a part
// that was lost.
type sentEntry struct {
	Characteristic string    `json:"characteristic"` // id, name, or "machine / name"
	Unit           string    `json:"unit"`
	Setup          int       `json:"setup"`
	Readings       []*string `json:"readings"`
	Streams        []string  `json:"streams"` // ids or names, one a reading, lost ones included; or none
	Short          string    `json:"short"`
}

func (s *Surface) round(w http.ResponseWriter, r *http.Request) error {
	var sent sentRound
	body, err := read(r, &sent)
	if err != nil {
		return s.refuse(w, r, uuid.Nil, sent.ID, asText(body), err)
	}
	station, err := place(senderOf(r), sent.Station)
	if err != nil {
		return s.refuse(w, r, uuid.Nil, sent.ID, sent.content(), err)
	}
	round, err := s.understand(r, sent, station)
	if err != nil {
		if pe := problemOf(err); pe != nil && pe.Field == "station" {
			station = uuid.Nil // there is none of this number that could show it
		}
		return s.refuse(w, r, station, sent.ID, sent.content(), err)
	}
	answer, err := s.Store.Record(r.Context(), round)
	if err != nil {
		if pe := problemOf(err); pe != nil && (pe.Kind == plant.Conflict || pe.Field == "taken_at") {
			kept(w, station)
			return err // the record has set it aside
		}
		return s.keep(w, r, station, sent.ID, sent.content(), err)
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
	lot, err := plant.CleanTextWithin("lot", sent.Lot, plant.MaxName)
	if err != nil {
		return plant.Round{}, err
	}
	streams, err := s.streams(r, sent, station)
	if err != nil {
		return plant.Round{}, err
	}
	round := plant.Round{ID: sent.ID, Station: station, Lot: lot, DueAt: sent.DueAt, Occasion: occasion, TakenRaw: sent.TakenAt,
		Skew: skewOf(sent.SentAt, ui.FrameOf(r).Now), Source: "api", Device: senderOf(r).ID}
	for i, e := range sent.Entries {
		entry, err := e.understand(fmt.Sprintf("entries[%d]", i), st, known, streams)
		if err != nil {
			return plant.Round{}, err
		}
		round.Entries = append(round.Entries, entry)
	}
	return round, nil
}

// streams reads the streams of the station's machines when the round names any.
func (s *Surface) streams(r *http.Request, sent sentRound, station uuid.UUID) (map[uuid.UUID][]plant.Stream, error) {
	for _, e := range sent.Entries {
		if len(e.Streams) > 0 {
			return s.Store.StationStreams(r.Context(), station)
		}
	}
	return nil, nil
}

// understand brings an entry into the subgroup that it means. known are the set-ups of a
// round that is on record already, and streams those of the station's machines.
func (e sentEntry) understand(at string, st plant.StationState, known map[uuid.UUID]plant.Setup, streams map[uuid.UUID][]plant.Stream) (plant.Entry, error) {
	c, ok := find(st, e.Characteristic)
	switch {
	case !ok && c.ID != uuid.Nil:
		return plant.Entry{}, plant.Invalidf(at+".characteristic", "This station measures %q more than once, each on a machine of its own. Name it by its id, or with its machine: %q.",
			c.Name, named(c))
	case !ok:
		return plant.Entry{}, plant.Invalidf(at+".characteristic", "This station measures no %q.", short(e.Characteristic))
	}
	setup := c.Setup
	stored, again := known[c.ID]
	if again {
		setup = stored // it is sent again: it means what it meant
	}
	switch {
	case e.Unit == "":
		return plant.Entry{}, plant.Invalidf(at+".unit", "State the unit of the readings: %s is measured in %s.", c.Name, setup.Unit)
	case e.Unit != setup.Unit:
		return plant.Entry{}, plant.Invalidf(at+".unit", "Readings came in the unit %q: %s. %s is measured in %s, so they were not taken.", short(e.Unit), valuesOf(e.Readings), c.Name, setup.Unit)
	case len(e.Readings) > setup.Size:
		return plant.Entry{}, plant.Invalidf(at+".readings", "There are %d readings where %d are asked.", len(e.Readings), setup.Size)
	case len(e.Streams) > 0 && len(e.Streams) != len(e.Readings):
		return plant.Entry{}, plant.Invalidf(at+".streams", "There are %d streams for %d readings. Name one for each reading, lost ones included, or none.", len(e.Streams), len(e.Readings))
	}
	out := plant.Entry{Characteristic: c.ID, SetupVersion: setup.Version, ShortReason: e.Short}
	if e.Setup != 0 {
		out.SetupVersion = e.Setup
	}
	for i, text := range e.Readings {
		var stream uuid.UUID
		if len(e.Streams) > 0 {
			if stream, ok = streamOf(streams[c.MachineID], e.Streams[i], again); !ok {
				return plant.Entry{}, plant.Invalidf(fmt.Sprintf("%s.streams[%d]", at, i), "The machine of %s has no stream %q.", c.Name, short(e.Streams[i]))
			}
		}
		if text == nil {
			continue
		}
		if stream != uuid.Nil {
			out.Streams = append(out.Streams, stream)
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

// find looks for a characteristic by its id, by its name, or by "machine / name". Where
// more than one has the name it returns one of them and false.
func find(st plant.StationState, text string) (found plant.CharacteristicState, ok bool) {
	if id, err := uuid.Parse(text); err == nil {
		return only(st, func(c plant.CharacteristicState) bool { return c.ID == id })
	}
	found, ok = only(st, func(c plant.CharacteristicState) bool { return c.Name == text })
	if found.ID == uuid.Nil {
		return only(st, func(c plant.CharacteristicState) bool { return named(c) == text })
	}
	return found, ok
}

// only is the one characteristic that is meant, or one of several and false.
func only(st plant.StationState, meant func(plant.CharacteristicState) bool) (found plant.CharacteristicState, ok bool) {
	for _, c := range st.Characteristics {
		if meant(c) {
			if ok {
				return found, false
			}
			found, ok = c, true
		}
	}
	return found, ok
}

// named is a characteristic's name with its machine's before it.
func named(c plant.CharacteristicState) string { return c.Machine.Name + " / " + c.Name }

// streamOf finds a stream by its id or name. One that is retired takes no new readings;
// a round that is sent again names what it named.
func streamOf(streams []plant.Stream, text string, again bool) (uuid.UUID, bool) {
	for _, x := range streams {
		if (x.Name == text || x.ID.String() == text) && (again || !x.Retired) {
			return x.ID, true
		}
	}
	return uuid.Nil, false
}

func occasionOf(text string) (plant.Occasion, bool) {
	switch o := plant.Occasion(text); o {
	case plant.Unplanned, plant.ByTime, plant.ByParts, plant.StartUp, plant.Changeover, plant.ToolChange, plant.AfterAdjustment, plant.FirstPiece, plant.LastPiece:
		return o, true
	}
	return "", false
}

// short is text that stands in a sentence.
// valuesOf lists readings as they came.
func valuesOf(readings []*string) string {
	var out []string
	for _, text := range readings {
		if text != nil {
			out = append(out, *text)
		}
	}
	return short(strings.Join(out, "; "))
}

func short(text string) string {
	const most = 60
	text = plant.CleanText(text)
	if r := []rune(text); len(r) > most {
		return string(r[:most]) + "…"
	}
	return text
}
