package store

import (
	"context"
	"crypto/sha256"
	"encoding/hex"
	"fmt"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
	"holdfast/internal/plant/ledger"
)

// nameHash binds a name for the ledger, from which it must be possible to erase it.
func nameHash(salt []byte, name string) string {
	sum := sha256.Sum256(append(salt[:len(salt):len(salt)], name...))
	return hex.EncodeToString(sum[:])
}

// RenamePerson mends the printed name of a person. What they entered is shown under the
// new name; the one before is kept beside it, and the ledger binds both. The same name
// again changes nothing.
func (s *Store) RenamePerson(ctx context.Context, id uuid.UUID, name string, by uuid.UUID) error {
	if name == "" {
		return plant.Invalidf("name", "A person needs a sign-in name and a printed name.")
	}
	if len([]rune(name)) > maxPersonText {
		return plant.Invalidf("name", "Please use at most %d characters for a name.", maxPersonText)
	}
	now := s.now()
	err := s.inTx(ctx, func(tx pgx.Tx) error {
		var before string
		var salt []byte
		if err := tx.QueryRow(ctx, `select name, name_salt from person where id = $1 and plant_id = $2 and erased_at is null for update`,
			id, s.plant()).Scan(&before, &salt); err != nil {
			return missing(err, "There is no such person.")
		}
		if before == name {
			return nil
		}
		if _, err := tx.Exec(ctx, `insert into person_name (person_id, plant_id, name, until, changed_by) values ($1, $2, $3, $4, $5)`,
			id, s.plant(), before, now, orNull(by)); err != nil {
			return err
		}
		if _, err := tx.Exec(ctx, `update person set name = $2 where id = $1`, id, name); err != nil {
			return err
		}
		return s.appendPlantChain(ctx, tx, ledger.Arrangement{What: "name changed", Subject: id, At: ledger.Time(now), Person: ledger.ID(by),
			Content: map[string]any{"was_hash": nameHash(salt, before), "name_hash": nameHash(salt, name)}})
	})
	if err != nil {
		return fmt.Errorf("rename a person: %w", err)
	}
	s.admissionChanged(ctx)
	return nil
}

// FormerNames lists the names under which a person was printed before, the latest first.
func (s *Store) FormerNames(ctx context.Context, id uuid.UUID) ([]plant.FormerName, error) {
	rows, err := s.pool.Query(ctx, `select name, until from person_name where person_id = $1 and plant_id = $2 order by until desc`, id, s.plant())
	if err != nil {
		return nil, fmt.Errorf("read former names: %w", err)
	}
	return pgx.CollectRows(rows, func(r pgx.CollectableRow) (n plant.FormerName, err error) {
		err = r.Scan(&n.Name, &n.Until)
		return n, err
	})
}
