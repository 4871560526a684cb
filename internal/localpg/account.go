package localpg

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"os/exec"
	"os/user"
	"path/filepath"
	"strconv"
	"syscall"
)

// account is the operating system's user the server runs as.
type account struct {
	name     string
	uid, gid int
	switched bool // not ours: we are root and hand files over to it
}

// accountFor chooses the user for the cluster in pgdata. PostgreSQL refuses to
// run as root, and its user must be a known one. An existing cluster keeps its
// owner.
func accountFor(pgdata string) (account, error) {
	owner := -1
	if info, err := os.Stat(pgdata); err == nil {
		owner = int(info.Sys().(*syscall.Stat_t).Uid)
	} else if !errors.Is(err, fs.ErrNotExist) {
		return account{}, fmt.Errorf("look at the cluster: %w", err)
	}
	if self := os.Geteuid(); self != 0 {
		if owner >= 0 && owner != self {
			return account{}, fmt.Errorf("the cluster in %s belongs to user %s. Start the program as that user or as root, or choose another data folder", pgdata, userName(owner))
		}
		return account{name: userName(self), uid: self, gid: os.Getegid()}, nil
	}

	var candidates []*user.User
	if owner > 0 {
		if u, err := user.LookupId(strconv.Itoa(owner)); err == nil {
			candidates = append(candidates, u)
		}
	} else if owner < 0 {
		for _, name := range []string{"postgres", "nobody"} {
			if u, err := user.Lookup(name); err == nil {
				candidates = append(candidates, u)
			}
		}
	}
	for _, u := range candidates {
		uid, err := strconv.Atoi(u.Uid)
		if err != nil || uid == 0 {
			continue
		}
		gid, err := strconv.Atoi(u.Gid)
		if err != nil {
			continue
		}
		return account{name: u.Username, uid: uid, gid: gid, switched: true}, nil
	}
	if owner >= 0 {
		return account{}, fmt.Errorf("the cluster in %s belongs to user %s, as which PostgreSQL cannot run. Give it to the user postgres: chown -R postgres %s", pgdata, userName(owner), pgdata)
	}
	return account{}, errors.New("PostgreSQL does not run as root, and this system has neither a user postgres nor a user nobody. Start the program as an ordinary user")
}

func userName(uid int) string {
	if u, err := user.LookupId(strconv.Itoa(uid)); err == nil {
		return u.Username
	}
	return strconv.Itoa(uid)
}

// attributes sets what a program of the server needs when it starts. The signal
// reaches it when the thread that started it ends, not the process: so it must be
// started and awaited by a goroutine locked to its thread.
func (a account) attributes(atOurDeath syscall.Signal) *syscall.SysProcAttr {
	attr := &syscall.SysProcAttr{
		Setpgid:   true, // Ctrl-C at the terminal is ours to handle
		Pdeathsig: atOurDeath,
	}
	if a.switched {
		attr.Credential = &syscall.Credential{Uid: uint32(a.uid), Gid: uint32(a.gid)}
	}
	return attr
}

// privateDir makes a folder that only the account may enter.
func (a account) privateDir(path string) error {
	if err := os.Mkdir(path, 0o700); err != nil {
		return err
	}
	if err := os.Chmod(path, 0o700); err != nil { // whatever the umask
		return err
	}
	if !a.switched {
		return nil
	}
	return os.Chown(path, a.uid, a.gid)
}

// checkReach reports why the account cannot work in dir or run the binaries.
func (a account) checkReach(dir string, bin Binaries) error {
	cmd := exec.Command(filepath.Join(bin.Dir, "postgres"), "--version")
	cmd.Dir, cmd.Env = dir, environment()
	cmd.SysProcAttr = a.attributes(syscall.SIGKILL)
	err := onOwnThread(cmd.Run)
	if err == nil {
		return nil
	}
	for _, path := range []string{dir, bin.Dir} {
		if wall := a.closedParent(path); wall != "" {
			return fmt.Errorf("the user %s, as which PostgreSQL runs, may not enter %s. Choose a data folder elsewhere, such as /var/lib/holdfast", a.name, wall)
		}
	}
	return fmt.Errorf("PostgreSQL cannot be run as user %s in %s: %w", a.name, dir, err)
}

// closedParent returns the topmost folder on the way to path that the mode bits
// close to the account, or "".
func (a account) closedParent(path string) string {
	wall := ""
	for p := path; ; p = filepath.Dir(p) {
		info, err := os.Stat(p)
		if err != nil {
			return p
		}
		st := info.Sys().(*syscall.Stat_t)
		bit := uint32(0o001)
		switch {
		case int(st.Uid) == a.uid:
			bit = 0o100
		case int(st.Gid) == a.gid:
			bit = 0o010
		}
		if st.Mode&bit == 0 {
			wall = p
		}
		if p == filepath.Dir(p) {
			return wall
		}
	}
}
