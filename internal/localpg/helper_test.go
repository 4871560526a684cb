package localpg_test

import (
	"bufio"
	"context"
	"encoding/json"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strings"
	"syscall"
	"testing"
	"time"

	"golang.org/x/sys/unix"

	"holdfast/internal/localpg"
)

// The test binary is also the program that is killed: started with these
// variables it runs a server until its input ends.
const (
	holdDir = "HOLDFAST_TEST_HOLD"
	// blind takes away root's right to look into other users' processes, which
	// root does not have in most containers.
	blind = "HOLDFAST_TEST_BLIND"
)

func TestMain(m *testing.M) {
	dir := os.Getenv(holdDir)
	if dir == "" {
		code := m.Run()
		if dir, err := pristine(); err == nil {
			if err := os.RemoveAll(filepath.Dir(dir)); err != nil {
				fmt.Fprintln(os.Stderr, err)
				code = max(code, 1)
			}
		}
		os.Exit(code)
	}
	if err := hold(dir); err != nil {
		fmt.Fprintln(os.Stderr, err)
		os.Exit(1)
	}
}

// held is what the helper prints once its server is ready.
type held struct {
	Server int
	URL    string
}

func hold(dir string) error {
	if os.Getenv(blind) != "" {
		runtime.LockOSThread()
		if err := unix.Prctl(unix.PR_CAPBSET_DROP, unix.CAP_SYS_PTRACE, 0, 0, 0); err != nil {
			return fmt.Errorf("give up looking into processes: %w", err)
		}
		return syscall.Exec("/proc/self/exe", os.Args, []string{holdDir + "=" + dir})
	}
	ctx, cancel := context.WithTimeout(context.Background(), time.Minute)
	defer cancel()
	server, err := localpg.Start(ctx, localpg.Options{Dir: dir, ThrowAway: true})
	if err != nil {
		return err
	}
	if err := json.NewEncoder(os.Stdout).Encode(held{server.PID(), server.URL()}); err != nil {
		return err
	}
	if _, err := io.Copy(io.Discard, os.Stdin); err != nil {
		return err
	}
	return server.Stop()
}

// helper is a running helper process.
type helper struct {
	held
	cmd   *exec.Cmd
	input io.Closer
}

// startHelper runs a server on dir in another process. The process is killed at
// the end of the test if it still runs.
func startHelper(t *testing.T, dir string, change func(*exec.Cmd)) *helper {
	t.Helper()
	// The path of the test binary may lead through folders closed to others.
	cmd := exec.Command("/proc/self/exe")
	cmd.Env = []string{holdDir + "=" + dir}
	cmd.Dir = "/"
	if change != nil {
		change(cmd)
	}
	var complaint strings.Builder
	cmd.Stderr = &complaint
	input, err := cmd.StdinPipe()
	if err != nil {
		t.Fatal(err)
	}
	output, err := cmd.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	h := &helper{cmd: cmd, input: input}
	t.Cleanup(func() {
		if cmd.ProcessState == nil {
			h.kill(t)
		}
	})
	line, err := bufio.NewReader(output).ReadBytes('\n')
	if err == nil {
		err = json.Unmarshal(line, &h.held)
	}
	if err != nil {
		input.Close()
		t.Fatalf("the helper did not start: %v, %v: %s", err, cmd.Wait(), complaint.String())
	}
	return h
}

// kill ends the helper without any chance to clean up, and waits until the
// kernel has taken its server down too.
func (h *helper) kill(t *testing.T) {
	t.Helper()
	if err := h.cmd.Process.Kill(); err != nil {
		t.Fatal(err)
	}
	_ = h.cmd.Wait() // says "killed"
	waitGone(t, h.Server)
}

// stop ends the helper in order.
func (h *helper) stop(t *testing.T) {
	t.Helper()
	h.input.Close()
	if err := h.cmd.Wait(); err != nil {
		t.Errorf("the helper ended with %v", err)
	}
}

func waitGone(t *testing.T, pid int) {
	t.Helper()
	for deadline := time.Now().Add(20 * time.Second); time.Now().Before(deadline); time.Sleep(5 * time.Millisecond) {
		if !alive(pid) {
			return
		}
	}
	t.Fatalf("process %d is still there after 20 s", pid)
}

// alive tells whether a process runs; a zombie does not.
func alive(pid int) bool {
	status, err := os.ReadFile(fmt.Sprintf("/proc/%d/stat", pid))
	if err != nil {
		return false
	}
	_, after, _ := strings.Cut(string(status), ") ")
	return !strings.HasPrefix(after, "Z") && !strings.HasPrefix(after, "X")
}
