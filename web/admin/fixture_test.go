package admin

import (
	"bytes"
	"context"
	"log/slog"
	"net/http"
	"net/http/cookiejar"
	"net/http/httptest"
	"net/netip"
	"net/url"
	"strings"
	"testing"
	"time"

	"github.com/alexedwards/scs/v2/memstore"
	"github.com/google/uuid"
	"golang.org/x/net/html"

	"holdfast/internal/auth"
	"holdfast/internal/live"
	"holdfast/internal/plant"
	"holdfast/internal/qualify"
	"holdfast/web"
	"holdfast/web/ui"
	"holdfast/web/words"
)

var noon = time.Date(2026, 3, 12, 11, 0, 0, 0, time.UTC) // 12:00 in the plant

// zone is a plant's zone that is never UTC.
var zone = time.FixedZone("Plant/Time", 3600)

// people all have the password "right".
type people []plant.Person

func (p people) Person(_ context.Context, id uuid.UUID) (plant.Person, error) {
	for _, one := range p {
		if one.ID == id {
			return one, nil
		}
	}
	return plant.Person{}, &plant.Error{Kind: plant.NotFound, Message: "There is no such person."}
}

func (p people) Check(_ context.Context, login string, s auth.Secret, _ netip.Addr) (plant.Person, error) {
	for _, one := range p {
		if one.Login == plant.CleanLogin(login) && string(s) == "right" {
			return one, nil
		}
	}
	return plant.Person{}, plant.Invalidf("password", "Name or password is wrong.")
}

// runner stands in for the computing: it goes on when the test says so.
type runner struct {
	record qualify.Record
	group  chan struct{} // one group is computed for each that is sent, then it waits
	end    chan error    // the run ends with what is sent
	began  chan struct{}
}

func newRunner(r qualify.Record) *runner {
	return &runner{record: r, group: make(chan struct{}), end: make(chan error), began: make(chan struct{}, 16)}
}

func (r *runner) run(ctx context.Context, opt qualify.Options) (qualify.Record, error) {
	r.began <- struct{}{}
	done := 0
	for {
		select {
		case <-ctx.Done():
			return qualify.Record{}, ctx.Err()
		case <-r.group:
			g := r.record.Groups[done]
			for _, result := range r.record.Results {
				if result.Group == g.Name {
					opt.Each(result)
				}
			}
			opt.Group(g)
			done++
		case err := <-r.end:
			return r.record, err
		}
	}
}

// nothing is the record of a plant in which nothing is set up.
type nothing struct{ Store }

func (nothing) Outline(context.Context) (plant.Outline, error) {
	return plant.Outline{Plant: plant.Plant{Name: "Kestrel Row", Location: zone}}, nil
}

// site is the surface behind the real router, with real sessions.
type site struct {
	*httptest.Server
	admin *Admin
	log   *bytes.Buffer
}

func newSite(t testing.TB, run Runner) *site {
	t.Helper()
	s := &site{log: &bytes.Buffer{}}
	log := slog.New(slog.DiscardHandler)
	hub := live.New(func(context.Context, []string) (map[string][]live.Fragment, error) { return nil, nil }, live.Options{Log: log})
	var all people
	for _, r := range plant.AllRoles {
		all = append(all, plant.Person{ID: uuid.New(), Login: string(r), Name: strings.ToUpper(string(r)[:1]) + string(r)[1:] + " 1", Roles: plant.Roles{r}, Active: true})
	}
	sessions := auth.NewSessions(auth.SessionOptions{Store: memstore.NewWithCleanupInterval(0), People: all, PlainHTTP: true, Log: log, Fail: web.SessionFault(log)})
	s.admin = New(Deps{Log: slog.New(slog.NewTextHandler(s.log, nil)), Machine: "press-hall-1", Run: run, Store: nothing{},
		About: func(context.Context) (Installation, error) { return Installation{}, nil }})
	s.Server = httptest.NewServer(web.New(web.Config{Log: log, Now: func() time.Time { return noon }, Sessions: sessions, Checker: all, Hub: hub,
		Plant: func() plant.Plant { return plant.Plant{Name: "Kestrel Row", Location: zone} }, Admin: s.admin}))
	t.Cleanup(func() {
		s.admin.Close()
		if err := hub.Close(context.Background()); err != nil {
			t.Error(err)
		}
		s.Server.Close()
		sessions.Close()
	})
	return s
}

// visitor is a browser without scripts that follows nothing.
type visitor struct {
	t    testing.TB
	http *http.Client
	base string
}

func (s *site) visitor(t testing.TB, login string) *visitor {
	t.Helper()
	jar, err := cookiejar.New(nil)
	if err != nil {
		t.Fatal(err)
	}
	v := &visitor{t: t, base: s.URL, http: &http.Client{Jar: jar,
		CheckRedirect: func(*http.Request, []*http.Request) error { return http.ErrUseLastResponse }}}
	if login != "" {
		if res, _ := v.post("/sign-in", url.Values{"login": {login}, "password": {"right"}}); res.StatusCode != http.StatusSeeOther {
			t.Fatalf("signing in as %s: %d", login, res.StatusCode)
		}
	}
	return v
}

func (v *visitor) do(method, path string, form url.Values) (*http.Response, string) {
	v.t.Helper()
	r, err := http.NewRequestWithContext(context.Background(), method, v.base+path, strings.NewReader(form.Encode()))
	if err != nil {
		v.t.Fatal(err)
	}
	if method == http.MethodPost {
		r.Header.Set("Content-Type", "application/x-www-form-urlencoded")
	}
	res, err := v.http.Do(r)
	if err != nil {
		v.t.Fatal(err)
	}
	defer res.Body.Close()
	var b bytes.Buffer
	if _, err := b.ReadFrom(res.Body); err != nil {
		v.t.Fatal(err)
	}
	return res, b.String()
}

func (v *visitor) get(path string) (*http.Response, string) { return v.do("GET", path, nil) }
func (v *visitor) post(path string, form url.Values) (*http.Response, string) {
	return v.do("POST", path, form)
}

// part is the text of the element with a data-testid, "" when it is not there.
func part(t testing.TB, page, id string) string {
	t.Helper()
	root, err := html.Parse(strings.NewReader(page))
	if err != nil {
		t.Fatal(err)
	}
	for n := range root.Descendants() {
		for _, a := range n.Attr {
			if a.Key != "data-testid" || a.Val != id {
				continue
			}
			var text []string
			for d := range n.Descendants() {
				if d.Type == html.TextNode {
					text = append(text, strings.Fields(d.Data)...)
				}
			}
			return strings.Join(text, " ")
		}
	}
	return ""
}

func format() ui.Format { return ui.NewFormat(words.For("en"), zone, noon) }

// sample is a record with all that a page has to show: several sources in a group, a
// value of every size, failures with and without a value, and names that are long.
func sample() qualify.Record {
	r := qualify.Record{
		Program: "holdfast", Version: "v1.4.0", Revision: "0123456789abcdef0123456789abcdef01234567", Modified: true,
		Go: "go1.26", OS: "linux", Arch: "arm64", CPUs: 4, Began: time.Date(2026, 3, 12, 10, 58, 7, 0, time.UTC), Seconds: 12.34,
	}
	add := func(group string, results ...qualify.Result) {
		g := qualify.GroupTotal{Name: group, Seconds: 0.5}
		for _, one := range results {
			one.Group = group
			if one.Passed {
				g.Passed++
			} else {
				g.Failed++
			}
			r.Results = append(r.Results, one)
		}
		r.Groups = append(r.Groups, g)
		r.Passed, r.Failed = r.Passed+g.Passed, r.Failed+g.Failed
	}
	tenth := 0.1
	noisy := tenth + 0.2 // carries the noise of its last place
	add("factors",
		qualify.Result{Name: "d2 for n = 5", Source: "a table of 1950", Status: qualify.FromMemory, Expected: 2.326, Obtained: 2.32592894726812, Difference: -7.1052731e-05, Allowance: 0.0005, Basis: "half a unit of the last place printed", Passed: true},
		qualify.Result{Name: "d3 for n = 5", Source: "a table of 1950", Status: qualify.FromMemory, Expected: 0.864, Obtained: 0.8664, Difference: 0.0024, Allowance: 0.0005, Basis: "half a unit of the last place printed"},
		qualify.Result{Name: "c4 for n = 2", Source: "closed form", Status: qualify.Computed, Expected: 0.3, Obtained: noisy, Difference: noisy - 0.3, Allowance: 5e-11, Basis: "10 significant digits", Passed: true})
	add("lot sampling",
		qualify.Result{Name: "acceptance at a very poor lot, " + strings.Repeat("second plan of the pair, ", 6) + "curtailed", Source: "a standard " + strings.Repeat("with its whole title ", 9), Status: qualify.Published, Expected: 3.2966356769e-06, Obtained: 3.2966356768827673e-06, Difference: -1.7e-17, Allowance: 5e-16, Basis: "10 significant digits", Passed: true},
		qualify.Result{Name: "least sample", Source: "search", Status: qualify.Computed, Expected: 125, Allowance: 0, Basis: "a whole number", Problem: "no plan holds both risks"})
	return r
}
