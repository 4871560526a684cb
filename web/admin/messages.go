package admin

import (
	"context"
	"net/http"
	"time"

	"github.com/go-chi/chi/v5"
	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// MessageStore is what the page about messages needs of the plant's record.
type MessageStore interface {
	Undelivered(ctx context.Context, most int) ([]plant.Undelivered, error)
	TargetStates(ctx context.Context) ([]plant.TargetState, error)
	OutboxState(ctx context.Context) (plant.OutboxState, error)
	SendAgain(ctx context.Context, id, person uuid.UUID) error
}

// MessageTarget is somewhere that messages may go, as the server was told at its start.
type MessageTarget struct {
	Name, Way, Where string
	Lines            string // names, "" for all
}

// Messages are what the page about messages works with.
type Messages struct {
	Store   MessageStore
	Targets []MessageTarget
	Try     func(ctx context.Context, target string) error // sends a test message; the error is in plain words
}

const messagesAddress = home + "/messages"

// undeliveredMost is how many undelivered messages are listed.
const undeliveredMost = 200

func (a *Admin) messageRoutes(r chi.Router) {
	r.Get("/messages", ui.Handle(a.log, a.showMessages))
	r.Post("/messages/try", ui.Handle(a.log, a.tryTarget))
	r.Post("/messages/{id}/again", ui.Handle(a.log, a.sendAgain))
}

// tried is what came of a test message.
type tried struct{ Target, Text, Problem string }

func (a *Admin) showMessages(w http.ResponseWriter, r *http.Request) error {
	return a.renderMessages(w, r, http.StatusOK, tried{})
}

func (a *Admin) renderMessages(w http.ResponseWriter, r *http.Request, status int, t tried) error {
	ctx := r.Context()
	lost, err := a.messages.Store.Undelivered(ctx, undeliveredMost)
	if err != nil {
		return err
	}
	states, err := a.messages.Store.TargetStates(ctx)
	if err != nil {
		return err
	}
	out, err := a.messages.Store.OutboxState(ctx)
	if err != nil {
		return err
	}
	s := shellFor(r, ui.FrameOf(r).Words.T("messages.page"))
	return ui.Render(w, r, status, messagesPage(s, newMessages(s.Format, a.messages.Targets, states, lost, out, t)))
}

func (a *Admin) tryTarget(w http.ResponseWriter, r *http.Request) error {
	if err := ui.ParseForm(w, r); err != nil {
		return err
	}
	t := tried{Target: r.PostForm.Get("target")}
	if !a.messages.knows(t.Target) {
		return plant.Invalidf("target", "There is no such target.")
	}
	f := ui.FrameOf(r)
	if err := a.messages.Try(r.Context(), t.Target); err != nil {
		t.Problem = f.Words.T("messages.try-failed", t.Target, err.Error())
	} else {
		t.Text = f.Words.T("messages.try-done", t.Target)
	}
	return a.renderMessages(w, r, http.StatusOK, t)
}

func (m Messages) knows(target string) bool {
	for _, t := range m.Targets {
		if t.Name == target {
			return true
		}
	}
	return false
}

func (a *Admin) sendAgain(w http.ResponseWriter, r *http.Request) error {
	text := chi.URLParam(r, "id")
	id, err := uuid.Parse(text)
	if err != nil || id.String() != text {
		return ui.NotFound(r)
	}
	if err := a.messages.Store.SendAgain(r.Context(), id, ui.FrameOf(r).Person.ID); err != nil {
		return err
	}
	ui.Redirect(w, r, messagesAddress)
	return nil
}

// messagesView is the page.
type messagesView struct {
	Targets     []targetView
	Undelivered []undeliveredView
	Waiting     string
	Tried       tried
}

type targetView struct {
	Name, Way, Where, Lines string
	State                   string
	Problem                 string // why the last attempt failed; empty: it did not
	Known                   bool   // in the configuration of this server
}

type undeliveredView struct {
	Title, Target, At, GivenUp, Attempts, Error, Again string
}

func newMessages(f ui.Format, targets []MessageTarget, states []plant.TargetState, lost []plant.Undelivered, out plant.OutboxState, t tried) messagesView {
	w := f.Words
	v := messagesView{Tried: t, Waiting: w.T("messages.none-waiting")}
	if out.Waiting > 0 {
		v.Waiting = w.T("messages.waiting", out.Waiting, f.Since(out.Oldest))
	}
	seen := map[string]plant.TargetState{}
	for _, s := range states {
		seen[s.Target] = s
	}
	for _, c := range targets {
		lines := c.Lines
		if lines == "" {
			lines = w.T("messages.all-lines")
		}
		v.Targets = append(v.Targets, newTarget(f, targetView{Name: c.Name, Way: w.T("messages.way." + c.Way), Where: c.Where, Lines: lines, Known: true}, seen[c.Name]))
		delete(seen, c.Name)
	}
	for _, s := range states {
		if _, left := seen[s.Target]; left && s.Waiting > 0 {
			v.Targets = append(v.Targets, newTarget(f, targetView{Name: s.Target, Way: w.T("messages.unknown-target")}, s))
		}
	}
	for _, u := range lost {
		v.Undelivered = append(v.Undelivered, undeliveredView{Title: u.Title, Target: u.Target, At: f.Clock(u.CreatedAt), GivenUp: f.Clock(u.GivenUpAt),
			Attempts: f.Count(u.Attempts), Error: u.LastError, Again: messagesAddress + "/" + u.ID.String() + "/again"})
	}
	return v
}

func newTarget(f ui.Format, v targetView, s plant.TargetState) targetView {
	w := f.Words
	switch {
	case s.Failures > 0:
		v.State, v.Problem = w.T("messages.failing", s.Failures, f.Clock(s.FailedAt)), s.LastError
		if s.PausedUntil.After(f.Now) {
			v.State = w.T("messages.paused", s.Failures, f.Clock(s.PausedUntil.Add(time.Minute-1)))
		}
	case s.LastOK.IsZero():
		v.State = w.T("messages.nothing-sent")
	default:
		v.State = w.T("messages.last-ok", f.Clock(s.LastOK))
	}
	return v
}
