package admin

import (
	"context"
	"encoding/json"
	"fmt"
	"log/slog"
	"net/http"
	"net/netip"

	"github.com/go-chi/chi/v5"
	"github.com/google/uuid"

	"holdfast/internal/auth"
	"holdfast/internal/plant"
	"holdfast/internal/qualify"
	"holdfast/web/ui"
)

// Deps is what the surface works with.
type Deps struct {
	Log     *slog.Logger
	Machine string // the name of the machine that the program runs on, "" when it is not known
	Run     Runner // qualify.Report when nil
	About   About  // there is no page about the installation when nil
	Staff   *Staff // people and devices; without it those pages are not there

	Messages Messages // that leave the box

	Store  Store
	Signer Signer
	Hasher Hasher
	// Changed is called after the plant's name, time zone or shifts were changed, so that
	// pages show what holds now.
	Changed func(ctx context.Context) error
	// Forget is called after a person's roles were changed, so that the next page knows.
	Forget func(person uuid.UUID)
}

// Store is what the surface needs of the plant's record.
type Store interface {
	Outline(ctx context.Context) (plant.Outline, error)
	ChangePlant(ctx context.Context, p plant.Plant, by uuid.UUID) error
	SetShifts(ctx context.Context, shifts []plant.Shift, by uuid.UUID) error

	AddLine(ctx context.Context, l plant.Line, by uuid.UUID) error
	AddStation(ctx context.Context, s plant.Station, by uuid.UUID) error
	AddMachine(ctx context.Context, m plant.Machine, by uuid.UUID) error
	AddPart(ctx context.Context, p plant.Part, by uuid.UUID) error
	AddGauge(ctx context.Context, g plant.Gauge, by uuid.UUID) error
	ChangeLine(ctx context.Context, l plant.Line, by uuid.UUID) error
	ChangeStation(ctx context.Context, s plant.Station, by uuid.UUID) error
	ChangeMachine(ctx context.Context, m plant.Machine, by uuid.UUID) error
	ChangePart(ctx context.Context, p plant.Part, by uuid.UUID) error
	ChangeGauge(ctx context.Context, g plant.Gauge, by uuid.UUID) error
	Retire(ctx context.Context, kind plant.Thing, id uuid.UUID, retired bool, by uuid.UUID) error
	Move(ctx context.Context, kind plant.Thing, id uuid.UUID, up bool, by uuid.UUID) error

	AddCharacteristic(ctx context.Context, c plant.Characteristic, s plant.Setup, by uuid.UUID) error
	ChangeCharacteristic(ctx context.Context, c plant.Characteristic, by uuid.UUID) error
	ChangeSetup(ctx context.Context, characteristic uuid.UUID, s plant.Setup, replaces int, by uuid.UUID) error
	CharacteristicSetups(ctx context.Context, id uuid.UUID) ([]plant.Setup, error)
	SubgroupCount(ctx context.Context, id uuid.UUID) (int, error)
	Revisions(ctx context.Context, characteristic uuid.UUID) ([]plant.Revision, error)
	FreezeKnown(ctx context.Context, k plant.KnownLimits) (plant.Revision, error)

	AddPerson(ctx context.Context, p plant.Person, secretHash string, by uuid.UUID) error
	AddRoles(ctx context.Context, person uuid.UUID, roles plant.Roles, by uuid.UUID) error
	LastRound(ctx context.Context, station uuid.UUID) (plant.RoundRecord, error)

	KeepDescription(ctx context.Context, d plant.Description) error
	Description(ctx context.Context, id, person uuid.UUID) (plant.Description, error)
	Add(ctx context.Context, by uuid.UUID, plan func(plant.Outline) (plant.Addition, error)) error
}

// Signer tells whose login and secret these are. Stating limits is a signature: the
// secret is entered again.
type Signer interface {
	Check(ctx context.Context, login string, s auth.Secret, from netip.Addr) (plant.Person, error)
}

// Hasher makes what is stored of a secret.
type Hasher interface {
	Hash(ctx context.Context, s auth.Secret) (string, error)
}

// Admin serves /admin. Close must be called.
type Admin struct {
	log           *slog.Logger
	machine       string
	about         About
	store         Store
	signer        Signer
	hasher        Hasher
	changed       func(ctx context.Context) error
	forget        func(person uuid.UUID)
	qualification *qualification
	staff         *Staff
	messages      Messages
}

// New makes the surface.
func New(d Deps) *Admin {
	if d.Run == nil {
		d.Run = qualify.Report
	}
	if d.Changed == nil {
		d.Changed = func(context.Context) error { return nil }
	}
	if d.Forget == nil {
		d.Forget = func(uuid.UUID) {}
	}
	return &Admin{log: d.Log, machine: d.Machine, about: d.About, messages: d.Messages, store: d.Store, signer: d.Signer, hasher: d.Hasher, changed: d.Changed, forget: d.Forget,
		qualification: &qualification{run: d.Run, log: d.Log}, staff: d.Staff}
}

// Close ends a qualification that runs and waits for it; no other can be started.
func (a *Admin) Close() { a.qualification.close() }

const (
	home                 = "/admin"
	qualificationAddress = home + "/qualification"
	recordAddress        = qualificationAddress + ".json"
)

// Routes adds the addresses under /admin. The router lets in who may arrange the plant;
// what is the administrator's or the engineer's alone asks for more.
func (a *Admin) Routes(r chi.Router) {
	r.Get("/", ui.Handle(a.log, a.overview))
	a.setupRoutes(r)
	r.Group(func(r chi.Router) {
		r.Use(ui.Require(plant.Manage))
		a.staffRoutes(r)
		r.Get("/qualification", ui.Handle(a.log, a.show))
		r.Post("/qualification", ui.Handle(a.log, a.qualify))
		r.Get("/qualification.json", ui.Handle(a.log, a.download))
		if a.about != nil {
			r.Get("/about", ui.Handle(a.log, a.aboutPage))
		}
		if a.messages.Store != nil {
			a.messageRoutes(r)
		}
	})
}

// get and post add a route whose handler returns an error; a post's form is read first.
func (a *Admin) get(r chi.Router, pattern string, f func(http.ResponseWriter, *http.Request) error) {
	r.Get(pattern, ui.Handle(a.log, f))
}

func (a *Admin) post(r chi.Router, pattern string, f func(http.ResponseWriter, *http.Request) error) {
	r.Post(pattern, ui.Handle(a.log, func(w http.ResponseWriter, r *http.Request) error {
		if err := ui.ParseForm(w, r); err != nil {
			return err
		}
		return f(w, r)
	}))
}

// setupRoutes adds what the plant is set up by.
func (a *Admin) setupRoutes(r chi.Router) {
	a.get(r, "/start", a.showStart)
	a.post(r, "/start/{step}", a.doStart)
	a.get(r, "/plant", a.showPlant)
	a.post(r, "/plant", a.changePlant)
	a.post(r, "/plant/shifts", a.changeShifts)
	a.get(r, "/floor", a.showFloor)
	a.get(r, "/parts", a.showParts)
	a.get(r, "/thing/{kind}/new", a.showThing)
	a.post(r, "/thing/{kind}/new", a.saveThing)
	a.get(r, "/thing/{kind}/{id}", a.showThing)
	a.post(r, "/thing/{kind}/{id}", a.saveThing)
	a.post(r, "/thing/{kind}/{id}/retire", a.retireThing)
	a.post(r, "/thing/{kind}/{id}/move", a.moveThing)
	r.Group(func(r chi.Router) {
		r.Use(ui.Require(plant.SetLimits))
		a.get(r, "/gauges", a.showGauges)
		a.get(r, "/characteristics", a.showCharacteristics)
		a.get(r, "/characteristic/new", a.showCharacteristic)
		a.post(r, "/characteristic/new", a.addCharacteristic)
		a.get(r, "/characteristic/{id}", a.showCharacteristic)
		a.post(r, "/characteristic/{id}", a.changeCharacteristic)
		a.get(r, "/characteristic/{id}/known-limits", a.showKnown)
		a.post(r, "/characteristic/{id}/known-limits", a.freezeKnown)
		a.get(r, "/chart-choice", a.showChoice)
		a.get(r, "/description", a.showDescription)
		a.post(r, "/description", a.sendDescription)
		a.get(r, "/description/{id}", a.previewDescription)
		a.post(r, "/description/{id}", a.confirmDescription)
		a.get(r, "/description/files/{file}", a.describeFile)
	})
}

func shellFor(r *http.Request, title string) ui.Shell {
	s := ui.ShellFor(r, ui.Admin, title)
	s.Bar = navigation(s.Words, s.Person, r.URL.Path)
	return s
}

// idIn reads an id from the address. Only the one spelling in which ids are written is an
// address.
func idIn(r *http.Request) (uuid.UUID, error) {
	text := chi.URLParam(r, "id")
	id, err := uuid.Parse(text)
	if err != nil || id.String() != text {
		return uuid.Nil, ui.NotFound(r)
	}
	return id, nil
}

func newID() uuid.UUID { return uuid.Must(uuid.NewV7()) }

// show is the qualification as it stands: never run, running, or the last record.
// With ?values=open every value can be read without opening its group.
func (a *Admin) show(w http.ResponseWriter, r *http.Request) error {
	s := shellFor(r, ui.FrameOf(r).Words.T("admin.qualification"))
	v := newPage(s, a.machine, a.qualification.state(), r.URL.Query().Get("values") == "open")
	switch {
	case v.Progress != nil:
		s.Scripts = []string{"js/admin-progress.js"}
	case v.Record != nil:
		s.Scripts = []string{"js/admin-print.js"}
	}
	return ui.Render(w, r, http.StatusOK, qualificationPage(s, v))
}

func (a *Admin) qualify(w http.ResponseWriter, r *http.Request) error {
	f := ui.FrameOf(r)
	if !a.qualification.start(r.Context(), f.Person.Name, f.Now) {
		return &plant.Error{Kind: plant.Conflict, Message: f.Words.T("admin.stopping")}
	}
	ui.Redirect(w, r, qualificationAddress)
	return nil
}

// file is the record as it is kept outside of the program: what the command prints as
// JSON, with where and by whom it was run.
type file struct {
	Plant   string `json:"plant"`
	Machine string `json:"machine"`
	RunBy   string `json:"run_by"`
	qualify.Record
}

func (a *Admin) download(w http.ResponseWriter, r *http.Request) error {
	last := a.qualification.state().Last
	if last == nil {
		return ui.NotFound(r)
	}
	body, err := json.MarshalIndent(file{ui.FrameOf(r).Plant.Name, a.machine, last.By, last.Record}, "", "  ")
	if err != nil {
		return fmt.Errorf("encode a qualification: %w", err)
	}
	h := w.Header()
	h.Set("Content-Type", "application/json")
	h.Set("Content-Disposition", `attachment; filename="holdfast-qualification-`+last.Record.Began.UTC().Format("20060102-150405")+`.json"`)
	h.Set("Cache-Control", "no-store")
	_, _ = w.Write(append(body, '\n')) // fails only when nobody listens any more
	return nil
}
