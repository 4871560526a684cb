package localpg

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"runtime"
	"slices"
	"strconv"
	"strings"
	"syscall"
	"time"

	"golang.org/x/sys/unix"
)

// process is a running PostgreSQL process that works in a cluster of ours.
type process struct {
	pid        int
	postmaster bool // the parent of the others
}

// stopOrphans ends what an earlier program left running in pgdata, and then
// removes postmaster.pid. That file must not go while any process of the cluster
// lives: it is what keeps two servers from writing the same data.
func stopOrphans(pgdata string, a account) error {
	const patience = 20 * time.Second
	begun := time.Now()
	sent := make(map[int]syscall.Signal)
	for {
		left, err := processesIn(pgdata, a)
		if err != nil {
			return err
		}
		if len(left) == 0 {
			break
		}
		waited := time.Since(begun)
		if waited > 2*patience {
			return fmt.Errorf("PostgreSQL process %d of an earlier run does not end. End it and start again", left[0].pid)
		}
		// A fast shutdown by the postmaster if it lives. Without it the others
		// have nobody to answer to and are told to quit.
		parent := slices.ContainsFunc(left, func(p process) bool { return p.postmaster })
		for _, p := range left {
			signal := syscall.SIGQUIT
			switch {
			case waited > patience+patience/2:
				signal = syscall.SIGKILL
			case parent && !p.postmaster:
				continue
			case parent && waited <= patience:
				signal = syscall.SIGINT
			}
			if sent[p.pid] == signal {
				continue
			}
			sent[p.pid] = signal
			if err := syscall.Kill(p.pid, signal); err != nil && !errors.Is(err, syscall.ESRCH) {
				return fmt.Errorf("end PostgreSQL process %d of an earlier run: %w", p.pid, err)
			}
		}
		time.Sleep(10 * time.Millisecond)
	}
	if err := os.Remove(filepath.Join(pgdata, "postmaster.pid")); err != nil && !errors.Is(err, fs.ErrNotExist) {
		return fmt.Errorf("remove the old postmaster.pid: %w", err)
	}
	return nil
}

// processesIn returns the PostgreSQL processes whose working folder is pgdata,
// which must be an absolute path without symbolic links. Process ids are used
// again by the system, so the number in postmaster.pid alone proves nothing.
func processesIn(pgdata string, a account) ([]process, error) {
	entries, err := os.ReadDir("/proc")
	if err != nil {
		return nil, fmt.Errorf("look for running servers: %w", err)
	}
	var found []process
	var hidden []int
	for _, entry := range entries {
		pid, err := strconv.Atoi(entry.Name())
		if err != nil {
			continue
		}
		base := filepath.Join("/proc", entry.Name())
		comm, err := os.ReadFile(filepath.Join(base, "comm"))
		if err != nil || strings.TrimSpace(string(comm)) != "postgres" {
			continue // ended meanwhile, or another program
		}
		cwd, exe, err := a.links(base)
		if errors.Is(err, fs.ErrPermission) {
			hidden = append(hidden, pid)
			continue
		}
		// A zombie has no links: it has let go of the data.
		if err != nil || cwd != pgdata || filepath.Base(exe) != "postgres" {
			continue
		}
		line, err := os.ReadFile(filepath.Join(base, "cmdline"))
		if err != nil || len(line) == 0 {
			continue
		}
		found = append(found, process{pid: pid, postmaster: !strings.HasPrefix(string(line), "postgres: ")})
	}
	// Other users' servers cannot be looked into and are no matter of ours,
	// unless the cluster itself names one.
	if len(found) == 0 && len(hidden) > 0 {
		if pid := readPidFile(pgdata).pid; slices.Contains(hidden, pid) {
			return nil, fmt.Errorf("process %d of another user seems to be running the cluster in %s. Stop it first", pid, pgdata)
		}
	}
	return found, nil
}

// links reads a process's working folder and program. Where root may not look
// into other users' processes (a container without that capability), it is done
// with the account's own file rights.
func (a account) links(base string) (cwd, exe string, err error) {
	read := func() error {
		if cwd, err = os.Readlink(filepath.Join(base, "cwd")); err != nil {
			return err
		}
		exe, err = os.Readlink(filepath.Join(base, "exe"))
		return err
	}
	err = read()
	if errors.Is(err, fs.ErrPermission) && a.switched {
		err = onOwnThread(func() error {
			// These rights are the thread's own: the rest of the program keeps its.
			defer unix.SetfsgidRetGid(os.Getegid())
			defer unix.SetfsuidRetUid(os.Geteuid())
			unix.SetfsgidRetGid(a.gid)
			unix.SetfsuidRetUid(a.uid)
			return read()
		})
	}
	const gone = " (deleted)" // the package was upgraded under the running server
	return strings.TrimSuffix(cwd, gone), strings.TrimSuffix(exe, gone), err
}

// onOwnThread runs f on a thread that does nothing else meanwhile.
func onOwnThread(f func() error) error {
	done := make(chan error, 1)
	go func() {
		runtime.LockOSThread()
		defer runtime.UnlockOSThread()
		done <- f()
	}()
	return <-done
}

// pidFile is what postmaster.pid says.
type pidFile struct {
	pid   int
	ready bool
}

// readPidFile returns zeros when the file is missing or half written. Its lines
// are described in PostgreSQL's source, src/include/utils/pidfile.h: the first is
// the process id, the eighth the status.
func readPidFile(pgdata string) pidFile {
	text, err := os.ReadFile(filepath.Join(pgdata, "postmaster.pid"))
	if err != nil {
		return pidFile{}
	}
	lines := strings.Split(string(text), "\n")
	pid, err := strconv.Atoi(strings.TrimSpace(lines[0]))
	if err != nil {
		return pidFile{}
	}
	return pidFile{pid: pid, ready: len(lines) >= 8 && strings.TrimSpace(lines[7]) == "ready"}
}
