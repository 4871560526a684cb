package web

import (
	"context"
	"crypto/x509"
	"errors"
	"log/slog"
	"net/http"
	"net/netip"
	"time"

	"github.com/go-chi/chi/v5"
	"github.com/google/uuid"

	"holdfast/internal/auth"
	"holdfast/internal/live"
	"holdfast/internal/plant"
	"holdfast/static"
	"holdfast/web/door"
	"holdfast/web/ui"
	"holdfast/web/words"
)

// Surface adds its routes to the router that it is given; addresses are relative to
// where it stands ("/" and "/{station}" under /station).
type Surface interface {
	Routes(r chi.Router)
}

// Sessions is what the router needs of auth.Sessions.
type Sessions interface {
	door.Sessions
	Middleware(next http.Handler) http.Handler
	LoadOnly(next http.Handler) http.Handler
	ID(ctx context.Context) string
	Expires(ctx context.Context) time.Time
}

// Hub is what the router needs of live.Hub.
type Hub interface {
	Serve(w http.ResponseWriter, r *http.Request, watch live.Watch)
	Refuse(w http.ResponseWriter, r *http.Request, why live.Reason)
}

// Config is what New joins. Surfaces that are nil are not there.
type Config struct {
	Log      *slog.Logger
	Now      func() time.Time // time.Now when nil
	Plant    func() plant.Plant
	Sessions Sessions
	Checker  door.Checker
	Hub      Hub

	// Tablet is what enrolling a device and signing in by badge and PIN need; nil where
	// there are no devices.
	Tablet *door.Tablet
	// First makes the first person under a one-time address; nil when there is somebody.
	First *door.First

	// DemoPeople lists who may step in by one click; nil outside of the
	// demonstration.
	DemoPeople func(ctx context.Context) ([]plant.Person, error)

	Station, Board, Desk, Admin, Calls Surface
	Account                            Surface // everybody's own page

	// API is mounted at /api/v1 and guards itself.
	API Surface

	// Metrics answers scrapes at /metrics and asks for its own token; nil when nobody may.
	Metrics http.Handler

	// SetLanguage keeps the language that a person has chosen. Without it every choice
	// is kept in the browser.
	SetLanguage func(ctx context.Context, person uuid.UUID, language string) error
	// SetDeviceLanguage keeps the language that was chosen at an enrolled tablet while
	// nobody was signed in. Without it that choice is kept by the browser too.
	SetDeviceLanguage func(ctx context.Context, device uuid.UUID, language string) error

	// Ready reports whether the server can do its work, for /readyz.
	Ready func(ctx context.Context) error

	// Hosts are the names, with port, under which the server answers; empty means
	// any. The demonstration names loopback only, so that no page of another site
	// can reach it by a name that resolves to this machine.
	Hosts []string
	// Secure says that browsers reach the server over https.
	Secure bool
	// Strict is how long browsers insist on https once they were here.
	Strict time.Duration
	// Authority is the plant's own, whose certificate tablets install; nil when there is none.
	Authority *x509.Certificate
	// Addr tells where a request comes from; nil takes the other end of the
	// connection, which behind a proxy is the proxy.
	Addr func(r *http.Request) netip.Addr
}

// AuthorityAddress is where the plant's own authority is shown, and how to trust it.
const AuthorityAddress = door.AuthorityAddress

// New joins everything to one handler.
func New(c Config) http.Handler {
	if c.Now == nil {
		c.Now = time.Now
	}
	if c.Addr == nil {
		c.Addr = peer
	}
	if c.Ready == nil {
		c.Ready = func(context.Context) error { return nil }
	}
	s := &server{Config: c}

	r := chi.NewRouter()
	r.Use(s.frame, s.access, s.recover, s.headers, s.checkHost, s.sameSite, ui.LimitBody(ui.MaxBody), headAsGet)
	visitors := chi.Chain(c.Sessions.Middleware, s.visitor)
	r.NotFound(visitors.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		ui.Deny(w, r, http.StatusNotFound)
	}).ServeHTTP)
	r.MethodNotAllowed(visitors.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		ui.Deny(w, r, http.StatusMethodNotAllowed)
	}).ServeHTTP)

	r.Get("/healthz", s.healthy)
	r.Get(ReadyAddress, s.ready)
	if c.Metrics != nil {
		r.Method(http.MethodGet, "/metrics", c.Metrics)
	}
	r.Method(http.MethodGet, static.Prefix+"*", static.Handler())
	r.With(c.Sessions.LoadOnly, s.visitor).Get("/live", s.live)

	r.Group(func(r chi.Router) {
		r.Use(visitors...)
		r.Post(ui.ThemeAddress, ui.Handle(c.Log, ui.SetTheme))
		if c.Authority != nil {
			(&door.Trust{Log: c.Log, Authority: c.Authority}).Routes(r)
		}
		r.Post(ui.LanguageAddress, ui.Handle(c.Log, ui.SetLanguage(c.SetLanguage, c.SetDeviceLanguage)))
		(&door.Handler{Log: c.Log, Checker: c.Checker, Sessions: c.Sessions, Demo: c.DemoPeople, Tablet: c.Tablet, First: c.First}).Routes(r)
		mount(r, ui.Station, c.Station)
		mount(r, ui.Board, c.Board)
		mount(r, ui.Desk, c.Desk)
		mount(r, ui.Admin, c.Admin)
		mount(r, ui.Calls, c.Calls)
		if c.Account != nil {
			r.Route(ui.AccountAddress, func(r chi.Router) {
				r.Use(ui.RequirePerson, ui.Speak(ui.Account))
				c.Account.Routes(r)
			})
		}
		if c.API != nil {
			r.Route("/api/v1", c.API.Routes)
		}
	})
	return r
}

func mount(r chi.Router, name ui.Surface, s Surface) {
	if s == nil {
		return
	}
	r.Route("/"+string(name), func(r chi.Router) {
		r.Use(ui.Require(ui.ActionFor(name)), ui.Speak(name))
		s.Routes(r)
	})
}

// server holds what the middleware and the router's own pages need.
type server struct{ Config }

// frame gathers what all pages share, as far as it is known before the session is.
func (s *server) frame(next http.Handler) http.Handler {
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		id := requestID()
		w.Header().Set("X-Request-Id", id)
		next.ServeHTTP(w, ui.WithFrame(r, ui.Frame{
			Addr: s.Addr(r), Plant: s.Plant(), Now: s.Now(), Theme: ui.ThemeOf(r),
			Words: words.From(r), RequestID: id, Secure: s.Secure,
		}))
	})
}

// visitor adds who is signed in to the frame.
func (s *server) visitor(next http.Handler) http.Handler {
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		f := ui.FrameOf(r)
		f.Device, _ = auth.DeviceFrom(r.Context())
		if set, ok := words.Known(f.Device.Language); ok {
			f.Words = set
		}
		if p, ok := auth.FromContext(r.Context()); ok {
			f.Person, f.SignedIn, f.Session, f.SessionEnds = p, true, s.Sessions.ID(r.Context()), s.Sessions.Expires(r.Context())
			if own, ok := words.Known(p.Language); ok {
				f.Words = own
			}
		}
		f.Revoked = auth.Revoked(r.Context())
		if f.OnWall() {
			f.Session = auth.DeviceSession(f.Device.ID)
		}
		next.ServeHTTP(w, ui.WithFrame(r, f))
	})
}

// live hands the socket to the hub, for the topics that the page's reader may see.
func (s *server) live(w http.ResponseWriter, r *http.Request) {
	f := ui.FrameOf(r)
	if !f.SignedIn && !f.OnWall() {
		s.Hub.Refuse(w, r, live.SessionEnded)
		return
	}
	topics := r.URL.Query()["topic"]
	for _, t := range topics {
		if action, ok := ui.TopicAction(t); !ok || !f.Person.May(action) && !(f.OnWall() && f.Device.May(action)) {
			s.Hub.Refuse(w, r, live.NotAllowed)
			return
		}
	}
	s.Hub.Serve(w, r, live.Watch{Topics: topics, Session: f.Session})
}

// ReadyAddress is where machines ask whether the server can do its work, and ServerHeader
// marks the answer as this program's.
const (
	ReadyAddress = "/readyz"
	ServerHeader = "X-Holdfast"
)

func (s *server) healthy(w http.ResponseWriter, _ *http.Request) { plain(w, http.StatusOK, "ok\n") }

const readyWithin = 2 * time.Second

func (s *server) ready(w http.ResponseWriter, r *http.Request) {
	ctx, cancel := context.WithTimeout(r.Context(), readyWithin)
	defer cancel()
	if err := s.Ready(ctx); err != nil {
		s.Log.LogAttrs(r.Context(), slog.LevelWarn, "not ready",
			slog.String("request", ui.FrameOf(r).RequestID), slog.String("error", err.Error()))
		plain(w, http.StatusServiceUnavailable, "not ready\n")
		return
	}
	plain(w, http.StatusOK, "ready\n")
}

func plain(w http.ResponseWriter, status int, text string) {
	w.Header().Set(ServerHeader, "serving")
	w.Header().Set("Content-Type", "text/plain; charset=utf-8")
	w.Header().Set("Cache-Control", "no-store")
	w.WriteHeader(status)
	_, _ = w.Write([]byte(text))
}

// peer is the other end of the connection.
func peer(r *http.Request) netip.Addr {
	ap, err := netip.ParseAddrPort(r.RemoteAddr)
	if err != nil {
		return netip.Addr{}
	}
	return ap.Addr().Unmap()
}

// SessionFault answers a request whose session cannot be read, for
// auth.SessionOptions.Fail.
func SessionFault(log *slog.Logger) func(w http.ResponseWriter, r *http.Request, err error) {
	return func(w http.ResponseWriter, r *http.Request, err error) {
		if errors.Is(err, context.Canceled) && r.Context().Err() != nil {
			return
		}
		ui.Fault(log, w, r, err)
	}
}
