// Package escalation looks after what nobody takes: every few seconds it asks the record
// what calls for somebody, decides by the plant's rules which steps are due, and has them
// fired. It keeps nothing in memory, so that any number of servers may look at once and
// one that was started again goes on where the record stands: the store fires each step
// once. It knows no SQL, no pages, and not how messages travel.
package escalation

import (
	"context"
	"errors"
	"log/slog"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
)

// Store is the plant's record.
type Store interface {
	StationStates(ctx context.Context, points int, ids ...uuid.UUID) ([]plant.StationState, error)
	KeepOverdue(ctx context.Context, states []plant.StationState) error
	FireStep(ctx context.Context, c plant.Call, messages []plant.Message) (fired bool, err error)
}

// Watch looks again and again.
type Watch struct {
	Store   Store
	Compose func(plant.Call) []plant.Message // what leaves the box because of a step, a message for each target
	Log     *slog.Logger
	Now     func() time.Time
	Every   time.Duration // 0: 5 s
}

// Run looks until ctx ends.
func (w *Watch) Run(ctx context.Context) {
	every := w.Every
	if every == 0 {
		every = 5 * time.Second
	}
	t := time.NewTicker(every)
	defer t.Stop()
	for {
		if _, err := w.Look(ctx); err != nil && ctx.Err() == nil {
			w.Log.Warn("could not look after what nobody takes; the next look tries again", "error", err)
		}
		select {
		case <-ctx.Done():
			return
		case <-t.C:
		}
	}
}

// Look fires what is due now and returns how many steps it fired. A step that cannot be
// fired does not keep the others from being.
func (w *Watch) Look(ctx context.Context) (fired int, err error) {
	states, err := w.Store.StationStates(ctx, 0)
	if err != nil {
		return 0, err
	}
	failed := []error{w.Store.KeepOverdue(ctx, states)}
	for _, c := range plant.CallsDue(states, w.Now()) {
		var messages []plant.Message
		if c.Step == plant.ByMessage && w.Compose != nil {
			messages = w.Compose(c)
		}
		ok, err := w.Store.FireStep(ctx, c, messages)
		if err != nil {
			failed = append(failed, err)
			continue
		}
		if ok {
			fired++
			w.Log.Info("nobody has taken it", "station", c.Station.Name, "characteristic", c.Characteristic.Name,
				"calls", string(c.Kind), "step", int(c.Step), "since", c.Since, "messages", len(messages))
		}
	}
	return fired, errors.Join(failed...)
}
