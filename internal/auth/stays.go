package auth

import (
	"context"
	"fmt"
	"slices"
	"time"

	"github.com/alexedwards/scs/v2"
	"github.com/google/uuid"

	"holdfast/internal/plant"
)

// Stay is a place where somebody is signed in.
type Stay struct {
	ID     string    // of the session, as Sessions.ID
	Device uuid.UUID // that it was begun on; Nil is a browser that is no device
	Begun  time.Time
	Seen   time.Time // to the minute or so
	Here   bool      // it is the session of this request
}

// Of lists where a person is signed in, the latest first; devices are all that there are.
// It reads every stored session, since they say inside whose they are: a few hundred in a
// plant. The store must be one that can be read whole.
func (s *Sessions) Of(ctx context.Context, person uuid.UUID, devices []plant.Device) ([]Stay, error) {
	store, ok := s.opt.Store.(scs.IterableStore)
	if !ok {
		return nil, fmt.Errorf("list sessions: %T cannot be read whole", s.opt.Store)
	}
	all, err := store.All()
	if err != nil {
		return nil, fmt.Errorf("list sessions: %w", err)
	}
	letIn := map[uuid.UUID]bool{}
	known := map[uuid.UUID]plant.Device{}
	for _, d := range devices {
		letIn[d.ID], known[d.ID] = d.Active(), d
	}
	here := s.ID(ctx)
	var stays []Stay
	for id, data := range all {
		c, err := s.claimOf(id, data)
		if err != nil {
			return nil, err
		}
		if c.person != person {
			continue
		}
		over, err := s.over(ctx, c, letIn)
		if err != nil {
			return nil, err
		}
		if over || s.opt.Now().Sub(c.seen) >= s.idle(known[c.device]) {
			continue
		}
		stays = append(stays, Stay{ID: id, Device: c.device, Begun: c.begun, Seen: c.seen, Here: id == here})
	}
	slices.SortFunc(stays, func(a, b Stay) int { return b.Begun.Compare(a.Begun) })
	return stays, nil
}

// End ends one session of a person, by the id that Of gave. That it is over already, or is
// somebody else's, changes nothing; then it returns false.
func (s *Sessions) End(person uuid.UUID, id string) (bool, error) {
	data, there, err := s.opt.Store.Find(id)
	if err != nil {
		return false, fmt.Errorf("find a session: %w", err)
	}
	if !there {
		return false, nil
	}
	c, err := s.claimOf(id, data)
	if err != nil || c.person != person {
		return false, err
	}
	if err := s.stored.Delete(id); err != nil {
		return false, fmt.Errorf("end a session: %w", err)
	}
	s.opt.OnEnd(id)
	return true, nil
}
