package calls

import (
	"context"
	"log/slog"
	"net/http"
	"time"

	"github.com/go-chi/chi/v5"
	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// Store is what the surface needs of the plant's record.
type Store interface {
	StationStates(ctx context.Context, points int, ids ...uuid.UUID) ([]plant.StationState, error)
	MatterState(ctx context.Context, id uuid.UUID) (plant.StationState, plant.CharacteristicState, error)
	SentCalls(ctx context.Context, since time.Time, most int) ([]plant.SentCall, error)
	OutboxState(ctx context.Context) (plant.OutboxState, error)
	Settings(ctx context.Context) (plant.Settings, error)
	QuietMatter(ctx context.Context, r plant.QuietRequest) error
}

// Deps is what the surface works with.
type Deps struct {
	Store Store
	Log   *slog.Logger
}

// Calls serves /calls.
type Calls struct {
	store Store
	log   *slog.Logger
}

// New makes the surface.
func New(d Deps) *Calls { return &Calls{store: d.Store, log: d.Log} }

// Routes adds the addresses under /calls.
func (c *Calls) Routes(r chi.Router) {
	r.Get("/", ui.Handle(c.log, c.show))
	r.Get("/quiet/{matter}", ui.Handle(c.log, c.showQuiet))
	r.Post("/quiet/{matter}", ui.Handle(c.log, c.quiet))
}

// How much of what was sent is listed.
const (
	sentDays = 7
	sentMost = 200
)

func shellFor(r *http.Request, title string) ui.Shell {
	s := ui.ShellFor(r, ui.Calls, title)
	s.Bar = way(s.Words)
	return s
}

func (c *Calls) show(w http.ResponseWriter, r *http.Request) error {
	ctx := r.Context()
	s := shellFor(r, ui.FrameOf(r).Words.T("calls.page"))
	states, err := c.store.StationStates(ctx, 0)
	if err != nil {
		return err
	}
	sent, err := c.store.SentCalls(ctx, s.Now.AddDate(0, 0, -sentDays), sentMost)
	if err != nil {
		return err
	}
	out, err := c.store.OutboxState(ctx)
	if err != nil {
		return err
	}
	return ui.Render(w, r, http.StatusOK, listPage(s, newList(s.Format, plant.OpenCalls(states, s.Now), sent, out)))
}

// matterIn reads the matter that the address names, in the one spelling of an id.
func matterIn(r *http.Request) (uuid.UUID, error) {
	text := chi.URLParam(r, "matter")
	id, err := uuid.Parse(text)
	if err != nil || id.String() != text {
		return uuid.Nil, ui.NotFound(r)
	}
	return id, nil
}

func (c *Calls) showQuiet(w http.ResponseWriter, r *http.Request) error {
	id, err := matterIn(r)
	if err != nil {
		return err
	}
	return c.renderQuiet(w, r, http.StatusOK, id, entry{ID: uuid.Must(uuid.NewV7()).String()}, nil)
}

func (c *Calls) renderQuiet(w http.ResponseWriter, r *http.Request, status int, id uuid.UUID, in entry, problem error) error {
	st, ch, err := c.store.MatterState(r.Context(), id)
	if err != nil {
		return err
	}
	set, err := c.store.Settings(r.Context())
	if err != nil {
		return err
	}
	s := shellFor(r, ui.FrameOf(r).Words.T("calls.quiet-page"))
	v, err := newQuiet(s.Format, &st, &ch, set.Escalation.LongestQuiet(), in, problem)
	if err != nil {
		return err
	}
	return ui.Render(w, r, status, quietPage(s, v))
}

func (c *Calls) quiet(w http.ResponseWriter, r *http.Request) error {
	id, err := matterIn(r)
	if err != nil {
		return err
	}
	if err := ui.ParseForm(w, r); err != nil {
		return err
	}
	f := ui.FrameOf(r)
	in := entryOf(r.PostForm)
	req, err := in.request(f.Now, f.Plant.Location)
	if err == nil {
		req.Matter, req.Person = id, f.Person.ID
		err = c.store.QuietMatter(r.Context(), req)
	}
	if plant.IsKind(err, plant.Invalid) {
		return c.renderQuiet(w, r, http.StatusUnprocessableEntity, id, in, err)
	}
	if err != nil {
		return err
	}
	ui.Redirect(w, r, ui.CallsAddress)
	return nil
}
