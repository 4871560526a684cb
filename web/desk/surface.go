package desk

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

// Store is what the desk needs of the plant's record.
type Store interface {
	StationStates(ctx context.Context, points int, ids ...uuid.UUID) ([]plant.StationState, error)
	History(ctx context.Context, characteristic uuid.UUID, stretch plant.Stretch) (plant.History, error)
	Revisions(ctx context.Context, characteristic uuid.UUID) ([]plant.Revision, error)
	RevisionAt(ctx context.Context, characteristic uuid.UUID, at time.Time) (plant.Revision, error)
	Freeze(ctx context.Context, f plant.FreezeRequest) (plant.Revision, error)
	Causes(ctx context.Context, family string) ([]plant.Cause, error)
	AllCauses(ctx context.Context) ([]plant.Cause, error)
	NewCause(ctx context.Context, c plant.Cause, by uuid.UUID) error
	RenameCause(ctx context.Context, id uuid.UUID, name string, by uuid.UUID) error
	RetireCause(ctx context.Context, id uuid.UUID, retired bool, by uuid.UUID) error
	Plans(ctx context.Context) ([]plant.ReactionPlan, error)
	PlanVersions(ctx context.Context, scope plant.PlanScope, kind plant.MatterKind) ([]plant.ReactionPlan, error)
	SavePlan(ctx context.Context, p plant.ReactionPlan) (plant.ReactionPlan, error)
	Matter(ctx context.Context, id uuid.UUID) (plant.Matter, error)
	Contained(ctx context.Context, at time.Time) ([]plant.Containment, error)
	SettledContainments(ctx context.Context, most int) ([]plant.Containment, error)
	Containment(ctx context.Context, id uuid.UUID) (plant.Containment, error)
	Reaches(ctx context.Context, matters ...uuid.UUID) (map[uuid.UUID]plant.Contained, error)
	StateProduct(ctx context.Context, e plant.ContainmentEntry) error
	Gauges(ctx context.Context, stations ...uuid.UUID) ([]plant.GaugeUse, error)
	GaugeChecks(ctx context.Context, gauge uuid.UUID, most int) ([]plant.GaugeCheckRecord, error)
	Settings(ctx context.Context) (plant.Settings, error)
	SettingsVersions(ctx context.Context) ([]plant.Settings, error)
	ChangeSettings(ctx context.Context, c plant.SettingsChange) (plant.Settings, error)
	adjustingStore
	ownerStore
}

// Signer tells whose login and secret these are. Freezing is a signature: the secret
// is entered again.
type Signer interface {
	Check(ctx context.Context, login string, s auth.Secret, from netip.Addr) (plant.Person, error)
}

// Deps is what the surface works with.
type Deps struct {
	Store  Store
	Signer Signer
	Log    *slog.Logger
}

// Desk serves /desk.
type Desk struct {
	log    *slog.Logger
	store  Store
	signer Signer
}

// New makes the surface.
func New(d Deps) *Desk { return &Desk{log: d.Log, store: d.Store, signer: d.Signer} }

// Routes adds the addresses under /desk.
func (d *Desk) Routes(r chi.Router) {
	r.Get("/", ui.Handle(d.log, d.list))
	r.Get("/settings", ui.Handle(d.log, d.showSettings))
	r.Get("/plans", ui.Handle(d.log, d.showPlans))
	r.Get("/plan", ui.Handle(d.log, d.showPlan))
	r.Get("/causes", ui.Handle(d.log, d.showCauses))
	r.Get("/product", ui.Handle(d.log, d.listProduct))
	r.Get("/product/{id}", ui.Handle(d.log, d.showProduct))
	r.Get("/gauges", ui.Handle(d.log, d.listGauges))
	r.Get("/gauges/{id}", ui.Handle(d.log, d.showGauge))
	r.Group(func(r chi.Router) {
		r.Use(ui.Require(plant.DecideProduct))
		r.Post("/product", ui.Handle(d.log, d.openProduct))
		r.Post("/product/{id}", ui.Handle(d.log, d.stateProduct))
	})
	d.ownerRoutes(r)
	r.Get("/characteristic/{id}", ui.Handle(d.log, d.chart))
	r.Get("/characteristic/{id}/revisions", ui.Handle(d.log, d.revisions))
	r.Get("/characteristic/{id}/adjustments", ui.Handle(d.log, d.audit))
	r.Get("/characteristic/{id}/adjusting-points", ui.Handle(d.log, d.showKnobs))
	r.Group(func(r chi.Router) {
		r.Use(ui.Require(plant.SetLimits))
		r.Post("/settings", ui.Handle(d.log, d.changeSettings))
		r.Post("/characteristic/{id}/adjusting-points", ui.Handle(d.log, d.saveKnob))
		r.Post("/plan", ui.Handle(d.log, d.editPlan))
		r.Post("/causes", ui.Handle(d.log, d.editCauses))
		r.Get("/characteristic/{id}/study", ui.Handle(d.log, d.showStudy))
		r.Get("/characteristic/{id}/study/freeze", ui.Handle(d.log, d.showFreeze))
		r.Post("/characteristic/{id}/study/freeze", ui.Handle(d.log, d.freeze))
	})
}

// idIn reads the characteristic that the address names. Only the one spelling in
// which ids are written is an address.
func idIn(r *http.Request) (uuid.UUID, error) {
	text := chi.URLParam(r, "id")
	id, err := uuid.Parse(text)
	if err != nil || id.String() != text {
		return uuid.Nil, ui.NotFound(r)
	}
	return id, nil
}

// address is a page of a characteristic.
func address(id uuid.UUID, parts ...string) string {
	p := "/desk/characteristic/" + id.String()
	for _, part := range parts {
		p += "/" + part
	}
	return p
}
