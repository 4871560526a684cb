package admin

import (
	"archive/zip"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"testing"
)

// TestTheZonesAreThoseOfTheZoneDatabase that Go brings along: each can be loaded, and none
// of a place is missing.
func TestTheZonesAreThoseOfTheZoneDatabase(t *testing.T) {
	t.Parallel()
	for _, name := range zones {
		if _, err := zoneOf(name); err != nil {
			t.Error(err)
		}
	}
	for _, name := range []string{"", "Local", "Europe/Berln", "../etc/passwd", "/etc/localtime"} {
		if loc, err := zoneOf(name); err == nil {
			t.Errorf("%q is taken as %v", name, loc)
		}
	}
	root, err := exec.Command("go", "env", "GOROOT").Output()
	if err != nil {
		t.Fatal(err)
	}
	z, err := zip.OpenReader(filepath.Join(strings.TrimSpace(string(root)), "lib", "time", "zoneinfo.zip"))
	if err != nil {
		t.Fatal(err)
	}
	defer z.Close()
	for _, f := range z.File {
		area, place, _ := strings.Cut(f.Name, "/")
		if place != "" && !slices.Contains([]string{"Etc", "SystemV", "US", "Canada", "Brazil", "Mexico", "Chile"}, area) && !slices.Contains(zones, f.Name) {
			t.Errorf("%s is in the zone database and not in zones.txt", f.Name)
		}
	}
}
