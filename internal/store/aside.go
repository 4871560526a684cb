package store

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/json"
	"errors"
	"fmt"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
)

// setAside keeps what could not be taken as it came. The same thing set aside twice is
// kept once.
func (s *Store) setAside(ctx context.Context, a plant.Aside, what any, digest [32]byte) error {
	body, err := json.Marshal(what)
	if err != nil {
		return fmt.Errorf("encode what is set aside: %w", err)
	}
	format, args := a.Why.Sentence()
	if args == nil {
		args = []any{}
	}
	said, err := json.Marshal(args)
	if err != nil {
		return fmt.Errorf("encode why it is set aside: %w", err)
	}
	_, err = s.pool.Exec(ctx, `insert into set_aside (id, plant_id, station_id, about, why, format, args, body, digest, came_at, person_id, device_id)
		select $1, $2, st.id, $4, $5, $10, $11, $6, $7, $8, p.id, $12
		from (values (1)) one left join station st on st.id = $3 and st.plant_id = $2 left join person p on p.id = $9
		on conflict on constraint set_aside_once do nothing`,
		newID(), s.plant(), a.Station, a.About, a.Why.Message, withoutNUL(body), digest[:], s.now(), a.Person, format, withoutNUL(said), orNull(a.Device))
	if err != nil {
		return fmt.Errorf("set aside: %w", err)
	}
	if a.Station != uuid.Nil {
		s.changed(a.Station)
	}
	return nil
}

// withoutNUL replaces the one character that JSON knows and Postgres does not keep.
func withoutNUL(body []byte) []byte {
	return bytes.ReplaceAll(body, []byte(`\u0000`), []byte(`\ufffd`))
}

// SetAside keeps what a device sent and could not be taken, with the reason. content is
// what it said, as JSON; the same content under the same number is kept once.
func (s *Store) SetAside(ctx context.Context, a plant.Aside, content json.RawMessage) error {
	return s.setAside(ctx, a, content, sha256.Sum256(content))
}

// readAsides reads the newest of what waits for a person at each station; its cost does
// not depend on how much waits.
func (g *gathering) readAsides(ctx context.Context, tx pgx.Tx, stations []uuid.UUID) error {
	rows, err := tx.Query(ctx, `select a.id, a.station_id, a.about, a.device_id, coalesce(d.name, ''), a.person_id, a.came_at, a.why, a.format, a.args
		from unnest($1::uuid[]) s (id)
		cross join lateral (select * from set_aside x where x.station_id = s.id and x.settled_at is null
			order by x.came_at desc, x.id desc limit $2) a
		left join device d on d.id = a.device_id
		order by a.came_at desc, a.id desc`, stations, plant.ShownAsides+1)
	if err != nil {
		return fmt.Errorf("read what was set aside: %w", err)
	}
	var a plant.Aside
	var device, person *uuid.UUID
	var why, format string
	var args []byte
	_, err = pgx.ForEachRow(rows, []any{&a.ID, &a.Station, &a.About, &device, &a.DeviceName, &person, &a.CameAt, &why, &format, &args}, func() error {
		one := a
		one.Device, one.Person = orNil(device), orNil(person)
		said, err := argsOf(args)
		if err != nil {
			return err
		}
		one.Restore(why, format, said)
		if st := g.byStation[one.Station]; len(st.Aside.Newest) < plant.ShownAsides {
			st.Aside.Newest = append(st.Aside.Newest, one)
		} else {
			st.Aside.More = true
		}
		return nil
	})
	if err != nil {
		return fmt.Errorf("read what was set aside: %w", err)
	}
	return nil
}

// argsOf reads the arguments of a sentence: text, and numbers as what they were.
func argsOf(body []byte) ([]any, error) {
	dec := json.NewDecoder(bytes.NewReader(body))
	dec.UseNumber()
	var args []any
	if err := dec.Decode(&args); err != nil {
		return nil, fmt.Errorf("read why it was set aside: %w", err)
	}
	for i, a := range args {
		n, ok := a.(json.Number)
		if !ok {
			continue
		}
		if v, err := n.Int64(); err == nil {
			args[i] = v
		} else if v, err := n.Float64(); err == nil {
			args[i] = v
		}
	}
	return args, nil
}

// ClearAsides notes that a person has seen what was set aside at a station until then.
// It stays on record.
func (s *Store) ClearAsides(ctx context.Context, station uuid.UUID, until time.Time, person uuid.UUID) error {
	_, err := s.pool.Exec(ctx, `update set_aside set settled_at = $1, settled_by = $2
		where plant_id = $3 and station_id = $4 and came_at <= $5 and settled_at is null`, s.now(), orNull(person), s.plant(), station, until)
	if err != nil {
		return fmt.Errorf("clear what was set aside: %w", err)
	}
	s.changed(station)
	return nil
}

// RoundSetups gives the set-ups that the subgroups of a stored round were taken under,
// by characteristic; empty when there is no such round. A round that is sent again is
// read by them, even when the set-up has changed since.
func (s *Store) RoundSetups(ctx context.Context, round uuid.UUID) (map[uuid.UUID]plant.Setup, error) {
	var raw []byte
	err := s.pool.QueryRow(ctx, `select answer from round where id = $1 and plant_id = $2`, round, s.plant()).Scan(&raw)
	if errors.Is(err, pgx.ErrNoRows) {
		return nil, nil
	}
	if err != nil {
		return nil, fmt.Errorf("look for a round: %w", err)
	}
	var a plant.Answer
	if err := json.Unmarshal(raw, &a); err != nil {
		return nil, fmt.Errorf("read a stored answer: %w", err)
	}
	out := make(map[uuid.UUID]plant.Setup, len(a.Parts))
	for _, part := range a.Parts {
		var version int
		if err := s.pool.QueryRow(ctx, `select setup_version from subgroup where characteristic_id = $1 and taken_at = $2 and id = $3 and version = 1`,
			part.Characteristic, a.TakenAt, part.Subgroup).Scan(&version); err != nil {
			return nil, fmt.Errorf("read the set-up of a stored round: %w", err)
		}
		if out[part.Characteristic], err = s.setup(ctx, s.pool, part.Characteristic, version); err != nil {
			return nil, err
		}
	}
	return out, nil
}
