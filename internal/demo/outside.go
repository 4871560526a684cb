package demo

import (
	"context"
	"encoding/json"
	"time"

	"holdfast/internal/plant"
)

// outside is what the test bench sent this morning and could not be taken: after a
// service its display was left in another unit.
func (b *builder) outside(ctx context.Context) error {
	all, err := b.store.Devices(ctx)
	if err != nil {
		return err
	}
	at := b.end.Add(-12 * time.Minute)
	st := b.store.WithClock(func() time.Time { return at })
	for _, d := range all {
		if d.Kind != plant.Sender {
			continue
		}
		const line = "0.023 lbf ft"
		content, err := json.Marshal(map[string]any{"line": line, "why": "unit", "at": at})
		if err != nil {
			return err
		}
		why := plant.Invalidf("line", "A reading came in another unit: %q.", line)
		if err := st.SetAside(ctx, plant.Aside{Station: d.Station, About: id(), Device: d.ID, Why: why}, content); err != nil {
			return err
		}
	}
	return nil
}
