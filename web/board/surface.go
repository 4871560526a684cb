package board

import (
	"context"
	"log/slog"
	"net/http"

	"github.com/go-chi/chi/v5"
	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/chart"
	"holdfast/web/ui"
)

// Store is what the board needs of the plant's record.
type Store interface {
	StationStates(ctx context.Context, points int, ids ...uuid.UUID) ([]plant.StationState, error)
}

// Deps is what the surface works with.
type Deps struct {
	Store     Store
	Handovers HandoverStore // there is no handover when nil
	Log       *slog.Logger
}

// Board serves /board.
type Board struct {
	store     Store
	handovers HandoverStore
	log       *slog.Logger
}

// New makes the surface.
func New(d Deps) *Board { return &Board{store: d.Store, handovers: d.Handovers, log: d.Log} }

// Routes adds the addresses under /board.
func (b *Board) Routes(r chi.Router) {
	r.Get("/", ui.Handle(b.log, b.show))
	r.Get("/alarms", ui.Handle(b.log, b.alarms))
	r.Get("/at/{station}/{characteristic}", ui.Handle(b.log, b.toStation))
	r.Get("/at/{station}/{characteristic}/{matter}", ui.Handle(b.log, b.toStation))
	r.Get("/chart/{station}/{characteristic}", ui.Handle(b.log, b.toChart))
	if b.handovers != nil {
		b.handoverRoutes(r)
	}
}

func (b *Board) show(w http.ResponseWriter, r *http.Request) error {
	states, err := b.store.StationStates(r.Context(), chart.SparkLength)
	if err != nil {
		return err
	}
	shell := ui.ShellFor(r, ui.Board, ui.FrameOf(r).Words.T("board.title"))
	shell.Topics = []string{ui.TopicBoard}
	shell.Scripts = []string{"js/board.js", "js/needs.js"}
	shell.OwnMain = true
	head := newHead(shell.Format, shell.Plant)
	shell.Bar, shell.BarEnd = place(shell.Plant.Name, head), clock(head)
	v := newPage(shell.Format, shell.Plant, states, readChoice(r.URL.Query(), states))
	v.Desk = shell.Person.May(plant.SeeDesk)
	v.Handover = b.handovers != nil && shell.SignedIn
	return ui.Render(w, r, http.StatusOK, page(shell, v))
}

// toStation leads to where a characteristic is worked at, or to its open matter there;
// who does not take rounds is led to its chart.
func (b *Board) toStation(w http.ResponseWriter, r *http.Request) error {
	return lead(w, r, plant.TakeRounds)
}

// toChart leads to the chart of a characteristic; who does not see the desk is led to
// its station.
func (b *Board) toChart(w http.ResponseWriter, r *http.Request) error {
	return lead(w, r, plant.SeeDesk)
}

func lead(w http.ResponseWriter, r *http.Request, first plant.Action) error {
	f := ui.FrameOf(r)
	if f.OnWall() {
		ui.Redirect(w, r, ui.DeviceHome(f.Device)) // nobody stands there to work at it
		return nil
	}
	var ids [3]uuid.UUID
	for i, name := range [...]string{"station", "characteristic", "matter"} {
		text := chi.URLParam(r, name)
		if name == "matter" && text == "" {
			continue
		}
		id, err := uuid.Parse(text)
		if err != nil || id.String() != text {
			ui.Deny(w, r, http.StatusNotFound)
			return nil
		}
		ids[i] = id
	}
	second := plant.SeeDesk
	if first == plant.SeeDesk {
		second = plant.TakeRounds
	}
	for _, action := range [...]plant.Action{first, second} {
		switch {
		case !f.Person.May(action):
		case action == plant.SeeDesk:
			ui.Redirect(w, r, "/desk/characteristic/"+ids[1].String())
			return nil
		case ids[2] != uuid.Nil:
			ui.Redirect(w, r, "/station/"+ids[0].String()+"/matter/"+ids[2].String())
			return nil
		default:
			ui.Redirect(w, r, "/station/"+ids[0].String())
			return nil
		}
	}
	ui.Deny(w, r, http.StatusForbidden)
	return nil
}

// stationAddress, matterAddress and chartAddress are the same for everybody.
func stationAddress(station, characteristic uuid.UUID) string {
	return "/board/at/" + station.String() + "/" + characteristic.String()
}

func matterAddress(station, characteristic, matter uuid.UUID) string {
	return stationAddress(station, characteristic) + "/" + matter.String()
}

func chartAddress(station, characteristic uuid.UUID) string {
	return "/board/chart/" + station.String() + "/" + characteristic.String()
}
