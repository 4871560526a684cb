package pgtest_test

import (
	"context"
	"fmt"
	"sync"
	"testing"

	"github.com/jackc/pgx/v5"

	"holdfast/internal/localpg/pgtest"
)

func TestMain(m *testing.M) { pgtest.Main(m, migrate) }

func migrate(ctx context.Context, connString string) error {
	conn, err := pgx.Connect(ctx, connString)
	if err != nil {
		return err
	}
	defer conn.Close(ctx)
	_, err = conn.Exec(ctx, `
		create table gauge (id int primary key);
		insert into gauge values (1);
		create role pgtest_reader nologin;
		grant select on gauge to pgtest_reader;`)
	return err
}

func TestEveryTestGetsItsOwnMigratedCopy(t *testing.T) {
	t.Parallel()
	var group sync.WaitGroup
	for i := range 6 {
		url := pgtest.Database(t)
		group.Go(func() {
			var n int
			sql := fmt.Sprintf("insert into gauge values (%d)", 2+i)
			if err := run(t, url, sql, "select count(*) from gauge", &n); err != nil || n != 2 {
				t.Errorf("copy %d holds %d rows, %v; want the template's one and its own", i, n, err)
			}
		})
	}
	group.Wait()
}

func TestEmptyDatabaseHasNoTables(t *testing.T) {
	t.Parallel()
	var n int
	err := run(t, pgtest.Empty(t), "select 1", "select count(*) from pg_tables where schemaname = 'public'", &n)
	if err != nil || n != 0 {
		t.Errorf("an empty database holds %d tables, %v", n, err)
	}
}

func TestApplicationRoleCanBeTaken(t *testing.T) {
	t.Parallel()
	var n int
	err := run(t, pgtest.Database(t), "set role pgtest_reader", "select count(*) from gauge", &n)
	if err != nil || n != 1 {
		t.Errorf("as reader: %d rows, %v", n, err)
	}
	if err := run(t, pgtest.Database(t), "set role pgtest_reader; delete from gauge", "select 1", &n); err == nil {
		t.Error("a reader may delete")
	}
}

func run(t *testing.T, url, first, query string, into any) error {
	t.Helper()
	conn, err := pgx.Connect(t.Context(), url)
	if err != nil {
		return err
	}
	defer conn.Close(context.Background())
	if _, err := conn.Exec(t.Context(), first); err != nil {
		return err
	}
	return conn.QueryRow(t.Context(), query).Scan(into)
}
