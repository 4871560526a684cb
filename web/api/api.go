package api

import (
	"context"
	_ "embed"
	"encoding/json"
	"log/slog"
	"net/http"
	"strings"
	"time"

	"github.com/go-chi/chi/v5"
	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// Store is what the surface needs of the plant's record.
type Store interface {
	StationSetups(ctx context.Context, id uuid.UUID) (plant.StationState, error)
	StationState(ctx context.Context, id uuid.UUID, points int) (plant.StationState, error)
	StationStreams(ctx context.Context, station uuid.UUID) (map[uuid.UUID][]plant.Stream, error)
	RoundSetups(ctx context.Context, round uuid.UUID) (map[uuid.UUID]plant.Setup, error)
	Record(ctx context.Context, r plant.Round) (plant.Answer, error)
	SetMachine(ctx context.Context, m plant.MachineState) error
	Parts(ctx context.Context) ([]plant.Part, error)
	CountRefused() // a round that never came to Record
	SetAside(ctx context.Context, a plant.Aside, content json.RawMessage) error
}

// Devices tells whose a token is; one that is nobody's, or no longer, is
// plant.Forbidden.
type Devices interface {
	Authenticate(ctx context.Context, token string) (plant.Device, error)
}

// Deps is what the surface works with.
type Deps struct {
	Store   Store
	Devices Devices
	Log     *slog.Logger
}

// Surface serves /api/v1.
type Surface struct{ Deps }

// New makes the surface.
func New(d Deps) *Surface { return &Surface{d} }

//go:embed guide.md
var guide []byte

// Routes adds the addresses under /api/v1.
func (s *Surface) Routes(r chi.Router) {
	r.Use(speakJSON)
	r.Get("/", func(w http.ResponseWriter, _ *http.Request) {
		w.Header().Set("Content-Type", "text/markdown; charset=utf-8")
		_, _ = w.Write(guide)
	})
	r.Group(func(r chi.Router) {
		r.Use(s.guard)
		r.Get("/station", ui.Handle(s.Log, s.station))
		r.Post("/rounds", ui.Handle(s.Log, s.round))
		r.Post("/machines/{machine}", ui.Handle(s.Log, s.machine))
		r.Post("/lines", ui.Handle(s.Log, s.line))
	})
}

// speakJSON makes every answer JSON, also that to a sender that does not ask for it.
func speakJSON(next http.Handler) http.Handler {
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		asked := r.Clone(r.Context())
		asked.Header.Set("Accept", "application/json")
		next.ServeHTTP(w, asked)
	})
}

type senderKey struct{}

// guard lets senders in by their token: 401 without one or with one that is worth
// nothing, 403 for a device that is no sender.
func (s *Surface) guard(next http.Handler) http.Handler {
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		kind, token, _ := strings.Cut(r.Header.Get("Authorization"), " ")
		if token = strings.TrimSpace(token); !strings.EqualFold(kind, "Bearer") || token == "" {
			unknown(s.Log, w, r, "Send the token of the device in the header: Authorization: Bearer TOKEN.")
			return
		}
		d, err := s.Devices.Authenticate(r.Context(), token)
		switch {
		case plant.IsKind(err, plant.Forbidden):
			unknown(s.Log, w, r, "This token is not valid, or no longer. Enrol the sender again.")
		case err != nil:
			ui.Fail(s.Log, w, r, err)
		case d.Kind != plant.Sender:
			ui.Fail(s.Log, w, r, plant.Forbiddenf("", "Only a device that was enrolled as a sender may send here."))
		default:
			next.ServeHTTP(w, r.WithContext(context.WithValue(r.Context(), senderKey{}, d)))
		}
	})
}

func unknown(log *slog.Logger, w http.ResponseWriter, r *http.Request, says string) {
	w.Header().Set("WWW-Authenticate", `Bearer realm="holdfast"`)
	ui.Fail(log, w, r, &ui.HTTPError{Status: http.StatusUnauthorized, Message: says})
}

func senderOf(r *http.Request) plant.Device { return r.Context().Value(senderKey{}).(plant.Device) }

// place is the station that something is sent for: the one that it names, which must be
// the sender's own where the sender has one, else the sender's own.
func place(d plant.Device, named uuid.UUID) (uuid.UUID, error) {
	switch {
	case named == uuid.Nil && d.Station == uuid.Nil:
		return uuid.Nil, plant.Invalidf("station", "This sender belongs to no single station. Name the station.")
	case named == uuid.Nil:
		return d.Station, nil
	case d.Station != uuid.Nil && named != d.Station:
		return uuid.Nil, plant.Forbiddenf("station", "This sender sends for another station.")
	}
	return named, nil
}

// KeptHeader tells a sender that what was refused was kept here: at a station, which shows
// it, or only on record, where it belongs to no station.
const (
	KeptHeader = "Holdfast-Kept"
	keptShown  = "station"
	keptOnly   = "record"
)

func kept(w http.ResponseWriter, station uuid.UUID) {
	where := keptShown
	if station == uuid.Nil {
		where = keptOnly
	}
	w.Header().Set(KeptHeader, where)
}

// refuse keeps a round that was refused before the record saw it, and counts it with those
// that the record refuses.
func (s *Surface) refuse(w http.ResponseWriter, r *http.Request, station, about uuid.UUID, content any, why error) error {
	if problemOf(why) != nil {
		s.Store.CountRefused()
	}
	return s.keep(w, r, station, about, content, why)
}

// keep sets aside what was refused because of what it says, so that the station shows
// it, and returns why it was refused. What the record set aside itself is left to it.
func (s *Surface) keep(w http.ResponseWriter, r *http.Request, station, about uuid.UUID, content any, why error) error {
	pe := problemOf(why)
	if pe == nil || pe.Kind != plant.Invalid && pe.Kind != plant.NotFound {
		return why
	}
	body, err := json.Marshal(content)
	if err != nil {
		return err
	}
	d := senderOf(r)
	if station == uuid.Nil {
		station = d.Station
	}
	ctx, cancel := context.WithTimeout(context.WithoutCancel(r.Context()), 10*time.Second)
	defer cancel()
	if err := s.Store.SetAside(ctx, plant.Aside{Station: station, About: about, Device: d.ID, Why: pe}, body); err != nil {
		return err
	}
	kept(w, station)
	return why
}
