package main

import (
	"context"
	"log/slog"
	"os"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"

	"holdfast/internal/localpg"
	"holdfast/internal/localpg/pgtest"
	"holdfast/internal/store/storetest"
)

var silent = slog.New(slog.DiscardHandler)

// TestTheDemoLeavesOtherDatabasesAlone: it refuses before it changes anything.
func TestTheDemoLeavesOtherDatabasesAlone(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	foreign := pgtest.Empty(t)
	conn, err := pgx.Connect(ctx, foreign)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { _ = conn.Close(ctx) })
	if _, err := conn.Exec(ctx, `create table invoices (id int primary key)`); err != nil {
		t.Fatal(err)
	}
	for name, url := range map[string]string{"of another program": foreign, "of a real plant": storetest.New(t, "x").URL} {
		c := demoCmd{database: database{URL: url}, Addr: "127.0.0.1:18231", Quiet: true}
		ctx, cancel := context.WithTimeout(ctx, time.Minute)
		err := c.Run(ctx, silent)
		cancel()
		if err == nil || !strings.Contains(err.Error(), "the demo takes only") {
			t.Errorf("a database %s: %v, want a refusal", name, err)
		}
	}
	var tables int
	if err := conn.QueryRow(ctx, `select count(*) from pg_class where relkind = 'r' and relnamespace = 'public'::regnamespace`).Scan(&tables); err != nil || tables != 1 {
		t.Errorf("the other program's database holds %d tables, %v; want its one", tables, err)
	}
}

// TestAnUnfinishedDemoStartsOver: what was interrupted while it was made is not served.
func TestAnUnfinishedDemoStartsOver(t *testing.T) {
	t.Parallel()
	dir := filepath.Join(t.TempDir(), "demo")
	c := demoCmd{database: database{Data: dir}}
	if over, err := c.startOver(); err != nil || over {
		t.Fatalf("nothing was begun: start over = %v, %v", over, err)
	}
	finished, err := c.begin()
	if err != nil {
		t.Fatal(err)
	}
	if over, err := c.startOver(); err != nil || !over {
		t.Errorf("begun and not finished: start over = %v, %v; want true", over, err)
	}
	if err := finished(); err != nil {
		t.Fatal(err)
	}
	if over, err := c.startOver(); err != nil || over {
		t.Errorf("finished: start over = %v, %v; want false", over, err)
	}
}

// TestServingEndsWithAnErrorWhenPostgresDies, so that a service manager that restarts on
// failure does.
func TestServingEndsWithAnErrorWhenPostgresDies(t *testing.T) {
	t.Parallel()
	db := reached{private: privateServer(t)}
	ended := untilPostgresEnds(context.Background(), db, silent)
	if err := syscall.Kill(db.private.PID(), syscall.SIGKILL); err != nil {
		t.Fatal(err)
	}
	select {
	case <-ended.Done():
	case <-time.After(20 * time.Second):
		t.Fatal("serving goes on without Postgres")
	}
	if err := whyEnded(ended); err == nil {
		t.Error("a server whose Postgres died ends as if it had been asked to")
	}
	asked, cancel := context.WithCancel(context.Background())
	ended = untilPostgresEnds(asked, reached{private: privateServer(t)}, silent)
	cancel()
	<-ended.Done()
	if err := whyEnded(ended); err != nil {
		t.Errorf("asked to stop: %v", err)
	}
}

// TestAuditFailsOnATamperedRecord: one reading, one judgement, changed in their tables by
// the owner of the database; the ledger's chains still hold.
func TestAuditFailsOnATamperedRecord(t *testing.T) {
	t.Parallel()
	ctx := context.Background()
	for _, tc := range []struct {
		sql        string
		judgements bool
	}{
		{`update subgroup set readings[1] = 14991, reading_sum = reading_sum + 1 where taken_at = (select min(taken_at) from subgroup)`, false},
		{`update signal set withdrawn = true`, true},
	} {
		p := storetest.New(t, "x")
		for range 3 {
			p.Clock.Advance(time.Minute)
			p.MustRecord(t, p.Diameter, 14990, 15001, 14992, 14990, 14991)
		}
		c := auditCmd{database: database{URL: p.URL}, Judgements: tc.judgements}
		if err := c.Run(ctx, silent); err != nil {
			t.Errorf("an honest record: %v", err)
		}
		if _, err := p.Pool().Exec(ctx, tc.sql); err != nil {
			t.Fatal(err)
		}
		if err := c.Run(ctx, silent); err == nil || !strings.Contains(err.Error(), "differs") {
			t.Errorf("after %s: %v, want an error", tc.sql, err)
		}
	}
}

// privateServer starts a private Postgres with durability on, as a small site has it, in
// a folder of its own.
func privateServer(t testing.TB) *localpg.Server {
	t.Helper()
	return privateServerIn(t, privateFolder(t))
}

func privateFolder(t testing.TB) string {
	t.Helper()
	dir, err := os.MkdirTemp("/var/tmp", "holdfast-test-")
	if err != nil {
		t.Fatal(err)
	}
	if err := os.Chmod(dir, 0o711); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		if err := os.RemoveAll(dir); err != nil {
			t.Error(err)
		}
	})
	return dir
}

func privateServerIn(t testing.TB, dir string) *localpg.Server {
	t.Helper()
	pg, err := localpg.Start(context.Background(), localpg.Options{Dir: dir})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		if err := pg.Stop(); err != nil {
			t.Error(err)
		}
	})
	return pg
}
