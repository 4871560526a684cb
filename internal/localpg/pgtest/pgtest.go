// Package pgtest gives the tests of other packages real databases: one
// throw-away PostgreSQL cluster for each test binary, and in it a fresh copy of a
// migrated database for each test that asks.
//
//	func TestMain(m *testing.M) { pgtest.Main(m, store.Migrate) }
//
//	func TestSomething(t *testing.T) {
//		t.Parallel()
//		pool := open(t, pgtest.Database(t))
//		...
//
// The cluster is made when the first test asks for a database and is gone when
// the test binary has ended, also when that was killed. Where PostgreSQL is not
// installed the tests fail and say what to install.
package pgtest

import (
	"context"
	"crypto/rand"
	"errors"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"sync"
	"sync/atomic"
	"syscall"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"
	"golang.org/x/sys/unix"

	"holdfast/internal/localpg"
)

// template is the migrated database that is copied.
const template = "holdfast_template"

// cluster is the one of this test binary.
var cluster struct {
	start      sync.Once
	err        error
	server     *localpg.Server
	dir        string
	watcher    io.Closer
	migrate    func(ctx context.Context, connString string) error
	migrated   sync.Once
	migrateErr error
	count      atomic.Int64
}

// Main runs the tests of a package and ends the process. Call it from TestMain.
// migrate brings an empty database, owned by the role that connString names, to
// the newest schema.
func Main(m *testing.M, migrate func(ctx context.Context, connString string) error) {
	cluster.migrate = migrate
	code := m.Run()
	if err := drop(); err != nil {
		fmt.Fprintln(os.Stderr, "pgtest:", err)
		code = max(code, 1)
	}
	os.Exit(code)
}

// Database returns the connection string of a fresh copy of the migrated
// database, with the rights of its owner. It stays until the test binary ends.
func Database(t testing.TB) string {
	t.Helper()
	server := running(t)
	cluster.migrated.Do(func() { cluster.migrateErr = makeTemplate(server) })
	if cluster.migrateErr != nil {
		t.Fatalf("make the template database: %v", cluster.migrateErr)
	}
	return create(t, server, "template "+template+" strategy file_copy")
}

// Empty returns the connection string of a fresh database without any tables of
// ours, for tests of the migrations themselves. Roles are shared by all databases
// of the cluster.
func Empty(t testing.TB) string {
	t.Helper()
	return create(t, running(t), "template template0 strategy file_copy")
}

// Dir returns a new folder in memory that lasts as long as the test and that the
// server's user can reach, which does not hold for t.TempDir under root.
func Dir(t testing.TB) string {
	t.Helper()
	dir, err := makeDir()
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		if err := os.RemoveAll(dir); err != nil {
			t.Error(err)
		}
	})
	return dir
}

func running(t testing.TB) *localpg.Server {
	t.Helper()
	cluster.start.Do(func() { cluster.err = start() })
	if cluster.err != nil {
		t.Fatal(cluster.err)
	}
	return cluster.server
}

func start() error {
	if cluster.migrate == nil {
		return errors.New("pgtest: TestMain does not call pgtest.Main")
	}
	dir, err := makeDir()
	if err != nil {
		return err
	}
	cluster.dir = dir
	ctx, cancel := context.WithTimeout(context.Background(), 2*time.Minute)
	defer cancel()
	cluster.server, err = localpg.Start(ctx, localpg.Options{Dir: dir, ThrowAway: true})
	if err != nil {
		return err
	}
	cluster.watcher, err = removeAfterUs(dir, cluster.server.PID())
	return err
}

// makeDir makes a folder for a cluster: in memory where there is room, since
// that is twice as fast.
func makeDir() (string, error) {
	base := os.TempDir()
	const enough = 1 << 30 // containers often have 64 MB
	var fs unix.Statfs_t
	if err := unix.Statfs("/dev/shm", &fs); err == nil && fs.Bavail*uint64(fs.Bsize) >= enough && unix.Access("/dev/shm", unix.W_OK) == nil {
		base = "/dev/shm"
	}
	dir := filepath.Join(base, "holdfast-test-"+rand.Text()[:10])
	if err := os.Mkdir(dir, 0o711); err != nil {
		return "", fmt.Errorf("make a folder for the test cluster: %w", err)
	}
	return dir, nil
}

// removeAfterUs starts a watcher that removes dir once this process and the
// server are gone. It notices by the end of its input, so even a kill cannot
// leave the folder behind, which would keep its memory. A dead process that
// nobody has collected yet has an empty command line.
func removeAfterUs(dir string, server int) (io.Closer, error) {
	const script = `while read -r _; do :; done
n=0; while grep -qs . "/proc/$1/cmdline" && [ $n -lt 300 ]; do sleep 0.1; n=$((n+1)); done
rm -rf -- "$2"`
	cmd := exec.Command("/bin/sh", "-c", script, "sh", strconv.Itoa(server), dir)
	cmd.Dir = "/"
	cmd.SysProcAttr = &syscall.SysProcAttr{Setpgid: true}
	input, err := cmd.StdinPipe()
	if err != nil {
		return nil, fmt.Errorf("watch over the test cluster: %w", err)
	}
	if err := cmd.Start(); err != nil {
		return nil, fmt.Errorf("watch over the test cluster: %w", err)
	}
	return closer(func() error {
		return errors.Join(input.Close(), cmd.Wait())
	}), nil
}

type closer func() error

func (c closer) Close() error { return c() }

// makeTemplate migrates the database that the others are copied from.
func makeTemplate(server *localpg.Server) error {
	ctx, cancel := context.WithTimeout(context.Background(), 2*time.Minute)
	defer cancel()
	if err := execute(ctx, server, "create database "+template); err != nil {
		return err
	}
	return cluster.migrate(ctx, server.ConnString(template))
}

func create(t testing.TB, server *localpg.Server, how string) string {
	t.Helper()
	name := "test_" + strconv.FormatInt(cluster.count.Add(1), 10)
	ctx, cancel := context.WithTimeout(context.Background(), time.Minute)
	defer cancel()
	if err := execute(ctx, server, "create database "+name+" "+how); err != nil {
		t.Fatalf("create a database for the test: %v", err)
	}
	return server.ConnString(name)
}

func execute(ctx context.Context, server *localpg.Server, sql string) error {
	conn, err := pgx.Connect(ctx, server.ConnString("postgres"))
	if err != nil {
		return err
	}
	defer conn.Close(context.WithoutCancel(ctx))
	_, err = conn.Exec(ctx, sql)
	return err
}

// drop ends the cluster and removes it.
func drop() error {
	var errs []error
	if cluster.server != nil {
		errs = append(errs, cluster.server.Stop())
	}
	if cluster.watcher != nil {
		errs = append(errs, cluster.watcher.Close())
	}
	if cluster.dir != "" {
		errs = append(errs, os.RemoveAll(cluster.dir))
	}
	return errors.Join(errs...)
}
