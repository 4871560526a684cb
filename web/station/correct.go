package station

import (
	"errors"
	"net/http"
	"strconv"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/auth"
	"holdfast/internal/plant"
	"holdfast/web/chart"
	"holdfast/web/ui"
)

// correctView is the last round of a station, to be corrected.
type correctView struct {
	Action  string
	None    bool // no round was taken here yet
	Taken   string
	By      string
	Parts   []correctPart
	Problem string
	MayVoid bool
	Back    string
}

// correctPart is one subgroup of the round.
type correctPart struct {
	Characteristic string
	Subgroup       string
	TakenAt        string
	Replaces       string
	What           string
	Note           string // it was corrected before, or voided
	Voided         bool
	Readings       []readingView
	Reasons        []choiceView
	ReasonProblem  string
	Short          []choiceView
	ShortNeeded    bool
	ShortProblem   string
	Problem        string
	SecretProblem  string
}

type choiceView struct {
	Value  string
	Name   string
	Chosen bool
}

// correction is what was posted, as typed.
type correction struct {
	plant.Correction
	raw      []string
	problems map[int]string
	part     correctPart // only its problems
}

func (s *Surface) showCorrection(w http.ResponseWriter, r *http.Request) error {
	st, err := s.stationIn(r, chart.VerdictLength)
	if err != nil {
		return err
	}
	return s.renderCorrection(w, r, http.StatusOK, st, nil, "")
}

func (s *Surface) renderCorrection(w http.ResponseWriter, r *http.Request, status int, st plant.StationState, typed *correction, problem string) error {
	frame := ui.FrameOf(r)
	f := frame.Format()
	v := correctView{Action: path(st.ID, "correct"), Problem: problem, MayVoid: frame.Person.May(plant.VoidRecords) && s.signer != nil, Back: path(st.ID)}
	last, err := s.store.LastRound(r.Context(), st.ID)
	switch {
	case plant.IsKind(err, plant.NotFound):
		v.None = true
	case err != nil:
		return err
	}
	v.Taken, v.By = f.Clock(last.TakenAt), last.PersonName
	for _, p := range last.Points {
		if c, ok := characteristicOf(st, p.Characteristic); ok {
			v.Parts = append(v.Parts, newCorrectPart(f, c, p, typed))
		}
	}
	return ui.Render(w, r, status, correctPage(s.shell(r, st, f.Words.T("station.correct-last")), v))
}

func newCorrectPart(f ui.Format, c plant.CharacteristicState, p plant.Point, typed *correction) correctPart {
	w := f.Words
	mine := typed != nil && typed.Subgroup == p.Subgroup
	v := correctPart{Characteristic: c.ID.String(), Subgroup: p.Subgroup.String(), TakenAt: p.TakenAt.UTC().Format(time.RFC3339Nano),
		Replaces: strconv.Itoa(p.Version), What: w.T("station.name-unit", c.Title(), c.Setup.Unit), Voided: p.Voided}
	if mine {
		v.ReasonProblem, v.ShortProblem, v.Problem, v.SecretProblem = typed.part.ReasonProblem, typed.part.ShortProblem, typed.part.Problem, typed.part.SecretProblem
	}
	switch {
	case p.Voided:
		v.Note = w.T("station.is-voided", reasonWords(f, p.Reason))
	case p.Version > 1:
		v.Note = w.T("station.is-corrected", p.Version, reasonWords(f, p.Reason))
	}
	size := len(p.Readings)
	if p.Setup == c.Setup.Version {
		size = max(size, c.Setup.Size)
	}
	for i := range size {
		id := v.Subgroup + "-" + strconv.Itoa(i)
		rv := readingView{ID: "correct-" + id, Label: w.T("station.part", i+1)}
		if i < len(p.Streams) {
			rv.From = c.Machine.StreamName(p.Streams[i])
		}
		switch {
		case mine:
			if i < len(typed.raw) {
				rv.Raw = typed.raw[i]
			}
			rv.Problem = typed.problems[i]
		case i < len(p.Readings):
			rv.Raw = f.Units(p.Readings[i], p.Stats.Decimals)
		}
		v.Readings = append(v.Readings, rv)
	}
	for _, reason := range plant.CorrectionReasons {
		v.Reasons = append(v.Reasons, choiceView{reason, reasonWords(f, reason), mine && typed.Reason == reason})
	}
	for _, reason := range shortReasons {
		chosen := p.ShortReason
		if mine {
			chosen = typed.ShortReason
		}
		v.Short = append(v.Short, choiceView{reason, w.T("station.short." + reason), chosen == reason})
	}
	v.ShortNeeded = p.ShortReason != "" || v.ShortProblem != ""
	return v
}

// reasonWords says a recorded reason in the language of the page.
func reasonWords(f ui.Format, reason string) string {
	if f.Words.Has("station.reason." + reason) {
		return f.Words.T("station.reason." + reason)
	}
	return reason
}

// correct is POST /station/{station}/correct.
func (s *Surface) correct(w http.ResponseWriter, r *http.Request) error {
	st, err := s.stationIn(r, chart.VerdictLength)
	if err != nil {
		return err
	}
	last, err := s.store.LastRound(r.Context(), st.ID)
	if err != nil {
		return err
	}
	c, point, err := readCorrection(r, st, last)
	if err != nil {
		return err
	}
	if point.Version == 0 {
		// Another round was taken meanwhile: the one that was seen is not the last.
		return s.renderCorrection(w, r, http.StatusConflict, st, nil, ui.FrameOf(r).Words.T("station.not-last"))
	}
	if c.Void {
		if err := s.signVoid(r, &c); err != nil {
			return err
		}
	}
	if c.bad() {
		return s.renderCorrection(w, r, http.StatusUnprocessableEntity, st, &c, "")
	}
	_, err = s.store.Correct(r.Context(), c.Correction)
	if err == nil {
		if c.Void {
			back(w, r, st.ID, "voided")
			return nil
		}
		ui.Redirect(w, r, path(st.ID, "round", last.ID.String()))
		return nil
	}
	words := ui.FrameOf(r).Words
	pe, ok := errors.AsType[*plant.Error](err)
	switch {
	case ok && pe.Kind == plant.Conflict:
		return s.renderCorrection(w, r, http.StatusConflict, st, nil, words.T("station.corrected-already"))
	case !ok || pe.Kind != plant.Invalid:
		return err
	case pe.Field == "reason":
		c.part.ReasonProblem = words.Problem(pe)
	case pe.Field == "short":
		c.part.ShortProblem = words.Problem(pe)
	default:
		c.part.Problem = words.Problem(pe)
	}
	return s.renderCorrection(w, r, http.StatusUnprocessableEntity, st, &c, "")
}

// bad reports whether a field must be mended.
func (c *correction) bad() bool {
	p := c.part
	return len(c.problems) > 0 || p.ReasonProblem != "" || p.ShortProblem != "" || p.Problem != "" || p.SecretProblem != ""
}

// readCorrection reads the form against the last round. The point is the zero value
// when the subgroup is not of the last round.
func readCorrection(r *http.Request, st plant.StationState, last plant.RoundRecord) (correction, plant.Point, error) {
	frame, form := ui.FrameOf(r), r.PostForm
	w := frame.Words
	c := correction{problems: map[int]string{}}
	id, err := uuid.Parse(form.Get("characteristic"))
	if err != nil {
		return c, plant.Point{}, notFound(r)
	}
	of, ok := characteristicOf(st, id)
	if !ok {
		return c, plant.Point{}, &plant.Error{Kind: plant.NotFound, Message: w.T("station.not-of-here")}
	}
	subgroup, err := uuid.Parse(form.Get("subgroup"))
	if err != nil {
		return c, plant.Point{}, notFound(r)
	}
	point, ok := pointOf(last.Points, subgroup)
	if !ok || point.Characteristic != id {
		return c, plant.Point{}, nil
	}
	c.Correction = plant.Correction{Characteristic: id, Subgroup: subgroup, TakenAt: point.TakenAt, Replaces: number(form.Get("replaces")),
		Void: form.Get("do") == "void", Reason: form.Get("reason"), Person: frame.Person.ID}
	if !contains(plant.CorrectionReasons, c.Reason) {
		c.Reason, c.part.ReasonProblem = "", w.T("station.say-why-corrected")
	}
	asked := len(point.Readings)
	if point.Setup == of.Setup.Version {
		asked = of.Setup.Size
	}
	for i, raw := range form["reading"] {
		raw = shorten(plant.CleanText(raw))
		c.raw = append(c.raw, raw)
		if raw == "" || c.Void {
			continue
		}
		units, err := plant.ParseReading(raw, point.Stats.Decimals)
		if err != nil {
			s := of.Setup
			s.Decimals = point.Stats.Decimals
			c.problems[i] = readingProblem(w, raw, s, false)
			continue
		}
		c.Readings = append(c.Readings, units)
	}
	if !c.Void {
		c.checkCount(r, asked)
	}
	return c, point, nil
}

func (c *correction) checkCount(r *http.Request, asked int) {
	w := ui.FrameOf(r).Words
	c.ShortReason = r.PostForm.Get("short")
	if c.ShortReason != "" && !contains(shortReasons, c.ShortReason) {
		c.ShortReason, c.part.ShortProblem = "", w.T("station.short-unknown")
		return
	}
	switch n := len(c.Readings); {
	case len(c.problems) > 0:
	case n == 0:
		c.part.Problem = w.T("station.no-reading")
	case n > asked:
		c.part.Problem = w.T("station.too-many", n, asked)
	case n < asked && c.ShortReason == "":
		c.part.ShortProblem = w.T("station.say-why-short", n, asked)
	case n == asked:
		c.ShortReason = ""
	}
}

// signVoid checks who voids: it is a supervisor's signature, so the secret is asked
// for again.
func (s *Surface) signVoid(r *http.Request, c *correction) error {
	frame := ui.FrameOf(r)
	if !frame.Person.May(plant.VoidRecords) || s.signer == nil {
		return &plant.Error{Kind: plant.Forbidden, Message: frame.Words.T("station.void-forbidden")}
	}
	secret := auth.Secret(r.PostForm.Get("password"))
	if secret == "" {
		c.part.SecretProblem = frame.Words.T("station.void-secret")
		return nil
	}
	person, err := s.signer.Check(r.Context(), frame.Person.Login, secret, frame.Addr)
	if pe, ok := errors.AsType[*plant.Error](err); ok {
		c.part.SecretProblem = frame.Words.Problem(pe)
		return nil
	}
	if err != nil {
		return err
	}
	if person.ID != frame.Person.ID || !person.May(plant.VoidRecords) {
		return &plant.Error{Kind: plant.Forbidden, Message: frame.Words.T("station.void-forbidden")}
	}
	return nil
}
