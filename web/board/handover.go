package board

import (
	"context"
	"fmt"
	"net/http"
	"net/url"
	"strconv"
	"strings"
	"time"

	"github.com/go-chi/chi/v5"
	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// HandoverStore is what the handover needs of the plant's record.
type HandoverStore interface {
	ShiftSummaries(ctx context.Context, span plant.ShiftSpan, lines ...uuid.UUID) ([]plant.ShiftSummary, error)
	ClosedMatters(ctx context.Context, from, to time.Time, lines ...uuid.UUID) ([]plant.Matter, error)
	RootOn(ctx context.Context, day string) (*plant.DailyRoot, error)
	WriteNote(ctx context.Context, n plant.ShiftNote) error
	ClearNote(ctx context.Context, note, person uuid.UUID) error
	ConfirmHandover(ctx context.Context, line uuid.UUID, span plant.ShiftSpan, person uuid.UUID) error
}

const handoverAddress = "/board/handover"

func (b *Board) handoverRoutes(r chi.Router) {
	r.Get("/handover", ui.Handle(b.log, b.handover))
	r.With(ui.Require(plant.HandOver)).Post("/handover/note", ui.Handle(b.log, b.writeNote))
	r.With(ui.Require(plant.HandOver)).Post("/handover/note/{note}/clear", ui.Handle(b.log, b.clearNote))
	r.With(ui.Require(plant.HandOver)).Post("/handover/read", ui.Handle(b.log, b.confirmRead))
}

// handoverChoice is which shift, which lines, and how the causes are gathered.
type handoverChoice struct {
	Line   uuid.UUID // Nil: all
	Span   plant.ShiftSpan
	Days   int // of causes; 0: the shift
	ByTime bool
}

// causeDays are the stretches that causes can be gathered over, in days; 0 is the shift.
var causeDays = []int{0, 7, 30}

// oldestShift is how far back a handover may be asked for.
const oldestShift = 5 * 366 * 24 * time.Hour

func readHandover(q url.Values, p plant.Plant, now time.Time) (handoverChoice, error) {
	c := handoverChoice{Span: p.SpanAt(now), ByTime: q.Get("by") == "time"}
	if text := q.Get("line"); text != "" {
		id, err := uuid.Parse(text)
		if err != nil {
			return c, plant.NotFoundf("", "There is no such line.")
		}
		c.Line = id
	}
	if text := q.Get("shift"); text != "" {
		at, err := time.Parse(time.RFC3339, text)
		if err != nil || at.After(now) || at.Before(now.Add(-oldestShift)) {
			return c, plant.NotFoundf("", "There is no such shift.")
		}
		c.Span = p.SpanAt(at)
	}
	for _, d := range causeDays {
		if q.Get("causes") == strconv.Itoa(d) {
			c.Days = d
		}
	}
	return c, nil
}

// address is where the choice is shown, with some of it changed.
func (c handoverChoice) address(change func(*handoverChoice)) string {
	if change != nil {
		change(&c)
	}
	q := url.Values{"shift": {c.Span.From.UTC().Format(time.RFC3339)}}
	if c.Line != uuid.Nil {
		q.Set("line", c.Line.String())
	}
	if c.Days > 0 {
		q.Set("causes", strconv.Itoa(c.Days))
	}
	if c.ByTime {
		q.Set("by", "time")
	}
	return handoverAddress + "?" + q.Encode()
}

func (b *Board) handover(w http.ResponseWriter, r *http.Request) error {
	return b.showHandover(w, r, http.StatusOK, nil, "")
}

// showHandover shows the page, with what was wrong with a note that was typed.
func (b *Board) showHandover(w http.ResponseWriter, r *http.Request, status int, problem error, typed string) error {
	f := ui.FrameOf(r)
	q := r.URL.Query()
	if problem != nil {
		q = url.Values{"line": {r.PostForm.Get("back-line")}, "shift": {r.PostForm.Get("shift")}}
	}
	c, err := readHandover(q, f.Plant, f.Now)
	if err != nil {
		return err
	}
	var only []uuid.UUID
	if c.Line != uuid.Nil {
		only = append(only, c.Line)
	}
	all, err := b.handovers.ShiftSummaries(r.Context(), c.Span)
	if err != nil {
		return err
	}
	from, to := c.Span.From, c.Span.To
	if c.Days > 0 {
		if f.Now.Before(to) {
			to = f.Now
		}
		from = to.AddDate(0, 0, -c.Days)
	}
	closed, err := b.handovers.ClosedMatters(r.Context(), from, to, only...)
	if err != nil {
		return err
	}
	until := c.Span.To
	if f.Now.Before(until) {
		until = f.Now
	}
	root, err := b.handovers.RootOn(r.Context(), until.In(f.Plant.Location).Format(time.DateOnly))
	if err != nil {
		return err
	}
	s := ui.ShellFor(r, ui.Board, f.Words.T("handover.title"))
	s.Path = c.address(nil)
	s.Styles = []string{"css/handover.css"}
	s.Scripts = []string{"js/handover.js"}
	s.OwnMain = true
	s.Bar = place(s.Plant.Name, newHead(s.Format, s.Plant))
	if !c.Span.Over(f.Now) {
		s.Topics = []string{ui.TopicBoard}
	}
	v := newHandover(s, c, all, closed, root)
	v.May = f.SignedIn && f.Person.May(plant.HandOver)
	v.Problem, v.Typed = ui.ProblemOf(f.Words, problem, "text"), typed
	return ui.Render(w, r, status, handoverPage(s, v))
}

func (b *Board) writeNote(w http.ResponseWriter, r *http.Request) error {
	if err := ui.ParseForm(w, r); err != nil {
		return err
	}
	f := ui.FrameOf(r)
	id, err := uuid.Parse(r.PostForm.Get("id"))
	if err != nil {
		return plant.Invalidf("text", "Write what the next shift must know.")
	}
	line, err := uuid.Parse(r.PostForm.Get("line"))
	if err != nil {
		return plant.NotFoundf("", "There is no such line.")
	}
	text := r.PostForm.Get("text")
	err = b.handovers.WriteNote(r.Context(), plant.ShiftNote{ID: id, Line: line, Text: text, WrittenByID: f.Person.ID})
	if plant.IsKind(err, plant.Invalid) {
		return b.showHandover(w, r, http.StatusUnprocessableEntity, err, text)
	}
	return b.back(w, r, err)
}

func (b *Board) clearNote(w http.ResponseWriter, r *http.Request) error {
	if err := ui.ParseForm(w, r); err != nil {
		return err
	}
	id, err := uuid.Parse(chi.URLParam(r, "note"))
	if err != nil {
		return ui.NotFound(r)
	}
	return b.back(w, r, b.handovers.ClearNote(r.Context(), id, ui.FrameOf(r).Person.ID))
}

func (b *Board) confirmRead(w http.ResponseWriter, r *http.Request) error {
	if err := ui.ParseForm(w, r); err != nil {
		return err
	}
	f := ui.FrameOf(r)
	line, err := uuid.Parse(r.PostForm.Get("line"))
	if err != nil {
		return plant.NotFoundf("", "There is no such line.")
	}
	from, err := time.Parse(time.RFC3339, r.PostForm.Get("shift"))
	if err != nil {
		return plant.NotFoundf("", "There is no such shift.")
	}
	span := f.Plant.SpanAt(from)
	if !span.From.Equal(from) {
		return plant.NotFoundf("", "There is no such shift.")
	}
	return b.back(w, r, b.handovers.ConfirmHandover(r.Context(), line, span, f.Person.ID))
}

// back leads to the handover that a form came from.
func (b *Board) back(w http.ResponseWriter, r *http.Request, err error) error {
	if err != nil {
		return err
	}
	q := url.Values{"shift": {r.PostForm.Get("shift")}}
	if line := r.PostForm.Get("back-line"); line != "" {
		q.Set("line", line)
	}
	ui.Redirect(w, r, handoverAddress+"?"+q.Encode())
	return nil
}

// handoverView is the page.
type handoverView struct {
	Heading, When string
	Running       bool // the shift is not over
	Earlier       string
	Later         string // "" on the newest
	Lines         []handoverLink
	Figures       []handoverFigure
	Sections      []lineView
	Causes        causesView
	Root          *rootView
	May           bool
	Shift         string // as forms send it
	BackLine      string
	Problem       string
	Typed         string
}

type handoverLink struct {
	Name, Address string
	Chosen        bool
}

// handoverFigure is one number of the shift, with what makes it up.
type handoverFigure struct {
	Label, Value, Detail string
	Tone                 string // of what must be seen first; "" calm
}

// lineView is one line of the floor.
type lineView struct {
	ID, Name    string
	NoteID      string
	Stations    []stationKeptView
	Open        []handoverMatter
	Contained   []handoverContained
	Ended       []handoverMatter
	Corrections []handoverCorrection
	Changes     []handoverChange
	MoreChanges string

	MoreContained string
	Notes         []handoverNote
	Readers       []string
	Over          bool
}

type stationKeptView struct {
	Name, Promised, Good, Late, Missed, Besides string
	Short                                       bool // something was late or missed
}

type handoverMatter struct {
	Address, Station, Name, Why, Age, Opened, Taken, Ended string
	Kind                                                   plant.Condition
}

type handoverContained struct {
	Address, Station, Name, Quantity, Where, Since string
}

type handoverCorrection struct{ When, What, Reason string }

type handoverChange struct{ When, Where, What, Note string }

type handoverNote struct{ ID, Text, By, Cleared string }

type rootView struct{ Root, Made string }

type causesView struct {
	Spans  []handoverLink
	Orders []handoverLink
	Rows   []causeView
	None   bool
}

type causeView struct {
	Cause, Count, Out, Share string
	Width                    string // of 100
}

func newHandover(s ui.Shell, c handoverChoice, all []plant.ShiftSummary, closed []plant.Matter, root *plant.DailyRoot) handoverView {
	f, w := s.Format, s.Words
	v := handoverView{
		Heading: f.Day(c.Span.From),
		When:    w.T("handover.when", f.Clock(c.Span.From), f.Time(c.Span.To)),
		Running: !c.Span.Over(f.Now), Shift: c.Span.From.UTC().Format(time.RFC3339),
	}
	if len(s.Plant.Shifts) > 0 {
		v.Heading = w.T("handover.heading", c.Span.Name, v.Heading)
	}
	v.Earlier = c.address(func(c *handoverChoice) { c.Span = s.Plant.SpanAt(c.Span.From.Add(-time.Second)) })
	if !v.Running {
		v.Later = c.address(func(c *handoverChoice) { c.Span = s.Plant.SpanAt(c.Span.To) })
	}
	v.Lines = append(v.Lines, handoverLink{w.T("handover.all-lines"), c.address(func(c *handoverChoice) { c.Line = uuid.Nil }), c.Line == uuid.Nil})
	shown := make([]plant.ShiftSummary, 0, len(all))
	for _, sum := range all {
		v.Lines = append(v.Lines, handoverLink{sum.Line.Name, c.address(func(c *handoverChoice) { c.Line = sum.Line.ID }), c.Line == sum.Line.ID})
		if c.Line == uuid.Nil || c.Line == sum.Line.ID {
			shown = append(shown, sum)
			v.Sections = append(v.Sections, newLineView(f, sum))
		}
	}
	if c.Line != uuid.Nil {
		v.BackLine = c.Line.String()
	}
	v.Figures = handoverFigures(f, shown)
	v.Causes = newCauses(f, c, closed)
	if root != nil {
		v.Root = &rootView{Root: fmt.Sprintf("%x", root.Root), Made: w.T("handover.root-made", f.Clock(root.At), root.Chains)}
	}
	return v
}

func handoverFigures(f ui.Format, list []plant.ShiftSummary) []handoverFigure {
	w := f.Words
	var kept plant.Kept
	var opened, taken, closed, open, places, parts, prompted, unprompted, changes, unstated int
	for _, s := range list {
		kept = kept.Add(s.Kept())
		o, t, c, still := s.Counts()
		opened, taken, closed, open = opened+o, taken+t, closed+c, open+still
		for _, k := range s.Contained {
			places++
			parts += k.Left()
			if !k.Stated() {
				unstated++
			}
		}
		for _, h := range s.Changes {
			switch {
			case h.Kind != plant.Adjustment:
				changes++
			case h.Prompted:
				prompted++
			default:
				unprompted++
			}
		}
	}
	out := []handoverFigure{
		{Label: w.T("handover.samples"), Value: w.T("handover.of", f.Count(kept.Good+kept.Late), f.Count(kept.Promised)), Detail: w.T("handover.samples-detail", kept.Late, kept.Missed, kept.Besides)},
		{Label: w.T("handover.matters"), Value: f.Count(open), Detail: w.T("handover.matters-detail", opened, taken, closed)},
		{Label: w.T("handover.contained"), Value: f.Count(parts), Detail: w.T("handover.contained-detail", places, unstated)},
		{Label: w.T("handover.adjustments"), Value: f.Count(prompted + unprompted), Detail: w.T("handover.adjustments-detail", prompted, unprompted, changes)},
	}
	if kept.Missed > 0 {
		out[0].Tone = "due"
	}
	if open > 0 {
		out[1].Tone = "look"
	}
	if places > 0 {
		out[2].Tone = "hold"
	}
	return out
}

// So much of a line is listed, the oldest first; the rest is counted.
const (
	changesShown   = 40
	containedShown = 15
)

func newLineView(f ui.Format, sum plant.ShiftSummary) lineView {
	w := f.Words
	v := lineView{ID: sum.Line.ID.String(), Name: sum.Line.Name, NoteID: uuid.Must(uuid.NewV7()).String(), Over: sum.Span.Over(f.Now)}
	for _, st := range sum.Stations {
		v.Stations = append(v.Stations, stationKeptView{st.Station.Name, f.Count(st.Promised), f.Count(st.Good), f.Count(st.Late), f.Count(st.Missed), f.Count(st.Besides), st.Late+st.Missed > 0})
	}
	for _, m := range sum.StillOpen() {
		v.Open = append(v.Open, newHandoverMatter(f, m, sum.Until))
	}
	for _, m := range sum.Ended() {
		v.Ended = append(v.Ended, newHandoverMatter(f, m, sum.Until))
	}
	for i, c := range sum.Contained {
		if i == containedShown {
			v.MoreContained = w.T("handover.more-contained", len(sum.Contained)-containedShown)
			break
		}
		row := handoverContained{Address: chartAddress(c.Station.ID, c.Characteristic.ID), Station: c.Station.Name, Name: c.Characteristic.Name, Since: f.Clock(c.OpenedAt)}
		if c.Matter != uuid.Nil && c.MatterClosed.IsZero() {
			row.Address = matterAddress(c.Station.ID, c.Characteristic.ID, c.Matter)
		}
		row.Quantity = w.T("handover.parts", c.Left())
		if !c.Stated() {
			row.Quantity = w.T("handover.not-stated")
		}
		place, tag := c.Where()
		row.Where = strings.Join(nonEmpty(place, tag), ", ")
		v.Contained = append(v.Contained, row)
	}
	for _, c := range sum.Corrections {
		what := w.T("handover.corrected", len(c.Withdrew), c.StationName, c.Name, f.Clock(c.TakenAt))
		if c.Voided {
			what = w.T("handover.voided", len(c.Withdrew), c.StationName, c.Name, f.Clock(c.TakenAt))
		}
		v.Corrections = append(v.Corrections, handoverCorrection{When: f.Clock(c.RecordedAt), What: what, Reason: c.Reason})
	}
	for i, h := range sum.Changes {
		if i == changesShown {
			v.MoreChanges = w.T("handover.more-changes", len(sum.Changes)-changesShown)
			break
		}
		v.Changes = append(v.Changes, newHandoverChange(f, h))
	}
	for _, n := range sum.Notes {
		row := handoverNote{ID: n.ID.String(), Text: n.Text, By: w.T("handover.by", n.WrittenBy, f.Clock(n.WrittenAt))}
		if !n.ClearedAt.IsZero() {
			row.Cleared = w.T("handover.cleared-by", n.ClearedBy, f.Clock(n.ClearedAt))
		}
		v.Notes = append(v.Notes, row)
	}
	for _, r := range sum.Readers {
		v.Readers = append(v.Readers, w.T("handover.by", r.Name, f.Clock(r.At)))
	}
	return v
}

func nonEmpty(texts ...string) (out []string) {
	for _, t := range texts {
		if t != "" {
			out = append(out, t)
		}
	}
	return out
}

func newHandoverMatter(f ui.Format, m plant.MatterOfShift, until time.Time) handoverMatter {
	w := f.Words
	v := handoverMatter{
		Address: matterAddress(m.Station, m.Characteristic, m.ID), Station: m.StationName, Name: m.Name, Kind: ui.ConditionOf(m.Kind()),
		Age: f.Age(m.Age(until)), Opened: f.Clock(m.OpenedAt),
	}
	var said []string
	for _, l := range m.Lines {
		if !l.Withdrawn {
			said = append(said, w.Firing(l.Firing, m.Setup))
		}
	}
	v.Why = strings.Join(said, "; ")
	if len(said) == 0 {
		v.Why = w.T("board.withdrawn")
	}
	if !m.TakenAt.IsZero() && m.TakenAt.Before(until) {
		v.Taken = w.T("board.taken", m.TakenByName, f.Clock(m.TakenAt))
	} else {
		v.Taken = w.T("handover.not-taken")
	}
	if !m.OpenAt(until) {
		v.Ended = w.T("handover.ended", f.Clock(m.ClosedAt), causeOf(f, m.Matter))
	}
	return v
}

func causeOf(f ui.Format, m plant.Matter) string {
	switch {
	case m.Closing == plant.WithdrawnBy:
		return f.Words.T("handover.withdrawn")
	case m.Action == "":
		return m.Cause
	}
	return f.Words.T("handover.cause-action", m.Cause, m.Action)
}

func newHandoverChange(f ui.Format, h plant.ChangeOfShift) handoverChange {
	w := f.Words
	v := handoverChange{When: f.Clock(h.HappenedAt), Where: h.MachineName, Note: h.Note}
	switch {
	case h.Kind == plant.Adjustment && h.Size != nil && h.Prompted:
		v.What = w.T("handover.adjusted-prompted", h.Name, f.WithUnit(f.SignedDecimal(*h.Size), h.Unit))
	case h.Kind == plant.Adjustment && h.Size != nil:
		v.What = w.T("handover.adjusted-unprompted", h.Name, f.WithUnit(f.SignedDecimal(*h.Size), h.Unit))
	default:
		v.What = w.T("handover.change." + string(h.Kind))
	}
	return v
}

// causesShown is how many causes are drawn; the trade looks at the few that make most.
const causesShown = 10

func newCauses(f ui.Format, c handoverChoice, closed []plant.Matter) causesView {
	w := f.Words
	var v causesView
	for _, d := range causeDays {
		name := w.T("handover.causes-shift")
		if d > 0 {
			name = w.T("handover.causes-days", d)
		}
		v.Spans = append(v.Spans, handoverLink{name, c.address(func(c *handoverChoice) { c.Days = d }) + "#causes", c.Days == d})
	}
	v.Orders = []handoverLink{
		{w.T("handover.by-count"), c.address(func(c *handoverChoice) { c.ByTime = false }) + "#causes", !c.ByTime},
		{w.T("handover.by-time"), c.address(func(c *handoverChoice) { c.ByTime = true }) + "#causes", c.ByTime},
	}
	list := plant.Pareto(closed, c.ByTime)
	v.None = len(list) == 0
	weight := func(s plant.CauseShare) float64 {
		if c.ByTime {
			return s.Out.Seconds()
		}
		return float64(s.Count)
	}
	var total, sum float64
	for _, s := range list {
		total += weight(s)
	}
	for i, s := range list {
		if i == causesShown {
			break
		}
		sum += weight(s)
		row := causeView{Cause: s.Cause, Count: f.Count(s.Count), Out: f.Age(s.Out)}
		if total > 0 {
			row.Width = strconv.FormatFloat(100*weight(s)/weight(list[0]), 'f', 1, 64)
			row.Share = w.T("handover.share", f.Number(100*sum/total, 0))
		}
		if weight(list[0]) == 0 {
			row.Width = "0"
		}
		v.Rows = append(v.Rows, row)
	}
	return v
}
