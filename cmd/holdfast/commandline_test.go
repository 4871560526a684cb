package main

import (
	"errors"
	"io"
	"io/fs"
	"net"
	"os"
	"path/filepath"
	"runtime/debug"
	"strings"
	"testing"
)

// onError runs a command line and gives what it wrote to standard error. Such tests do not
// run side by side: standard error is the process's own.
func onError(t *testing.T, args ...string) (string, error) {
	t.Helper()
	r, w, err := os.Pipe()
	if err != nil {
		t.Fatal(err)
	}
	defer r.Close()
	before := os.Stderr
	os.Stderr = w
	failed := run(t.Context(), args)
	os.Stderr = before
	_ = w.Close()
	out, err := io.ReadAll(r)
	if err != nil {
		t.Fatal(err)
	}
	return string(out), failed
}

func TestACommandLineWithoutACommandHelps(t *testing.T) {
	for line, want := range map[string][]string{
		"":     {"serve", "Serve the plant.", "Print the version.", "qualify"},
		"user": {"user add", "user list"},
	} {
		out, err := onError(t, strings.Fields(line)...)
		if err == nil || status(err) != 2 {
			t.Errorf("holdfast %s: %v, status %d; want 2", line, err, status(err))
		}
		for _, w := range want {
			if !strings.Contains(out, w) {
				t.Errorf("holdfast %s does not help with %q:\n%s", line, w, out)
			}
		}
	}
	if out, err := onError(t, "polish"); err == nil || status(err) != 2 || out != "" {
		t.Errorf("an unknown command: %v\n%s", err, out)
	}
}

func TestWhatCannotBeUnderstoodLeadsToTheHelp(t *testing.T) {
	for line, want := range map[string]string{
		"user roles ada operator": "unexpected argument operator; a role is said with --role operator. holdfast user roles --help says what can be typed",
		"user roles ada tall":     "unexpected argument tall. holdfast user roles --help says what can be typed",
		"polish":                  "unexpected argument polish. holdfast --help says what can be typed",
	} {
		if _, err := onError(t, strings.Fields(line)...); err == nil || told(err) != want {
			t.Errorf("holdfast %s: %q, want %q", line, told(err), want)
		}
	}
}

// TestATakenAddressLeavesNothingBehind: the address is tried before a database is made.
func TestATakenAddressLeavesNothingBehind(t *testing.T) {
	taken, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	defer taken.Close()
	folder := filepath.Join(t.TempDir(), "new")
	_, err = onError(t, "serve", "--data", folder, "--addr", taken.Addr().String())
	if err == nil || !strings.HasSuffix(told(err), "address already in use. Choose another with --addr, or end what listens there") {
		t.Errorf("a taken address: %v", err)
	}
	if _, err := os.Stat(folder); !errors.Is(err, fs.ErrNotExist) {
		t.Errorf("the folder is made: %v", err)
	}
}

func TestTheVersionNamesTheCommitOnce(t *testing.T) {
	const commit = "b45a43b6d0c1b45a43b6d0c1b45a43b6d0c1b45a"
	for _, tc := range []struct{ version, changed, want string }{
		{"(devel)", "false", "(devel) b45a43b6d0c1"},
		{"(devel)", "true", "(devel) b45a43b6d0c1 (changed)"},
		{"v0.0.0-20261201090000-b45a43b6d0c1", "false", "v0.0.0-20261201090000-b45a43b6d0c1"},
		{"v0.0.0-20261201090000-b45a43b6d0c1+dirty", "true", "v0.0.0-20261201090000-b45a43b6d0c1+dirty"},
		{"v1.2.0", "false", "v1.2.0 b45a43b6d0c1"},
	} {
		info := &debug.BuildInfo{Main: debug.Module{Version: tc.version},
			Settings: []debug.BuildSetting{{Key: "vcs.revision", Value: commit}, {Key: "vcs.modified", Value: tc.changed}}}
		if got := versionOf(info); got != tc.want {
			t.Errorf("%s: %q, want %q", tc.version, got, tc.want)
		}
	}
}
