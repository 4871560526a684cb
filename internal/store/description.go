package store

import (
	"context"
	"fmt"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
)

// descriptionLife is how long a description that was sent in waits to be confirmed.
const descriptionLife = 24 * time.Hour

// KeepDescription keeps a file until it is confirmed, and forgets those that nobody
// confirmed for a day.
func (s *Store) KeepDescription(ctx context.Context, d plant.Description) error {
	if _, err := s.pool.Exec(ctx, `delete from description where plant_id = $1 and sent_at < $2`, s.plant(), s.now().Add(-descriptionLife)); err != nil {
		return fmt.Errorf("forget old descriptions: %w", err)
	}
	_, err := s.pool.Exec(ctx, `insert into description (id, plant_id, person_id, sent_at, name, content) values ($1, $2, $3, $4, $5, $6)`,
		d.ID, s.plant(), d.Person, s.now(), d.Name, d.Content)
	if err != nil {
		return fmt.Errorf("keep a description: %w", err)
	}
	return nil
}

// Description reads a file that waits to be confirmed by the person who sent it.
func (s *Store) Description(ctx context.Context, id, person uuid.UUID) (d plant.Description, err error) {
	err = s.pool.QueryRow(ctx, `select id, person_id, sent_at, name, content from description where id = $1 and plant_id = $2 and person_id = $3`,
		id, s.plant(), person).Scan(&d.ID, &d.Person, &d.SentAt, &d.Name, &d.Content)
	if err != nil {
		return d, fmt.Errorf("read a description: %w", missing(err, "This file does not wait any more. Send it again."))
	}
	return d, nil
}

// Add adds to the plant what plan makes of its outline, all of it or nothing. Nobody
// else adds to the plant meanwhile, so that sending the same twice adds it once.
func (s *Store) Add(ctx context.Context, by uuid.UUID, plan func(plant.Outline) (plant.Addition, error)) error {
	err := s.arranged(ctx, by, func(ctx context.Context, a *arranging) error {
		if _, err := a.tx.Exec(ctx, `select from plant where id = $1 for update`, s.plant()); err != nil {
			return fmt.Errorf("hold the plant: %w", err)
		}
		var o plant.Outline
		var err error
		if o.Plant, err = s.plantFrom(ctx, a.tx); err != nil {
			return err
		}
		if err := s.outline(ctx, a.tx, &o); err != nil {
			return err
		}
		add, err := plan(o)
		if err != nil {
			return err
		}
		return a.add(ctx, add)
	})
	if err != nil {
		return fmt.Errorf("add to the plant: %w", err)
	}
	return nil
}

// add adds what hangs higher first.
func (a *arranging) add(ctx context.Context, add plant.Addition) error {
	for _, v := range add.Lines {
		a.addLine(v)
	}
	for _, v := range add.Stations {
		a.addStation(v)
	}
	for _, v := range add.Machines {
		a.addMachine(v)
	}
	for _, v := range add.Parts {
		a.addPart(v)
	}
	for _, v := range add.Gauges {
		a.addGauge(v)
	}
	for _, v := range add.Characteristics {
		if err := a.addCharacteristic(v.Characteristic, v.Setup); err != nil {
			return err
		}
	}
	if len(add.Shifts) > 0 {
		return a.setShifts(ctx, add.Shifts)
	}
	return nil
}
