package admin

import (
	"bytes"
	"context"
	"log/slog"
	"net/http"
	"net/http/httptest"
	"net/url"
	"strings"
	"testing"
	"time"

	"golang.org/x/net/html"

	"holdfast/internal/plant"
	"holdfast/internal/qualify"
	"holdfast/web"
	"holdfast/web/ui"
	"holdfast/web/webtest"
	"holdfast/web/words"
)

var noon = time.Date(2026, 3, 12, 11, 0, 0, 0, time.UTC) // 12:00 in the plant

// zone is a plant's zone that is never UTC.
var zone = time.FixedZone("Plant/Time", 3600)

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
	all := webtest.OneOfEach()
	s.admin = New(Deps{Log: slog.New(slog.NewTextHandler(s.log, nil)), Machine: "press-hall-1", Run: run, Store: nothing{},
		About: func(context.Context) (Installation, error) { return Installation{}, nil }})
	t.Cleanup(s.admin.Close) // after the server
	s.Server, _ = webtest.Serve(t, &web.Config{Now: func() time.Time { return noon }, Checker: all,
		Plant: func() plant.Plant { return plant.Plant{Name: "Kestrel Row", Location: zone} }, Admin: s.admin}, all, nil)
	return s
}

// visitor is a browser without scripts that follows nothing.
type visitor struct{ *webtest.Browser }

func (s *site) visitor(t testing.TB, login string) *visitor {
	t.Helper()
	return &visitor{webtest.Visit(t, s.URL, login)}
}

func (v *visitor) get(path string) (*http.Response, string) {
	v.T.Helper()
	a := v.Get(path)
	return a.Response, a.Text
}

func (v *visitor) post(path string, form url.Values) (*http.Response, string) {
	v.T.Helper()
	a := v.Post(path, form)
	return a.Response, a.Text
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
