package main

import (
	"io"
	"os"
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
