package localpg

import (
	"cmp"
	"errors"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"unicode"
)

// OldestVersion is the oldest major version of PostgreSQL that is accepted.
const OldestVersion = 15

// Binaries is an installed PostgreSQL server.
type Binaries struct {
	Dir   string // the folder that holds initdb and postgres
	Major int    // major version, such as 15
}

// ErrNotInstalled says that no usable PostgreSQL server was found. The error
// that wraps it says where was looked and what to install.
var ErrNotInstalled = errors.New("PostgreSQL is not installed")

// search is where a server is looked for.
type search struct {
	explicit string // a folder that was asked for
	named    string // the value of PGBINDIR
	packaged string // pattern of the folders of packaged servers
	major    int    // version that wrote the data; 0 means any
}

// Find returns the PostgreSQL server to use: from the folder explicit when it is
// not empty, else from the folder named by PGBINDIR, else the server on PATH,
// else the newest packaged one. A folder that was named but is not usable is an
// error and not passed over. Only [OldestVersion] or newer is accepted.
func Find(explicit string) (Binaries, error) { return find(explicit, 0) }

// find is Find, for data written by the given major version.
func find(explicit string, major int) (Binaries, error) {
	return search{
		explicit: explicit,
		named:    os.Getenv("PGBINDIR"),
		// Debian and its relatives keep them off PATH, since several versions may
		// stand side by side.
		packaged: "/usr/lib/postgresql/*/bin",
		major:    major,
	}.run()
}

func (s search) run() (Binaries, error) {
	for _, place := range []struct{ dir, by string }{
		{s.explicit, "the folder given"},
		{s.named, "PGBINDIR"},
	} {
		if place.dir == "" {
			continue
		}
		b, err := inspect(place.dir)
		if err != nil {
			return Binaries{}, fmt.Errorf("%w where it was said to be: %s is %s, but %w. %s", ErrNotInstalled, place.by, place.dir, err, advice(s.major))
		}
		return b, s.check(b)
	}

	var found []Binaries
	if onPath, err := exec.LookPath("postgres"); err == nil {
		if real, err := filepath.EvalSymlinks(onPath); err == nil {
			if b, err := inspect(filepath.Dir(real)); err == nil {
				found = append(found, b)
			}
		}
	}
	dirs, err := filepath.Glob(s.packaged)
	if err != nil {
		return Binaries{}, fmt.Errorf("look for PostgreSQL: %w", err)
	}
	var packaged []Binaries
	for _, dir := range dirs {
		if b, err := inspect(dir); err == nil {
			packaged = append(packaged, b)
		}
	}
	slices.SortFunc(packaged, func(a, b Binaries) int { return cmp.Compare(b.Major, a.Major) })
	found = append(found, packaged...)

	var refused error
	for _, b := range found {
		err := s.check(b)
		if err == nil {
			return b, nil
		}
		if refused == nil {
			refused = err
		}
	}
	if refused != nil {
		return Binaries{}, refused
	}
	return Binaries{}, fmt.Errorf("%w (looked in PGBINDIR, PATH and %s). %s", ErrNotInstalled, s.packaged, advice(s.major))
}

// inspect reads the version of the server in dir.
func inspect(dir string) (Binaries, error) {
	for _, name := range []string{"initdb", "postgres"} {
		info, err := os.Stat(filepath.Join(dir, name))
		if err != nil {
			return Binaries{}, fmt.Errorf("%s is not in it", name)
		}
		if info.IsDir() || info.Mode()&0o111 == 0 {
			return Binaries{}, fmt.Errorf("%s in it is not a program", name)
		}
	}
	cmd := exec.Command(filepath.Join(dir, "postgres"), "--version")
	cmd.Env = environment()
	out, err := cmd.Output()
	if err != nil {
		return Binaries{}, fmt.Errorf("its postgres does not say its version: %w", err)
	}
	major, err := majorOf(string(out))
	if err != nil {
		return Binaries{}, err
	}
	return Binaries{Dir: dir, Major: major}, nil
}

// majorOf reads 15 from "postgres (PostgreSQL) 15.13 (Debian 15.13-0+deb12u1)",
// and from "postgres (PostgreSQL) 19beta1".
func majorOf(version string) (int, error) {
	_, rest, ok := strings.Cut(version, "(PostgreSQL) ")
	if ok {
		end := strings.IndexFunc(rest, func(r rune) bool { return !unicode.IsDigit(r) })
		if end < 0 {
			end = len(rest)
		}
		if major, err := strconv.Atoi(rest[:end]); err == nil {
			return major, nil
		}
	}
	return 0, fmt.Errorf("its version cannot be read from %q", strings.TrimSpace(version))
}

func (s search) check(b Binaries) error {
	if s.major != 0 && b.Major != s.major {
		return fmt.Errorf("the data were written by PostgreSQL %d, but the server in %s is PostgreSQL %d. %s Or move the data to the newer version with pg_upgrade",
			s.major, b.Dir, b.Major, advice(s.major))
	}
	if b.Major < OldestVersion {
		return fmt.Errorf("%w: the server in %s is PostgreSQL %d, and %d or newer is needed. %s", ErrNotInstalled, b.Dir, b.Major, OldestVersion, advice(s.major))
	}
	return nil
}

func advice(major int) string {
	pkg := "postgresql"
	if major != 0 {
		pkg += "-" + strconv.Itoa(major)
	}
	return "Install it: on Debian or Ubuntu `sudo apt-get install " + pkg + "`. " +
		"Or set PGBINDIR to the folder that holds initdb and postgres."
}

// environment is what the server's programs are given: no PG... variable of
// ours may change where or how they work, nor may our language.
func environment() []string {
	return []string{"PATH=/usr/local/sbin:/usr/local/bin:/usr/sbin:/usr/bin:/sbin:/bin", "LC_ALL=C.UTF-8", "HOME=/",
		// A backend would give the memory of every statement back to the kernel and ask
		// for it again; on small virtual machines that costs more than the statement.
		"MALLOC_TRIM_THRESHOLD_=67108864", "MALLOC_TOP_PAD_=4194304", "MALLOC_MMAP_THRESHOLD_=33554432"}
}
