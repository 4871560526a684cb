package store_test

import (
	"context"
	"net/url"
	"strings"
	"testing"

	"github.com/jackc/pgx/v5"

	"holdfast/internal/localpg/pgtest"
	"holdfast/internal/plant/ledger"
	"holdfast/internal/store"
	"holdfast/internal/store/storetest"
)

func TestMigrationsGoUpAndDownAndUp(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	pgtest.Database(t) // makes the role, which belongs to the cluster: two at once would collide
	u := pgtest.Empty(t)
	for _, step := range []func() error{
		func() error { return store.Migrate(ctx, u) },
		func() error { return store.Migrate(ctx, u) }, // nothing to do is no error
		func() error { return store.MigrateDown(u) },
		func() error { return store.Migrate(ctx, u) },
	} {
		if err := step(); err != nil {
			t.Fatal(err)
		}
	}
}

// TestApplicationRoleCannotRewriteTheRecord tries it, as the role that serves.
func TestApplicationRoleCannotRewriteTheRecord(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	p := storetest.New(t, "x")
	p.MustRecord(t, p.Diameter, 14990, 14991, 14992, 14990, 14991)
	if _, err := p.Pool().Exec(ctx, "alter role holdfast_app login"); err != nil {
		t.Fatal(err)
	}
	u, err := url.Parse(p.URL)
	if err != nil {
		t.Fatal(err)
	}
	u.User = url.User("holdfast_app")
	app, err := store.Open(ctx, store.Options{URL: u.String(), Clock: p.Clock.Now})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(app.Close)
	if guarded, err := app.Guarded(ctx); err != nil || !guarded {
		t.Errorf("guarded = %v, %v; want true", guarded, err)
	}
	if guarded, err := p.Guarded(ctx); err != nil || guarded {
		t.Errorf("guarded as the owner = %v, %v; want false", guarded, err)
	}
	for _, table := range []string{"subgroup", "round", "ledger", "revision", "boundary", "change", "machine_state", "setup", "reaction_plan", "plant_settings",
		"matter_answer", "matter_fix", "matter_verification", "knob",
		"gauge_check", "containment_entry",
		"protection", "acceptance", "ending"} {
		for _, sql := range []string{"update " + table + " set plant_id = plant_id", "delete from " + table, "truncate " + table} {
			if _, err := app.Pool().Exec(ctx, sql); err == nil || !strings.Contains(err.Error(), "permission denied") {
				t.Errorf("%s: %v, want permission denied", sql, err)
			}
		}
	}
	// All that the work needs goes through as that role.
	as := *p
	as.Store = app
	for range 20 {
		p.Clock.Advance(30 * 60e9)
		as.MustRecord(t, p.Diameter, 14990, 14991, 14992, 14990, 14993)
	}
	as.MustFreeze(t, p.Diameter)
	p.Clock.Advance(30 * 60e9)
	a := as.MustRecord(t, p.Diameter, 14998, 14998, 14999, 14998, 14999)
	if !a.Parts[0].Opened {
		t.Errorf("answer = %+v, want a matter", a)
	}
	consistent(t, &as)
}

// TestEveryTableHasAKeyAndNoSequence keeps the record fit for bringing plants together.
func TestEveryTableHasAKeyAndNoSequence(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	conn, err := pgx.Connect(ctx, pgtest.Database(t))
	if err != nil {
		t.Fatal(err)
	}
	defer conn.Close(ctx)
	var without []string
	err = conn.QueryRow(ctx, `select coalesce(array_agg(c.relname::text), '{}') from pg_class c join pg_namespace n on n.oid = c.relnamespace
		where n.nspname = 'public' and c.relkind = 'r' and c.relname <> 'schema_migrations'
		and not exists (select from pg_index i where i.indrelid = c.oid and i.indisprimary)`).Scan(&without)
	if err != nil || len(without) > 0 {
		t.Errorf("tables without a key: %v, %v", without, err)
	}
	var sequences int
	if err := conn.QueryRow(ctx, `select count(*) from pg_class where relkind = 'S'`).Scan(&sequences); err != nil || sequences != 0 {
		t.Errorf("%d sequences, %v; want none", sequences, err)
	}
	var loose []string
	err = conn.QueryRow(ctx, `select coalesce(array_agg(i.indexrelid::regclass::text), '{}') from pg_index i join pg_class c on c.oid = i.indrelid
		join pg_namespace n on n.oid = c.relnamespace
		where n.nspname = 'public' and i.indisunique and not i.indisprimary and c.relname <> 'schema_migrations'
		and not exists (select from pg_attribute a where a.attrelid = c.oid and a.attnum = any(i.indkey) and a.attname = 'plant_id')`).Scan(&loose)
	if err != nil || len(loose) > 0 {
		t.Errorf("unique constraints without the plant: %v, %v", loose, err)
	}
}

// TestTamperingIsFound changes the record behind the program's back, as its owner.
func TestTamperingIsFound(t *testing.T) {
	t.Parallel()
	for name, sql := range map[string]string{
		"a body":         `update ledger set body = convert_to(replace(convert_from(body, 'UTF8'), '14990', '14991'), 'UTF8') where kind = 'subgroup' and seq = 3`,
		"a removed row":  `delete from ledger where kind = 'subgroup' and seq = 3`,
		"a cut-off tail": `delete from ledger l where kind = 'subgroup' and seq = (select max(seq) from ledger where chain = l.chain)`,
		"a moved row":    `update ledger set seq = 99 where kind = 'subgroup' and seq = 3`,
		"a whole chain":  `delete from ledger where chain in (select chain from ledger where kind = 'subgroup')`,
	} {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			ctx := context.Background()
			p := storetest.New(t, "x")
			for range 4 {
				p.Clock.Advance(30 * 60e9)
				p.MustRecord(t, p.Diameter, 14990, 14991, 14992, 14990, 14993)
			}
			if _, err := p.VerifyLedger(ctx); err != nil {
				t.Fatal(err)
			}
			if tag, err := p.Pool().Exec(ctx, sql); err != nil || tag.RowsAffected() == 0 {
				t.Fatal(tag, err)
			}
			_, err := p.VerifyLedger(ctx)
			if _, ok := err.(*ledger.Break); !ok {
				t.Errorf("verifying = %v, want a break", err)
			}
		})
	}
}
