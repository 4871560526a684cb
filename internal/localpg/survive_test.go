package localpg_test

import (
	"context"
	"errors"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"syscall"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"

	"holdfast/internal/localpg"
)

func TestSecondProgramIsRefused(t *testing.T) {
	t.Parallel()
	dir := cluster(t)
	first := startHelper(t, dir, nil)
	_, err := localpg.Start(t.Context(), localpg.Options{Dir: dir, ThrowAway: true, Fresh: true})
	inUse, ok := errors.AsType[*localpg.InUseError](err)
	if !ok || inUse.PID != first.cmd.Process.Pid || inUse.Dir != dir {
		t.Fatalf("error %v; want the folder in use by process %d", err, first.cmd.Process.Pid)
	}
	if want := fmt.Sprintf("in use by process %d", inUse.PID); !strings.Contains(err.Error(), want) {
		t.Errorf("error %q does not say %q", err, want)
	}
	expect(t, first.URL, "1", "select '1'")
	first.stop(t)

	// The same holds inside one program.
	server := start(t, localpg.Options{Dir: dir, ThrowAway: true})
	_, err = localpg.Start(t.Context(), localpg.Options{Dir: dir, ThrowAway: true})
	if inUse, ok := errors.AsType[*localpg.InUseError](err); !ok || inUse.PID != os.Getpid() {
		t.Errorf("error %v; want the folder in use by process %d", err, os.Getpid())
	}
	expect(t, server.URL(), "1", "select '1'")
}

func TestKilledProgramLeavesNoServerAndLosesNothing(t *testing.T) {
	t.Parallel()
	dir := cluster(t)
	killed := startHelper(t, dir, nil)
	expect(t, killed.URL, "42", "create table kept as select 42 as x", "select x::text from kept")
	begun := time.Now()
	killed.kill(t)
	t.Logf("the server was gone %v after its program", time.Since(begun).Round(time.Millisecond))
	if left := postgresIn(t, dir); len(left) > 0 {
		t.Errorf("processes %v are left", left)
	}
	server := start(t, localpg.Options{Dir: dir, ThrowAway: true})
	expect(t, server.URL(), "42", "select x::text from kept")
}

func TestServerThatDiesIsNoticed(t *testing.T) {
	t.Parallel()
	dir := cluster(t)
	server := start(t, localpg.Options{Dir: dir})
	expect(t, server.URL(), "42", "create table kept as select 42 as x", "select x::text from kept")
	select {
	case <-server.Done():
		t.Fatal("Done is closed while the server runs")
	default:
	}
	if err := syscall.Kill(server.PID(), syscall.SIGKILL); err != nil {
		t.Fatal(err)
	}
	select {
	case <-server.Done():
	case <-time.After(10 * time.Second):
		t.Fatal("Done is still open 10 s after the server was killed")
	}
	if err := server.Stop(); err != nil {
		t.Errorf("Stop after a crash: %v", err)
	}
	again := start(t, localpg.Options{Dir: dir})
	expect(t, again.URL(), "42", "select x::text from kept")
	if !strings.Contains(again.LogTail(), "was not properly shut down") {
		t.Errorf("the log does not tell of the recovery:\n%s", again.LogTail())
	}
}

// runAlone starts a server on the cluster as somebody would by hand: nothing
// ends it when its parent dies. It returns the process and a connection string.
func runAlone(t *testing.T, dir string) (*exec.Cmd, string) {
	t.Helper()
	bin, err := localpg.Find("")
	if err != nil {
		t.Fatal(err)
	}
	pgdata := filepath.Join(dir, "pgdata")
	cmd := exec.Command(filepath.Join(bin.Dir, "postgres"), "-D", pgdata, "-c", "listen_addresses=",
		"-c", "unix_socket_directories="+pgdata, "-c", "fsync=off")
	cmd.SysProcAttr = asOwner(t, pgdata)
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	done := make(chan struct{})
	go func() { _ = cmd.Wait(); close(done) }()
	t.Cleanup(func() {
		_ = cmd.Process.Kill() // when the test itself has failed
		<-done
	})
	url := "postgres://holdfast@/holdfast?host=" + pgdata
	for deadline := time.Now().Add(20 * time.Second); ; time.Sleep(5 * time.Millisecond) {
		if _, err = query(t, url, "select ''"); err == nil {
			return cmd, url
		}
		if time.Now().After(deadline) {
			t.Fatalf("a server started by hand does not answer: %v", err)
		}
	}
}

// asOwner starts a process as the user that a folder belongs to.
func asOwner(t *testing.T, path string) *syscall.SysProcAttr {
	t.Helper()
	if os.Geteuid() != 0 {
		return nil
	}
	info, err := os.Stat(path)
	if err != nil {
		t.Fatal(err)
	}
	st := info.Sys().(*syscall.Stat_t)
	return &syscall.SysProcAttr{Credential: &syscall.Credential{Uid: st.Uid, Gid: st.Gid}}
}

// postgresIn lists the processes that work in the cluster.
func postgresIn(t *testing.T, dir string) []int {
	t.Helper()
	var pids []int
	links, err := filepath.Glob("/proc/[0-9]*/cwd")
	if err != nil {
		t.Fatal(err)
	}
	for _, link := range links {
		if target, err := os.Readlink(link); err == nil && target == filepath.Join(dir, "pgdata") {
			pid, err := strconv.Atoi(strings.Split(link, "/")[2])
			if err != nil {
				t.Fatal(err)
			}
			pids = append(pids, pid)
		}
	}
	return pids
}

func TestOrphanedServerIsShutDown(t *testing.T) {
	t.Parallel()
	for name, change := range map[string]func(*exec.Cmd){
		"by a program with every right": nil,
		"by root that may not look into other users' processes": func(cmd *exec.Cmd) {
			if os.Geteuid() == 0 {
				cmd.Env = append(cmd.Env, blind+"=1")
			}
		},
	} {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			dir := cluster(t)
			orphan, url := runAlone(t, dir)
			expect(t, url, "42", "create table kept as select 42 as x", "select x::text from kept")
			next := startHelper(t, dir, change)
			if alive(orphan.Process.Pid) {
				t.Error("two servers run on the same data")
			}
			expect(t, next.URL, "42", "select x::text from kept")
			next.stop(t)
		})
	}
}

func TestBackendThatOutlivedItsServerIsEnded(t *testing.T) {
	t.Parallel()
	dir := cluster(t)
	orphan, url := runAlone(t, dir)
	conn, err := pgx.Connect(t.Context(), url)
	if err != nil {
		t.Fatal(err)
	}
	defer conn.Close(context.Background())
	backend := int(conn.PgConn().PID())
	// A busy backend does not notice that the postmaster is gone.
	busy := make(chan error, 1)
	go func() {
		_, err := conn.Exec(context.Background(), "select count(*) from generate_series(1, 1e12::bigint)")
		busy <- err
	}()
	for !strings.Contains(title(backend), "SELECT") {
		time.Sleep(time.Millisecond)
	}
	if err := orphan.Process.Kill(); err != nil {
		t.Fatal(err)
	}
	waitGone(t, orphan.Process.Pid)
	if !alive(backend) {
		t.Fatal("the backend ended by itself: this test shows nothing")
	}
	server := start(t, localpg.Options{Dir: dir, ThrowAway: true})
	if alive(backend) {
		t.Error("a backend of the old server still has the data open")
	}
	if err := <-busy; err == nil {
		t.Error("the old backend finished its query")
	}
	expect(t, server.URL(), "1", "select '1'")
}

func title(pid int) string {
	line, err := os.ReadFile(fmt.Sprintf("/proc/%d/cmdline", pid))
	if err != nil {
		return ""
	}
	return string(line)
}

// The number in an old postmaster.pid may meanwhile belong to anybody.
func TestStalePidFileOfAnotherProcess(t *testing.T) {
	t.Parallel()
	dir := cluster(t)
	pgdata := filepath.Join(dir, "pgdata")
	other := exec.Command("sleep", "60")
	other.Dir, other.SysProcAttr = "/", asOwner(t, pgdata)
	if err := other.Start(); err != nil {
		t.Fatal(err)
	}
	defer func() {
		if !alive(other.Process.Pid) {
			t.Error("the other process was ended")
		}
		_ = other.Process.Kill()
		_ = other.Wait()
	}()
	stale := fmt.Sprintf("%d\n%s\n1700000000\n5432\n/nowhere\n\n  1 1\nready   \n", other.Process.Pid, pgdata)
	if err := os.WriteFile(filepath.Join(pgdata, "postmaster.pid"), []byte(stale), 0o644); err != nil {
		t.Fatal(err)
	}
	server := start(t, localpg.Options{Dir: dir, ThrowAway: true})
	expect(t, server.URL(), "1", "select '1'")
}

func TestLeftoversOfAKilledFirstStartAreRemoved(t *testing.T) {
	t.Parallel()
	dir := cluster(t)
	for _, name := range []string{"pgdata.init-12345/base", "run-OLD"} {
		if err := os.MkdirAll(filepath.Join(dir, name), 0o700); err != nil {
			t.Fatal(err)
		}
	}
	server := start(t, localpg.Options{Dir: dir, ThrowAway: true})
	expect(t, server.URL(), "1", "select '1'")
	for _, name := range []string{"pgdata.init-12345", "run-OLD"} {
		if _, err := os.Stat(filepath.Join(dir, name)); err == nil {
			t.Errorf("%s is still there", name)
		}
	}
}
