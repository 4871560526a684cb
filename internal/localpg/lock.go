package localpg

import (
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"time"

	"golang.org/x/sys/unix"
)

// InUseError says that another running program holds the data folder.
type InUseError struct {
	Dir string
	PID int // the holder's process id; 0 when it could not be read
}

func (e *InUseError) Error() string {
	holder := "another program"
	if e.PID != 0 {
		holder = "process " + strconv.Itoa(e.PID)
	}
	return fmt.Sprintf("the data folder %s is in use by %s. Stop that one first, or choose another data folder", e.Dir, holder)
}

// dirLock is the lock on a data folder. The kernel lets it go when the program
// ends, however it ends; the server does not inherit it.
type dirLock struct {
	file      *os.File
	oldSocket string // socket folder of the last run, "" when it ended in order
}

// lockDir takes the lock, or fails with an [InUseError].
func lockDir(dir string) (*dirLock, error) {
	path := filepath.Join(dir, "lock")
	file, err := os.OpenFile(path, os.O_RDWR|os.O_CREATE, 0o644)
	if err != nil {
		return nil, fmt.Errorf("lock the data folder: %w", err)
	}
	if err := unix.Flock(int(file.Fd()), unix.LOCK_EX|unix.LOCK_NB); err != nil {
		defer file.Close()
		if !errors.Is(err, unix.EWOULDBLOCK) {
			return nil, fmt.Errorf("lock the data folder: %w", err)
		}
		return nil, &InUseError{Dir: dir, PID: holder(file)}
	}
	_, socket := readLock(file)
	l := &dirLock{file: file, oldSocket: socket}
	if err := l.note(""); err != nil {
		file.Close()
		return nil, err
	}
	return l, nil
}

// note writes who holds the lock and where the sockets are.
func (l *dirLock) note(socketDir string) error {
	text := fmt.Sprintf("%d\n%s\n", os.Getpid(), socketDir)
	if err := l.file.Truncate(0); err != nil {
		return fmt.Errorf("write the lock file: %w", err)
	}
	if _, err := l.file.WriteAt([]byte(text), 0); err != nil {
		return fmt.Errorf("write the lock file: %w", err)
	}
	return nil
}

// release lets the folder go. The file stays: removing it would let two
// programs hold two different files of the same name.
func (l *dirLock) release() error {
	return errors.Join(l.file.Truncate(0), l.file.Close())
}

// holder reads the holder's process id, which is written an instant after the
// lock is taken.
func holder(file *os.File) int {
	for range 20 {
		if pid, _ := readLock(file); pid != 0 {
			return pid
		}
		time.Sleep(5 * time.Millisecond)
	}
	return 0
}

func readLock(file *os.File) (pid int, socketDir string) {
	text, err := io.ReadAll(io.NewSectionReader(file, 0, 4096))
	if err != nil {
		return 0, ""
	}
	lines := strings.Split(string(text), "\n")
	pid, err = strconv.Atoi(lines[0])
	if err != nil || len(lines) < 2 {
		return 0, ""
	}
	return pid, lines[1]
}
