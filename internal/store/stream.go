package store

import (
	"context"
	"fmt"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
)

// StationStreams lists the streams of the machines that a station serves, by machine, in
// their order; those that are retired are marked.
func (s *Store) StationStreams(ctx context.Context, station uuid.UUID) (map[uuid.UUID][]plant.Stream, error) {
	rows, err := s.pool.Query(ctx, `select x.machine_id, x.id, x.name, x.retired_at is not null
		from stream x join machine m on m.id = x.machine_id where m.station_id = $1 and m.plant_id = $2
		order by x.position, x.name`, station, s.plant())
	if err != nil {
		return nil, fmt.Errorf("read streams: %w", err)
	}
	out := map[uuid.UUID][]plant.Stream{}
	var machine uuid.UUID
	var one plant.Stream
	if _, err := pgx.ForEachRow(rows, []any{&machine, &one.ID, &one.Name, &one.Retired}, func() error {
		out[machine] = append(out[machine], one)
		return nil
	}); err != nil {
		return nil, fmt.Errorf("read streams: %w", err)
	}
	return out, nil
}

// checkStreams refuses an entry with a reading from a stream that its machine never had.
// One that was retired meanwhile is believed: the reading may be older than that.
func checkStreams(ctx context.Context, q querier, e plant.Entry, machine uuid.UUID) error {
	if len(e.Streams) == 0 {
		return nil
	}
	var strange bool
	err := q.QueryRow(ctx, `select exists (select from unnest($1::uuid[]) named (id)
		where not exists (select from stream x where x.id = named.id and x.machine_id = $2))`, e.Streams, machine).Scan(&strange)
	if err != nil {
		return fmt.Errorf("look for the streams of a machine: %w", err)
	}
	if strange {
		return plant.Invalidf("streams", "A reading names a stream that its machine does not have.")
	}
	return nil
}
