package board

import (
	"context"
	"net/http"
	"net/url"
	"strconv"
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
	s.Scripts = []string{"js/handover.js", ui.TypedScript}
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
