package admin

import (
	"encoding/json"
	"fmt"
	"log/slog"
	"net/http"

	"github.com/go-chi/chi/v5"

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
}

// Admin serves /admin. Close must be called.
type Admin struct {
	log           *slog.Logger
	machine       string
	about         About
	qualification *qualification
}

// New makes the surface.
func New(d Deps) *Admin {
	if d.Run == nil {
		d.Run = qualify.Report
	}
	return &Admin{log: d.Log, machine: d.Machine, about: d.About, qualification: &qualification{run: d.Run, log: d.Log}}
}

// Close ends a qualification that runs and waits for it; no other can be started.
func (a *Admin) Close() { a.qualification.close() }

const (
	home                 = "/admin"
	qualificationAddress = home + "/qualification"
	recordAddress        = qualificationAddress + ".json"
)

// Routes adds the addresses under /admin.
func (a *Admin) Routes(r chi.Router) {
	r.Get("/", ui.Handle(a.log, a.start))
	r.Get("/qualification", ui.Handle(a.log, a.show))
	r.Post("/qualification", ui.Handle(a.log, a.qualify))
	r.Get("/qualification.json", ui.Handle(a.log, a.download))
	if a.about != nil {
		r.Get("/about", ui.Handle(a.log, a.aboutPage))
	}
}

func shellFor(r *http.Request, title string) ui.Shell {
	s := ui.ShellFor(r, ui.Admin, title)
	s.Styles = []string{"css/admin.css"}
	s.Bar = navigation(s.Words, r.URL.Path)
	return s
}

func (a *Admin) start(w http.ResponseWriter, r *http.Request) error {
	return ui.Render(w, r, http.StatusOK, startPage(shellFor(r, ui.FrameOf(r).Words.T("admin.title"))))
}

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
