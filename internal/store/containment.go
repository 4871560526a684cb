package store

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
	"holdfast/internal/plant/ledger"
)

// openContainment opens the containment of a matter together with it; the opening of the
// matter is what is sealed. It has the matter's id.
func (s *Store) openContainment(b *pgx.Batch, l *locked, matter uuid.UUID, now time.Time) {
	b.Queue(`insert into containment (id, plant_id, station_id, characteristic_id, matter_id, opened_at) values ($1, $2, $3, $4, $1, $5)`,
		matter, s.plant(), l.station, l.id, now)
}

// settleWithMatter settles the containment of a matter that is closed where nothing is
// left to be said: all that was kept aside has its disposition, or no product was in
// doubt and nobody put any aside.
func settleWithMatter(b *pgx.Batch, matter uuid.UUID, suspects bool, now time.Time) {
	b.Queue(`update containment c set settled_at = $2 where c.matter_id = $1 and c.settled_at is null and
			coalesce((select sum(e.delta) = 0 from containment_entry e where e.containment_id = c.id and e.step <> all ($4)), not $3)`,
		matter, now, suspects, plant.RestAnswers)
}

const selectContainment = `select c.id, c.matter_id, c.opened_at, c.settled_at, m.closed_at,
		st.id, st.name, st.family, st.position, l.id, l.name, l.position, ch.id, ch.machine_id, ch.part_id, ch.family, ch.name, ch.position
	from containment c left join matter m on m.id = c.matter_id
	join characteristic ch on ch.id = c.characteristic_id join station st on st.id = c.station_id join line l on l.id = st.line_id`

func scanContainment(r pgx.CollectableRow) (c plant.Containment, err error) {
	var matter, part *uuid.UUID
	var settled, closed *time.Time
	h := &c.Characteristic
	err = r.Scan(&c.ID, &matter, &c.OpenedAt, &settled, &closed,
		&c.Station.ID, &c.Station.Name, &c.Station.Family, &c.Station.Position, &c.Line.ID, &c.Line.Name, &c.Line.Position,
		&h.ID, &h.MachineID, &part, &h.Family, &h.Name, &h.Position)
	c.Matter, c.SettledAt, c.MatterClosed = orNil(matter), orZero(settled), orZero(closed)
	c.Station.LineID, h.StationID, h.PartID = c.Line.ID, c.Station.ID, orNil(part)
	return c, err
}

const selectEntries = `select e.id, e.containment_id, e.step, e.quantity, e.delta, e.place, e.tag, e.note, e.recorded_at, e.person_id, coalesce(p.name, '')
	from containment_entry e left join person p on p.id = e.person_id`

func scanEntry(r pgx.CollectableRow) (e plant.ContainmentEntry, err error) {
	var person *uuid.UUID
	err = r.Scan(&e.ID, &e.Containment, &e.Step, &e.Quantity, &e.Delta, &e.Place, &e.Tag, &e.Note, &e.RecordedAt, &person, &e.PersonName)
	e.Person = orNil(person)
	return e, err
}

// containments reads those that a condition picks, with their entries up to an instant.
func (s *Store) containments(ctx context.Context, q querier, upTo any, where string, args ...any) ([]plant.Containment, error) {
	rows, err := q.Query(ctx, selectContainment+where, args...)
	if err != nil {
		return nil, fmt.Errorf("read containments: %w", err)
	}
	list, err := pgx.CollectRows(rows, scanContainment)
	if err != nil {
		return nil, fmt.Errorf("read containments: %w", err)
	}
	return list, s.addEntries(ctx, q, upTo, list)
}

// addEntries reads what was stated about containments, where there are any.
func (s *Store) addEntries(ctx context.Context, q querier, upTo any, list []plant.Containment) error {
	if len(list) == 0 {
		return nil
	}
	ids, place := make([]uuid.UUID, len(list)), make(map[uuid.UUID]int, len(list))
	for i, c := range list {
		ids[i], place[c.ID] = c.ID, i
	}
	rows, err := q.Query(ctx, selectEntries+` where e.containment_id = any($1) and e.recorded_at <= $2 order by e.recorded_at, e.id`, ids, upTo)
	if err != nil {
		return fmt.Errorf("read what was kept aside: %w", err)
	}
	entries, err := pgx.CollectRows(rows, scanEntry)
	for _, e := range entries {
		c := &list[place[e.Containment]]
		c.Entries = append(c.Entries, e)
	}
	return wrapped("read what was kept aside", err)
}

// wrapped is err with what was being done, nil for nil.
func wrapped(what string, err error) error {
	if err == nil {
		return nil
	}
	return fmt.Errorf("%s: %w", what, err)
}

// mostContained is how many open containments are read at once; more would be a plant
// that does not look at them.
const mostContained = 1000

// Contained lists the product that was still contained at an instant, the oldest first,
// with its quantities as they were stated then; the zero instant is now. Reach and
// Suspect are not filled: they are of now, and Reaches finds them.
func (s *Store) Contained(ctx context.Context, at time.Time) ([]plant.Containment, error) {
	if at.IsZero() {
		at = s.now()
	}
	return s.containments(ctx, s.pool, at, ` where c.plant_id = $1 and c.opened_at <= $2 and (c.settled_at is null or c.settled_at > $2)
		order by c.opened_at, c.id limit $3`, s.plant(), at, mostContained)
}

// SettledContainments lists the newest containments that are settled.
func (s *Store) SettledContainments(ctx context.Context, most int) ([]plant.Containment, error) {
	return s.containments(ctx, s.pool, "infinity", ` where c.plant_id = $1 and c.settled_at is not null order by c.settled_at desc, c.id limit $2`, s.plant(), most)
}

// Containment reads one, open or settled.
func (s *Store) Containment(ctx context.Context, id uuid.UUID) (plant.Containment, error) {
	return s.containment(ctx, s.pool, id)
}

func (s *Store) containment(ctx context.Context, q querier, id uuid.UUID) (plant.Containment, error) {
	list, err := s.containments(ctx, q, "infinity", ` where c.id = $1 and c.plant_id = $2`, id, s.plant())
	if err != nil {
		return plant.Containment{}, err
	}
	if len(list) == 0 {
		return plant.Containment{}, &plant.Error{Kind: plant.NotFound, Message: "There is no such product on record."}
	}
	return list[0], nil
}

// StateProduct records what a person states about product in doubt: that it was put
// aside, how much there is, or what became of it. The same statement sent again is no
// error; the same id with other content is a Conflict. What decides over product is a
// signature: the caller has checked the secret.
func (s *Store) StateProduct(ctx context.Context, e plant.ContainmentEntry) error {
	ctx, cancel := s.saving(ctx)
	defer cancel()
	e = e.Clean()
	of := e.Opens
	if of == uuid.Nil {
		c, err := s.Containment(ctx, e.Containment)
		if err != nil {
			return err
		}
		of = c.Characteristic.ID
	}
	var station uuid.UUID
	err := s.inTx(ctx, func(tx pgx.Tx) error {
		l, err := s.lockOne(ctx, tx, of)
		if err != nil {
			return err
		}
		station = l.station
		return s.stateProduct(ctx, tx, l, e)
	})
	if err == nil {
		s.changed(station)
	}
	return err
}

func (s *Store) stateProduct(ctx context.Context, tx pgx.Tx, l *locked, e plant.ContainmentEntry) error {
	now, digest := s.now(), e.Digest()
	var have []byte
	switch err := tx.QueryRow(ctx, `select digest from containment_entry where id = $1`, e.ID).Scan(&have); {
	case err == nil && bytes.Equal(have, digest[:]):
		return nil
	case err == nil:
		return &plant.Error{Kind: plant.Conflict, Message: "Another statement was sent under this number. Look at what is on record."}
	case !errors.Is(err, pgx.ErrNoRows):
		return fmt.Errorf("look for the statement: %w", err)
	}
	c := plant.Containment{ID: e.Containment, OpenedAt: now}
	b := &pgx.Batch{}
	if e.Opens != uuid.Nil {
		b.Queue(`insert into containment (id, plant_id, station_id, characteristic_id, opened_at) values ($1, $2, $3, $4, $5)`,
			c.ID, s.plant(), l.station, l.id, now)
	} else {
		var err error
		if c, err = s.containment(ctx, tx, e.Containment); err != nil {
			return err
		}
	}
	e, err := c.Admit(e)
	if err != nil {
		return err
	}
	body := ledger.Containment{Entry: e.ID, Containment: c.ID, Step: string(e.Step), Quantity: e.Quantity, Delta: e.Delta, Place: e.Place, Tag: e.Tag,
		Note: e.Note, Opens: e.Opens != uuid.Nil, RecordedAt: ledger.Time(now), Person: ledger.ID(e.Person)}
	if e.Step.Decides() {
		if body.Signature, err = s.signature(ctx, tx, e.Person, "product "+string(e.Step)); err != nil {
			return err
		}
	}
	b.Queue(`insert into containment_entry (id, plant_id, containment_id, step, quantity, delta, place, tag, note, opens, recorded_at, person_id, digest)
		values ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12, $13)`,
		e.ID, s.plant(), c.ID, string(e.Step), e.Quantity, e.Delta, e.Place, e.Tag, e.Note, body.Opens, now, orNull(e.Person), digest[:])
	c.Entries = append(c.Entries, e)
	var settled *time.Time
	if c.Settled() {
		settled = &now
	}
	b.Queue(`update containment set settled_at = $2 where id = $1`, c.ID, settled)
	if err := s.seal(b, l, body); err != nil {
		return err
	}
	s.save(b, l)
	return wrapped("write what was stated", tx.SendBatch(ctx, b).Close())
}
