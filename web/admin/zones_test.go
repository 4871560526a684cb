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
	for typed, want := range map[string]string{"berlin": "Europe/Berlin", "EUROPE/berlin": "Europe/Berlin", "new york": "America/New_York"} {
		if loc, err := zoneOf(typed); err != nil || loc.String() != want {
			t.Errorf("%q is taken as %v, %v; want %s", typed, loc, err, want)
		}
	}
	for typed, want := range map[string]string{"Europe/Berln": "Europe/Berlin", "Louisville": "America/Kentucky/Louisville", "zz": "", "": ""} {
		if like := likeZone(typed); len(like) > 4 || want != "" && !slices.Contains(like, want) || want == "" && len(like) > 0 {
			t.Errorf("%q is like %q; want %q among them", typed, like, want)
		}
	}
	if loc, err := zoneOf("Louisville"); err == nil {
		t.Errorf("a place that two zones have is taken as %v", loc)
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
