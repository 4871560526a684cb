package store

import (
	"context"
	"fmt"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
	"holdfast/internal/plant/ledger"
)

const selectPerson = `select id, login, name, roles, active, language, secret, coalesce(badge, ''), pin, erased_at, sessions_since from person`

type personRow struct {
	plant.Person
	secret, pin string
}

func scanPerson(r pgx.CollectableRow) (p personRow, err error) {
	var roles []string
	var erased, since *time.Time
	err = r.Scan(&p.ID, &p.Login, &p.Name, &roles, &p.Active, &p.Language, &p.secret, &p.Badge, &p.pin, &erased, &since)
	for _, role := range roles {
		p.Roles = append(p.Roles, plant.Role(role))
	}
	p.HasSecret, p.HasPIN = p.secret != "", p.Badge != "" && p.pin != ""
	p.ErasedAt, p.SessionsSince = orZero(erased), orZero(since)
	return p, err
}

// Person reads one person.
func (s *Store) Person(ctx context.Context, id uuid.UUID) (plant.Person, error) {
	p, err := s.person(ctx, ` where id = $1 and plant_id = $2`, id, s.plant())
	return p.Person, err
}

// Credential reads a person by the name typed at sign-in, with the hash of the secret.
// Somebody who does not exist is NotFound.
func (s *Store) Credential(ctx context.Context, login string) (plant.Person, string, error) {
	p, err := s.person(ctx, ` where login = $1 and plant_id = $2`, plant.CleanLogin(login), s.plant())
	return p.Person, p.secret, err
}

// CredentialByBadge reads a person by their badge, with the hash of the PIN. Somebody who
// does not exist is NotFound.
func (s *Store) CredentialByBadge(ctx context.Context, badge string) (plant.Person, string, error) {
	p, err := s.person(ctx, ` where badge = $1 and plant_id = $2`, plant.CleanBadge(badge), s.plant())
	return p.Person, p.pin, err
}

// Rehash replaces the hash of a secret or a PIN by one of the same at another cost. When
// the secret was changed meanwhile, nothing happens.
func (s *Store) Rehash(ctx context.Context, id uuid.UUID, old, fresh string) error {
	if _, err := s.pool.Exec(ctx, `update person set secret = case when secret = $2 then $3 else secret end, pin = case when pin = $2 then $3 else pin end
		where id = $1 and (secret = $2 or pin = $2)`, id, old, fresh); err != nil {
		return fmt.Errorf("store a new hash: %w", err)
	}
	return nil
}

func (s *Store) person(ctx context.Context, where string, args ...any) (personRow, error) {
	rows, err := s.pool.Query(ctx, selectPerson+where, args...)
	if err != nil {
		return personRow{}, fmt.Errorf("read person: %w", err)
	}
	p, err := pgx.CollectExactlyOneRow(rows, scanPerson)
	if err != nil {
		return p, fmt.Errorf("read person: %w", missing(err, "There is no such person."))
	}
	return p, nil
}

// People lists everybody by name.
func (s *Store) People(ctx context.Context) ([]plant.Person, error) {
	rows, err := s.pool.Query(ctx, selectPerson+` where plant_id = $1 order by name, login`, s.plant())
	if err != nil {
		return nil, fmt.Errorf("read people: %w", err)
	}
	return pgx.CollectRows(rows, func(r pgx.CollectableRow) (plant.Person, error) {
		p, err := scanPerson(r)
		return p.Person, err
	})
}

// PeopleByID reads many people; those that do not exist are left out.
func (s *Store) PeopleByID(ctx context.Context, ids []uuid.UUID) ([]plant.Person, error) {
	rows, err := s.pool.Query(ctx, selectPerson+` where plant_id = $1 and id = any($2)`, s.plant(), ids)
	if err != nil {
		return nil, fmt.Errorf("read people: %w", err)
	}
	return pgx.CollectRows(rows, func(r pgx.CollectableRow) (plant.Person, error) {
		p, err := scanPerson(r)
		return p.Person, err
	})
}

// SetLanguage keeps in which language pages speak to a person; "" leaves it to the
// device. It is a preference and no fact, so it is not entered in the ledger.
func (s *Store) SetLanguage(ctx context.Context, id uuid.UUID, language string) error {
	tag, err := s.pool.Exec(ctx, `update person set language = $2 where id = $1 and plant_id = $3`, id, language, s.plant())
	if err != nil {
		return fmt.Errorf("set language: %w", err)
	}
	if tag.RowsAffected() == 0 {
		return plant.NotFoundf("", "There is no such person.")
	}
	return nil
}

// signature binds a person's signature for the ledger. The caller has checked that
// the secret was entered again.
func (s *Store) signature(ctx context.Context, q querier, person uuid.UUID, meaning string) (*ledger.Signature, error) {
	var name string
	var salt []byte
	err := q.QueryRow(ctx, `select name, name_salt from person where id = $1`, person).Scan(&name, &salt)
	if err != nil {
		return nil, fmt.Errorf("read signer: %w", missing(err, "There is no such person."))
	}
	return &ledger.Signature{Person: person, NameHash: nameHash(salt, name), At: ledger.Time(s.now()), Meaning: meaning}, nil
}
