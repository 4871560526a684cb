package station

import (
	"net/http"
	"strconv"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
	"holdfast/web/chart"
	"holdfast/web/ui"
)

// verdictView is the answer to a round, full width.
type verdictView struct {
	Tone      string // class of the band
	Symbol    string
	Title     string
	Sentences []string   // under the title, the gravest first
	Corrected string     // it was corrected since, and says so
	Aside     *asideView // what to keep aside
	Learning  []string   // "Axle seat: 12 of 20 subgroups collected."
	Round     string     // "This round, 10:42"
	Facts     []factView
	Next      string // when the next round is due
	NextIn    string
	Now       bool // it is due already
	Chart     string
	ChartOf   string
	Parts     string // drawing of the single readings
	Step      string // what to do
	StepMore  string
	Caution   bool
	Matter    *stepView // what is open after the round
	Back      string
	Correct   string
	Change    string
}

// factView is one characteristic of the round with its value.
type factView struct {
	Name  string
	Value string
	Note  string
	State plant.Condition
}

// stepView leads to taking or closing what is open.
type stepView struct {
	Href    string // its page
	Take    string // address of taking it; "" when it is taken already
	Version string
	TakenBy string
}

// told is one characteristic of a round with all that its answer is said from.
type told struct {
	plant.PartAnswer
	of        plant.CharacteristicState
	point     plant.Point
	found     bool // the subgroup stands; false when it was voided
	corrected bool
}

// now is the answer as it stands: as told, and after a correction what the record
// says of it.
func (t *told) now(st plant.StationState) {
	if !t.corrected {
		return
	}
	t.Firings = nil
	for _, s := range t.point.Standing() {
		t.Firings = append(t.Firings, s.Firing)
	}
	learning := t.of.Revision == nil
	t.Matter, t.Opened = uuid.Nil, false
	gravity := plant.Look
	if t.of.Matter != nil {
		t.Matter, gravity = t.of.Matter.ID, t.of.Matter.Kind()
	}
	t.Verdict, t.StillOpen = plant.Decide(t.Firings, learning, t.of.Matter != nil, gravity)
}

// showVerdict is GET /station/{station}/round/{round}.
func (s *Surface) showVerdict(w http.ResponseWriter, r *http.Request) error {
	st, err := s.stationIn(r, chart.VerdictLength)
	if err != nil {
		return err
	}
	id, err := idIn(r, "round")
	if err != nil {
		return err
	}
	answer, err := s.store.Answer(r.Context(), id)
	if err != nil {
		return err
	}
	if answer.Station != st.ID {
		return notFound(r)
	}
	parts, main, err := s.tell(r, st, answer)
	if err != nil {
		return err
	}
	f := ui.FrameOf(r).Format()
	v := newVerdict(f, st, answer, parts, main)
	shell := s.shell(r, st, v.Title)
	shell.Scripts = append(shell.Scripts, "js/station-saved.js")
	return ui.Render(w, r, http.StatusOK, verdictPage(shell, v))
}

// tell gathers the parts of an answer. main is the one that the page is about: the
// gravest, and of equals one that fired in this round.
func (s *Surface) tell(r *http.Request, st plant.StationState, answer plant.Answer) (parts []told, main int, err error) {
	for _, p := range answer.Parts {
		c, ok := characteristicOf(st, p.Characteristic)
		if !ok {
			continue // it has moved to another station since
		}
		t := told{PartAnswer: p, of: c}
		if t.point, t.found = pointOf(c.Points, p.Subgroup); !t.found {
			older, err := s.store.History(r.Context(), c.ID, plant.Stretch{To: answer.TakenAt, Last: chart.VerdictLength})
			if err != nil {
				return nil, 0, err
			}
			t.of.Points = older.Points
			t.point, t.found = pointOf(older.Points, p.Subgroup)
		}
		t.corrected = !t.found || t.point.Version > 1
		t.now(st)
		parts = append(parts, t)
		if n := len(parts) - 1; n > 0 && graver(parts[n], parts[main]) {
			main = n
		}
	}
	if len(parts) == 0 {
		return nil, 0, notFound(r)
	}
	return parts, main, nil
}

func graver(a, b told) bool {
	if a.Verdict != b.Verdict {
		return a.Verdict.Graver(b.Verdict) == a.Verdict
	}
	return len(a.Firings) > 0 && len(b.Firings) == 0
}

func pointOf(points []plant.Point, subgroup uuid.UUID) (plant.Point, bool) {
	for _, p := range points {
		if p.Subgroup == subgroup {
			return p, true
		}
	}
	return plant.Point{}, false
}

func newVerdict(f ui.Format, st plant.StationState, answer plant.Answer, parts []told, main int) verdictView {
	w, m := f.Words, parts[main]
	condition := ui.ConditionOf(m.Verdict)
	v := verdictView{Tone: ui.Tone(condition), Symbol: ui.SymbolOf(condition), Title: ui.VerdictWords(w, m.Verdict),
		Round: w.T("station.this-round", f.Clock(answer.TakenAt)), Back: path(st.ID),
		Correct: path(st.ID, "correct"), Change: path(st.ID, "change")}
	if v.Tone == "learning" {
		v.Tone = "calm"
	}
	v.Sentences = append(v.Sentences, sentences(f, m)...)
	var measured []plant.CharacteristicState
	for i, p := range parts {
		measured = append(measured, p.of)
		if i != main && (len(p.Firings) > 0 || p.StillOpen) {
			v.Sentences = append(v.Sentences, sentences(f, p)...)
		}
		if p.corrected {
			v.Corrected = w.T("station.corrected-since", ui.VerdictWords(w, answer.Verdict))
		}
		v.Facts = append(v.Facts, newFact(f, p))
		if p.of.Revision == nil && p.Verdict == plant.Learning {
			v.Learning = append(v.Learning, w.T("station.learning-count", p.of.Title(), p.of.Collected, limits.EnoughSubgroups))
		}
	}
	v.Sentences = append(v.Sentences, gaugeDoubts(f, measured)...)
	v.step(f, st, m, answer.TakenAt)
	v.next(f, st)
	v.draw(f, m)
	return v
}

// sentences say in words what the round did on one characteristic.
func sentences(f ui.Format, t told) []string {
	w, s := f.Words, t.of.Setup
	if !t.found {
		return []string{w.T("station.voided", t.of.Title())}
	}
	var out []string
	for _, firing := range t.Firings {
		if firing.Panel == plant.Reading {
			out = append(out, outsideWords(f, t)...)
			continue
		}
		out = append(out, w.T("station.fired", t.of.Title(), w.Firing(firing, s)))
	}
	switch {
	case t.StillOpen && t.of.Matter != nil && t.of.Matter.ID == t.Matter:
		out = append(out, w.T("station.still-open-since", t.of.Title(), f.Clock(t.of.Matter.OpenedTaken)))
	case t.StillOpen:
		out = append(out, w.T("station.still-open", t.of.Title()))
	}
	if len(out) > 0 {
		return out
	}
	if t.Verdict == plant.Learning {
		return []string{w.T("station.learning-text")}
	}
	return []string{w.T("station.leave-text")}
}

// outsideWords names the parts outside specification: "Part 3 is outside
// specification: 6.91 kN, upper limit 6.80 kN."
func outsideWords(f ui.Format, t told) []string {
	var out []string
	s := t.of.Setup
	for i, units := range t.point.Readings {
		reading := f.Reading(units, t.point.Stats.Decimals, s)
		switch s.Outside(units, t.point.Stats.Decimals) {
		case plant.High:
			out = append(out, f.Words.T("station.outside-high", t.of.Title(), i+1, reading, f.WithUnit(f.Decimal(*s.Upper), s.Unit)))
		case plant.Low:
			out = append(out, f.Words.T("station.outside-low", t.of.Title(), i+1, reading, f.WithUnit(f.Decimal(*s.Lower), s.Unit)))
		}
	}
	return out
}

func newFact(f ui.Format, t told) factView {
	w, s := f.Words, t.of.Setup
	v := factView{Name: w.T("station.average", t.of.Title(), t.point.Stats.N), State: ui.ConditionOf(t.Verdict)}
	if s.Size == 1 {
		v.Name = t.of.Title()
	}
	if !t.found {
		return v
	}
	mean := t.point.Stats.Mean()
	v.Value = f.Mean(mean, s)
	// How far it lies from target stands in large letters: beside a verdict to leave the
	// process alone it would be an invitation to adjust.
	if s.Target != nil && (t.Verdict == plant.Look || t.Verdict == plant.Hold) {
		off := mean - s.Target.Float()
		amount := f.WithUnit(f.Number(max(off, -off), s.MeanDecimals()), s.Unit)
		switch {
		case amount == f.WithUnit(f.Number(0, s.MeanDecimals()), s.Unit):
			v.Note = w.T("station.on-target")
		case off > 0:
			v.Note = w.T("station.above-target", amount)
		default:
			v.Note = w.T("station.below-target", amount)
		}
	}
	if t.point.Stats.N < s.Size {
		v.Name = w.T("station.average-short", v.Name, s.Size)
	}
	return v
}

// step says what is to be done now.
func (v *verdictView) step(f ui.Format, st plant.StationState, m told, taken time.Time) {
	w := f.Words
	if m.Verdict == plant.Hold {
		v.Caution = true
	}
	if m.Matter == uuid.Nil || m.of.Matter == nil || m.of.Matter.ID != m.Matter {
		if m.Verdict == plant.Look || m.Verdict == plant.Hold {
			v.Step, v.StepMore = w.T("station.step-closed"), ""
		}
		return
	}
	open := m.of.Matter
	v.Aside = instruction(f, m.of)
	v.Caution = v.Caution || v.Aside != nil
	v.Matter = &stepView{Href: path(st.ID, "matter", open.ID.String()), Version: strconv.Itoa(open.Version), TakenBy: open.TakenByName}
	if open.TakenByName == "" {
		v.Matter.Take = path(st.ID, "matter", open.ID.String(), "take")
	}
	if step, more, ok := fixWords(f, *open, taken, len(m.Firings) > 0); ok {
		v.Step, v.StepMore = step, more
		return
	}
	switch {
	case open.OnlyGauge():
		v.Step, v.StepMore = w.T("reach.step-gauge"), w.T("reach.step-gauge-more")
	case m.Verdict == plant.Hold:
		v.Step, v.StepMore = w.T("station.step-hold"), w.T("station.step-hold-more")
	case onlyBetter(m):
		v.Step, v.StepMore = w.T("station.step-better"), w.T("station.step-better-more")
	default:
		v.Step, v.StepMore = w.T("station.step-look"), w.T("station.step-look-more")
	}
}

func onlyBetter(t told) bool {
	for _, f := range t.Firings {
		if !f.Better(t.of.Setup) {
			return false
		}
	}
	return len(t.Firings) > 0
}

// next says when the station is next visited.
func (v *verdictView) next(f ui.Format, st plant.StationState) {
	for _, c := range byDue(st.Characteristics) {
		switch {
		case isDue(c):
			v.Now, v.Next, v.NextIn = true, f.Words.T("station.due-now"), c.Title()
			return
		case c.Due.State == plant.Later:
			v.Next, v.NextIn = f.Clock(c.Due.At), f.Words.T("station.next-in", c.Title(), f.Age(c.Due.At.Sub(f.Now)))
			return
		}
	}
}

// draw makes the picture of the last rounds, and of the single readings for a Hold.
func (v *verdictView) draw(f ui.Format, t told) {
	s := t.of.Setup
	points := upTo(t.of.Points, t.point)
	lo, hi := specAxis(s)
	signal := ""
	for _, firing := range t.Firings {
		if firing.Panel == plant.Location {
			signal = f.Words.RuleKey(firing.Rule, firing.Side)
			break
		}
	}
	v.ChartOf = f.Words.T("station.last-rounds", f.Words.T("station.name-unit", t.of.Title(), s.Unit))
	w, h := float64(verdictW), float64(verdictH)
	if t.Verdict == plant.Hold {
		w, h = besideW, besideH
	}
	c := chart.Verdict{ID: "verdict", Label: f.Words.T("station.verdict-label", t.of.Title()), W: w, H: h,
		Points: stationPoints(f, points, s, t.of), Limits: chartLimits(f, t.of.Revision, s), Signal: signal, Lo: lo, Hi: hi, Words: chartWords(f.Words)}
	v.Chart = c.SVG()
	if t.Verdict != plant.Hold || !t.found {
		return
	}
	readings := make([]float64, len(t.point.Readings))
	for i, units := range t.point.Readings {
		readings[i] = plant.Decimal{Units: units, Decimals: t.point.Stats.Decimals}.Float()
	}
	v.Parts = (&chart.Strip{ID: "verdict-parts", Label: f.Words.T("station.parts-label", t.of.Title()), W: stripW, H: besideH,
		Spec: chartSpec(f, s), Readings: readings, Size: len(readings), Words: chartWords(f.Words)}).SVG()
}

// upTo are the points up to this one, so that an older answer shows what was there.
func upTo(points []plant.Point, last plant.Point) []plant.Point {
	for i, p := range points {
		if p.Subgroup == last.Subgroup {
			return points[:i+1]
		}
	}
	return points
}
