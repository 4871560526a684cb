package store

import (
	"context"
	"fmt"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
)

// AddCause adds a cause to the catalogue of a station family, or of all families when
// family is empty.
func (s *Store) AddCause(ctx context.Context, family string, c plant.Cause, position int, by uuid.UUID) error {
	return s.arrange(ctx, "cause added", c.ID, by, map[string]any{"name": c.Name, "family": family}, func(tx pgx.Tx) error {
		_, err := tx.Exec(ctx, `insert into cause (id, plant_id, family, name, position) values ($1, $2, $3, $4, $5)`,
			c.ID, s.plant(), family, c.Name, position)
		return nameTaken(err)
	})
}

// NewCause adds a cause at the end of a catalogue, by hand. The family must be that of a
// station, or empty for all.
func (s *Store) NewCause(ctx context.Context, c plant.Cause, by uuid.UUID) error {
	name, err := causeName(c.Name)
	if err != nil {
		return err
	}
	if err := s.scopeExists(ctx, s.pool, plant.PlanScope{Family: c.Family}); err != nil {
		return err
	}
	var position int
	if err := s.pool.QueryRow(ctx, `select coalesce(max(position), 0) + 1 from cause where plant_id = $1 and family = $2`, s.plant(), c.Family).Scan(&position); err != nil {
		return fmt.Errorf("read causes: %w", err)
	}
	c.Name = name
	return s.AddCause(ctx, c.Family, c, position, by)
}

func causeName(s string) (string, error) {
	name, err := plant.CleanTextWithin("name", s, 60)
	if err == nil && name == "" {
		err = plant.Invalidf("name", "A cause needs a name.")
	}
	return name, err
}

// RenameCause gives a cause another name. What is on record keeps the words that were
// chosen then.
func (s *Store) RenameCause(ctx context.Context, id uuid.UUID, name string, by uuid.UUID) error {
	name, err := causeName(name)
	if err != nil {
		return err
	}
	return s.arrange(ctx, "cause renamed", id, by, map[string]any{"name": name}, func(tx pgx.Tx) error {
		return s.oneCause(tx.Exec(ctx, `update cause set name = $2 where id = $1 and plant_id = $3`, id, name, s.plant()))
	})
}

// RetireCause takes a cause out of what is offered, or puts it back. It is never removed.
func (s *Store) RetireCause(ctx context.Context, id uuid.UUID, retired bool, by uuid.UUID) error {
	return s.arrange(ctx, "cause changed", id, by, map[string]any{"retired": retired}, func(tx pgx.Tx) error {
		at := time.Time{}
		if retired {
			at = s.now()
		}
		return s.oneCause(tx.Exec(ctx, `update cause set retired_at = $2 where id = $1 and plant_id = $3`, id, timeOrNull(at), s.plant()))
	})
}

// oneCause judges an update of one row of the catalogue.
func (s *Store) oneCause(tag interface{ RowsAffected() int64 }, err error) error {
	if err == nil && tag.RowsAffected() == 0 {
		return plant.NotFoundf("", "There is no such cause.")
	}
	return nameTaken(err)
}

// Causes lists what is offered at the stations of a family, with what belongs to every
// family at the end.
func (s *Store) Causes(ctx context.Context, family string) ([]plant.Cause, error) {
	return s.causes(ctx, `where plant_id = $1 and family in ($2, '') and retired_at is null order by family = '', position, name`, s.plant(), family)
}

// AllCauses lists the whole catalogue by family, what is retired included.
func (s *Store) AllCauses(ctx context.Context) ([]plant.Cause, error) {
	return s.causes(ctx, `where plant_id = $1 order by family = '', family, retired_at is not null, position, name`, s.plant())
}

func (s *Store) causes(ctx context.Context, where string, args ...any) ([]plant.Cause, error) {
	rows, err := s.pool.Query(ctx, `select id, name, family, retired_at from cause `+where, args...)
	if err != nil {
		return nil, fmt.Errorf("read causes: %w", err)
	}
	return pgx.CollectRows(rows, func(r pgx.CollectableRow) (c plant.Cause, err error) {
		var retired *time.Time
		err = r.Scan(&c.ID, &c.Name, &c.Family, &retired)
		c.RetiredAt = orZero(retired)
		return c, err
	})
}
