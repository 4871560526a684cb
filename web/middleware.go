package web

import (
	"crypto/rand"
	"fmt"
	"log/slog"
	"net/http"
	"runtime/debug"
	"strings"
	"time"

	"github.com/go-chi/chi/v5"
	"github.com/go-chi/chi/v5/middleware"

	"holdfast/web/ui"
)

// requestID names a request in the log and in its answer. One that a client sends
// is not taken over: it could be anything.
func requestID() string { return rand.Text()[:12] }

// access writes one line a request. It holds no query, since that of the sign-in
// page and of searches is nobody's business, and no person: the record says who
// did what, the log does not.
func (s *server) access(next http.Handler) http.Handler {
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		began := time.Now()
		ww := middleware.NewWrapResponseWriter(w, r.ProtoMajor)
		defer func() {
			f := ui.FrameOf(r)
			status := ww.Status()
			switch {
			case status == 0 && r.Header.Get("Upgrade") != "":
				status = http.StatusSwitchingProtocols // the connection was taken over
			case status == 0:
				status = http.StatusOK
			}
			level := slog.LevelInfo
			if strings.HasPrefix(r.URL.Path, "/static/") || r.URL.Path == "/healthz" || r.URL.Path == "/readyz" || r.URL.Path == "/metrics" {
				level = slog.LevelDebug
			}
			s.Log.LogAttrs(r.Context(), level, "request",
				slog.String("request", f.RequestID),
				slog.String("method", r.Method),
				slog.String("path", r.URL.Path),
				slog.Int("status", status),
				slog.Int("bytes", ww.BytesWritten()),
				slog.Duration("took", time.Since(began)),
				slog.String("from", f.Addr.String()))
		}()
		next.ServeHTTP(ww, r)
	})
}

// recover turns a panic into a reference number. What was already sent cannot be
// taken back; then the connection is cut, so that nobody takes half for whole.
func (s *server) recover(next http.Handler) http.Handler {
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		defer func() {
			v := recover()
			if v == nil {
				return
			}
			if v == http.ErrAbortHandler {
				panic(v)
			}
			err := fmt.Errorf("panic: %v", v)
			stack := slog.String("stack", string(debug.Stack()))
			if ww, ok := w.(middleware.WrapResponseWriter); ok && (ww.Status() != 0 || r.Header.Get("Upgrade") != "") {
				s.Log.LogAttrs(r.Context(), slog.LevelError, "a request failed half-way",
					slog.String("request", ui.FrameOf(r).RequestID), slog.String("path", r.URL.Path),
					slog.String("error", err.Error()), stack)
				panic(http.ErrAbortHandler)
			}
			ui.Fault(s.Log, w, r, err, stack)
		}()
		next.ServeHTTP(w, r)
	})
}

// ContentPolicy lets pages load from this server only and run no script, style or
// handler that stands in the page itself.
const ContentPolicy = "default-src 'none'; script-src 'self'; style-src 'self'; img-src 'self' data:; " +
	"font-src 'self'; connect-src 'self'; form-action 'self'; base-uri 'none'; frame-ancestors 'none'"

func (s *server) headers(next http.Handler) http.Handler {
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		h := w.Header()
		h.Set("Content-Security-Policy", ContentPolicy)
		h.Set("X-Content-Type-Options", "nosniff")
		h.Set("Referrer-Policy", "same-origin") // "Go back" needs it, other sites get nothing
		h.Set("Permissions-Policy", "camera=(), display-capture=(), geolocation=(), microphone=(), payment=(), usb=()")
		h.Set("Cross-Origin-Opener-Policy", "same-origin")
		h.Set("Cross-Origin-Resource-Policy", "same-origin")
		if s.Secure && s.Strict > 0 {
			h.Set("Strict-Transport-Security", fmt.Sprintf("max-age=%.0f", s.Strict.Seconds()))
		}
		next.ServeHTTP(w, r)
	})
}

// checkHost answers only under the names that were given. A site whose name is made
// to resolve to this machine could otherwise read what its visitor may read.
func (s *server) checkHost(next http.Handler) http.Handler {
	if len(s.Hosts) == 0 {
		return next
	}
	known := make(map[string]bool, len(s.Hosts))
	for _, h := range s.Hosts {
		known[strings.ToLower(h)] = true
	}
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		if !known[strings.ToLower(r.Host)] {
			plain(w, http.StatusMisdirectedRequest, ui.FrameOf(r).Words.T("ui.problem-text.host")+"\n")
			return
		}
		next.ServeHTTP(w, r)
	})
}

// sameSite refuses posts that a browser says come from another site.
func (s *server) sameSite(next http.Handler) http.Handler {
	guard := http.NewCrossOriginProtection()
	guard.SetDenyHandler(http.HandlerFunc(ui.DenyCrossSite))
	return guard.Handler(next)
}

// headAsGet answers HEAD as it would answer GET; the server leaves out the body. The
// router's own middleware for this does not see routes below a mounted router.
func headAsGet(next http.Handler) http.Handler {
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		if r.Method == http.MethodHead {
			asked := *r
			asked.Method = http.MethodGet
			r = &asked
		}
		next.ServeHTTP(w, r)
	})
}

// Route is one method and pattern that the handler answers.
type Route struct {
	Method  string
	Pattern string
}

func (r Route) String() string { return r.Method + " " + r.Pattern }

// Routes lists the routes of a handler that New made, in the order of its tree.
func Routes(h http.Handler) ([]Route, error) {
	tree, ok := h.(chi.Routes)
	if !ok {
		return nil, fmt.Errorf("routes: %T is no router", h)
	}
	var all []Route
	err := chi.Walk(tree, func(method, pattern string, _ http.Handler, _ ...func(http.Handler) http.Handler) error {
		all = append(all, Route{method, pattern})
		return nil
	})
	return all, err
}
