package store

import (
	"context"
	"encoding/json"
	"fmt"
	"slices"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
)

// readChanges reads what was done to each machine since the first point that is shown of
// it: charts show it, and the newest of it may ask for a sample.
func (g *gathering) readChanges(ctx context.Context, tx pgx.Tx) error {
	shown, sampled := map[uuid.UUID]time.Time{}, map[uuid.UUID]time.Time{}
	earlier := func(m map[uuid.UUID]time.Time, id uuid.UUID, t time.Time) {
		if have, ok := m[id]; !t.IsZero() && (!ok || t.Before(have)) {
			m[id] = t
		}
	}
	for _, c := range g.characteristics {
		earlier(sampled, c.MachineID, c.LastTaken)
		earlier(shown, c.MachineID, c.LastTaken)
		if len(c.Points) > 0 {
			earlier(shown, c.MachineID, c.Points[0].TakenAt)
		}
	}
	var machines []uuid.UUID
	var since []time.Time
	for id := range g.machines {
		machines, since = append(machines, id), append(since, shown[id])
	}
	// The limit inside makes it a short walk along an index for each machine, also where a
	// characteristic was not sampled for a year.
	rows, err := tx.Query(ctx, `select h.machine_id, h.characteristic_id, h.kind, h.size::text, h.prompted, h.happened_at, h.moves
		from unnest($1::uuid[], $2::timestamptz[]) s (id, at) cross join lateral (
			select * from change x where x.machine_id = s.id and x.happened_at <= $3 order by x.happened_at desc limit 100) h
		where h.happened_at > s.at order by h.happened_at desc, h.id desc`, machines, since, g.now)
	if err != nil {
		return fmt.Errorf("read changes: %w", err)
	}
	var c plant.Change
	var characteristic *uuid.UUID
	var size *string
	var moves []byte
	done := map[uuid.UUID][]plant.Change{}
	_, err = pgx.ForEachRow(rows, []any{&c.Machine, &characteristic, &c.Kind, &size, &c.Prompted, &c.HappenedAt, &moves}, func() error {
		v := c
		v.Characteristic = orNil(characteristic)
		if moves != nil {
			if err := json.Unmarshal(moves, &v.Moves); err != nil {
				return err
			}
		}
		if err := into(&v.Size, size); err != nil {
			return err
		}
		done[v.Machine] = append(done[v.Machine], v)
		if v.HappenedAt.After(sampled[v.Machine]) && (v.Kind == plant.ToolChanged || v.Kind == plant.Adjustment) {
			g.changes[v.Machine] = append(g.changes[v.Machine], v)
		}
		return nil
	})
	if err != nil {
		return fmt.Errorf("read changes: %w", err)
	}
	for _, c := range g.characteristics {
		if len(c.Points) == 0 {
			continue
		}
		for _, ch := range slices.Backward(done[c.MachineID]) {
			_, moves := ch.EffectOn(c.ID)
			if ch.HappenedAt.After(c.Points[0].TakenAt) && (moves || ch.Kind != plant.Adjustment) {
				c.Changes = append(c.Changes, ch)
			}
		}
	}
	return nil
}
