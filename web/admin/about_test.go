package admin

import (
	"context"
	"errors"
	"net/http"
	"strings"
	"testing"
	"time"

	"holdfast/internal/browsertest"
)

// well is an installation that nothing is wrong with.
func well() Installation {
	return Installation{
		Version: "v1.2", Go: "go1.26", System: "linux/amd64", Processors: 4, Started: noon.Add(-time.Hour),
		Address: "https://10.0.0.5:8443", HTTPS: HTTPSAuto, Fingerprint: "AB:CD", Certificate: noon.AddDate(1, 0, 0), Names: []string{"works.plant.example", "10.0.0.5"},
		Postgres: "15.4", Database: "holdfast", Private: true, Bytes: 3 << 30, Guarded: true, Durable: true, Checksums: true,
		Chains: 12, Root: strings.Repeat("0f", 32), TimeServer: TimeServerFollowed, Disk: 100 << 30, DiskFree: 50 << 30, Saves: 41,
	}
}

func aboutSite(t *testing.T, about About) *site {
	t.Helper()
	s := newSite(t, nil)
	s.admin.about = about
	return s
}

func TestAboutWarnsOfWhatNeedsSomebody(t *testing.T) {
	var now Installation
	s := aboutSite(t, func(context.Context) (Installation, error) { return now, nil })
	v := s.visitor(t, "administrator")
	now = well()
	if res, body := v.get(aboutAddress); res.StatusCode != http.StatusOK || strings.Contains(body, "about-warning") ||
		!strings.Contains(body, "3.0 GiB") || !strings.Contains(body, now.Root) || !strings.Contains(body, "AB:CD") || !strings.Contains(body, "works.plant.example, 10.0.0.5") {
		t.Errorf("of a good installation: %s\n%s", res.Status, body)
	}
	for name, spoil := range map[string]func(*Installation){
		"rounds failed":        func(i *Installation) { i.Failed = 1 },
		"undelivered":          func(i *Installation) { i.GivenUp = 1 },
		"plain http":           func(i *Installation) { i.HTTPS = HTTPSOff },
		"certificate ends":     func(i *Installation) { i.Certificate = noon.AddDate(0, 0, 10) },
		"not guarded":          func(i *Installation) { i.Guarded = false },
		"not durable":          func(i *Installation) { i.Durable = false },
		"no checksums":         func(i *Installation) { i.Checksums = false },
		"clocks apart":         func(i *Installation) { i.Skew = -5 * time.Second },
		"no time server":       func(i *Installation) { i.TimeServer = TimeServerNone },
		"disk filling":         func(i *Installation) { i.DiskFree = 3 << 30 },
		"disk as good as full": func(i *Installation) { i.DiskFree = 1 << 20 },
	} {
		now = well()
		spoil(&now)
		if _, body := v.get(aboutAddress); strings.Count(body, `class="about-warning"`) != 1 {
			t.Errorf("%s: %d warnings", name, strings.Count(body, `class="about-warning"`))
		}
	}
}

func TestAboutWhenTheDatabaseIsSilent(t *testing.T) {
	s := aboutSite(t, func(context.Context) (Installation, error) {
		return Installation{}, errors.New("no answer from db.internal")
	})
	res, body := s.visitor(t, "administrator").get(aboutAddress)
	if res.StatusCode != http.StatusInternalServerError || strings.Contains(body, "db.internal") {
		t.Errorf("%s\n%s", res.Status, body)
	}
}

func TestAboutInTheBrowser(t *testing.T) {
	t.Parallel()
	s := aboutSite(t, func(context.Context) (Installation, error) {
		i := well()
		i.Checksums, i.DiskFree = false, 1<<20
		i.Fingerprint = strings.Repeat("AB:", 31) + "CD"
		return i, nil
	})
	b := browsertest.Start(t).Person(s.URL)
	b.Open("/sign-in")
	b.Fill("#login", "administrator")
	b.Fill("#password", "right")
	b.Keys("\r")
	b.WaitFor(`location.pathname === "/admin"`)
	b.Open(aboutAddress)
	b.Accessible("about this installation")
	b.FitsWidth("about this installation", 1280, 320)
}
