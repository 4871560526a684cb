package main

import (
	"context"
	"net/http"
	"net/url"
	"slices"
	"strings"
	"testing"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web"
)

// visitorKind is one of those who come to the server: somebody with one role, or what
// comes without a person.
type visitorKind string

const (
	nobody        visitorKind = "nobody"
	operator                  = visitorKind(plant.Operator)
	supervisor                = visitorKind(plant.Supervisor)
	engineer                  = visitorKind(plant.Engineer)
	administrator             = visitorKind(plant.Administrator)
	atTablet      visitorKind = "operator by PIN at a tablet"
	manager       visitorKind = "administrator by PIN at a tablet" // who is an operator too: the PIN opens only that
	bare          visitorKind = "enrolled tablet without a person"
	wall          visitorKind = "wall screen"
	sender        visitorKind = "sender with its token"
	revoked       visitorKind = "revoked tablet"
)

// who is the set of those that a route answers.
type who []visitorKind

// everybody is all who come, in the order in which they are tried.
var everybody = who{nobody, operator, supervisor, engineer, administrator, atTablet, manager, bare, wall, sender, revoked}

var (
	people    = who{operator, supervisor, engineer, administrator, atTablet, manager}
	takers    = who{operator, supervisor, atTablet, manager}
	seers     = who{operator, supervisor, engineer, atTablet, manager}
	watchers  = append(who{wall}, seers...) // the board, to look at
	deskers   = who{supervisor, engineer}
	setters   = who{engineer}
	called    = who{supervisor}
	managers  = who{administrator}
	arrangers = who{engineer, administrator}
	tablets   = who{bare, atTablet, manager}
	senders   = who{sender}
)

// routeRow is one route: whom it answers, and with what. All others are refused as
// refusal says.
type routeRow struct {
	route  string // as web.Route prints it
	may    who
	status int
}

// refusal is how a route turns somebody away: who is signed in with 403, nobody and a
// device without a person by a way to the sign-in page, a wall screen by the way back to
// its board, and on /live and /api with 401. What only a tablet may send is 403 for all.
func refusal(method, pattern string, v visitorKind) (status int, to string) {
	switch {
	case pattern == "/sign-in/badge":
		return http.StatusForbidden, ""
	case strings.HasPrefix(pattern, "/api/"):
		return http.StatusUnauthorized, ""
	case slices.Contains(people, v):
		return http.StatusForbidden, ""
	case v == wall && method == http.MethodGet:
		return http.StatusSeeOther, "/board"
	case v == wall:
		return http.StatusForbidden, ""
	case pattern == "/live":
		return http.StatusUnauthorized, ""
	}
	return http.StatusSeeOther, "/sign-in"
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
	{"POST /sign-in/badge", tablets, 422},
	{"POST /sign-out", everybody, 303},
	{"POST /still-here", people, 204},
	{"GET /enrol", everybody, 200},
	{"POST /enrol", everybody, 422},
	{"POST /theme", everybody, 303},
	{"POST /language", everybody, 422},
	{"GET /live", watchers, 400}, // no upgrade was asked for
	{"GET /admin/about", managers, 200},
	{"GET /admin/", arrangers, 200},
	{"GET /admin/start", arrangers, 200},
	{"POST /admin/start/{step}", arrangers, 422},
	{"GET /admin/plant", arrangers, 200},
	{"POST /admin/plant", arrangers, 422},
	{"POST /admin/plant/shifts", arrangers, 303}, // an empty calendar is one
	{"GET /admin/floor", arrangers, 200},
	{"GET /admin/parts", arrangers, 200},
	{"GET /admin/thing/{kind}/new", arrangers, 200},
	{"POST /admin/thing/{kind}/new", arrangers, 422},
	{"GET /admin/thing/{kind}/{id}", arrangers, 200},
	{"POST /admin/thing/{kind}/{id}", arrangers, 422},
	{"POST /admin/thing/{kind}/{id}/retire", arrangers, 422},
	{"POST /admin/thing/{kind}/{id}/move", arrangers, 422},
	{"GET /admin/gauges", setters, 200},
	{"GET /admin/characteristics", setters, 200},
	{"GET /admin/characteristic/new", setters, 200},
	{"POST /admin/characteristic/new", setters, 422},
	{"GET /admin/characteristic/{id}", setters, 200},
	{"POST /admin/characteristic/{id}", setters, 422},
	{"GET /admin/characteristic/{id}/known-limits", setters, 200},
	{"POST /admin/characteristic/{id}/known-limits", setters, 422},
	{"GET /admin/chart-choice", setters, 200},
	{"GET /admin/description", setters, 200},
	{"POST /admin/description", setters, 422},
	{"GET /admin/description/{id}", setters, 404}, // no file waits
	{"POST /admin/description/{id}", setters, 404},
	{"GET /admin/description/files/{file}", setters, 200},
	{"GET /admin/qualification", managers, 200},
	{"GET /admin/qualification.json", managers, 404}, // none was run
	{"POST /admin/qualification", managers, 303},
	{"GET /admin/people", managers, 200},
	{"POST /admin/people", managers, 422},
	{"GET /admin/people/{person}", managers, 200},
	{"POST /admin/people/{person}/roles", managers, 422}, // none at all
	{"POST /admin/people/{person}/active", managers, 303},
	{"POST /admin/people/{person}/secret", managers, 200},
	{"POST /admin/people/{person}/badge", managers, 303}, // taken away
	{"POST /admin/people/{person}/erase", managers, 422},
	{"POST /admin/people/{person}/name", managers, 422},
	{"POST /admin/people/{person}/end", managers, 303}, // no session is named
	{"GET /admin/devices", managers, 200},
	{"POST /admin/devices", managers, 422},
	{"POST /admin/devices/{device}", managers, 422},
	{"POST /admin/devices/{device}/revoke", managers, 303},
	{"POST /admin/devices/code/{code}/withdraw", managers, 303},
	{"GET /admin/messages", managers, 200},
	{"POST /admin/messages/try", managers, 422},
	{"POST /admin/messages/{id}/again", managers, 404}, // no message of this id

	{"GET /station/", takers, 200},
	{"GET /station/{station}", takers, 200},
	{"POST /station/{station}/round", takers, 422},
	{"GET /station/{station}/round/{round}", takers, 200},
	{"GET /station/{station}/matter/{matter}", takers, 200},
	{"POST /station/{station}/matter/{matter}/take", takers, 409}, // a version that nobody saw
	{"POST /station/{station}/matter/{matter}/step", takers, 422},
	{"POST /station/{station}/matter/{matter}/close", takers, 422},
	{"POST /station/{station}/matter/{matter}/verify", takers, 422}, // without a fix to verify
	{"GET /station/{station}/matter/{matter}/aside", takers, 200},
	{"POST /station/{station}/matter/{matter}/aside", takers, 422},
	{"GET /station/{station}/gauges", takers, 200},
	{"GET /station/{station}/gauge/{gauge}", takers, 404}, // of no gauge
	{"POST /station/{station}/gauge/{gauge}", takers, 404},
	{"GET /station/{station}/change", takers, 200},
	{"POST /station/{station}/change", takers, 422},
	{"GET /station/{station}/change/{characteristic}", takers, 200},
	{"GET /station/{station}/correct", takers, 200},
	{"POST /station/{station}/correct", takers, 404}, // of no subgroup
	{"GET /station/{station}/machine/{machine}", takers, 200},
	{"POST /station/{station}/machine/{machine}", takers, 422},
	{"POST /station/{station}/not-taken", takers, 422},

	{"GET /api/v1/", everybody, 200},
	{"GET /api/v1/station", senders, 422}, // of no station
	{"POST /api/v1/rounds", senders, 422},
	{"POST /api/v1/machines/{machine}", senders, 422},
	{"POST /api/v1/lines", senders, 422},

	{"GET /board/", watchers, 200},
	{"GET /board/alarms", watchers, 200},
	{"GET /board/at/{station}/{characteristic}", seers, 303},
	{"GET /board/at/{station}/{characteristic}/{matter}", seers, 303},
	{"GET /board/chart/{station}/{characteristic}", seers, 303},
	{"GET /board/handover", watchers, 200},
	{"POST /board/handover/note", takers, 422},
	{"POST /board/handover/note/{note}/clear", takers, 404}, // of no note
	{"POST /board/handover/read", takers, 404},              // of no line

	{"GET /account/", people, 200},
	{"POST /account/end", people, 303}, // no session is named
	{"POST /account/password", people, 422},
	{"POST /account/pin", people, 422},

	{"GET /calls/", called, 200},
	{"GET /calls/quiet/{matter}", called, 200},
	{"POST /calls/quiet/{matter}", called, 422},

	{"GET /desk/", deskers, 200},
	{"GET /desk/settings", deskers, 200},
	{"POST /desk/settings", setters, 422},
	{"GET /desk/plans", deskers, 200},
	{"GET /desk/plan", deskers, 404}, // of no kind
	{"POST /desk/plan", setters, 404},
	{"GET /desk/causes", deskers, 200},
	{"POST /desk/causes", setters, 422},
	{"GET /desk/product", deskers, 200},
	{"POST /desk/product", deskers, 422},
	{"GET /desk/product/{id}", deskers, 404}, // of no product
	{"POST /desk/product/{id}", deskers, 404},
	{"GET /desk/gauges", deskers, 200},
	{"GET /desk/gauges/{id}", deskers, 404}, // of no gauge
	{"GET /desk/engineering", deskers, 200},
	{"GET /desk/characteristic/{id}/owner", deskers, 200},
	{"POST /desk/characteristic/{id}/owner/protection", setters, 422},
	{"POST /desk/characteristic/{id}/owner/acceptance", setters, 422},
	{"POST /desk/characteristic/{id}/owner/end", setters, 422},
	{"GET /desk/characteristic/{id}", deskers, 200},
	{"GET /desk/characteristic/{id}/revisions", deskers, 200},
	{"GET /desk/characteristic/{id}/adjustments", deskers, 200},
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
	spare := r.person(t, "spare", plant.Operator)
	gone, _ := r.enrol(t, plant.Device{Kind: plant.Wall, Name: "To be revoked"})
	path := strings.NewReplacer("{station}", r.Station.ID.String(), "{round}", a.Round.String(), "{matter}", a.Parts[0].Matter.String(),
		"{characteristic}", r.Diameter.ID.String(), "{machine}", r.Machine.ID.String(), "{id}", r.Diameter.ID.String(),
		"/thing/{kind}/{id}", "/thing/line/"+r.Line.ID.String(), "{kind}", "line", "{step}", "floor", "{file}", "template.csv",
		"{person}", spare.ID.String(), "{device}", gone.ID.String(), "{code}", uuid.NewString(),
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
	for _, kind := range everybody {
		v := r.visitAs(t, kind)
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
			if !slices.Contains(row.may, kind) {
				want, to = refusal(method, pattern, kind)
			}
			var res *http.Response
			if method == http.MethodPost {
				res, _ = v.post(path.Replace(pattern), url.Values{})
			} else {
				res, _ = v.get(path.Replace(pattern))
			}
			if res.StatusCode != want || !strings.HasPrefix(res.Header.Get("Location"), to) {
				t.Errorf("%s as %q: %d to %q, want %d", row.route, kind, res.StatusCode, res.Header.Get("Location"), want)
			}
			if csp := res.Header.Get("Content-Security-Policy"); !strings.Contains(csp, "default-src 'none'") || strings.Contains(csp, "unsafe") {
				t.Errorf("%s: content policy %q", row.route, csp)
			}
		}
		if res, _ := v.post("/sign-out", nil); res.StatusCode != http.StatusSeeOther {
			t.Errorf("signing out as %q: %d", kind, res.StatusCode)
		}
		if res, _ := v.get("/board"); slices.Contains(people, kind) && res.StatusCode != http.StatusSeeOther {
			t.Errorf("after signing out as %q the board answers %d", kind, res.StatusCode)
		}
	}
}

// visitAs comes as one of everybody.
func (r *running) visitAs(t testing.TB, kind visitorKind) *visitor {
	t.Helper()
	switch kind {
	case nobody:
		return r.visit(t, "")
	case atTablet:
		v, _ := r.visitOn(t, plant.Device{Kind: plant.Tablet, Name: "Tablet of an operator", Station: r.Station.ID})
		r.badge(t, r.Operator.ID, "1001")
		v.signInByBadge("1001", pin)
		return v
	case manager:
		v, _ := r.visitOn(t, plant.Device{Kind: plant.Tablet, Name: "Tablet of an administrator", Station: r.Station.ID})
		r.person(t, "both", plant.Operator, plant.Administrator, plant.Engineer)
		p, err := r.PersonByLogin(context.Background(), "both")
		if err != nil {
			t.Fatal(err)
		}
		r.badge(t, p.ID, "1002")
		v.signInByBadge("1002", pin)
		return v
	case bare:
		v, _ := r.visitOn(t, plant.Device{Kind: plant.Tablet, Name: "Tablet", Station: r.Station.ID})
		return v
	case wall:
		v, _ := r.visitOn(t, plant.Device{Kind: plant.Wall, Name: "Wall"})
		return v
	case sender:
		v := r.visit(t, "")
		_, v.token = r.enrol(t, plant.Device{Kind: plant.Sender, Name: "Gauge"})
		return v
	case revoked:
		v, d := r.visitOn(t, plant.Device{Kind: plant.Tablet, Name: "Lost tablet", Station: r.Station.ID})
		if err := r.RevokeDevice(context.Background(), d.ID, uuid.Nil); err != nil {
			t.Fatal(err)
		}
		r.program.devices.Forget()
		return v
	}
	return r.visit(t, string(kind)+"1")
}
