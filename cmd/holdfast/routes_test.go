package main

import (
	"net/http"
	"net/url"
	"slices"
	"strings"
	"testing"

	"holdfast/internal/plant"
	"holdfast/web"
)

// who is the set of those that a route answers.
type who []plant.Role

const nobody = plant.Role("")

var (
	everybody = who{nobody, plant.Operator, plant.Supervisor, plant.Engineer, plant.Administrator}
	takers    = who{plant.Operator, plant.Supervisor}
	seers     = who{plant.Operator, plant.Supervisor, plant.Engineer}
	deskers   = who{plant.Supervisor, plant.Engineer}
	setters   = who{plant.Engineer}
	managers  = who{plant.Administrator}
)

// routeRow is one route: whom it answers, and with what. Everybody else is refused:
// nobody by a way to the sign-in page (on /live by 401), another role by 403.
type routeRow struct {
	route  string // as web.Route prints it
	may    who
	status int
}

// routeTable is every route that there is. A route that is missing here fails the test,
// and so does a row without its route. A post without a body is refused as what it is,
// a form that says nothing: 422.
var routeTable = []routeRow{
	{"GET /", everybody, 303},
	{"GET /healthz", everybody, 200},
	{"GET /readyz", everybody, 200},
	{"GET /static/*", everybody, 200},
	{"GET /sign-in", everybody, 200},
	{"POST /sign-in", everybody, 422},
	{"POST /sign-in/demo", everybody, 404}, // no demonstration
	{"POST /sign-out", everybody, 303},
	{"POST /theme", everybody, 303},
	{"GET /live", seers, 400}, // no upgrade was asked for
	{"GET /admin/", managers, 200},
	{"GET /admin/qualification", managers, 200},
	{"GET /admin/qualification.json", managers, 404}, // none was run
	{"POST /admin/qualification", managers, 303},

	{"GET /station/", takers, 200},
	{"GET /station/{station}", takers, 200},
	{"POST /station/{station}/round", takers, 422},
	{"GET /station/{station}/round/{round}", takers, 200},
	{"GET /station/{station}/matter/{matter}", takers, 200},
	{"POST /station/{station}/matter/{matter}/take", takers, 409}, // a version that nobody saw
	{"POST /station/{station}/matter/{matter}/close", takers, 422},
	{"GET /station/{station}/change", takers, 200},
	{"POST /station/{station}/change", takers, 422},
	{"GET /station/{station}/change/{characteristic}", takers, 200},
	{"GET /station/{station}/correct", takers, 200},
	{"POST /station/{station}/correct", takers, 404}, // of no subgroup
	{"GET /station/{station}/machine/{machine}", takers, 200},
	{"POST /station/{station}/machine/{machine}", takers, 422},

	{"GET /board/", seers, 200},
	{"GET /board/at/{station}/{characteristic}", seers, 303},
	{"GET /board/at/{station}/{characteristic}/{matter}", seers, 303},
	{"GET /board/chart/{station}/{characteristic}", seers, 303},

	{"GET /desk/", deskers, 200},
	{"GET /desk/settings", deskers, 200},
	{"POST /desk/settings", setters, 422},
	{"GET /desk/characteristic/{id}", deskers, 200},
	{"GET /desk/characteristic/{id}/revisions", deskers, 200},
	{"GET /desk/characteristic/{id}/adjusting-points", deskers, 200},
	{"POST /desk/characteristic/{id}/adjusting-points", setters, 422},
	{"GET /desk/characteristic/{id}/study", setters, 200},
	{"GET /desk/characteristic/{id}/study/freeze", setters, 200},
	{"POST /desk/characteristic/{id}/study/freeze", setters, 409}, // after no revision that was seen
}

func TestEveryRouteByEveryRoleAndByNobody(t *testing.T) {
	t.Parallel()
	r := serve(t)
	r.calm(t, 22)
	r.MustFreeze(t, r.Diameter)
	a := r.MustRecord(t, r.Diameter, 14998, 14999, 14998, 14999, 14998)
	path := strings.NewReplacer("{station}", r.Station.ID.String(), "{round}", a.Round.String(), "{matter}", a.Parts[0].Matter.String(),
		"{characteristic}", r.Diameter.ID.String(), "{machine}", r.Machine.ID.String(), "{id}", r.Diameter.ID.String(),
		"/static/*", "/static/css/tokens.css", "/live", "/live?topic=board")

	routes, err := web.Routes(r.program.server.Handler)
	if err != nil {
		t.Fatal(err)
	}
	there := map[string]bool{}
	for _, route := range routes {
		there[route.String()] = true
		if !slices.ContainsFunc(routeTable, func(row routeRow) bool { return row.route == route.String() }) {
			t.Errorf("%s is not in the table of routes and roles", route)
		}
	}
	logins := map[plant.Role]string{plant.Operator: "operator1", plant.Supervisor: "supervisor1", plant.Engineer: "engineer1", plant.Administrator: "administrator1"}
	for _, role := range everybody {
		v := r.visit(t, logins[role])
		for _, row := range routeTable {
			if !there[row.route] {
				t.Errorf("%s is in the table and not there", row.route)
				continue
			}
			if row.route == "POST /sign-out" {
				continue // last of all
			}
			method, pattern, _ := strings.Cut(row.route, " ")
			want, to := row.status, ""
			if !slices.Contains(row.may, role) {
				switch {
				case role != nobody:
					want = http.StatusForbidden
				case pattern == "/live":
					want = http.StatusUnauthorized
				default:
					want, to = http.StatusSeeOther, "/sign-in"
				}
			}
			var res *http.Response
			if method == http.MethodPost {
				res, _ = v.post(path.Replace(pattern), url.Values{})
			} else {
				res, _ = v.get(path.Replace(pattern))
			}
			if res.StatusCode != want || !strings.HasPrefix(res.Header.Get("Location"), to) {
				t.Errorf("%s as %q: %d to %q, want %d", row.route, role, res.StatusCode, res.Header.Get("Location"), want)
			}
			if csp := res.Header.Get("Content-Security-Policy"); !strings.Contains(csp, "default-src 'none'") || strings.Contains(csp, "unsafe") {
				t.Errorf("%s: content policy %q", row.route, csp)
			}
		}
		if res, _ := v.post("/sign-out", nil); res.StatusCode != http.StatusSeeOther {
			t.Errorf("signing out as %q: %d", role, res.StatusCode)
		}
		if res, _ := v.get("/board"); role != nobody && res.StatusCode != http.StatusSeeOther {
			t.Errorf("after signing out as %q the board answers %d", role, res.StatusCode)
		}
	}
}
