package store

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
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

// Current reports whether the database has exactly the newest schema that this program
// knows. It changes nothing.
func Current(ctx context.Context, url string) (bool, error) {
	newest, err := newestMigration()
	if err != nil {
		return false, err
	}
	conn, err := pgx.Connect(ctx, url)
	if err != nil {
		return false, fmt.Errorf("connect to the database: %w", err)
	}
	defer conn.Close(context.WithoutCancel(ctx))
	var version int64
	var dirty bool
	if err := conn.QueryRow(ctx, `select version, dirty from schema_migrations`).Scan(&version, &dirty); err != nil {
		return false, fmt.Errorf("read the version of the schema: %w", err)
	}
	return version == newest && !dirty, nil
}

func newestMigration() (newest int64, err error) {
	names, err := fs.Glob(migrations.Files, "*.up.sql")
	if err != nil {
		return 0, err
	}
	for _, name := range names {
		var n int64
		if _, err := fmt.Sscanf(name, "%d_", &n); err != nil {
			return 0, fmt.Errorf("read the number of migration %s: %w", name, err)
		}
		newest = max(newest, n)
	}
	return newest, nil
}
