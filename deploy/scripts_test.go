package deploy_test

import (
	"context"
	"errors"
	"fmt"
	"net/url"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgconn"

	"holdfast/internal/localpg"
	"holdfast/internal/localpg/pgtest"
)

// server starts a private server of its own for a test: roles and databases of
// fixed names are made in it.
func server(t *testing.T) *localpg.Server {
	t.Helper()
	s, err := localpg.Start(t.Context(), localpg.Options{Dir: pgtest.Dir(t), ThrowAway: true})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		if err := s.Stop(); err != nil {
			t.Error(err)
		}
	})
	return s
}

// as is the connection string for another role and password.
func as(t *testing.T, conn, role, password string) string {
	t.Helper()
	u, err := url.Parse(conn)
	if err != nil {
		t.Fatal(err)
	}
	u.User = url.UserPassword(role, password)
	return u.String()
}

// script runs a program and returns what it prints.
func script(t *testing.T, env []string, name string, args ...string) (string, error) {
	t.Helper()
	// Read here, so that a changed script is not answered from the test cache.
	for _, file := range []string{"backup", "restore", "database.bash", "roles.sql"} {
		if _, err := os.ReadFile(file); err != nil {
			t.Fatal(err)
		}
	}
	cmd := exec.CommandContext(t.Context(), name, args...)
	cmd.Env = append([]string{"PATH=" + os.Getenv("PATH"), "LC_ALL=C.UTF-8"}, env...)
	out, err := cmd.CombinedOutput()
	return string(out), err
}

func execute(t *testing.T, conn, sql string) error {
	t.Helper()
	c, err := pgx.Connect(t.Context(), conn)
	if err != nil {
		return err
	}
	defer c.Close(context.Background())
	_, err = c.Exec(t.Context(), sql)
	return err
}

func must(t *testing.T, conn string, statements ...string) {
	t.Helper()
	for _, sql := range statements {
		if err := execute(t, conn, sql); err != nil {
			t.Fatalf("%s: %v", sql, err)
		}
	}
}

func value(t *testing.T, conn, sql string) string {
	t.Helper()
	c, err := pgx.Connect(t.Context(), conn)
	if err != nil {
		t.Fatal(err)
	}
	defer c.Close(context.Background())
	var v string
	if err := c.QueryRow(t.Context(), sql).Scan(&v); err != nil {
		t.Fatalf("%s: %v", sql, err)
	}
	return v
}

// denied tells whether the server refused for lack of rights (SQLSTATE 42501).
func denied(err error) bool {
	pe, ok := errors.AsType[*pgconn.PgError](err)
	return ok && pe.Code == "42501"
}

func TestRolesForAServerOfYourOwn(t *testing.T) {
	t.Parallel()
	s := server(t)
	// On somebody's own server neither our roles nor our database exist.
	postgres := as(t, s.ConnString("postgres"), "postgres", "")
	must(t, s.ConnString("postgres"), "create role postgres superuser login")
	must(t, postgres, "alter database holdfast rename to another", "alter role holdfast rename to bootstrap")

	psql := filepath.Join(s.Binaries().Dir, "psql")
	args := []string{"--no-psqlrc", "-f", "roles.sql", postgres}
	for _, env := range [][]string{
		nil,
		{"HOLDFAST_OWNER_PASSWORD=", "HOLDFAST_APP_PASSWORD="},
		{"HOLDFAST_OWNER_PASSWORD=long enough for an owner", "HOLDFAST_APP_PASSWORD=short"},
	} {
		if out, err := script(t, env, psql, args...); err == nil || !strings.Contains(out, "16 characters or more") {
			t.Errorf("with %q: %v: %s", env, err, out)
		}
	}
	out, err := script(t, []string{
		"HOLDFAST_OWNER_PASSWORD=o'wner \" $1 password", "HOLDFAST_APP_PASSWORD=the application's password",
	}, psql, args...)
	if err != nil {
		t.Fatalf("%v: %s", err, out)
	}
	if got := value(t, postgres, `select string_agg(rolname || ' ' || rolsuper || rolcreaterole || rolcanlogin || (rolpassword like 'SCRAM-SHA-256$%'), ', ' order by rolname)
		from pg_authid where rolname like 'holdfast%'`); got != "holdfast falsefalsetruetrue, holdfast_app falsefalsetruetrue" {
		t.Errorf("roles: %s", got)
	}

	owner := as(t, s.ConnString("holdfast"), "holdfast", "")
	app := as(t, s.ConnString("holdfast"), "holdfast_app", "")
	must(t, owner, "create table fact (x int)", "grant select, insert on fact to holdfast_app")
	must(t, app, "insert into fact values (1)")
	for _, sql := range []string{"delete from fact", "update fact set x = 2", "create table mine (x int)", "drop table fact"} {
		if err := execute(t, app, sql); err == nil {
			t.Errorf("the application may %s", sql)
		}
	}
	must(t, postgres, "create role stranger login")
	if err := execute(t, as(t, s.ConnString("holdfast"), "stranger", ""), "select 1"); !denied(err) {
		t.Errorf("a stranger connects: %v", err)
	}
}

func TestBackupAndRestore(t *testing.T) {
	t.Parallel()
	s := server(t)
	must(t, s.URL(), "create role holdfast_app", "create role keeper superuser login",
		"create table fact (id int primary key, note text)", "grant select on fact to holdfast_app",
		"insert into fact select n, 'päron ' || n from generate_series(1, 1000) n",
		"create table state (changed xid8 not null default pg_current_xact_id())",
		"insert into state values ('4000000000')")
	const summary = "select count(*) || ' ' || md5(string_agg(note, ',' order by id)) from fact"
	before := value(t, s.URL(), summary)
	data := filepath.Dir(s.SocketDir())
	folder := filepath.Join(t.TempDir(), "kept here")

	// Older files, of which the newest stays.
	if err := os.MkdirAll(folder, 0o700); err != nil {
		t.Fatal(err)
	}
	for _, day := range []string{"01", "02", "03"} {
		if err := os.WriteFile(filepath.Join(folder, "holdfast-202401"+day+"T000000Z.dump"), nil, 0o600); err != nil {
			t.Fatal(err)
		}
	}
	out, err := script(t, []string{"KEEP=2"}, "./backup", "--data", data, folder)
	if err != nil {
		t.Fatalf("%v: %s", err, out)
	}
	file := strings.TrimSpace(out)
	kept, err := filepath.Glob(filepath.Join(folder, "*"))
	if err != nil || len(kept) != 2 || kept[1] != file || !strings.Contains(kept[0], "20240103") {
		t.Errorf("kept: %q, %v", kept, err)
	}
	if info, err := os.Stat(file); err != nil || info.Mode().Perm() != 0o600 {
		t.Errorf("the backup is open to others: %v, %v", info.Mode(), err)
	}

	// The address form, with a password that must be decoded and not be seen.
	withPassword := as(t, s.URL(), "keeper", "p@ss:w/ord %")
	other := t.TempDir()
	// Where the program is found, what it says of the heads goes beside the backup. It gets the
	// address without its password, as everything else does.
	program := filepath.Join(t.TempDir(), "program")
	if err := os.WriteFile(program, []byte("#!/bin/sh\necho \"$* $DATABASE_URL\"\n"), 0o755); err != nil {
		t.Fatal(err)
	}
	out, err = script(t, []string{"DATABASE_OWNER_URL=" + withPassword, "HOLDFAST=" + program}, "./backup", other)
	if err != nil {
		t.Errorf("%v: %s", err, out)
	}
	heads, err := os.ReadFile(strings.TrimSpace(out) + ".heads")
	if err != nil || !strings.HasPrefix(string(heads), "audit --heads postgres://keeper@") {
		t.Errorf("heads beside the backup: %q, %v", heads, err)
	}

	must(t, s.URL(), "delete from fact where id > 10", "insert into fact values (2000, 'later')")
	later := value(t, s.URL(), summary)

	damaged := filepath.Join(folder, "damaged.dump")
	text, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(damaged, text[:len(text)*2/3], 0o600); err != nil {
		t.Fatal(err)
	}
	if out, err := script(t, nil, "./restore", "--data", data, damaged); err == nil {
		t.Errorf("a damaged file is restored: %s", out)
	}
	if got := value(t, s.URL(), summary); got != later {
		t.Errorf("a damaged file changed the database: %s, was %s", got, later)
	}
	if got := value(t, s.URL(), "select count(*)::text from pg_database where datname like 'holdfast_%'"); got != "0" {
		t.Errorf("a damaged file leaves %s databases", got)
	}

	// Somebody is still connected: the change of names must not wait for them.
	idle, err := pgx.Connect(t.Context(), s.URL())
	if err != nil {
		t.Fatal(err)
	}
	defer idle.Close(context.Background())
	out, err = script(t, []string{"ADMIN_URL=" + withPassword}, "./restore", file)
	if err != nil {
		t.Fatalf("%v: %s", err, out)
	}
	if got := value(t, s.URL(), summary); got != before {
		t.Errorf("restored: %s; want %s", got, before)
	}
	app := as(t, s.URL(), "holdfast", "") + "&options=" + "-c%20role%3Dholdfast_app"
	if got := value(t, app, "select current_user || count(*) from fact"); got != "holdfast_app1000" {
		t.Errorf("as application: %s", got)
	}
	if err := execute(t, app, "delete from fact"); !denied(err) {
		t.Errorf("the application may delete after a restore: %v", err)
	}
	if got := value(t, s.URL(), "select (changed::text::numeric < 4000000000)::text from state"); got != "true" {
		t.Error("a transaction number of the old cluster came along")
	}
	if got := value(t, s.URL(), "select tableowner from pg_tables where tablename = 'fact'"); got != "holdfast" {
		t.Errorf("the owner is %s", got)
	}
	old := value(t, s.URL(), "select datname from pg_database where datname like 'holdfast_before_%'")
	if got := value(t, s.ConnString(old), summary); got != later {
		t.Errorf("the old database holds %s; want %s", got, later)
	}
}

func TestBackupRefusesWhatCannotWork(t *testing.T) {
	t.Parallel()
	for _, tc := range []struct {
		env  []string
		args []string
		says string
	}{
		{nil, []string{t.TempDir()}, "DATABASE_OWNER_URL="},
		{nil, []string{"--data", t.TempDir(), t.TempDir()}, "No private server is running"},
		{[]string{"DATABASE_URL=postgres://x@/y?host=/nowhere", "KEEP=all"}, []string{t.TempDir()}, "KEEP must be a number"},
		{[]string{"DATABASE_URL=postgres://x@/y?host=/nowhere"}, []string{t.TempDir()}, "/nowhere"},
	} {
		out, err := script(t, tc.env, "./backup", tc.args...)
		if err == nil || !strings.Contains(out, tc.says) {
			t.Errorf("backup %q with %q: %v: %s; want %q", tc.args, tc.env, err, out, tc.says)
		}
		if left, err := os.ReadDir(tc.args[len(tc.args)-1]); err != nil || len(left) > 0 {
			t.Errorf("backup %q leaves %v, %v", tc.args, left, err)
		}
	}
}

// TestFilesOfTheServiceAgree keeps the numbers that stand in several files equal.
func TestFilesOfTheServiceAgree(t *testing.T) {
	t.Parallel()
	needs, err := os.ReadFile("needs.bash")
	if err != nil {
		t.Fatal(err)
	}
	if want := fmt.Sprintf("\noldest_postgres=%d\n", localpg.OldestVersion); !strings.Contains(string(needs), want) {
		t.Errorf("needs.bash does not say %q", strings.TrimSpace(want))
	}
}
