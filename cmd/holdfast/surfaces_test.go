package main

import (
	"net/http"
	"regexp"
	"slices"
	"testing"
)

// TestTheBarLeadsToWhatTheRoutesOpen compares the ways between the surfaces with the table
// of routes: everybody with a person finds those that answer, and no other.
func TestTheBarLeadsToWhatTheRoutesOpen(t *testing.T) {
	t.Parallel()
	r := serve(t)
	bar := regexp.MustCompile(`(?s)<nav id="surfaces".*?</nav>`)
	way := regexp.MustCompile(`<a href="([^"]*)"`)
	homes := []struct{ route, href string }{
		{"GET /station/", "/station?all"}, {"GET /board/", "/board"}, {"GET /desk/", "/desk"}, {"GET /admin/", "/admin"},
	}
	for _, kind := range []visitorKind{operator, supervisor, engineer, administrator, atTablet, manager} {
		v := r.visitAs(t, kind)
		var want []string
		for _, home := range homes {
			row := slices.IndexFunc(routeTable, func(row routeRow) bool { return row.route == home.route })
			if slices.Contains(routeTable[row].may, kind) && kind != atTablet && kind != manager { // a tablet has its place
				want = append(want, home.href)
			}
		}
		res, body := v.get("/account/")
		var got []string
		for _, m := range way.FindAllStringSubmatch(bar.FindString(body), -1) {
			got = append(got, m[1])
		}
		if res.StatusCode != http.StatusOK || !slices.Equal(got, want) {
			t.Errorf("%q: %d, the bar leads to %q, want %q", kind, res.StatusCode, got, want)
		}
		for _, href := range got {
			if res, _ := v.get(href); res.StatusCode >= 400 {
				t.Errorf("%q: %s answers %d", kind, href, res.StatusCode)
			}
		}
	}
}
