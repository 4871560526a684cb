package store

import (
	"context"
	"errors"
	"fmt"
	"time"

	"github.com/golang-migrate/migrate/v4"
	migratepgx "github.com/golang-migrate/migrate/v4/database/pgx/v5"
	"github.com/golang-migrate/migrate/v4/source/iofs"
	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/stdlib"

	"holdfast/migrations"
)

// Migrate brings the database to the newest schema, as its owner. Several servers
// may start at once: one migrates under an advisory lock, the others wait, but no
// longer than ctx allows, and two minutes at most.
func Migrate(ctx context.Context, ownerURL string) error {
	ctx, cancel := context.WithTimeout(ctx, 2*time.Minute)
	defer cancel()
	m, err := newMigrator(ownerURL)
	if err != nil {
		return err
	}
	defer m.Close()
	done := make(chan error, 1)
	go func() { done <- m.Up() }()
	select {
	case err := <-done:
		if err != nil && !errors.Is(err, migrate.ErrNoChange) {
			return fmt.Errorf("migrate: %w", err)
		}
		return nil
	case <-ctx.Done():
		m.GracefulStop <- true
		return fmt.Errorf("migrate: %w", ctx.Err())
	}
}

// MigrateDown takes everything back. It exists for the test that exercises the down
// files.
func MigrateDown(ownerURL string) error {
	m, err := newMigrator(ownerURL)
	if err != nil {
		return err
	}
	defer m.Close()
	return m.Down()
}

func newMigrator(ownerURL string) (*migrate.Migrate, error) {
	cfg, err := pgx.ParseConfig(ownerURL)
	if err != nil {
		return nil, fmt.Errorf("read database address: %w", err)
	}
	// migrate takes its lock on a context without a limit; the server's own limit on
	// waiting for locks ends that.
	cfg.RuntimeParams["lock_timeout"] = "110s"
	driver, err := migratepgx.WithInstance(stdlib.OpenDB(*cfg), &migratepgx.Config{})
	if err != nil {
		return nil, fmt.Errorf("open database to migrate: %w", err)
	}
	source, err := iofs.New(migrations.Files, ".")
	if err != nil {
		return nil, fmt.Errorf("read migrations: %w", err)
	}
	m, err := migrate.NewWithInstance("iofs", source, "pgx5", driver)
	if err != nil {
		return nil, fmt.Errorf("prepare migrations: %w", err)
	}
	return m, nil
}
