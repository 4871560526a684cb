package localpg_test

import (
	"context"
	"errors"
	"fmt"
	"os"
	"os/exec"
	"os/user"
	"path/filepath"
	"strconv"
	"strings"
	"sync"
	"syscall"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"

	"holdfast/internal/localpg"
	"holdfast/internal/localpg/pgtest"
)

// start runs a server and stops it at the end of the test.
func start(t *testing.T, opts localpg.Options) *localpg.Server {
	t.Helper()
	server, err := localpg.Start(t.Context(), opts)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		if err := server.Stop(); err != nil {
			t.Error(err)
		}
	})
	return server
}

// pristine is a stopped cluster that tests copy: making one takes longer.
var pristine = sync.OnceValues(func() (string, error) {
	parent, err := os.MkdirTemp("", "holdfast-test-")
	if err != nil {
		return "", err
	}
	if err := os.Chmod(parent, 0o755); err != nil {
		return "", err
	}
	dir := filepath.Join(parent, "pristine")
	server, err := localpg.Start(context.Background(), localpg.Options{Dir: dir, ThrowAway: true})
	if err != nil {
		return "", err
	}
	return dir, server.Stop()
})

// cluster returns a data folder with a stopped cluster in it.
func cluster(t *testing.T, below ...string) string {
	t.Helper()
	from, err := pristine()
	if err != nil {
		t.Fatal(err)
	}
	dir := filepath.Join(append([]string{pgtest.Dir(t)}, below...)...)
	if err := os.MkdirAll(dir, 0o711); err != nil {
		t.Fatal(err)
	}
	if out, err := exec.Command("cp", "-a", filepath.Join(from, "pgdata"), dir).CombinedOutput(); err != nil {
		t.Fatalf("copy the cluster: %v: %s", err, out)
	}
	return dir
}

// query runs statements and returns the one value that the last one gives.
func query(t *testing.T, url string, statements ...string) (string, error) {
	t.Helper()
	ctx, cancel := context.WithTimeout(context.Background(), 20*time.Second)
	defer cancel()
	conn, err := pgx.Connect(ctx, url)
	if err != nil {
		return "", err
	}
	defer conn.Close(ctx)
	last := len(statements) - 1
	for _, s := range statements[:last] {
		if _, err := conn.Exec(ctx, s); err != nil {
			return "", err
		}
	}
	var value string
	err = conn.QueryRow(ctx, statements[last]).Scan(&value)
	return value, err
}

func expect(t *testing.T, url, want string, statements ...string) {
	t.Helper()
	got, err := query(t, url, statements...)
	if err != nil || got != want {
		t.Errorf("%s gives %q, %v; want %q", statements[len(statements)-1], got, err, want)
	}
}

func TestDataSurviveARestart(t *testing.T) {
	t.Parallel()
	// A path that must be quoted in a pattern and will not do in a URL.
	dir := filepath.Join(pgtest.Dir(t), `it's, "odd" [a-b]* 100% é`)
	server := start(t, localpg.Options{Dir: dir})
	expect(t, server.URL(), "7", "create table kept (x int)", "insert into kept values (7)", "select x::text from kept")
	if err := server.Stop(); err != nil {
		t.Fatal(err)
	}
	if alive(server.PID()) {
		t.Error("the server is still there after Stop")
	}
	if _, err := query(t, server.URL(), "select ''"); err == nil {
		t.Error("the server answers after Stop")
	}

	again := start(t, localpg.Options{Dir: dir})
	expect(t, again.URL(), "7", "select x::text from kept")
	if server.URL() == again.URL() {
		t.Error("two runs share a socket folder")
	}
	left, err := os.ReadDir(dir)
	if err != nil {
		t.Fatal(err)
	}
	var names []string
	for _, e := range left {
		names = append(names, strings.TrimRight(e.Name(), "ABCDEFGHIJKLMNOPQRSTUVWXYZ234567"))
	}
	if got, want := strings.Join(names, " "), "lock pgdata postgres.log"; got != want {
		t.Errorf("the data folder holds %s; want %s", got, want)
	}

	if err := again.Stop(); err != nil {
		t.Fatal(err)
	}
	fresh := start(t, localpg.Options{Dir: dir, Fresh: true})
	expect(t, fresh.URL(), "true", "select (to_regclass('kept') is null)::text")
}

func TestServerIsDurableAndPrivate(t *testing.T) {
	t.Parallel()
	server := start(t, localpg.Options{Dir: cluster(t)})
	for setting, want := range map[string]string{
		"fsync": "on", "synchronous_commit": "on", "full_page_writes": "on",
		"listen_addresses": "", "server_encoding": "UTF8", "data_directory_mode": "0700",
		"unix_socket_permissions": "0700", "data_checksums": "on",
	} {
		expect(t, server.URL(), want, "show "+setting)
	}
	expect(t, server.URL(), "C.UTF-8 holdfast", "select datcollate || ' ' || pg_get_userbyid(datdba) from pg_database where datname = current_database()")
	info, err := os.Stat(server.SocketDir())
	if err != nil || info.Mode().Perm() != 0o700 {
		t.Errorf("socket folder: %v, %v; want it closed to others", info.Mode(), err)
	}
}

func TestServerDoesNotRunAsRoot(t *testing.T) {
	t.Parallel()
	want := strconv.Itoa(os.Geteuid())
	if want == "0" {
		u, err := user.Lookup("postgres")
		if err != nil {
			u, err = user.Lookup("nobody")
		}
		if err != nil {
			t.Fatal(err)
		}
		want = u.Uid
	}
	server := start(t, localpg.Options{Dir: cluster(t), ThrowAway: true})
	status, err := os.ReadFile(fmt.Sprintf("/proc/%d/status", server.PID()))
	if err != nil {
		t.Fatal(err)
	}
	for _, line := range strings.Split(string(status), "\n") {
		fields := strings.Fields(line)
		if len(fields) == 0 {
			continue
		}
		switch fields[0] {
		case "Uid:":
			if strings.Join(fields[1:], " ") != strings.TrimSpace(strings.Repeat(want+" ", 4)) {
				t.Errorf("server runs with %s; want user %s throughout", line, want)
			}
		case "Groups:":
			if os.Geteuid() == 0 && len(fields) != 1 {
				t.Errorf("server keeps root's groups: %s", line)
			}
		}
	}
}

// TestOrdinaryUser runs the whole life of a cluster without root's rights.
func TestOrdinaryUser(t *testing.T) {
	t.Parallel()
	dir := filepath.Join(pgtest.Dir(t), "data")
	if err := os.Mkdir(dir, 0o700); err != nil {
		t.Fatal(err)
	}
	unprivileged := func(*exec.Cmd) {}
	if os.Geteuid() == 0 {
		nobody, err := user.Lookup("nobody")
		if err != nil {
			t.Fatal(err)
		}
		uid, _ := strconv.Atoi(nobody.Uid)
		gid, _ := strconv.Atoi(nobody.Gid)
		if err := os.Chown(dir, uid, gid); err != nil {
			t.Fatal(err)
		}
		unprivileged = func(cmd *exec.Cmd) {
			cmd.SysProcAttr = &syscall.SysProcAttr{Credential: &syscall.Credential{Uid: uint32(uid), Gid: uint32(gid)}}
		}
	}
	first := startHelper(t, dir, unprivileged)
	expect(t, first.URL, "1", "create table kept as select 1 as x", "select x::text from kept")
	first.kill(t)
	second := startHelper(t, dir, unprivileged)
	expect(t, second.URL, "1", "select x::text from kept")
	second.stop(t)

	// Root keeps the cluster with its owner.
	third := start(t, localpg.Options{Dir: dir, ThrowAway: true})
	expect(t, third.URL(), "1", "select x::text from kept")
}

func TestClosedParentIsNamed(t *testing.T) {
	t.Parallel()
	dir := filepath.Join(t.TempDir(), "data") // below a folder closed to others
	server, err := localpg.Start(t.Context(), localpg.Options{Dir: dir, ThrowAway: true})
	if os.Geteuid() != 0 {
		if err != nil {
			t.Fatal(err)
		}
		if err := server.Stop(); err != nil {
			t.Error(err)
		}
		return
	}
	wall := filepath.Dir(filepath.Dir(dir))
	if err == nil || !strings.Contains(err.Error(), "may not enter "+wall+". Choose a data folder elsewhere") {
		t.Errorf("error %v; want it to name %s", err, wall)
	}
	if left, err := filepath.Glob(filepath.Join(dir, "*")); err != nil || len(left) != 1 {
		t.Errorf("a refused start leaves %v, %v; want the lock file alone", left, err)
	}
}

func TestLongPathGetsAShortSocket(t *testing.T) {
	t.Parallel()
	dir := cluster(t, strings.Repeat("long", 20), strings.Repeat("path", 20))
	server := start(t, localpg.Options{Dir: dir, ThrowAway: true})
	expect(t, server.URL(), "1", "select '1'")
	if !strings.HasPrefix(server.SocketDir(), "/tmp/") {
		t.Errorf("socket folder is %s", server.SocketDir())
	}
	if err := server.Stop(); err != nil {
		t.Fatal(err)
	}
	if _, err := os.Stat(server.SocketDir()); err == nil {
		t.Error("Stop leaves the socket folder")
	}

	killed := startHelper(t, dir, nil)
	conf, err := pgx.ParseConfig(killed.URL)
	if err != nil {
		t.Fatal(err)
	}
	killed.kill(t)
	start(t, localpg.Options{Dir: dir, ThrowAway: true})
	if _, err := os.Stat(conf.Host); err == nil {
		t.Errorf("the socket folder %s of the killed program is still there", conf.Host)
	}
}

func TestForeignFolderIsLeftAlone(t *testing.T) {
	t.Parallel()
	dir := pgtest.Dir(t)
	mine := filepath.Join(dir, "pgdata", "letter")
	if err := os.Mkdir(filepath.Dir(mine), 0o711); err != nil {
		t.Fatal(err)
	}
	if os.Geteuid() == 0 {
		nobody := 65534
		if err := os.Chown(filepath.Dir(mine), nobody, nobody); err != nil {
			t.Fatal(err)
		}
	}
	if err := os.WriteFile(mine, []byte("dear"), 0o644); err != nil {
		t.Fatal(err)
	}
	_, err := localpg.Start(t.Context(), localpg.Options{Dir: dir, ThrowAway: true})
	if err == nil || !strings.Contains(err.Error(), "is not a PostgreSQL cluster") {
		t.Errorf("error %v; want a refusal", err)
	}
	if text, err := os.ReadFile(mine); string(text) != "dear" {
		t.Errorf("the file of somebody else: %q, %v", text, err)
	}
}

func TestStartThatFailsTellsWhy(t *testing.T) {
	t.Parallel()
	dir := cluster(t)
	conf, err := os.OpenFile(filepath.Join(dir, "pgdata", "postgresql.conf"), os.O_APPEND|os.O_WRONLY, 0)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := conf.WriteString("no_such_setting = 1\n"); err != nil {
		t.Fatal(err)
	}
	conf.Close()
	_, err = localpg.Start(t.Context(), localpg.Options{Dir: dir, ThrowAway: true})
	if err == nil || !strings.Contains(err.Error(), "no_such_setting") {
		t.Errorf("error %v; want the server's own words", err)
	}

	ctx, cancel := context.WithCancelCause(t.Context())
	tired := errors.New("tired of waiting")
	cancel(tired)
	if _, err := localpg.Start(ctx, localpg.Options{Dir: pgtest.Dir(t), ThrowAway: true}); !errors.Is(err, tired) {
		t.Errorf("error %v; want the reason for giving up", err)
	}
}
