package store

import (
	"context"
	"crypto/rand"
	"crypto/sha256"
	"encoding/hex"
	"fmt"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
	"holdfast/internal/plant/ledger"
)

const selectPerson = `select id, login, name, roles, active, secret from person`

type personRow struct {
	plant.Person
	secret string
}

func scanPerson(r pgx.CollectableRow) (p personRow, err error) {
	var roles []string
	err = r.Scan(&p.ID, &p.Login, &p.Name, &roles, &p.Active, &p.secret)
	for _, role := range roles {
		p.Roles = append(p.Roles, plant.Role(role))
	}
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

// Rehash replaces the hash of a secret by one of the same secret at another cost. When
// the secret was changed meanwhile, nothing happens.
func (s *Store) Rehash(ctx context.Context, id uuid.UUID, old, fresh string) error {
	if _, err := s.pool.Exec(ctx, `update person set secret = $3 where id = $1 and secret = $2`, id, old, fresh); err != nil {
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

// AddPerson adds somebody who may sign in. secretHash is never entered in the ledger,
// nor is the name.
func (s *Store) AddPerson(ctx context.Context, p plant.Person, secretHash string, by uuid.UUID) error {
	if len(p.Roles) == 0 {
		return plant.Invalidf("roles", "A person needs at least one role.")
	}
	roles := make([]string, len(p.Roles))
	for i, r := range p.Roles {
		roles[i] = string(r)
	}
	p.Login = plant.CleanLogin(p.Login)
	if p.Login == "" || p.Name == "" {
		return plant.Invalidf("login", "A person needs a sign-in name and a printed name.")
	}
	salt := make([]byte, 16)
	rand.Read(salt)
	err := s.arrange(ctx, "person added", p.ID, by, map[string]any{"roles": roles}, func(tx pgx.Tx) error {
		_, err := tx.Exec(ctx, `insert into person (id, plant_id, login, name, name_salt, roles, secret, active, created_at)
			values ($1, $2, $3, $4, $5, $6, $7, $8, $9)`,
			p.ID, s.plant(), p.Login, p.Name, salt, roles, secretHash, p.Active, s.now())
		if violates(err, "person_login_once") {
			return plant.Conflictf("login", "Somebody signs in under this name already.").Because(err)
		}
		return err
	})
	if err != nil {
		return fmt.Errorf("add person: %w", err)
	}
	return nil
}

// SetSecret replaces the hash of a person's secret.
func (s *Store) SetSecret(ctx context.Context, id uuid.UUID, secretHash string, by uuid.UUID) error {
	return s.arrange(ctx, "secret changed", id, by, nil, func(tx pgx.Tx) error {
		tag, err := tx.Exec(ctx, `update person set secret = $2 where id = $1 and plant_id = $3`, id, secretHash, s.plant())
		if err == nil && tag.RowsAffected() == 0 {
			return plant.NotFoundf("", "There is no such person.")
		}
		return err
	})
}

// SetActive lets a person sign in or keeps them out.
func (s *Store) SetActive(ctx context.Context, id uuid.UUID, active bool, by uuid.UUID) error {
	return s.arrange(ctx, "person changed", id, by, map[string]any{"active": active}, func(tx pgx.Tx) error {
		tag, err := tx.Exec(ctx, `update person set active = $2 where id = $1 and plant_id = $3`, id, active, s.plant())
		if err == nil && tag.RowsAffected() == 0 {
			return plant.NotFoundf("", "There is no such person.")
		}
		return err
	})
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
	sum := sha256.Sum256(append(salt, name...))
	return &ledger.Signature{Person: person, NameHash: hex.EncodeToString(sum[:]), At: ledger.Time(s.now()), Meaning: meaning}, nil
}
