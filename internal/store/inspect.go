package store

import (
	"context"
	"fmt"
	"time"

	"github.com/jackc/pgx/v5"
)

// Installation is what a database server says of itself and of the rights of whoever asks.
type Installation struct {
	Version       string // as the server writes it
	VersionNumber int    // 150004 for 15.4
	Database      string
	User          string
	Now           time.Time // by its clock
	Bytes         int64     // of this database
	Encoding      string
	Checksums     bool // of data pages
	Durable       bool // fsync and full_page_writes are on: an answered round outlives a power cut
	Connections   int  // the most that it takes
	MayCreate     bool // make tables, as the owner who migrates must
	Tables        bool // ours are there
	Schema        int  // their version; 0 when there are none, or only the owner may ask
	SchemaBroken  bool // a migration stopped half-way, as far as this role may ask
	Guarded       bool // this role can neither change nor delete samples and ledger; false while there are none
}

// Inspect asks the database server at url about itself. It changes nothing.
func Inspect(ctx context.Context, url string) (Installation, error) {
	var i Installation
	conn, err := pgx.Connect(ctx, url)
	if err != nil {
		return i, fmt.Errorf("connect: %w", err)
	}
	defer conn.Close(ctx)
	return i, i.read(ctx, conn)
}

// Inspect asks the database that the store uses about itself.
func (s *Store) Inspect(ctx context.Context) (Installation, error) {
	var i Installation
	return i, i.read(ctx, s.pool)
}

func (i *Installation) read(ctx context.Context, q querier) error {
	var migrations bool
	err := q.QueryRow(ctx, `select current_setting('server_version'), current_setting('server_version_num')::int, current_database(), current_user,
			clock_timestamp(), pg_database_size(current_database()), current_setting('server_encoding'), current_setting('data_checksums') = 'on',
			current_setting('fsync') = 'on' and current_setting('full_page_writes') = 'on', current_setting('max_connections')::int,
			has_schema_privilege('public', 'create'), to_regclass('public.ledger') is not null, to_regclass('public.schema_migrations') is not null`).
		Scan(&i.Version, &i.VersionNumber, &i.Database, &i.User, &i.Now, &i.Bytes, &i.Encoding, &i.Checksums, &i.Durable, &i.Connections,
			&i.MayCreate, &i.Tables, &migrations)
	if err != nil {
		return fmt.Errorf("ask the server about itself: %w", err)
	}
	if i.Tables {
		if err := q.QueryRow(ctx, `select not (has_table_privilege('subgroup', 'update') or has_table_privilege('subgroup', 'delete')
			or has_table_privilege('ledger', 'update') or has_table_privilege('ledger', 'delete'))`).Scan(&i.Guarded); err != nil {
			return fmt.Errorf("ask for privileges: %w", err)
		}
	}
	if migrations {
		var readable bool
		if err := q.QueryRow(ctx, `select has_table_privilege('schema_migrations', 'select')`).Scan(&readable); err != nil || !readable {
			return err
		}
		if err := q.QueryRow(ctx, `select coalesce(max(version), 0)::int, coalesce(bool_or(dirty), false) from schema_migrations`).Scan(&i.Schema, &i.SchemaBroken); err != nil {
			return fmt.Errorf("ask for the schema's version: %w", err)
		}
	}
	return nil
}
