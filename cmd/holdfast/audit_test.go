package main

import (
	"context"
	"log/slog"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"testing"

	"github.com/jackc/pgx/v5"

	"holdfast/internal/store/storetest"
)

var printing sync.Mutex // standard output is the process's own

// printed runs a command and gives what it writes to standard output.
func printed(t *testing.T, run func() error) (string, error) {
	t.Helper()
	printing.Lock()
	defer printing.Unlock()
	file := filepath.Join(t.TempDir(), "out")
	f, err := os.Create(file)
	if err != nil {
		t.Fatal(err)
	}
	stdout := os.Stdout
	os.Stdout = f
	err = run()
	os.Stdout = stdout
	f.Close()
	out, readErr := os.ReadFile(file)
	if readErr != nil {
		t.Fatal(readErr)
	}
	return string(out), err
}

func TestAuditAgainstKeptHeads(t *testing.T) {
	t.Parallel()
	ctx, log := context.Background(), slog.New(slog.DiscardHandler)
	p := storetest.New(t, "x")
	p.MustRecord(t, p.Diameter, 14990, 14991, 14992, 14990, 14991)
	p.Clock.Advance(1)
	p.MustRecord(t, p.Diameter, 14991, 14991, 14992, 14990, 14991)
	db := database{URL: p.URL}
	heads, err := printed(t, func() error { return (&auditCmd{database: db, Heads: true}).Run(ctx, log) })
	if err != nil || !strings.HasPrefix(heads, "# ") || strings.Count(heads, "\n") < 3 {
		t.Fatalf("%v\n%s", err, heads)
	}
	kept := filepath.Join(t.TempDir(), "kept.heads")
	if err := os.WriteFile(kept, []byte(heads), 0o600); err != nil {
		t.Fatal(err)
	}
	p.Clock.Advance(1)
	p.MustRecord(t, p.Diameter, 14992, 14991, 14992, 14990, 14991)
	out, err := printed(t, func() error { return (&auditCmd{database: db, Against: kept}).Run(ctx, log) })
	if err != nil || !strings.Contains(out, "are contained") {
		t.Errorf("an honest record that went on: %v\n%s", err, out)
	}

	// Somebody with the owner's rights cuts off what was measured last, and mends the head.
	conn, err := pgx.Connect(ctx, p.URL)
	if err != nil {
		t.Fatal(err)
	}
	defer conn.Close(ctx)
	for _, sql := range []string{
		`delete from subgroup where taken_at = (select max(taken_at) from subgroup)`,
		`delete from ledger where kind = 'subgroup' and seq >= 2 and chain = (select chain from ledger where kind = 'subgroup' limit 1)`,
		`update characteristic_state s set (ledger_seq, ledger_hash) = (select seq, hash from ledger where chain = s.characteristic_id order by seq desc limit 1)
			where exists (select from ledger where chain = s.characteristic_id)`,
	} {
		if _, err := conn.Exec(ctx, sql); err != nil {
			t.Fatal(err)
		}
	}
	out, err = printed(t, func() error { return (&auditCmd{database: db, Against: kept}).Run(ctx, log) })
	if err == nil || !strings.Contains(out, "does not contain") {
		t.Errorf("a cut chain: %v\n%s", err, out)
	}

	for name, text := range map[string]string{"nothing": "# only a remark\n", "nonsense": "abc\n", "a short hash": "0198c0de-0000-7000-8000-000000000000 4 abcd\n"} {
		if err := os.WriteFile(kept, []byte(text), 0o600); err != nil {
			t.Fatal(err)
		}
		if _, err := readHeads(kept); err == nil {
			t.Errorf("%s was read", name)
		}
	}
}
