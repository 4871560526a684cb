package store

import (
	"context"
	"fmt"
	"slices"

	"github.com/google/uuid"

	"holdfast/internal/plant"
)

// AddRoles gives a person roles besides those held already. Giving what is held already
// changes nothing and is no error.
func (s *Store) AddRoles(ctx context.Context, person uuid.UUID, roles plant.Roles, by uuid.UUID) error {
	err := s.arranged(ctx, by, func(ctx context.Context, a *arranging) error {
		var held []string
		err := a.tx.QueryRow(ctx, `select roles from person where id = $1 and plant_id = $2 for update`, person, s.plant()).Scan(&held)
		if err != nil {
			return missing(err, "There is no such person.")
		}
		before := len(held)
		for _, r := range roles {
			if !slices.Contains(held, string(r)) {
				held = append(held, string(r))
			}
		}
		if len(held) == before {
			return nil
		}
		a.say("person changed", person, map[string]any{"roles": held})
		_, err = a.tx.Exec(ctx, `update person set roles = $2 where id = $1`, person, held)
		return err
	})
	if err != nil {
		return fmt.Errorf("add roles: %w", err)
	}
	s.admissionChanged(ctx)
	return nil
}
