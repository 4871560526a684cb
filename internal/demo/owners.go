package demo

import (
	"context"
	"errors"
	"time"

	"holdfast/internal/plant"
)

// owners computes how every characteristic stands at the end of the history and states
// what engineering has said meanwhile: the spoke holes, drilled too wide, are gauged one by
// one, and the first that is a little below capable is accepted for a quarter.
func (b *builder) owners(ctx context.Context) error {
	st := b.store.WithClock(func() time.Time { return b.end })
	if _, err := st.RefreshStandings(ctx, true); err != nil {
		return err
	}
	states, err := st.StationStates(ctx, 1)
	if err != nil {
		return err
	}
	by := b.people[plant.Engineer][0]
	accepted := false
	day := b.end.In(b.zone).AddDate(0, 3, 1)
	quarter := time.Date(day.Year(), day.Month(), day.Day(), 0, 0, 0, 0, b.zone) // to the end of the day before
	for _, s := range states {
		for _, c := range s.Characteristics {
			if c.Ownership().Reason != plant.NotCapable {
				continue
			}
			switch {
			case c.Standing.Figure.Grade == plant.AtAccepted && !accepted:
				accepted = true
				err = errors.Join(err, st.Accept(ctx, plant.Acceptance{ID: id(), Characteristic: c.ID, SetupVersion: c.Setup.Version,
					Reason: "The drawing is being widened with the customer, who takes these parts until then.",
					Told:   plant.FormatFloat(c.Standing.Figure.Bound, 2), Until: quarter, Person: by}))
			case s.Family == "drilling":
				err = errors.Join(err, st.StateProtection(ctx, plant.Protection{ID: id(), Characteristic: c.ID, Method: plant.InspectAll,
					Instruction: "Pin gauge GO 2.55 in every hole. What does not pass goes into the red box, with the time on the card.",
					DecidedBy:   "Quality manager", From: b.end.AddDate(0, 0, -9), Person: by}))
			}
		}
	}
	return err
}
