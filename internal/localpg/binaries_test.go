package localpg

import (
	"errors"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

func TestMajorVersion(t *testing.T) {
	t.Parallel()
	for _, tc := range []struct {
		text string
		want int
	}{
		{"postgres (PostgreSQL) 15.13 (Debian 15.13-0+deb12u1)\n", 15},
		{"postgres (PostgreSQL) 19beta1\n", 19},
		{"postgres (PostgreSQL) 18\n", 18},
		{"postgres (PostgreSQL) devel\n", 0},
		{"something else 15.1\n", 0},
		{"", 0},
	} {
		got, err := majorOf(tc.text)
		if got != tc.want || (err == nil) != (tc.want != 0) {
			t.Errorf("majorOf(%q) = %d, %v; want %d", tc.text, got, err, tc.want)
		}
	}
}

// pretend makes a folder whose postgres says that it is of the given version.
func pretend(t *testing.T, parent, version string) string {
	t.Helper()
	dir := filepath.Join(parent, version, "bin")
	if err := os.MkdirAll(dir, 0o755); err != nil {
		t.Fatal(err)
	}
	for _, name := range []string{"initdb", "postgres"} {
		script := "#!/bin/sh\necho 'postgres (PostgreSQL) " + version + "'\n"
		if err := os.WriteFile(filepath.Join(dir, name), []byte(script), 0o755); err != nil {
			t.Fatal(err)
		}
	}
	return dir
}

// These tests change PATH, so they run one after the other.
func TestSearch(t *testing.T) {
	many, old, none := t.TempDir(), t.TempDir(), t.TempDir()
	for _, v := range []string{"9.6", "15.2", "16.1", "100.1"} {
		pretend(t, many, v)
	}
	pretend(t, old, "14.9")
	broken := pretend(t, t.TempDir(), "16.0")
	if err := os.Remove(filepath.Join(broken, "initdb")); err != nil {
		t.Fatal(err)
	}
	in := func(parent, version string) string { return filepath.Join(parent, version, "bin") }
	all := func(parent string) string { return filepath.Join(parent, "*", "bin") }
	t.Setenv("PATH", none)

	for _, tc := range []struct {
		name   string
		search search
		want   string // folder, or
		says   string // part of the error
	}{
		{"newest packaged, by number", search{packaged: all(many)}, in(many, "100.1"), ""},
		{"the one that wrote the data", search{packaged: all(many), major: 15}, in(many, "15.2"), ""},
		{"named before packaged", search{named: in(many, "16.1"), packaged: all(many)}, in(many, "16.1"), ""},
		{"explicit before named", search{explicit: in(many, "15.2"), named: in(many, "16.1")}, in(many, "15.2"), ""},
		{"none", search{packaged: all(none)}, "", "sudo apt-get install postgresql"},
		{"only an old one", search{packaged: all(old)}, "", "is PostgreSQL 14, and 15 or newer is needed"},
		{"none for the data", search{packaged: all(many), major: 17}, "", "sudo apt-get install postgresql-17"},
		{"named wrongly", search{named: none, packaged: all(many)}, "", "PGBINDIR is " + none + ", but initdb is not in it"},
		{"half installed", search{explicit: broken}, "", "initdb is not in it"},
	} {
		t.Run(tc.name, func(t *testing.T) {
			got, err := tc.search.run()
			if tc.want != "" {
				if err != nil || got.Dir != tc.want {
					t.Errorf("found %s, %v; want %s", got.Dir, err, tc.want)
				}
				return
			}
			if err == nil || !strings.Contains(err.Error(), tc.says) {
				t.Errorf("found %q with error %v; want an error saying %q", got.Dir, err, tc.says)
			}
			if tc.search.major == 0 && !errors.Is(err, ErrNotInstalled) {
				t.Errorf("error %v is not ErrNotInstalled", err)
			}
		})
	}

	t.Run("link on PATH", func(t *testing.T) {
		links := t.TempDir()
		if err := os.Symlink(filepath.Join(in(many, "16.1"), "postgres"), filepath.Join(links, "postgres")); err != nil {
			t.Fatal(err)
		}
		t.Setenv("PATH", links)
		got, err := search{packaged: all(many)}.run()
		if err != nil || got != (Binaries{in(many, "16.1"), 16}) {
			t.Errorf("found %+v, %v; want the target of the link", got, err)
		}
	})
}
