package desk_test

import (
	"context"
	"encoding/json"
	"net/http"
	"net/url"
	"os"
	"testing"
	"time"

	"github.com/chromedp/chromedp"

	"holdfast/internal/plant"
)

// wide makes Diameter stable and not capable: a Ppk of 1.1 on 725 readings.
func (s *site) wide(t testing.TB) {
	t.Helper()
	for i := range 145 {
		if i == 20 {
			s.Clock.Advance(time.Minute)
			s.MustFreeze(t, s.Diameter)
		}
		s.Clock.Advance(30 * time.Minute)
		d := int64(i%3) - 1
		s.MustRecord(t, s.Diameter, 14987+d, 14990+d, 14991+d, 14992+d, 14995+d)
	}
	if _, err := s.RefreshStandings(context.Background(), true); err != nil {
		t.Fatal(err)
	}
}

func TestTheOwnerIsSeenProtectedAndAccepted(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.wide(t)
	b := s.signIn(t, s.Engineer)
	at := path(s.Diameter, "owner")
	const reason = "Stable, not capable: Ppk at least 1.0"
	page := b.get(at).is(http.StatusOK).has("Engineering", reason, "Say how product is protected", "From 625 readings in 125 subgroups", "1.33; 1.00 when accepted.",
		"no frozen limits yet", "too little data under these limits", "authorised people decide")
	b.get("/desk/engineering").is(http.StatusOK).has("1 characteristic is not capable and nobody has said how its product is protected.", "No protection stated", "Axle seat diameter", "Press force")
	b.get("/desk/engineering?why=not-capable").is(http.StatusOK).has("Axle seat diameter").hasNot("Press force")
	b.get("/desk?show=engineering").is(http.StatusOK).has("stable, not capable")
	b.get("/desk?show=nobody").is(http.StatusOK).has(`data-testid="empty"`)
	b.get(path(s.Diameter)).is(http.StatusOK).has(reason)

	id := hiddenID.FindStringSubmatch(page.body)[1]
	statement := url.Values{"id": {id}, "method": {"inspect-all"}, "instruction": {""}, "decided_by": {"Quality manager"}}
	b.post(at+"/protection", statement).is(http.StatusUnprocessableEntity).has("Say what is to be done with the product.", `value="Quality manager"`)
	statement.Set("instruction", "Gauge every axle")
	for range 2 {
		b.post(at+"/protection", statement).is(http.StatusSeeOther)
	}
	page = b.get(at).is(http.StatusOK).has("100 % inspection", "Gauge every axle", "decided by Quality manager").hasNot("Say how product is protected")
	if n := page.count(`data-testid="statement"`); n != 1 {
		t.Errorf("%d statements, want 1", n)
	}
	b.get("/desk/engineering").is(http.StatusOK).has("100 % inspection: Gauge every axle").hasNot("No protection stated")

	accept := url.Values{"id": {"0190b3a4-0000-7000-8000-00000000000a"}, "reason": {"customer agrees"}, "until": {s.Clock.Now().AddDate(0, 1, 0).Format("2006-01-02")}, "told": {"1.05"}}
	b.post(at+"/acceptance", accept).is(http.StatusUnprocessableEntity).has("Enter your password again to sign.")
	accept.Set("secret", "wrong")
	b.post(at+"/acceptance", accept).is(http.StatusUnprocessableEntity).has("The password is wrong.", "customer agrees")
	accept.Set("secret", "right")
	accept.Set("until", "2020-01-01")
	b.post(at+"/acceptance", accept).is(http.StatusUnprocessableEntity).has("The end must lie in the future.")
	accept.Set("until", s.Clock.Now().AddDate(0, 1, 0).Format("2006-01-02"))
	b.post(at+"/acceptance", accept).is(http.StatusSeeOther)
	b.get(at).is(http.StatusOK).has("Nobody", "accepted until", "signed by Engineer 1", "below capable, accepted for a time")

	protections, err := s.Protections(t.Context(), s.Diameter.ID)
	if err != nil || len(protections) != 1 {
		t.Fatal(protections, err)
	}
	end := url.Values{"id": {"0190b3a4-0000-7000-8000-00000000000b"}, "of": {protections[0].ID.String()}, "reason": {""}}
	b.post(at+"/end", end).is(http.StatusUnprocessableEntity).has("Say why it ends.")
	end.Set("reason", "new reamer")
	b.post(at+"/end", end).is(http.StatusSeeOther)
	b.get(at).is(http.StatusOK).has("by Engineer 1: new reamer")

	sup := s.signIn(t, s.Supervisor)
	sup.get(at).is(http.StatusOK).hasNot(`data-testid="protect"`, `data-testid="accept"`)
	sup.post(at+"/protection", statement).is(http.StatusForbidden)
}

// TestEngineeringIsFilteredByKeyboard walks from the list of characteristics to what
// engineering owns and narrows it, without a mouse; axe finds nothing on the way.
func TestEngineeringIsFilteredByKeyboard(t *testing.T) {
	t.Parallel()
	axe, err := os.ReadFile("../../internal/browsertest/testdata/axe.min.js")
	if err != nil {
		t.Fatal(err)
	}
	s := newSite(t)
	s.wide(t)
	if err := s.StateProtection(t.Context(), plant.Protection{ID: s.Station.ID, Characteristic: s.Diameter.ID, Method: plant.Sorting, Instruction: "Sort", DecidedBy: "Quality manager", Person: s.Engineer.ID}); err != nil {
		t.Fatal(err)
	}
	sc := s.screen(t)
	follow := func(link, then string) {
		t.Helper()
		sc.value(`document.querySelector('` + link + `').focus()`)
		sc.keys("\r")
		sc.waitFor(then)
	}
	sc.open("/desk")
	follow(`a[href="/desk?show=engineering"]`, `location.search === "?show=engineering" && document.querySelectorAll("[data-testid=characteristic]").length === 4`)
	sc.want("the owner is bold", `document.querySelector("[data-testid=characteristic] td b").textContent`, "Engineering")
	follow(`a[href="/desk/engineering"]`, `document.querySelectorAll("[data-testid=engineering-row]").length === 4`)
	follow(`a[href="/desk/engineering?why=not-capable"]`, `document.querySelectorAll("[data-testid=engineering-row]").length === 1`)
	follow(`[data-testid=engineering-row] a.name`, `document.querySelector("[data-testid=figure]")`)
	for _, at := range []string{"/desk/engineering", path(s.Diameter, "owner"), path(s.Mass, "owner"), "/desk/settings"} {
		sc.do(chromedp.EmulateViewport(1440, 900))
		for _, theme := range []string{"day", "night"} {
			sc.value(`document.cookie = "theme=` + theme + `; path=/"`)
			sc.open(at)
			sc.waitFor(`document.querySelector("main h1")`)
			sc.do(chromedp.Evaluate[chromedp.Void](string(axe)))
			found := sc.value(`JSON.stringify((await axe.run()).violations.map((v) => [v.id, v.nodes[0].html]))`)
			var list []any
			if err := json.Unmarshal([]byte(found), &list); err != nil || len(list) > 0 {
				t.Errorf("%s by %s: %s %v", at, theme, found, err)
			}
		}
		sc.do(chromedp.EmulateViewport(320, 900)) // 1280 px at 400 %
		sc.want(at+" reflows", `document.documentElement.scrollWidth <= innerWidth`, "true")
	}
}
