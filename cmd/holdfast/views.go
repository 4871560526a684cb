package main

import (
	"context"
	"sync"
	"sync/atomic"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/live"
	"holdfast/internal/plant"
	"holdfast/internal/store"
	"holdfast/web/board"
	"holdfast/web/calls"
	"holdfast/web/desk"
	"holdfast/web/station"
	"holdfast/web/ui"
)

type plantID = uuid.UUID

// boardPoints is how many points a card of the board shows.
const boardPoints = 25

// views renders what the hub pushes. It keeps the state of all stations, reads again
// only those that changed, and now and then all, since ages and due times move with the
// clock; so a change costs one query however many stations and viewers there are.
type views struct {
	store *store.Store
	plant *atomic.Pointer[plant.Plant]
	now   func() time.Time

	mu    sync.Mutex
	dirty map[uuid.UUID]bool

	// Used by the hub's one rendering goroutine only.
	states   []plant.StationState
	place    map[uuid.UUID]int
	readAll  time.Time
	stations map[uuid.UUID]uuid.UUID // characteristic to station
}

func newViews(st *store.Store, p *atomic.Pointer[plant.Plant], now func() time.Time) *views {
	return &views{store: st, plant: p, now: now, dirty: map[uuid.UUID]bool{}, place: map[uuid.UUID]int{}, stations: map[uuid.UUID]uuid.UUID{}}
}

// changed notes the stations and names the topics that show them. Charts are marked by
// station as well: the hub drops what nobody watches.
func (v *views) changed(stations []uuid.UUID) []string {
	v.mu.Lock()
	defer v.mu.Unlock()
	topics := append(ui.InEveryLanguage(ui.Board, ui.TopicBoard), ui.InEveryLanguage(ui.Station, ui.TopicCalls)...)
	for _, id := range stations {
		v.dirty[id] = true
		topics = append(topics, ui.InEveryLanguage(ui.Station, ui.TopicStation(id))...)
		for c, st := range v.stations {
			if st == id {
				topics = append(topics, ui.InEveryLanguage(ui.Desk, ui.TopicChart(c))...)
			}
		}
	}
	return topics
}

// refreshAll is how old the state of stations that did not change may be.
const refreshAll = 9 * time.Second

func (v *views) refresh(ctx context.Context) error {
	now := v.now()
	v.mu.Lock()
	ids := make([]uuid.UUID, 0, len(v.dirty))
	for id := range v.dirty {
		ids = append(ids, id)
	}
	clear(v.dirty)
	v.mu.Unlock()
	all := v.states == nil || now.Sub(v.readAll).Abs() >= refreshAll
	if all {
		ids = nil
	} else if len(ids) == 0 {
		return nil
	}
	states, err := v.store.StationStates(ctx, boardPoints, ids...)
	if err != nil {
		v.mu.Lock()
		for _, id := range ids {
			v.dirty[id] = true
		}
		v.mu.Unlock()
		v.readAll = time.Time{}
		return err
	}
	if all {
		v.states, v.readAll = states, now
		clear(v.place)
		for i, s := range states {
			v.place[s.ID] = i
		}
	} else {
		for _, s := range states {
			i, known := v.place[s.ID]
			if !known {
				v.readAll = time.Time{} // a new station: its place is found by reading all
				return v.refresh(ctx)
			}
			v.states[i] = s
		}
	}
	v.mu.Lock()
	defer v.mu.Unlock()
	for _, s := range states {
		for _, c := range s.Characteristics {
			v.stations[c.ID] = s.ID
		}
	}
	return nil
}

func (v *views) render(ctx context.Context, topics []string) (map[string][]live.Fragment, error) {
	if err := v.refresh(ctx); err != nil {
		return nil, err
	}
	p := *v.plant.Load()
	now := v.now()
	out := make(map[string][]live.Fragment, len(topics))
	for _, topic := range topics {
		what, w, ok := ui.TopicLanguage(topic)
		if !ok {
			continue
		}
		f := ui.NewFormat(w, p.Location, now)
		var fragments []live.Fragment
		var err error
		if what == ui.TopicBoard {
			fragments, err = board.Fragments(f, p, v.states)
		} else if what == ui.TopicCalls {
			fragments, err = calls.Fragments(f, plant.OpenCalls(v.states, now))
		} else if id, ok := ui.StationOfTopic(what); ok {
			if i, known := v.place[id]; known {
				fragments, err = station.Fragments(f, v.states[i])
			}
		} else if id, ok := ui.ChartOfTopic(what); ok {
			fragments, err = v.chart(ctx, f, id)
		}
		if err != nil {
			return nil, err
		}
		out[topic] = fragments
	}
	return out, nil
}

// chart renders the live parts of a desk chart: its newest stretch.
func (v *views) chart(ctx context.Context, f ui.Format, id uuid.UUID) ([]live.Fragment, error) {
	h, err := v.store.History(ctx, id, plant.Stretch{Last: desk.LiveStretch})
	if plant.IsKind(err, plant.NotFound) {
		return nil, nil
	}
	if err != nil {
		return nil, err
	}
	return desk.Fragments(f, h)
}
