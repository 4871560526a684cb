package station

import (
	"errors"
	"net/http"
	"net/url"
	"strings"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
	"holdfast/web/words"
)

// Bounds of what one field of the form may hold.
const (
	maxTyped   = 40 // characters of a reading
	maxRetyped = 5  // earlier typings of one reading
)

// draft is a round as it stands in the form: what was typed, and what is wrong with it.
type draft struct {
	Round     uuid.UUID
	Due       time.Time
	Occasion  plant.Occasion
	Deviation bool
	Entries   []draftEntry
	Problem   string // about the whole
}

type draftEntry struct {
	Of           plant.CharacteristicState
	Setup        int // version that the sender saw
	Readings     []draftReading
	Extra        int // readings beyond what is asked
	Short        string
	Problem      string
	ShortProblem string
}

type draftReading struct {
	Raw     string
	Units   int64
	OK      bool
	First   []string  // earlier typings of it
	Keyed   uuid.UUID // who keyed it; Nil is whoever sends
	Stream  uuid.UUID // of the machine that the part came from; Nil: none was named
	Problem string
}

func emptyEntries(cs []plant.CharacteristicState) []draftEntry {
	out := make([]draftEntry, len(cs))
	for i, c := range cs {
		out[i] = draftEntry{Of: c, Setup: c.Setup.Version, Readings: make([]draftReading, c.Setup.Size)}
		for j, stream := range plant.NextStreams(c.Machine.InUse(), c.Setup.Size, lastStreams(c)) {
			out[i].Readings[j].Stream = stream
		}
	}
	return out
}

// lastStreams are the streams of the newest subgroup.
func lastStreams(c plant.CharacteristicState) []uuid.UUID {
	if len(c.Points) == 0 {
		return nil
	}
	return c.Points[len(c.Points)-1].Streams
}

// readDraft reads the posted form. What it cannot belong to is an error; what a
// person can mend is marked in the draft.
func readDraft(r *http.Request, st plant.StationState, now time.Time) (draft, error) {
	form, w := r.PostForm, ui.FrameOf(r).Words
	d := draft{Deviation: form.Get("entry") == deviationEntry}
	var err error
	if d.Round, err = uuid.Parse(form.Get("round")); err != nil || d.Round == uuid.Nil {
		return d, plant.Invalidf("round", "%s", w.T("station.no-number"))
	}
	if d.Due, d.Occasion, err = answers(form, w, now); err != nil {
		return d, err
	}
	ids := form["characteristic"]
	if len(ids) == 0 || len(ids) > 50 {
		return d, plant.Invalidf("characteristic", "%s", w.T("station.no-characteristic"))
	}
	seen := make(map[uuid.UUID]bool)
	for _, text := range ids {
		id, err := uuid.Parse(text)
		if err != nil {
			return d, notFound(r)
		}
		c, ok := characteristicOf(st, id)
		if !ok {
			return d, &plant.Error{Kind: plant.NotFound, Message: w.T("station.not-of-here")}
		}
		if seen[id] {
			return d, plant.Invalidf("characteristic", "%s", w.T("station.twice"))
		}
		seen[id] = true
		d.Entries = append(d.Entries, readEntry(form, w, c, d.Deviation))
	}
	return d, nil
}

// answers reads what the round answers: the due time and the occasion that the page
// showed.
func answers(form url.Values, w *words.Printer, now time.Time) (time.Time, plant.Occasion, error) {
	occasion := plant.Occasion(form.Get("occasion"))
	if occasion != plant.Unplanned && !w.Has("ui.occasion."+string(occasion)) {
		return time.Time{}, "", plant.Invalidf("occasion", "%s", w.T("station.no-occasion"))
	}
	text := form.Get("due")
	if text == "" {
		return time.Time{}, occasion, nil
	}
	due, err := time.Parse(time.RFC3339Nano, text)
	if err != nil || due.After(now.Add(plant.MaxAhead)) || due.Year() < 2000 {
		return time.Time{}, "", plant.Invalidf("due", "%s", w.T("station.no-due"))
	}
	return plant.CutTime(due), occasion, nil
}

func readEntry(form url.Values, w *words.Printer, c plant.CharacteristicState, deviation bool) draftEntry {
	id := c.ID.String()
	e := draftEntry{Of: c, Readings: make([]draftReading, c.Setup.Size)}
	// An unreadable version is version 0, which no set-up has: the save is refused as
	// having seen another set-up.
	e.Setup = number(form.Get("setup-" + id))
	typed, keyed, streams := form["reading-"+id], form["keyed-"+id], form["stream-"+id]
	for i, raw := range typed {
		raw = plant.CleanText(raw)
		if i >= c.Setup.Size {
			if raw != "" {
				e.Extra++
			}
			continue
		}
		r := &e.Readings[i]
		r.Raw = shorten(raw)
		if i < len(keyed) && r.Raw != "" {
			r.Keyed, _ = uuid.Parse(keyed[i]) // what cannot be read is nobody's: whoever sends answers for it
		}
		if i < len(streams) {
			if r.Stream, _ = uuid.Parse(streams[i]); r.Stream == uuid.Nil && r.Raw != "" {
				e.Problem = w.T("station.no-stream", i+1)
			}
		}
		for _, first := range form["first-"+id+"-"+itoa(i)] {
			if first = shorten(plant.CleanText(first)); first != "" && len(r.First) < maxRetyped {
				r.First = append(r.First, first)
			}
		}
		if r.Raw == "" {
			continue
		}
		var err error
		if r.Units, err = parse(raw, c.Setup, deviation); err != nil {
			r.Problem = readingProblem(w, raw, c.Setup, deviation)
			continue
		}
		r.OK = true
	}
	e.Short = form.Get("short-" + id)
	return e
}

func shorten(s string) string {
	if runes := []rune(s); len(runes) > maxTyped {
		return string(runes[:maxTyped])
	}
	return s
}

// parse reads one reading as typed: in full, or as deviation from the target.
func parse(raw string, s plant.Setup, deviation bool) (int64, error) {
	if deviation && s.Target != nil {
		return plant.ParseDeviation(raw, s.Decimals, *s.Target)
	}
	return plant.ParseReading(raw, s.Decimals)
}

// readingProblem says in words why text that does not parse is no reading.
func readingProblem(w *words.Printer, raw string, s plant.Setup, deviation bool) string {
	decimals := s.Decimals
	if deviation && s.Target != nil {
		decimals = 0
	}
	if _, err := plant.ParseReading(raw, plant.MaxDecimals); err == nil {
		switch {
		case deviation && s.Target != nil:
			return w.T("station.whole-digits")
		case decimals == 0:
			return w.T("station.whole-numbers")
		}
		return w.T("station.too-many-decimals", decimals)
	}
	if strings.Trim(raw, "+-\u22120123456789.,") == "" && strings.ContainsAny(raw, "0123456789") && strings.Count(raw, ".")+strings.Count(raw, ",") < 2 {
		if strings.LastIndexAny(raw, "+-") <= 0 {
			return w.T("station.too-large")
		}
	}
	return w.T("station.not-a-number")
}

// check marks in the draft what keeps it from being saved and reports whether
// anything does.
func (d *draft) check(w *words.Printer) bool {
	bad := false
	for i := range d.Entries {
		bad = d.Entries[i].check(w, d.Deviation) || bad
	}
	return bad
}

func (e *draftEntry) check(w *words.Printer, deviation bool) (bad bool) {
	s := e.Of.Setup
	n, wrong := 0, 0
	for i := range e.Readings {
		r := &e.Readings[i]
		switch {
		case r.Problem != "":
			wrong++
		case r.OK && suspect(e.Of, *r, deviation):
			// Typed once more, with eyes on the gauge: what was typed first is kept
			// beside it, and the field is empty so that it is really typed.
			r.First = append(r.First, r.Raw)
			r.Raw, r.OK, r.Problem = "", false, w.T("station.look-at-gauge")
			wrong++
		case r.OK:
			n++
		}
	}
	if e.Short != "" && !contains(shortReasons, e.Short) {
		e.Short, e.ShortProblem = "", w.T("station.short-unknown")
		return true
	}
	switch {
	case wrong > 0 || e.Problem != "":
		return true
	case e.Extra > 0:
		e.Problem = w.T("station.too-many", n+e.Extra, s.Size)
	case n == 0:
		e.Problem = w.T("station.no-reading")
	case n < s.Size && e.Short == "":
		e.ShortProblem = w.T("station.say-why-short", n, s.Size)
	}
	return e.Problem != "" || e.ShortProblem != ""
}

// round is the draft as it is sent to the record.
func (d draft) round(station, person uuid.UUID, taken time.Time, skew time.Duration) plant.Round {
	r := plant.Round{ID: d.Round, Station: station, DueAt: d.Due, Occasion: d.Occasion, TakenRaw: taken, Skew: skew,
		Source: "station", Person: person}
	for _, e := range d.Entries {
		out := plant.Entry{Characteristic: e.Of.ID, SetupVersion: e.Setup}
		for _, reading := range e.Readings {
			if !reading.OK {
				continue
			}
			for _, first := range reading.First {
				out.Retyped = append(out.Retyped, plant.Retyped{Index: len(out.Readings), First: first})
			}
			out.Readings = append(out.Readings, reading.Units)
		}
		out.KeyedBy, out.Streams = e.keyedBy(person), e.streams()
		if len(out.Readings) < e.Of.Setup.Size {
			out.ShortReason = e.Short
		}
		r.Entries = append(r.Entries, out)
	}
	return r
}

// streams are the streams of the readings; empty where the form named none.
func (e draftEntry) streams() []uuid.UUID {
	var out []uuid.UUID
	for _, r := range e.Readings {
		if r.OK && r.Stream != uuid.Nil {
			out = append(out, r.Stream)
		}
	}
	return out
}

// saveRound is POST /station/{station}/round. A round that is right needs to know only
// what is measured here and by which limits; how the station stands is read when the
// page must be shown again.
func (s *Surface) saveRound(w http.ResponseWriter, r *http.Request) error {
	id, err := idIn(r, "station")
	if err != nil {
		return err
	}
	st, err := s.store.StationSetups(r.Context(), id)
	if err != nil {
		return err
	}
	frame := ui.FrameOf(r)
	d, err := readDraft(r, st, frame.Now)
	if err != nil {
		return err
	}
	strangers, err := s.strangers(r, &d)
	if err != nil {
		return err
	}
	if d.check(frame.Words) || strangers {
		return s.again(w, r, http.StatusUnprocessableEntity, d)
	}
	taken, skew, own, err := sentTime(r.PostForm, frame.Now)
	if err != nil {
		return s.refused(w, r, d, err)
	}
	if !own {
		taken = s.firstTaken(r, d.Round, frame.Now)
	}
	answer, err := s.store.Record(r.Context(), d.round(st.ID, frame.Person.ID, taken, skew))
	if err != nil {
		s.stamps.forget(d.Round)
		return s.refused(w, r, d, err)
	}
	keepEntry(w, r, d.Deviation)
	ui.Redirect(w, r, path(st.ID, "round", answer.Round.String()))
	return nil
}

// firstTaken is the time of a round that came without one: that of its first send,
// when it was sent before.
func (s *Surface) firstTaken(r *http.Request, round uuid.UUID, now time.Time) time.Time {
	if a, err := s.store.Answer(r.Context(), round); err == nil {
		return a.TakenAt
	}
	return s.stamps.of(round, now)
}

// refused shows the form again with what the record said against it. A conflict gets
// a new number: under the old one something else is on record.
func (s *Surface) refused(w http.ResponseWriter, r *http.Request, d draft, err error) error {
	pe, ok := errors.AsType[*plant.Error](err)
	if !ok || pe.Kind != plant.Invalid && pe.Kind != plant.Conflict {
		return err
	}
	d.Problem = ui.FrameOf(r).Words.Problem(pe)
	if pe.Kind == plant.Conflict {
		d.Round = uuid.Must(uuid.NewV7())
	}
	return s.again(w, r, ui.StatusOf(pe.Kind), d)
}

// again shows the form with what was typed, beside the station as it stands.
func (s *Surface) again(w http.ResponseWriter, r *http.Request, status int, d draft) error {
	st, err := s.stationIn(r, 12)
	if err != nil {
		return err
	}
	for i := range d.Entries {
		if c, ok := characteristicOf(st, d.Entries[i].Of.ID); ok {
			d.Entries[i].Of = c
		}
	}
	f := ui.FrameOf(r).Format()
	round := fillRound(f, st, d)
	return s.renderWork(w, r, status, st, workView{Side: newSide(f, st), Round: &round})
}

// keepEntry remembers at this tablet how readings are typed.
func keepEntry(w http.ResponseWriter, r *http.Request, deviation bool) {
	value := "full"
	if deviation {
		value = deviationEntry
	}
	if c, err := r.Cookie(entryCookie); err == nil && c.Value == value {
		return
	}
	http.SetCookie(w, &http.Cookie{Name: entryCookie, Value: value, Path: "/station", MaxAge: 365 * 24 * 60 * 60,
		Secure: ui.FrameOf(r).Secure, SameSite: http.SameSiteLaxMode}) // the script of the keypad sets it too
}

func contains(list []string, s string) bool {
	for _, have := range list {
		if have == s {
			return true
		}
	}
	return false
}

// firstName is the field that carries the earlier typings of a reading; its id ends
// in the number of the reading.
func firstName(part, readingID string) string {
	return "first-" + part + readingID[strings.LastIndexByte(readingID, '-'):]
}
