package station

import (
	"context"
	"log/slog"
	"net/http"
	"net/netip"
	"time"

	"github.com/go-chi/chi/v5"
	"github.com/google/uuid"

	"holdfast/internal/auth"
	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// Store is what the station needs of the plant's record.
type Store interface {
	StationStates(ctx context.Context, points int, ids ...uuid.UUID) ([]plant.StationState, error)
	StationState(ctx context.Context, id uuid.UUID, points int) (plant.StationState, error)
	StationSetups(ctx context.Context, id uuid.UUID) (plant.StationState, error)
	History(ctx context.Context, characteristic uuid.UUID, stretch plant.Stretch) (plant.History, error)
	Answer(ctx context.Context, round uuid.UUID) (plant.Answer, error)
	LastRound(ctx context.Context, station uuid.UUID) (plant.RoundRecord, error)
	Record(ctx context.Context, r plant.Round) (plant.Answer, error)
	Correct(ctx context.Context, c plant.Correction) (plant.PartAnswer, error)
	Matter(ctx context.Context, id uuid.UUID) (plant.Matter, error)
	TakeMatter(ctx context.Context, id uuid.UUID, version int, person uuid.UUID) error
	AnswerStep(ctx context.Context, a plant.StepAnswer) error
	CloseMatter(ctx context.Context, c plant.ClosingRequest) error
	VerifyFix(ctx context.Context, v plant.VerifyRequest) error
	Containment(ctx context.Context, id uuid.UUID) (plant.Containment, error)
	Reaches(ctx context.Context, matters ...uuid.UUID) (map[uuid.UUID]plant.Contained, error)
	StateProduct(ctx context.Context, e plant.ContainmentEntry) error
	Gauges(ctx context.Context, stations ...uuid.UUID) ([]plant.GaugeUse, error)
	GaugeChecks(ctx context.Context, gauge uuid.UUID, most int) ([]plant.GaugeCheckRecord, error)
	CheckGauge(ctx context.Context, c plant.GaugeCheckRecord) error
	LogChange(ctx context.Context, c plant.Change) error
	SetMachine(ctx context.Context, m plant.MachineState) error
	Causes(ctx context.Context, family string) ([]plant.Cause, error)
	Parts(ctx context.Context) ([]plant.Part, error)
	ClearAsides(ctx context.Context, station uuid.UUID, until time.Time, person uuid.UUID) error
	Knobs(ctx context.Context, machine uuid.UUID) ([]plant.Knob, error)
	Present(ctx context.Context, device uuid.UUID, since time.Time) ([]uuid.UUID, error)
}

// Signer tells whose a login and a secret are. Voiding a record is a signature, so the
// secret is typed again for it.
type Signer interface {
	Check(ctx context.Context, login string, s auth.Secret, from netip.Addr) (plant.Person, error)
}

// Deps is what the surface works with.
type Deps struct {
	Store  Store
	Signer Signer // without one nothing can be voided
	Log    *slog.Logger
}

// Surface serves /station.
type Surface struct {
	log    *slog.Logger
	store  Store
	signer Signer
	stamps *stamps
}

// New makes the surface.
func New(d Deps) *Surface {
	return &Surface{log: d.Log, store: d.Store, signer: d.Signer, stamps: newStamps()}
}

// Routes adds the addresses under /station.
func (s *Surface) Routes(r chi.Router) {
	get := func(pattern string, f func(http.ResponseWriter, *http.Request) error) {
		r.Get(pattern, ui.Handle(s.log, f))
	}
	post := func(pattern string, f func(http.ResponseWriter, *http.Request) error) {
		r.Post(pattern, ui.Handle(s.log, func(w http.ResponseWriter, r *http.Request) error {
			if err := ui.ParseForm(w, r); err != nil {
				return err
			}
			return f(w, r)
		}))
	}
	get("/", s.choose)
	get("/{station}", s.work)
	post("/{station}/round", s.saveRound)
	get("/{station}/round/{round}", s.showVerdict)
	get("/{station}/matter/{matter}", s.showMatter)
	post("/{station}/matter/{matter}/take", s.takeMatter)
	post("/{station}/matter/{matter}/step", s.answerStep)
	post("/{station}/matter/{matter}/close", s.closeMatter)
	post("/{station}/matter/{matter}/verify", s.verifyFix)
	get("/{station}/matter/{matter}/aside", s.showAside)
	post("/{station}/matter/{matter}/aside", s.keepAside)
	get("/{station}/gauges", s.showGauges)
	get("/{station}/gauge/{gauge}", s.showGauge)
	post("/{station}/gauge/{gauge}", s.checkGauge)
	get("/{station}/change", s.showChange)
	post("/{station}/change", s.logChange)
	get("/{station}/change/{characteristic}", s.showAdjustment)
	get("/{station}/correct", s.showCorrection)
	post("/{station}/correct", s.correct)
	get("/{station}/machine/{machine}", s.showMachine)
	post("/{station}/machine/{machine}", s.setMachine)
	post("/{station}/not-taken", s.clearNotTaken)
}

// notFound is what an address gets that leads to nothing here.
func notFound(r *http.Request) error {
	return &plant.Error{Kind: plant.NotFound, Message: ui.FrameOf(r).Words.T("ui.problem-text.not-found")}
}

// idIn reads an id from the address. Only the one spelling in which ids are written
// is an address.
func idIn(r *http.Request, name string) (uuid.UUID, error) {
	text := chi.URLParam(r, name)
	id, err := uuid.Parse(text)
	if err != nil || id.String() != text {
		return uuid.Nil, notFound(r)
	}
	return id, nil
}

// stationIn reads the station that the address names.
func (s *Surface) stationIn(r *http.Request, points int) (plant.StationState, error) {
	id, err := idIn(r, "station")
	if err != nil {
		return plant.StationState{}, err
	}
	return s.store.StationState(r.Context(), id, points)
}

// characteristicOf finds a characteristic of the station.
func characteristicOf(st plant.StationState, id uuid.UUID) (plant.CharacteristicState, bool) {
	for _, c := range st.Characteristics {
		if c.ID == id {
			return c, true
		}
	}
	return plant.CharacteristicState{}, false
}

// machineOf finds a machine of the station.
func machineOf(st plant.StationState, id uuid.UUID) (plant.MachineNow, bool) {
	for _, m := range st.Machines {
		if m.ID == id {
			return m, true
		}
	}
	return plant.MachineNow{}, false
}

// path is an address below a station.
func path(station uuid.UUID, parts ...string) string {
	p := "/station/" + station.String()
	for _, part := range parts {
		p += "/" + part
	}
	return p
}
