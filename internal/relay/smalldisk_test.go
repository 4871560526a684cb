package relay_test

import (
	"bytes"
	"errors"
	"fmt"
	"os"
	"os/exec"
	"os/signal"
	"path/filepath"
	"strings"
	"syscall"
	"testing"

	"golang.org/x/sys/unix"

	"holdfast/internal/relay"
)

const smallDisk = "HOLDFAST_TEST_SPOOL"

// TestADiskThatIsReallyFull fills a spool in a process of its own, which the kernel lets
// write so much into one file and no more, and reads it again without that bound.
func TestADiskThatIsReallyFull(t *testing.T) {
	t.Parallel()
	if path := os.Getenv(smallDisk); path != "" {
		fillUp(path)
		return
	}
	path := filepath.Join(t.TempDir(), "spool")
	cmd := exec.Command(os.Args[0], "-test.run=^TestADiskThatIsReallyFull$")
	cmd.Env = append(os.Environ(), smallDisk+"="+path)
	out, err := cmd.CombinedOutput()
	if err != nil || !bytes.Contains(out, []byte("kept ")) {
		t.Fatalf("%v\n%s", err, out)
	}
	var kept int
	_, after, _ := strings.Cut(string(out), "kept ")
	if _, err := fmt.Sscan(after, &kept); err != nil || kept == 0 {
		t.Fatalf("%v\n%s", err, out)
	}
	s := open(t, path)
	defer s.Close()
	if s.Len() != kept {
		t.Errorf("%d messages are in the file, %d were said to be kept", s.Len(), kept)
	}
	to := serve(t)
	post(t, s, to)
	until(t, "all was sent", func() bool { return s.Len() == 0 })
	if got := len(to.has()); got != kept {
		t.Errorf("the server took %d, %d were said to be kept", got, kept)
	}
}

// fillUp writes until the disk takes no more, as a reader of a broker does, and says how
// much of it was kept.
func fillUp(path string) {
	signal.Ignore(syscall.SIGXFSZ) // then a write beyond the bound fails, as on a full disk
	if err := unix.Setrlimit(unix.RLIMIT_FSIZE, &unix.Rlimit{Cur: 10_000, Max: 10_000}); err != nil {
		panic(err)
	}
	s, err := relay.OpenSpool(path, quiet)
	if err != nil {
		panic(err)
	}
	s.Strict = true
	g := gather(s)
	g.Size = 1
	kept := 0
	for i := range 200 {
		durable, err := g.Take(fmt.Sprintf("1.%03d", i), fmt.Sprint(i))
		switch {
		case errors.Is(err, relay.ErrFull):
		case err != nil || !durable:
			panic(fmt.Sprint(durable, err))
		default:
			kept++
		}
	}
	if kept == 200 {
		panic("the disk was not full")
	}
	// A reading whose round did not fit any more waits, and is sent when there is room.
	if err := s.Close(); err != nil {
		panic(err)
	}
	fmt.Println("kept", kept)
}
