package ui

import (
	"context"

	"github.com/google/uuid"

	"holdfast/internal/auth"
	"holdfast/internal/plant"
)

// Stays knows where people are signed in, and ends single sessions.
type Stays interface {
	Of(ctx context.Context, person uuid.UUID, devices []plant.Device) ([]auth.Stay, error)
	// End ends one; that it is over already, or not this person's, is no error.
	End(ctx context.Context, person uuid.UUID, session string) error
}

// StayView is one place where somebody is signed in.
type StayView struct {
	Session, Where, Since, Used string
	Here                        bool // the session of this request, which ends by signing out
}

// StaysOf lists where a person is signed in; devices are all that there are.
func StaysOf(ctx context.Context, stays Stays, s Shell, person uuid.UUID, devices []plant.Device) ([]StayView, error) {
	all, err := stays.Of(ctx, person, devices)
	if err != nil {
		return nil, err
	}
	names := map[uuid.UUID]string{uuid.Nil: s.Words.T("account.a-browser")}
	for _, d := range devices {
		names[d.ID] = d.Name
	}
	var out []StayView
	for _, one := range all {
		out = append(out, StayView{Session: one.ID, Where: names[one.Device], Since: s.Format.Clock(one.Begun), Used: s.Format.Clock(one.Seen), Here: one.Here})
	}
	return out, nil
}
