package localpg

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"sync"
	"syscall"
	"time"

	"github.com/jackc/pgx/v5"
)

const (
	// Database is the database that every cluster has.
	Database = "holdfast"
	// Owner is the role that owns it, a superuser of the private cluster.
	Owner = "holdfast"
	// port only names the socket file: the folder around it is ours alone.
	port = "5432"
)

// Options say which cluster to run and how.
type Options struct {
	// Dir is the data folder. It is made when missing. Required; see [DefaultDir].
	Dir string
	// Fresh deletes the cluster in Dir first, with everything in it.
	Fresh bool
	// ThrowAway gives up durability for speed: nothing is forced to the disk.
	// For tests only.
	ThrowAway bool
	// Binaries is the folder of the server's programs; "" means look for them.
	Binaries string
	// Log receives what happens to the server; nil means nobody.
	Log *slog.Logger
}

// Server is a running private PostgreSQL server. Its methods may be called from
// several goroutines.
type Server struct {
	dir     string // absolute, without symbolic links
	pgdata  string
	sockets string
	account account
	bin     Binaries
	lock    *dirLock
	log     *slog.Logger

	process *os.Process
	exited  chan struct{} // closed once the server's process is gone
	stop    sync.Once
	stopErr error
}

// Start brings up the cluster in opts.Dir, creating it first when there is none,
// and returns once the server answers and has the database "holdfast". What an
// earlier program left running there is ended first. ctx bounds the start alone;
// recovery after a power cut may take minutes. The error wraps [ErrNotInstalled]
// where PostgreSQL is missing and is an [InUseError] where another program holds
// the folder.
func Start(ctx context.Context, opts Options) (*Server, error) {
	if opts.Dir == "" {
		return nil, errors.New("start PostgreSQL: no data folder given")
	}
	log := opts.Log
	if log == nil {
		log = slog.New(slog.DiscardHandler)
	}
	dir, err := makeDir(opts.Dir)
	if err != nil {
		return nil, err
	}
	lock, err := lockDir(dir)
	if err != nil {
		return nil, err
	}
	s := &Server{dir: dir, pgdata: filepath.Join(dir, "pgdata"), lock: lock, log: log, exited: make(chan struct{})}
	if err := s.start(ctx, opts); err != nil {
		if s.process != nil {
			s.end()
		}
		return nil, errors.Join(err, s.cleanUp())
	}
	return s, nil
}

func (s *Server) start(ctx context.Context, opts Options) error {
	begun := time.Now()
	var err error
	if s.account, err = accountFor(s.pgdata); err != nil {
		return err
	}
	version := dataVersion(s.pgdata)
	if opts.Fresh {
		version = 0 // the old data need not be readable
	}
	if s.bin, err = find(opts.Binaries, version); err != nil {
		return err
	}
	if err := s.account.checkReach(s.dir, s.bin); err != nil {
		return err
	}
	if err := s.clearAway(opts.Fresh); err != nil {
		return err
	}
	if err := s.create(ctx, opts.ThrowAway); err != nil {
		return err
	}
	if err := s.makeSocketDir(); err != nil {
		return err
	}
	if err := s.launch(opts.ThrowAway); err != nil {
		return err
	}
	if err := s.waitReady(ctx); err != nil {
		return err
	}
	if err := s.createDatabase(ctx); err != nil {
		return err
	}
	s.log.Info("PostgreSQL is ready", "version", s.bin.Major, "folder", s.dir, "user", s.account.name,
		"took", time.Since(begun).Round(time.Millisecond))
	return nil
}

// launch starts the server's process and the goroutine that waits for its end.
func (s *Server) launch(throwAway bool) error {
	output, err := s.openLog()
	if err != nil {
		return err
	}
	defer output.Close()
	cmd := exec.Command(filepath.Join(s.bin.Dir, "postgres"), s.arguments(throwAway)...)
	cmd.Dir, cmd.Env = "/", environment()
	cmd.Stdout, cmd.Stderr = output, output
	cmd.SysProcAttr = s.account.attributes(syscall.SIGINT)

	started := make(chan error)
	go func() {
		// The kernel watches the thread that started the server, so this one
		// stays with it to the end.
		runtime.LockOSThread()
		defer runtime.UnlockOSThread()
		err := cmd.Start()
		s.process = cmd.Process
		started <- err
		if err != nil {
			return
		}
		err = cmd.Wait()
		s.log.Info("PostgreSQL has ended", "folder", s.dir, "result", cmd.ProcessState.String(), "error", err)
		close(s.exited)
	}()
	if err := <-started; err != nil {
		return fmt.Errorf("start PostgreSQL: %w", err)
	}
	return nil
}

// waitReady waits until the server accepts connections.
func (s *Server) waitReady(ctx context.Context) error {
	poll := time.NewTicker(5 * time.Millisecond)
	defer poll.Stop()
	slow := time.NewTicker(5 * time.Second)
	defer slow.Stop()
	for {
		select {
		case <-s.exited:
			return fmt.Errorf("PostgreSQL ended while starting. The last lines of %s:\n%s", s.logPath(), s.logTail())
		case <-ctx.Done():
			return fmt.Errorf("wait for PostgreSQL to be ready: %w", context.Cause(ctx))
		case <-slow.C:
			s.log.Info("PostgreSQL is still starting; after a power cut it first repairs its data", "folder", s.dir)
		case <-poll.C:
			if f := readPidFile(s.pgdata); f.ready && f.pid == s.process.Pid {
				return nil
			}
		}
	}
}

// createDatabase makes the database, unless it is there.
func (s *Server) createDatabase(ctx context.Context) error {
	conn, err := pgx.Connect(ctx, s.ConnString("postgres"))
	if err != nil {
		return fmt.Errorf("connect to the private PostgreSQL: %w", err)
	}
	defer conn.Close(context.WithoutCancel(ctx))
	var there bool
	err = conn.QueryRow(ctx, "select exists (select from pg_database where datname = $1)", Database).Scan(&there)
	if err == nil && !there {
		_, err = conn.Exec(ctx, "create database "+pgx.Identifier{Database}.Sanitize())
	}
	if err != nil {
		return fmt.Errorf("create the database %s: %w", Database, err)
	}
	return nil
}

// URL is the connection string of the database "holdfast" as its owner.
func (s *Server) URL() string { return s.ConnString(Database) }

// ConnString is the connection string of a database of this server as the owner,
// in URL form. Every other role can be used with the same string: no password is
// asked for.
func (s *Server) ConnString(database string) string { return connString(s.sockets, database) }

// PID is the process id of the server.
func (s *Server) PID() int { return s.process.Pid }

// SocketDir is the folder of the server's socket, for psql -h.
func (s *Server) SocketDir() string { return s.sockets }

// Binaries are the server's programs, among them pg_dump of the same version.
func (s *Server) Binaries() Binaries { return s.bin }

// Done is closed when the server has ended, asked or not.
func (s *Server) Done() <-chan struct{} { return s.exited }

// LogTail returns the last lines that the server printed, for a report of why it
// ended.
func (s *Server) LogTail() string { return s.logTail() }

// Stop ends the server with a fast shutdown and lets the data folder go. Open
// transactions are rolled back, so close the pool first. It returns when the
// server is gone; further calls return the same error.
func (s *Server) Stop() error {
	s.stop.Do(func() {
		s.end()
		s.stopErr = s.cleanUp()
	})
	return s.stopErr
}

// end makes the server's process end, with growing insistence.
func (s *Server) end() {
	for _, step := range []struct {
		signal   syscall.Signal
		patience time.Duration
	}{
		{syscall.SIGINT, 20 * time.Second},
		{syscall.SIGQUIT, 5 * time.Second},
		{syscall.SIGKILL, 5 * time.Second},
	} {
		select {
		case <-s.exited:
			return
		default:
		}
		if err := s.process.Signal(step.signal); err != nil && !errors.Is(err, os.ErrProcessDone) {
			s.log.Error("PostgreSQL cannot be signalled", "error", err)
		}
		select {
		case <-s.exited:
			return
		case <-time.After(step.patience):
			s.log.Warn("PostgreSQL does not end yet", "signal", step.signal.String(), "waited", step.patience)
		}
	}
}

// cleanUp removes what lasts no longer than the run and lets the folder go.
func (s *Server) cleanUp() error {
	var errs []error
	if s.process != nil {
		// Nothing is left after an orderly end. After a crash the others may take
		// a moment to notice.
		errs = append(errs, stopOrphans(s.pgdata, s.account))
	}
	if s.sockets != "" {
		errs = append(errs, os.RemoveAll(s.sockets))
	}
	return errors.Join(append(errs, s.lock.release())...)
}
