package ui

import (
	"bytes"
	"context"
	"crypto/rand"
	"encoding/json"
	"errors"
	"fmt"
	"log/slog"
	"net/http"
	"strings"

	"github.com/a-h/templ"

	"holdfast/internal/plant"
	"holdfast/web/words"
)

// HTTPError is an answer that no kind of plant.Error stands for. Message is what
// the person reads; Err goes no further than the log.
type HTTPError struct {
	Status  int
	Message string
	Err     error
}

func (e *HTTPError) Error() string {
	if e.Err != nil {
		return fmt.Sprintf("%d: %s: %v", e.Status, e.Message, e.Err)
	}
	return fmt.Sprintf("%d: %s", e.Status, e.Message)
}

func (e *HTTPError) Unwrap() error { return e.Err }

// StatusOf is the table of what each kind of problem is answered with.
func StatusOf(k plant.Kind) int {
	switch k {
	case plant.Invalid:
		return http.StatusUnprocessableEntity
	case plant.NotFound:
		return http.StatusNotFound
	case plant.Conflict:
		return http.StatusConflict
	case plant.Forbidden:
		return http.StatusForbidden
	}
	return http.StatusInternalServerError
}

// problem is an answer that is not what was asked for, ready to be shown.
type problem struct {
	Status  int    `json:"-"`
	Kind    string `json:"kind"`
	Title   string `json:"-"`
	Message string `json:"message"`
	Field   string `json:"field,omitempty"`
	Ref     string `json:"ref,omitempty"`
}

// Handle is the one adapter between handlers that return an error and net/http.
func Handle(log *slog.Logger, f func(w http.ResponseWriter, r *http.Request) error) http.HandlerFunc {
	return func(w http.ResponseWriter, r *http.Request) {
		if err := f(w, r); err != nil {
			Fail(log, w, r, err)
		}
	}
}

// Fail answers a request with what err means. It must be called before anything was
// written.
func Fail(log *slog.Logger, w http.ResponseWriter, r *http.Request, err error) {
	f := FrameOf(r)
	if pe, ok := errors.AsType[*plant.Error](err); ok && StatusOf(pe.Kind) != http.StatusInternalServerError {
		status := StatusOf(pe.Kind)
		kind := kindOf(status)
		answer(w, r, problem{Status: status, Kind: kind, Field: pe.Field,
			Title: f.Words.T("ui.problem." + kind), Message: f.Words.Problem(pe)})
		return
	}
	if he, ok := errors.AsType[*HTTPError](err); ok && he.Status < http.StatusInternalServerError {
		kind := kindOf(he.Status)
		answer(w, r, problem{Status: he.Status, Kind: kind, Title: f.Words.T("ui.problem." + kind), Message: he.Message})
		return
	}
	if r.Context().Err() != nil && errors.Is(err, context.Canceled) {
		return // whoever asked is gone: no one to answer, nothing to repair
	}
	Fault(log, w, r, err)
}

// Fault answers with 500 and a reference number, under which the log has the error.
func Fault(log *slog.Logger, w http.ResponseWriter, r *http.Request, err error, more ...slog.Attr) {
	f := FrameOf(r)
	ref := reference()
	attrs := append([]slog.Attr{slog.String("ref", ref), slog.String("request", f.RequestID),
		slog.String("method", r.Method), slog.String("path", r.URL.Path), slog.String("error", err.Error())}, more...)
	log.LogAttrs(r.Context(), slog.LevelError, "a request failed", attrs...)
	if errors.Is(err, plant.ErrNoRoom) {
		answer(w, r, problem{Status: http.StatusServiceUnavailable, Kind: "no-room", Ref: ref,
			Title: f.Words.T("ui.problem.no-room"), Message: f.Words.T("ui.problem-text.no-room", ref)})
		return
	}
	answer(w, r, problem{Status: http.StatusInternalServerError, Kind: "fault", Ref: ref,
		Title: f.Words.T("ui.problem.fault"), Message: f.Words.T("ui.problem-text.fault", ref)})
}

// Deny answers with one of the plain problems that need no further words: 401, 403,
// 404 or 405.
func Deny(w http.ResponseWriter, r *http.Request, status int) {
	t := FrameOf(r).Words
	kind := kindOf(status)
	p := problem{Status: status, Kind: kind, Title: t.T("ui.problem." + kind)}
	switch kind {
	case "signed-out":
		p.Message = t.T("ui.problem-text.signed-out")
	case "forbidden":
		p.Message = t.T("ui.problem-text.forbidden")
	case "method":
		p.Message = t.T("ui.problem-text.method")
	default:
		p.Message = t.T("ui.problem-text.not-found")
	}
	answer(w, r, p)
}

// DenyCrossSite answers a form that another site has sent.
func DenyCrossSite(w http.ResponseWriter, r *http.Request) {
	t := FrameOf(r).Words
	answer(w, r, problem{Status: http.StatusForbidden, Kind: "forbidden",
		Title: t.T("ui.problem.forbidden"), Message: t.T("ui.problem-text.cross-site")})
}

func kindOf(status int) string {
	switch status {
	case http.StatusUnauthorized:
		return "signed-out"
	case http.StatusForbidden:
		return "forbidden"
	case http.StatusNotFound:
		return "not-found"
	case http.StatusMethodNotAllowed:
		return "method"
	case http.StatusConflict:
		return "conflict"
	case http.StatusRequestEntityTooLarge:
		return "too-large"
	case http.StatusUnprocessableEntity:
		return "invalid"
	}
	return "bad-request"
}

// reference makes a number short enough to be read out over a telephone: no
// letters that look like digits.
func reference() string {
	const letters = "0123456789ABCDEFGHJKMNPQRSTVWXYZ"
	var b [5]byte
	_, _ = rand.Read(b[:]) // never fails
	for i := range b {
		b[i] = letters[int(b[i])%len(letters)]
	}
	return string(b[:])
}

// answer writes a problem in the form that the sender can use.
func answer(w http.ResponseWriter, r *http.Request, p problem) {
	var err error
	switch {
	case WantsJSON(r):
		err = RenderJSON(w, p.Status, map[string]problem{"error": p})
	case fetched(r):
		err = Render(w, r, p.Status, Message(p.Message))
	default:
		s := ShellFor(r, Door, p.Title)
		if s.Path == r.URL.RequestURI() && r.Method == http.MethodGet {
			s.Path = "/" // switching the theme here must not ask for the broken page again
		}
		err = Render(w, r, p.Status, problemPage(s, p, backFrom(r)))
	}
	if err != nil {
		http.Error(w, http.StatusText(p.Status), p.Status)
	}
}

// backFrom is where "Go back" leads: the page that the request came from unless
// that is the one that failed.
func backFrom(r *http.Request) string {
	back := refererPath(r)
	if back == "/" || r.Method == http.MethodGet && back == LocalPath(r.URL.RequestURI()) || strings.HasPrefix(back, SignInAddress) {
		return ""
	}
	return back
}

// fetched reports whether a script sent the request, which wants a part and not a
// page.
func fetched(r *http.Request) bool { return r.Header.Get("Sec-Fetch-Dest") == "empty" }

// WantsJSON reports whether a program asks, which wants JSON and no page.
func WantsJSON(r *http.Request) bool {
	accept := r.Header.Get("Accept")
	return strings.Contains(accept, "application/json") && !strings.Contains(accept, "text/html")
}

// Render writes a component with a status. It renders into a buffer first: when
// that fails nothing has been sent, and the error can still be answered.
func Render(w http.ResponseWriter, r *http.Request, status int, c templ.Component) error {
	var b bytes.Buffer
	if err := c.Render(r.Context(), &b); err != nil {
		return fmt.Errorf("render a page: %w", err)
	}
	h := w.Header()
	h.Set("Content-Type", "text/html; charset=utf-8")
	h.Set("Cache-Control", "no-store") // the record moves, and the next at this tablet is another person
	w.WriteHeader(status)
	_, _ = w.Write(b.Bytes()) // fails only when nobody listens any more
	return nil
}

// RenderJSON writes v as JSON.
func RenderJSON(w http.ResponseWriter, status int, v any) error {
	b, err := json.Marshal(v)
	if err != nil {
		return fmt.Errorf("encode an answer: %w", err)
	}
	h := w.Header()
	h.Set("Content-Type", "application/json")
	h.Set("Cache-Control", "no-store")
	w.WriteHeader(status)
	_, _ = w.Write(append(b, '\n'))
	return nil
}

// Redirect leads on to a local path with 303, which turns a post into a get.
func Redirect(w http.ResponseWriter, r *http.Request, path string) {
	tellTaken(w, r)
	w.Header().Set("Cache-Control", "no-store")
	http.Redirect(w, r, LocalPath(path), http.StatusSeeOther)
}

// ProblemOf is what a form shows about one of its fields, in the language of the
// page: the message when err is about that field, else "". The field "" holds what is
// about the whole.
func ProblemOf(w *words.Printer, err error, field string) string {
	if pe, ok := errors.AsType[*plant.Error](err); ok && pe.Field == field {
		return w.Problem(pe)
	}
	return ""
}

// NotFound is the error of an address that leads to nothing.
func NotFound(r *http.Request) error {
	return &plant.Error{Kind: plant.NotFound, Message: FrameOf(r).Words.T("ui.problem-text.not-found")}
}
