package store

import (
	"context"
	"fmt"

	"holdfast/internal/plant"
)

// FreezeKnown freezes limits from a centre and a sigma that an engineer states, signed by
// the person, so that a characteristic is judged from its first round on. The revision's
// basis says that they were given. The caller has checked that the secret was entered
// again. Where limits are in force already it is a Conflict: those are revised by a study.
func (s *Store) FreezeKnown(ctx context.Context, k plant.KnownLimits) (plant.Revision, error) {
	h, err := s.History(ctx, k.Characteristic, plant.Stretch{Last: 1})
	if err != nil {
		return plant.Revision{}, err
	}
	setup := h.State.Setup
	if err := k.Check(setup); err != nil {
		return plant.Revision{}, err
	}
	switch {
	case setup.Version != k.SetupVersion:
		return plant.Revision{}, plant.Conflictf("", "The set-up was changed meanwhile. Look at it again.")
	case h.State.Revision != nil:
		return plant.Revision{}, plant.Conflictf("", "Limits are in force already. Revise them by a limit study.")
	case h.State.Retired:
		return plant.Revision{}, plant.Conflictf("", "It is retired. Bring it back first.")
	}
	r := k.Revision(setup)
	r.ID = newID()
	f := plant.FreezeRequest{Characteristic: k.Characteristic, SetupVersion: k.SetupVersion, After: k.After, Rules: r.Rules, Reason: k.Reason, Person: k.Person}
	if err := f.Check(s.now()); err != nil {
		return plant.Revision{}, err
	}
	if err := s.freeze(ctx, &r, f); err != nil {
		return plant.Revision{}, fmt.Errorf("freeze known limits: %w", err)
	}
	s.measured.Delete(h.State.StationID)
	s.changed(h.State.StationID)
	return r, nil
}
