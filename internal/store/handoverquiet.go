package store

import (
	"context"
	"fmt"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
)

// readQuiets reads what was said last about keeping each of the matters quiet.
func (g *shiftReading) readQuiets(ctx context.Context, list []*plant.Matter) (map[uuid.UUID]plant.Quiet, error) {
	ids := make([]uuid.UUID, len(list))
	for i, m := range list {
		ids[i] = m.ID
	}
	rows, err := g.tx.Query(ctx, `select distinct on (q.matter_id) q.id, q.matter_id, q.kind, q.at, q.until, q.reason, q.person_id, p.name
		from quieting q join person p on p.id = q.person_id where q.matter_id = any($1) and q.at < $2 order by q.matter_id, q.at desc, q.id desc`, ids, g.until)
	if err != nil {
		return nil, fmt.Errorf("read quieting: %w", err)
	}
	out := map[uuid.UUID]plant.Quiet{}
	var q plant.Quiet
	_, err = pgx.ForEachRow(rows, []any{&q.ID, &q.Matter, &q.Kind, &q.At, &q.Until, &q.Reason, &q.Person, &q.PersonName}, func() error {
		out[q.Matter] = q
		return nil
	})
	if err != nil {
		return nil, fmt.Errorf("read quieting: %w", err)
	}
	return out, nil
}
