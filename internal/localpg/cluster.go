package localpg

import (
	"bytes"
	"context"
	"crypto/rand"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"syscall"
)

// DefaultDir is where the data of the named program belong when nobody says
// otherwise: /var/lib/NAME for root, the user's data folder (XDG) for others.
func DefaultDir(name string) (string, error) {
	if os.Geteuid() == 0 {
		return filepath.Join("/var/lib", name), nil
	}
	// A relative path in the variable is to be ignored (XDG Base Directory
	// Specification 0.8).
	if base := os.Getenv("XDG_DATA_HOME"); filepath.IsAbs(base) {
		return filepath.Join(base, name), nil
	}
	home, err := os.UserHomeDir()
	if err != nil {
		return "", fmt.Errorf("find a place for the data: %w", err)
	}
	return filepath.Join(home, ".local", "share", name), nil
}

// makeDir makes the data folder and returns its real path. As root it lets other
// users through, though not look around: the server's user must reach pgdata.
func makeDir(dir string) (string, error) {
	fail := func(err error) (string, error) { return "", fmt.Errorf("make the data folder: %w", err) }
	abs, err := filepath.Abs(dir)
	if err != nil {
		return fail(err)
	}
	if err := os.MkdirAll(filepath.Dir(abs), 0o755); err != nil {
		return fail(err)
	}
	through := fs.FileMode(0o700)
	if os.Geteuid() == 0 {
		through = 0o711
	}
	if err := os.Mkdir(abs, through); err != nil && !errors.Is(err, fs.ErrExist) {
		return fail(err)
	}
	info, err := os.Stat(abs)
	if err != nil {
		return fail(err)
	}
	if !info.IsDir() {
		return fail(fmt.Errorf("%s is not a folder", abs))
	}
	if os.Geteuid() == 0 && info.Mode().Perm()&through != through {
		if err := os.Chmod(abs, info.Mode().Perm()|through); err != nil {
			return fail(err)
		}
	}
	abs, err = filepath.EvalSymlinks(abs)
	if err != nil {
		return fail(err)
	}
	return abs, nil
}

// dataVersion is the major version that wrote pgdata; 0 when there is none.
func dataVersion(pgdata string) int {
	text, err := os.ReadFile(filepath.Join(pgdata, "PG_VERSION"))
	if err != nil {
		return 0
	}
	major, err := strconv.Atoi(strings.TrimSpace(string(text)))
	if err != nil {
		return 0
	}
	return major
}

// clearAway ends and removes what earlier runs left: servers, half-made
// clusters, socket folders; and, if fresh, the cluster itself.
func (s *Server) clearAway(fresh bool) error {
	if err := stopOrphans(s.pgdata, s.account); err != nil {
		return err
	}
	halfMade, err := filepath.Glob(filepath.Join(globQuote(s.dir), "pgdata.init-*"))
	if err != nil {
		return fmt.Errorf("clear the data folder: %w", err)
	}
	for _, dir := range halfMade {
		if err := stopOrphans(dir, s.account); err != nil {
			return err
		}
	}
	sockets, err := filepath.Glob(filepath.Join(globQuote(s.dir), "run-*"))
	if err != nil {
		return fmt.Errorf("clear the data folder: %w", err)
	}
	stale := append(halfMade, sockets...)
	if strings.HasPrefix(s.lock.oldSocket, shortSockets) {
		stale = append(stale, s.lock.oldSocket)
	}
	if fresh {
		stale = append(stale, s.pgdata)
	}
	for _, path := range stale {
		if err := os.RemoveAll(path); err != nil {
			return fmt.Errorf("clear the data folder: %w", err)
		}
	}
	return nil
}

// globQuote makes a path safe to stand in a pattern.
func globQuote(path string) string {
	return strings.NewReplacer(`\`, `\\`, `*`, `\*`, `?`, `\?`, `[`, `\[`).Replace(path)
}

// create makes the cluster, unless it is there. It is made under another name
// first, so that a cluster called pgdata is always a whole one.
func (s *Server) create(ctx context.Context, throwAway bool) error {
	if _, err := os.Stat(s.pgdata); err == nil {
		if dataVersion(s.pgdata) == 0 {
			return fmt.Errorf("%s is not a PostgreSQL cluster. Move it away or choose another data folder", s.pgdata)
		}
		return nil
	} else if !errors.Is(err, fs.ErrNotExist) {
		return fmt.Errorf("look at the cluster: %w", err)
	}
	s.log.Info("creating a PostgreSQL cluster", "folder", s.dir)
	growing := s.pgdata + ".init-" + strconv.Itoa(os.Getpid())
	if err := s.account.privateDir(growing); err != nil {
		return fmt.Errorf("create the cluster: %w", err)
	}
	args := []string{"-D", growing, "-U", Owner, "--auth=trust", "-E", "UTF8", "--locale=C.UTF-8", "--data-checksums"}
	if throwAway {
		args = append(args, "--no-sync", "--wal-segsize=1") // half the size, half the time
	}
	var output bytes.Buffer
	cmd := exec.CommandContext(ctx, filepath.Join(s.bin.Dir, "initdb"), args...)
	cmd.Dir, cmd.Env = "/", environment()
	cmd.Stdout, cmd.Stderr = &output, &output
	cmd.SysProcAttr = s.account.attributes(syscall.SIGKILL)
	err := onOwnThread(cmd.Run)
	if err == nil {
		err = os.Rename(growing, s.pgdata)
	}
	if err == nil && !throwAway {
		err = syncDir(s.dir)
	}
	if err != nil {
		if cause := context.Cause(ctx); cause != nil {
			err = cause
		}
		return errors.Join(fmt.Errorf("create the cluster: %w\n%s", err, tail(output.Bytes())),
			stopOrphans(growing, s.account), os.RemoveAll(growing))
	}
	return nil
}

func syncDir(path string) error {
	dir, err := os.Open(path)
	if err != nil {
		return err
	}
	defer dir.Close()
	return dir.Sync()
}

const (
	// longestSocketPath is what fits the kernel's sun_path (unix(7): 108 bytes
	// with the final zero).
	longestSocketPath = 107
	// shortSockets begins the names of socket folders for data folders whose own
	// path will not do.
	shortSockets = "/tmp/holdfast-run-"
)

// makeSocketDir makes the socket folder of this run. Its name is new each time:
// a client of an earlier run cannot reach the wrong server.
func (s *Server) makeSocketDir() error {
	suffix := rand.Text()[:8]
	dir := filepath.Join(s.dir, "run-"+suffix)
	if len(dir)+len("/.s.PGSQL."+port) > longestSocketPath || !plainPath(dir) {
		dir = shortSockets + suffix
	}
	// Noted before it is made: after a kill the next run removes it.
	if err := s.lock.note(dir); err != nil {
		return err
	}
	if err := s.account.privateDir(dir); err != nil {
		return fmt.Errorf("make the socket folder: %w", err)
	}
	s.sockets = dir
	return nil
}

// plainPath tells whether every client will take the path as one host name: a
// comma separates hosts, and not all agree on how other characters are written.
func plainPath(path string) bool {
	return strings.IndexFunc(path, func(r rune) bool {
		return !(r >= 'a' && r <= 'z' || r >= 'A' && r <= 'Z' || r >= '0' && r <= '9' || strings.ContainsRune("/._-", r))
	}) < 0
}

// arguments are the server's settings. They stand on its command line, where
// they win over postgresql.conf, which is left to whoever looks after the data.
func (s *Server) arguments(throwAway bool) []string {
	args := []string{"-D", s.pgdata, "-p", port}
	set := func(name, value string) { args = append(args, "-c", name+"="+value) }
	set("listen_addresses", "")
	set("unix_socket_directories", s.sockets)
	set("unix_socket_permissions", "0700")
	set("logging_collector", "off")
	set("log_destination", "stderr")
	set("cluster_name", "holdfast")
	durable := "on"
	if throwAway {
		durable = "off"
		set("max_connections", "300")
		set("shared_buffers", "32MB")
		set("autovacuum", "off")
		set("wal_level", "minimal")
		set("max_wal_senders", "0")
		set("max_wal_size", "256MB")
	}
	set("fsync", durable)
	set("synchronous_commit", durable)
	set("full_page_writes", durable)
	return args
}

func (s *Server) logPath() string { return filepath.Join(s.dir, "postgres.log") }

// openLog opens the file that the server prints to, putting aside one that has
// grown large.
func (s *Server) openLog() (*os.File, error) {
	const large = 8 << 20
	if info, err := os.Stat(s.logPath()); err == nil && info.Size() > large {
		if err := os.Rename(s.logPath(), s.logPath()+".1"); err != nil {
			return nil, fmt.Errorf("put aside the server's log: %w", err)
		}
	}
	file, err := os.OpenFile(s.logPath(), os.O_WRONLY|os.O_CREATE|os.O_APPEND, 0o600)
	if err != nil {
		return nil, fmt.Errorf("open the server's log: %w", err)
	}
	return file, nil
}

func (s *Server) logTail() string {
	file, err := os.Open(s.logPath())
	if err != nil {
		return ""
	}
	defer file.Close()
	if info, err := file.Stat(); err == nil && info.Size() > 8192 {
		if _, err := file.Seek(-8192, io.SeekEnd); err != nil {
			return ""
		}
	}
	text, err := io.ReadAll(file)
	if err != nil {
		return ""
	}
	return tail(text)
}

// tail returns the last twenty lines.
func tail(text []byte) string {
	lines := strings.Split(strings.TrimSpace(string(text)), "\n")
	return strings.Join(lines[max(0, len(lines)-20):], "\n")
}
