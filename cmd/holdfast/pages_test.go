package main

import (
	"slices"
	"strings"
	"testing"

	"github.com/google/uuid"

	"holdfast/internal/browsertest"
	"holdfast/internal/plant"
)

// sight is a page as one kind of person sees it; several addresses are several states.
type sight struct {
	as visitorKind
	at []string
}

// pageTable says, for every route of routeTable that answers with a page, who looks at it
// and where. What is served below another address, or is no page, stands in noPages.
func (w *works) pageTable() map[string][]sight {
	id := func(c plant.Characteristic) string { return c.ID.String() }
	station := "/station/" + w.Station.ID.String()
	chart := "/desk/characteristic/" + id(w.Diameter)
	thing := "/admin/thing/"
	return map[string][]sight{
		"GET /sign-in": {{nobody, []string{"/sign-in"}}, {bare, []string{"/sign-in", "/sign-in?locked=yes"}}},
		"GET /enrol":   {{nobody, []string{"/enrol"}}},

		"GET /account/": {{operator, []string{"/account/"}}, {atTablet, []string{"/account/"}}, {administrator, []string{"/account/"}}},

		"GET /station/":                                  {{operator, []string{"/station/?all"}}},
		"GET /station/{station}":                         {{operator, []string{station, station + "?measure=" + id(w.Diameter)}}, {atTablet, []string{station}}, {supervisor, []string{station}}},
		"GET /station/{station}/round/{round}":           {{operator, []string{station + "/round/" + w.lookRound.String(), station + "/round/" + w.holdRound.String()}}},
		"GET /station/{station}/matter/{matter}":         {{operator, []string{station + "/matter/" + w.look.ID.String(), station + "/matter/" + w.hold.ID.String()}}},
		"GET /station/{station}/matter/{matter}/aside":   {{operator, []string{station + "/matter/" + w.look.ID.String() + "/aside", station + "/matter/" + w.hold.ID.String() + "/aside"}}},
		"GET /station/{station}/gauges":                  {{operator, []string{"/station/" + w.long.StationID.String() + "/gauges"}}},
		"GET /station/{station}/gauge/{gauge}":           {{operator, []string{"/station/" + w.long.StationID.String() + "/gauge/" + w.gauge.ID.String()}}},
		"GET /station/{station}/change":                  {{operator, []string{station + "/change"}}},
		"GET /station/{station}/change/{characteristic}": {{operator, []string{station + "/change/" + id(w.Diameter), "/station/" + w.long.StationID.String() + "/change/" + id(w.long)}}},
		"GET /station/{station}/correct":                 {{operator, []string{station + "/correct"}}},
		"GET /station/{station}/machine/{machine}":       {{operator, []string{station + "/machine/" + w.Machine.ID.String()}}},

		"GET /board/":         {{supervisor, []string{"/board"}}, {engineer, []string{"/board?owner=engineering"}}, {wall, []string{"/board"}}},
		"GET /board/alarms":   {{supervisor, []string{"/board/alarms"}}},
		"GET /board/handover": {{supervisor, []string{"/board/handover", "/board/handover?causes=7&line=" + w.Line.ID.String()}}, {operator, []string{"/board/handover"}}},

		"GET /calls/":               {{supervisor, []string{"/calls/"}}},
		"GET /calls/quiet/{matter}": {{supervisor, []string{"/calls/quiet/" + w.hold.ID.String(), "/calls/quiet/" + w.quiet.ID.String()}}},

		"GET /desk/":                                     {{engineer, []string{"/desk/"}}, {supervisor, []string{"/desk/"}}},
		"GET /desk/settings":                             {{engineer, []string{"/desk/settings"}}},
		"GET /desk/plans":                                {{engineer, []string{"/desk/plans"}}},
		"GET /desk/plan":                                 {{engineer, []string{"/desk/plan?" + scope(plant.MatterUp, "turning"), "/desk/plan?" + scope(plant.MatterDown, "")}}, {supervisor, []string{"/desk/plan?" + scope(plant.MatterUp, "turning")}}},
		"GET /desk/causes":                               {{engineer, []string{"/desk/causes"}}},
		"GET /desk/product":                              {{supervisor, []string{"/desk/product"}}},
		"GET /desk/product/{id}":                         {{supervisor, []string{"/desk/product/" + w.hold.ID.String()}}},
		"GET /desk/gauges":                               {{engineer, []string{"/desk/gauges"}}},
		"GET /desk/gauges/{id}":                          {{engineer, []string{"/desk/gauges/" + w.gauge.ID.String()}}},
		"GET /desk/engineering":                          {{engineer, []string{"/desk/engineering"}}},
		"GET /desk/characteristic/{id}/owner":            {{engineer, []string{"/desk/characteristic/" + id(w.Length) + "/owner"}}, {supervisor, []string{chart + "/owner"}}},
		"GET /desk/characteristic/{id}":                  {{engineer, []string{chart, chart + "?as=table", "/desk/characteristic/" + id(w.Force)}}, {supervisor, []string{"/desk/characteristic/" + id(w.long)}}},
		"GET /desk/characteristic/{id}/revisions":        {{engineer, []string{chart + "/revisions"}}},
		"GET /desk/characteristic/{id}/adjustments":      {{engineer, []string{chart + "/adjustments"}}},
		"GET /desk/characteristic/{id}/adjusting-points": {{engineer, []string{chart + "/adjusting-points"}}},
		"GET /desk/characteristic/{id}/study":            {{engineer, []string{chart + "/study", "/desk/characteristic/" + id(w.Force) + "/study"}}},
		"GET /desk/characteristic/{id}/study/freeze":     {{engineer, []string{chart + "/study/freeze"}}},

		"GET /admin/":                                 {{engineer, []string{"/admin/"}}, {administrator, []string{"/admin/"}}},
		"GET /admin/start":                            {{administrator, []string{"/admin/start"}}},
		"GET /admin/about":                            {{administrator, []string{"/admin/about"}}},
		"GET /admin/plant":                            {{administrator, []string{"/admin/plant"}}},
		"GET /admin/floor":                            {{administrator, []string{"/admin/floor"}}},
		"GET /admin/parts":                            {{engineer, []string{"/admin/parts"}}},
		"GET /admin/thing/{kind}/new":                 {{engineer, []string{thing + "gauge/new", thing + "machine/new", thing + "part/new"}}, {administrator, []string{thing + "station/new", thing + "line/new"}}},
		"GET /admin/thing/{kind}/{id}":                {{engineer, []string{thing + "machine/" + w.Machine.ID.String(), thing + "gauge/" + w.gauge.ID.String()}}, {administrator, []string{thing + "station/" + w.Station.ID.String()}}},
		"GET /admin/gauges":                           {{engineer, []string{"/admin/gauges"}}},
		"GET /admin/characteristics":                  {{engineer, []string{"/admin/characteristics"}}},
		"GET /admin/characteristic/new":               {{engineer, []string{"/admin/characteristic/new"}}},
		"GET /admin/characteristic/{id}":              {{engineer, []string{"/admin/characteristic/" + id(w.Diameter)}}},
		"GET /admin/characteristic/{id}/known-limits": {{engineer, []string{"/admin/characteristic/" + id(w.Force) + "/known-limits"}}},
		"GET /admin/chart-choice":                     {{engineer, []string{"/admin/chart-choice", "/admin/chart-choice?size=5&batches=pieces&varies=no&special=streams"}}},
		"GET /admin/description":                      {{engineer, []string{"/admin/description"}}},
		"GET /admin/description/{id}":                 {{engineer, []string{w.description}}},
		"GET /admin/qualification":                    {{administrator, []string{"/admin/qualification"}}},
		"GET /admin/people":                           {{administrator, []string{"/admin/people"}}},
		"GET /admin/people/{person}":                  {{administrator, []string{"/admin/people/" + w.Operator.ID.String()}}},
		"GET /admin/devices":                          {{administrator, []string{"/admin/devices"}}},
		"GET /admin/messages":                         {{administrator, []string{"/admin/messages"}}},
	}
}

// noPages are routes that answer with something else than a page.
var noPages = map[string]string{
	"GET /":                               "leads on",
	"GET /healthz":                        "a word",
	"GET /readyz":                         "a word",
	"GET /static/*":                       "files",
	"GET /live":                           "a socket",
	"GET /admin/description/files/{file}": "files",
	"GET /admin/qualification.json":       "a file",
	"GET /api/v1/":                        "text for programs",
	"GET /api/v1/station":                 "JSON",
	"GET /board/at/{station}/{characteristic}":          "leads on",
	"GET /board/at/{station}/{characteristic}/{matter}": "leads on",
	"GET /board/chart/{station}/{characteristic}":       "leads on",
}

// TestEveryPageIsForEverybody opens every page as the people who work with it: by day and
// by night, enlarged, narrow and wide, in colours of the reader's own and without movement.
func TestEveryPageIsForEverybody(t *testing.T) {
	t.Parallel()
	w := serveWorks(t)
	table := w.pageTable()
	for _, row := range routeTable {
		if !strings.HasPrefix(row.route, "GET ") {
			continue
		}
		if why, none := noPages[row.route]; (table[row.route] == nil) == (why == "" && !none) {
			t.Errorf("%s stands in neither or both of the table of pages and of what is none", row.route)
		}
	}
	seen := map[visitorKind][]string{}
	for route, sights := range table {
		i := slices.IndexFunc(routeTable, func(row routeRow) bool { return row.route == route })
		if i < 0 {
			t.Errorf("%s is in the table of pages and not there", route)
			continue
		}
		for _, s := range sights {
			if !slices.Contains(routeTable[i].may, s.as) {
				t.Errorf("%s is not for %s", route, s.as)
			}
			seen[s.as] = append(seen[s.as], s.at...)
		}
	}
	b := browsertest.Start(t)
	for kind, paths := range seen {
		slices.Sort(paths)
		p := w.windowOf(t, b, kind)
		// Two windows of one person share the work.
		half := len(paths)
		if half > 20 {
			half /= 2
			other := w.windowOf(t, b, kind)
			t.Run(string(kind)+", second window", func(t *testing.T) {
				t.Parallel()
				lookAt(t, other, paths[half:])
			})
		}
		t.Run(string(kind), func(t *testing.T) {
			t.Parallel()
			lookAt(t, p, paths[:half])
		})
	}
}

func lookAt(t *testing.T, p *browsertest.Page, paths []string) {
	for _, path := range paths {
		q := p.For(t)
		q.Open(path)
		q.WaitFor(`document.querySelector("main")`)
		q.Want(path+": the answer is the page", `performance.getEntriesByType("navigation")[0].responseStatus`, "200")
		q.ForEverybody(path)
	}
}

// windowOf is a window in which this kind of visitor is signed in.
func (w *works) windowOf(t testing.TB, b *browsertest.Browser, kind visitorKind) *browsertest.Page {
	t.Helper()
	seat := func(d plant.Device) *browsertest.Page {
		d.Name += " " + uuid.NewString()[:4]
		code, err := w.MakeDeviceCode(t.Context(), d, w.Administrator.ID)
		w.ok(t, err)
		p := b.Person(w.url)
		p.Open("/enrol")
		p.WaitFor(find("#code"))
		p.Fill("#code", code.Code)
		p.Keys("\r")
		p.WaitFor(`location.pathname !== "/enrol"`)
		return p
	}
	switch kind {
	case nobody:
		return b.Person(w.url)
	case bare, atTablet:
		p := seat(plant.Device{Kind: plant.Tablet, Name: "Tablet", Station: w.Station.ID})
		if kind == atTablet {
			w.badge(t, w.Operator.ID, "1001")
			badgeIn(p, "1001")
		}
		return p
	case wall:
		return seat(plant.Device{Kind: plant.Wall, Name: "Wall"})
	}
	return w.signIn(t, b, string(kind)+"1")
}
