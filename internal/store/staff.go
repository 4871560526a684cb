package store

import (
	"context"
	"crypto/rand"
	"fmt"
	"strings"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
	"holdfast/internal/plant/ledger"
)

const maxPersonText = 100

// AddPerson adds somebody who may sign in: by login and secret, and, once SetBadge was
// called, by badge and PIN. Neither hashes nor the name nor the login are entered in the
// ledger. Without a secretHash there is no signing in by login.
func (s *Store) AddPerson(ctx context.Context, p plant.Person, secretHash string, by uuid.UUID) error {
	if err := s.addPerson(ctx, p, secretHash, by, nil); err != nil {
		return fmt.Errorf("add person: %w", err)
	}
	return nil
}

// AddFirstPerson adds the person who sets everything up, and refuses with Conflict when
// there is anybody already.
func (s *Store) AddFirstPerson(ctx context.Context, p plant.Person, secretHash string) error {
	err := s.addPerson(ctx, p, secretHash, uuid.Nil, func(tx pgx.Tx) error {
		if err := s.lockPeople(ctx, tx); err != nil {
			return err
		}
		var people bool
		if err := tx.QueryRow(ctx, `select exists (select from person where plant_id = $1)`, s.plant()).Scan(&people); err != nil {
			return err
		}
		if people {
			return plant.Conflictf("", "Somebody was added here already. Sign in, or ask them to add you.")
		}
		return nil
	})
	if err != nil {
		return fmt.Errorf("add the first person: %w", err)
	}
	return nil
}

func (s *Store) addPerson(ctx context.Context, p plant.Person, secretHash string, by uuid.UUID, first func(tx pgx.Tx) error) error {
	var err error
	if p.Roles, err = plant.CleanRoles(p.Roles); err != nil {
		return err
	}
	p.Login = plant.CleanLogin(p.Login)
	if p.Login == "" || p.Name == "" {
		return plant.Invalidf("login", "A person needs a sign-in name and a printed name.")
	}
	if len([]rune(p.Login)) > maxPersonText || len([]rune(p.Name)) > maxPersonText {
		return plant.Invalidf("login", "Please use at most %d characters for a name.", maxPersonText)
	}
	roles := roleTexts(p.Roles)
	content := map[string]any{"roles": roles}
	if !p.Active {
		content["active"] = false
	}
	salt := make([]byte, 16)
	rand.Read(salt)
	return s.arrange(ctx, "person added", p.ID, by, content, func(tx pgx.Tx) error {
		if first != nil {
			if err := first(tx); err != nil {
				return err
			}
		}
		_, err := tx.Exec(ctx, `insert into person (id, plant_id, login, name, name_salt, roles, secret, active, created_at)
			values ($1, $2, $3, $4, $5, $6, $7, $8, $9)`,
			p.ID, s.plant(), p.Login, p.Name, salt, roles, secretHash, p.Active, s.now())
		if violates(err, "person_login_once") {
			return plant.Conflictf("login", "Somebody signs in under this name already.").Because(err)
		}
		return err
	})
}

func roleTexts(rs plant.Roles) []string {
	out := make([]string, len(rs))
	for i, r := range rs {
		out[i] = string(r)
	}
	return out
}

// lockPeople lets one change of who may manage happen after the other.
func (s *Store) lockPeople(ctx context.Context, tx pgx.Tx) error {
	_, err := tx.Exec(ctx, `select id from plant where id = $1 for no key update`, s.plant())
	return err
}

// PersonByLogin reads a person by the name typed at sign-in.
func (s *Store) PersonByLogin(ctx context.Context, login string) (plant.Person, error) {
	p, _, err := s.Credential(ctx, login)
	return p, err
}

// changePerson runs one statement on a person's row; $1 is the person, $2 the plant.
func (s *Store) changePerson(ctx context.Context, what string, id, by uuid.UUID, content map[string]any, sql string, args ...any) error {
	err := s.arrange(ctx, what, id, by, content, func(tx pgx.Tx) error {
		if err := s.lockPeople(ctx, tx); err != nil {
			return err
		}
		before, err := s.administrators(ctx, tx)
		if err != nil {
			return err
		}
		tag, err := tx.Exec(ctx, sql, append([]any{id, s.plant()}, args...)...)
		if violates(err, "person_badge_once") {
			return plant.Conflictf("badge", "Somebody has this badge already.").Because(err)
		}
		if err != nil {
			return err
		}
		if tag.RowsAffected() == 0 {
			return plant.NotFoundf("", "There is no such person.")
		}
		after, err := s.administrators(ctx, tx)
		if err == nil && after == 0 && before > 0 {
			return lastAdministrator()
		}
		return err
	})
	if err != nil {
		return fmt.Errorf("%s: %w", what, err)
	}
	s.admissionChanged(ctx)
	return nil
}

// administrators counts those who can manage the plant.
func (s *Store) administrators(ctx context.Context, tx pgx.Tx) (n int, err error) {
	err = tx.QueryRow(ctx, `select count(*) from person where plant_id = $1 and active and 'administrator' = any(roles)`, s.plant()).Scan(&n)
	return n, err
}

func lastAdministrator() error {
	return plant.Conflictf("", "This is the last administrator who may sign in. Make somebody else one first.")
}

// SetActive lets a person sign in or keeps them out. Keeping out ends their sessions for
// good: letting them in again revives none.
func (s *Store) SetActive(ctx context.Context, id uuid.UUID, active bool, by uuid.UUID) error {
	content := map[string]any{"active": active}
	if active {
		return s.changePerson(ctx, "person changed", id, by, content,
			`update person set active = true where id = $1 and plant_id = $2 and erased_at is null`)
	}
	return s.endSessions(ctx, "person changed", id, by, content, `active = false`, ``)
}

// SetRoles replaces what a person may be.
func (s *Store) SetRoles(ctx context.Context, id uuid.UUID, roles plant.Roles, by uuid.UUID) error {
	roles, err := plant.CleanRoles(roles)
	if err != nil {
		return err
	}
	texts := roleTexts(roles)
	return s.changePerson(ctx, "person changed", id, by, map[string]any{"roles": texts},
		`update person set roles = $3 where id = $1 and plant_id = $2 and erased_at is null`, texts)
}

// EraseName takes the names of a person out of the plant for good, with the salt under
// which signatures are bound to it, their login, badge and secrets. What they entered
// stays on record under their id, which is shown shortened in place of the name. They
// must have been kept out before.
func (s *Store) EraseName(ctx context.Context, id, by uuid.UUID) error {
	now := s.now()
	err := s.inTx(ctx, func(tx pgx.Tx) error {
		var active, erased bool
		if err := tx.QueryRow(ctx, `select active, erased_at is not null from person where id = $1 and plant_id = $2 for update`,
			id, s.plant()).Scan(&active, &erased); err != nil {
			return missing(err, "There is no such person.")
		}
		switch {
		case erased:
			return nil
		case active:
			return plant.Conflictf("", "Keep this person from signing in first, then erase the name.")
		}
		short := strings.ToUpper(id.String()[len(id.String())-6:])
		if _, err := tx.Exec(ctx, `update person set name = $2, login = $3, name_salt = '', secret = '', badge = null, pin = '', erased_at = $4
			where id = $1`, id, "Person "+short, "erased-"+id.String(), now); err != nil {
			return err
		}
		if _, err := tx.Exec(ctx, `delete from person_name where person_id = $1`, id); err != nil {
			return err
		}
		return s.appendPlantChain(ctx, tx, ledger.Arrangement{What: "name erased", Subject: id, At: ledger.Time(now), Person: ledger.ID(by)})
	})
	if err != nil {
		return fmt.Errorf("erase a name: %w", err)
	}
	s.admissionChanged(ctx)
	return nil
}
