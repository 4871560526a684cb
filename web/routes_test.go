package web_test

import (
	"net/http"
	"net/url"
	"slices"
	"testing"

	"holdfast/internal/plant"
	"holdfast/web"
	"holdfast/web/webtest"
)

// who is the set of those that a route answers.
type who []plant.Role

const nobody = plant.Role("")

var (
	everybody = who{nobody, plant.Operator, plant.Supervisor, plant.Engineer, plant.Administrator}
	takers    = who{plant.Operator, plant.Supervisor}
	seers     = who{plant.Operator, plant.Supervisor, plant.Engineer}
	deskers   = who{plant.Supervisor, plant.Engineer}
	arrangers = who{plant.Engineer, plant.Administrator}
	voiders   = who{plant.Supervisor}
)

// row is one route: whom it answers and with what. Everybody else is refused: nobody
// by a way to the sign-in page (on /live by 401), another role by 403.
type row struct {
	route  string // as web.Route prints it
	path   string // an example, when the pattern has parameters
	form   url.Values
	may    who
	status int // for those who may
}

// table is every route that there is. A route that is missing here fails the test,
// and so does a row without its route.
var table = []row{
	{route: "GET /healthz", may: everybody, status: 200},
	{route: "GET /readyz", may: everybody, status: 200},
	{route: "GET /static/*", path: "/static/css/tokens.css", may: everybody, status: 200},
	{route: "GET /", may: everybody, status: 303},
	{route: "GET /sign-in", may: everybody, status: 200},
	{route: "POST /sign-in", may: everybody, status: 422},
	{route: "POST /sign-in/demo", may: everybody, status: 404},
	{route: "POST /sign-out", may: everybody, status: 303},
	{route: "POST /theme", may: everybody, status: 303},
	{route: "POST /language", may: everybody, status: 422},
	// Without an upgrade the hub answers 400 to those whom it would serve.
	{route: "GET /live", path: "/live?topic=board", may: seers, status: 400},

	{route: "GET /station/", may: takers, status: 200},
	{route: "POST /station/void", may: voiders, status: 303},
	{route: "GET /station/panic", may: takers, status: 500},
	{route: "GET /board/", may: seers, status: 200},
	{route: "POST /board/void", may: voiders, status: 303},
	{route: "GET /board/panic", may: seers, status: 500},
	{route: "GET /desk/", may: deskers, status: 200},
	{route: "POST /desk/void", may: voiders, status: 303},
	{route: "GET /desk/panic", may: deskers, status: 500},
	{route: "GET /admin/", may: arrangers, status: 200},
	{route: "POST /admin/void"}, // who arranges voids nothing, and who voids does not arrange
	{route: "GET /admin/panic", may: arrangers, status: 500},
}

// missing compares the routes that there are with the table's.
func missing(routes []web.Route, table []row) (notInTable, notThere []string) {
	known := make(map[string]bool, len(table))
	for _, r := range table {
		known[r.route] = true
	}
	there := make(map[string]bool, len(routes))
	for _, r := range routes {
		there[r.String()] = true
		if !known[r.String()] {
			notInTable = append(notInTable, r.String())
		}
	}
	for _, r := range table {
		if !there[r.route] {
			notThere = append(notThere, r.route)
		}
	}
	return notInTable, notThere
}

func TestEveryRouteIsTriedByEveryRoleAndByNobody(t *testing.T) {
	t.Parallel()
	f := newFixture(t, nil)
	routes, err := web.Routes(f.handler)
	if err != nil {
		t.Fatal(err)
	}
	notInTable, notThere := missing(routes, table)
	for _, r := range notInTable {
		t.Errorf("%s is not in the table of routes and roles", r)
	}
	for _, r := range notThere {
		t.Errorf("%s is in the table and not there", r)
	}
	for _, role := range everybody {
		name := string(role)
		if role == nobody {
			name = "nobody"
		}
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			v := f.visitor(t, role)
			for _, row := range table {
				if row.route == "POST /sign-out" && role != nobody {
					continue // last of all, below
				}
				tryRoute(t, v, role, row)
			}
			if role != nobody {
				if res := v.Post("/sign-out", nil); res.StatusCode != http.StatusSeeOther {
					t.Errorf("signing out: %d", res.StatusCode)
				}
			}
		})
	}
}

func tryRoute(t *testing.T, v *visitor, role plant.Role, row row) {
	t.Helper()
	method, path := cut(row.route)
	if row.path != "" {
		path = row.path
	}
	want, to := row.status, ""
	if !slices.Contains(row.may, role) {
		switch {
		case role != nobody:
			want = http.StatusForbidden
		case path == "/live?topic=board":
			want = http.StatusUnauthorized
		default:
			want, to = http.StatusSeeOther, "/sign-in"
		}
	}
	var res webtest.Answer
	if method == http.MethodPost {
		res = v.Post(path, row.form)
	} else {
		res = v.Get(path)
	}
	if res.StatusCode != want {
		t.Errorf("%s: %d, want %d", row.route, res.StatusCode, want)
	}
	if at, _ := url.Parse(res.Header.Get("Location")); to != "" && at.Path != to {
		t.Errorf("%s: leads to %s, want %s", row.route, at, to)
	}
}

func cut(route string) (method, path string) {
	for i := range route {
		if route[i] == ' ' {
			return route[:i], route[i+1:]
		}
	}
	return route, ""
}

func TestARouteMissingFromTheTableIsFound(t *testing.T) {
	t.Parallel()
	a, b := missing([]web.Route{{Method: "GET", Pattern: "/new"}, {Method: "GET", Pattern: "/"}}, []row{{route: "GET /"}, {route: "GET /gone"}})
	if !slices.Equal(a, []string{"GET /new"}) || !slices.Equal(b, []string{"GET /gone"}) {
		t.Errorf("found %v and %v", a, b)
	}
}

func TestRoutesNeedsARouter(t *testing.T) {
	t.Parallel()
	if _, err := web.Routes(http.NotFoundHandler()); err == nil {
		t.Error("a handler without routes was walked")
	}
}
