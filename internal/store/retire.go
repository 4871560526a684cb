package store

import (
	"context"
	"fmt"
	"slices"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
)

// thing is what retiring and ordering a kind of thing need to know.
type thing struct {
	table    string
	siblings string // the column that things which stand in one order share, "" when they stand by name
	stations string // the stations whose pages show it
	holds    string // rows where something in use still hangs on $1, which keeps it from being retired
	inUse    *plant.Error
	lost     string // a row where what $1 hangs on is retired itself, so that it cannot come back
	above    *plant.Error
}

var things = map[plant.Thing]thing{
	plant.ALine: {table: "line", siblings: "plant_id", stations: `select id from station where line_id = $1`,
		holds: `select from station where line_id = $1 and retired_at is null`, inUse: plant.Conflictf("", "This line has stations that are in use. Retire them first.")},
	plant.AStation: {table: "station", siblings: "line_id", stations: `select id from station where id = $1`,
		holds: `select from machine where station_id = $1 and retired_at is null`, inUse: plant.Conflictf("", "This station has machines that are in use. Retire them first."),
		lost: `select from station t join line l on l.id = t.line_id where t.id = $1 and l.retired_at is not null`, above: plant.Conflictf("", "Its line is retired. Bring the line back first.")},
	plant.AMachine: {table: "machine", siblings: "station_id", stations: `select station_id from machine where id = $1`,
		holds: `select from characteristic where machine_id = $1 and retired_at is null`, inUse: plant.Conflictf("", "Characteristics are measured on this machine. Retire them first."),
		lost: `select from machine t join station l on l.id = t.station_id where t.id = $1 and l.retired_at is not null`, above: plant.Conflictf("", "Its station is retired. Bring the station back first.")},
	plant.APart: {table: "part", stations: `select distinct station_id from characteristic where part_id = $1`,
		holds: `select from characteristic where part_id = $1 and retired_at is null
			union all select from machine m join lateral (select part_id from machine_state x where x.machine_id = m.id order by x.at desc, x.id desc limit 1) x on true
				where x.part_id = $1 and m.retired_at is null`, inUse: plant.Conflictf("", "A machine makes this part, or a characteristic is measured on it. Change that first.")},
	plant.AGauge: {table: "gauge", stations: `select id from station where id = $1`,
		holds: `select from setup u join characteristic_state cs on cs.characteristic_id = u.characteristic_id and cs.setup_version = u.version
			join characteristic c on c.id = u.characteristic_id where u.gauge_id = $1 and c.retired_at is null`, inUse: plant.Conflictf("", "Characteristics are measured with this gauge. Give them another first.")},
	plant.ACharacteristic: {table: "characteristic", siblings: "station_id", stations: `select station_id from characteristic where id = $1`,
		holds: `select from matter where characteristic_id = $1 and closed_at is null`, inUse: plant.Conflictf("", "A matter is open on it. It must be closed first."),
		lost: `select from characteristic t join machine l on l.id = t.machine_id where t.id = $1 and l.retired_at is not null`, above: plant.Conflictf("", "Its machine is retired. Bring the machine back first.")},
}

// Retire takes a thing out of use, or brings it back. What was recorded stays as it is.
// What something in use still hangs on is a Conflict.
func (s *Store) Retire(ctx context.Context, kind plant.Thing, id uuid.UUID, retired bool, by uuid.UUID) error {
	k, ok := things[kind]
	if !ok {
		return fmt.Errorf("retire: there is no kind %q", kind)
	}
	return s.arranged(ctx, by, func(ctx context.Context, a *arranging) error {
		// Whoever hangs something on it meanwhile waits for the row.
		var name string
		err := a.tx.QueryRow(ctx, `select name from `+k.table+` where id = $1 and plant_id = $2 for update`, id, s.plant()).Scan(&name)
		if err != nil {
			return missing(err, "There is no such thing in this plant.")
		}
		check, refusal := k.holds, k.inUse
		if !retired {
			check, refusal = k.lost, k.above
		}
		if check != "" {
			var hangs bool
			if err := a.tx.QueryRow(ctx, `select exists (`+check+`)`, id).Scan(&hangs); err != nil {
				return fmt.Errorf("look what hangs on it: %w", err)
			}
			if hangs {
				return refusal
			}
		}
		var at any
		what := " brought back"
		if retired {
			at, what = s.now(), " retired"
		}
		a.say(string(kind)+what, id, map[string]any{"name": name, "retired": retired})
		if err := one(a.tx.Exec(ctx, `update `+k.table+` set retired_at = $3 where id = $1 and plant_id = $2`, id, s.plant(), at)); err != nil {
			return err
		}
		return a.stationsOf(ctx, k.stations, id)
	})
}

// Move moves a thing one place up or down among those in use that it stands with. At the
// end it stays where it is.
func (s *Store) Move(ctx context.Context, kind plant.Thing, id uuid.UUID, up bool, by uuid.UUID) error {
	k, ok := things[kind]
	if !ok || k.siblings == "" {
		return plant.Invalidf("", "These stand by their names and have no other order.")
	}
	return s.arranged(ctx, by, func(ctx context.Context, a *arranging) error {
		ids, err := all(ctx, a.tx, pgx.RowTo[uuid.UUID], `select id from `+k.table+` where plant_id = $1
			and `+k.siblings+` = (select `+k.siblings+` from `+k.table+` where id = $2) and retired_at is null order by position, name, id for update`, s.plant(), id)
		if err != nil {
			return fmt.Errorf("read order: %w", err)
		}
		i := slices.Index(ids, id)
		if i < 0 {
			return plant.NotFoundf("", "There is no such thing in this plant.")
		}
		j := i + 1
		if up {
			j = i - 1
		}
		if j >= 0 && j < len(ids) {
			ids[i], ids[j] = ids[j], ids[i]
		}
		b := &pgx.Batch{}
		for position, id := range ids {
			b.Queue(`update `+k.table+` set position = $2 where id = $1`, id, position)
		}
		if err := a.tx.SendBatch(ctx, b).Close(); err != nil {
			return fmt.Errorf("write order: %w", err)
		}
		a.say(string(kind)+"s put in order", id, map[string]any{"order": ids})
		return a.stationsOf(ctx, k.stations, id)
	})
}
