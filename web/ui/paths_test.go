package ui

import (
	"net/http/httptest"
	"net/url"
	"strings"
	"testing"

	"holdfast/internal/plant"
	"holdfast/web/words"
)

func TestLocalPathKeepsOnlyOurOwn(t *testing.T) {
	t.Parallel()
	for _, path := range []string{"/", "/board", "/desk/a%2Fb/chart?from=2026-01-01&last=50", "/station/0190-x?a=//b", "/a//b"} {
		if got := LocalPath(path); got != path {
			t.Errorf("LocalPath(%q) = %q", path, got)
		}
	}
	for _, path := range []string{"", "board", "//", "//?a", "//evil.example", "///evil.example", `/\evil.example`, `\/evil.example`,
		"https://evil.example/", "javascript:alert(1)", "/\t/evil.example", "/%zz", "/./" + "/evil.example", "/a/..//evil.example",
		"/%2e%2e//evil.example", "/\nevil", "/" + strings.Repeat("a", 3000)} {
		if got := LocalPath(path); got != "/" {
			t.Errorf("LocalPath(%q) = %q, want /", path, got)
		}
	}
}

func FuzzLocalPath(f *testing.F) {
	for _, s := range []string{"/", "//x", "/a?b=c", `/\x`, "/./x", "/%2f/x", "/a;b"} {
		f.Add(s)
	}
	base, _ := url.Parse("http://ours.example/sign-in")
	f.Fuzz(func(t *testing.T, s string) {
		got := LocalPath(s)
		ref, err := url.Parse(got)
		if err != nil {
			t.Fatalf("LocalPath(%q) = %q is no address: %v", s, got, err)
		}
		if to := base.ResolveReference(ref); to.Host != base.Host || to.Scheme != base.Scheme || strings.ContainsAny(got, "\\\t\r\n") || strings.HasPrefix(got, "//") {
			t.Fatalf("LocalPath(%q) = %q leads to %s", s, got, to)
		}
		if again := LocalPath(got); again != got {
			t.Fatalf("LocalPath(%q) = %q, and of that %q", s, got, again)
		}
	})
}

func TestSignInPathCarriesTheWayBack(t *testing.T) {
	t.Parallel()
	if got := SignInPath("/"); got != "/sign-in" {
		t.Errorf("got %q", got)
	}
	if got := SignInPath("/desk/x?last=5&y"); got != "/sign-in?to=%2Fdesk%2Fx%3Flast%3D5%26y" {
		t.Errorf("got %q", got)
	}
}

func TestRefererOfAnotherSiteIsNotGoneBackTo(t *testing.T) {
	t.Parallel()
	r := httptest.NewRequest("POST", "http://ours.example/board", nil)
	for referer, want := range map[string]string{"": "/", "http://evil.example/x": "/", "http://ours.example/station/7?a=b": "/station/7?a=b", "::": "/"} {
		r.Header.Set("Referer", referer)
		if got := refererPath(r); got != want {
			t.Errorf("from %q: %q, want %q", referer, got, want)
		}
	}
}

func TestHomesAndSurfacesByRole(t *testing.T) {
	t.Parallel()
	person := func(roles ...plant.Role) plant.Person { return plant.Person{Roles: roles, Active: true} }
	for _, tc := range []struct {
		who   plant.Person
		home  string
		opens string
	}{
		{person(plant.Operator), "/station", "station board"},
		{person(plant.Supervisor), "/board", "station board desk"},
		{person(plant.Engineer), "/desk", "board desk admin"},
		{person(plant.Administrator), "/admin", "admin"},
		{person(plant.Operator, plant.Supervisor), "/board", "station board desk"},
		{person(plant.Administrator, plant.Engineer), "/desk", "board desk admin"},
		{plant.Person{Roles: plant.Roles{plant.Engineer}}, "/desk", ""},
	} {
		if got := Home(tc.who); got != tc.home {
			t.Errorf("%v begins at %s, want %s", tc.who.Roles, got, tc.home)
		}
		for _, s := range []string{"station", "board", "desk", "admin"} {
			if got, want := MayOpen(tc.who, "/"+s+"/x?y=z"), strings.Contains(tc.opens, s); got != want {
				t.Errorf("%v may open %s: %v, want %v", tc.who.Roles, s, got, want)
			}
		}
		if MayOpen(tc.who, "/sign-out") || MayOpen(tc.who, "/") {
			t.Errorf("%v is led to what is no page", tc.who.Roles)
		}
	}
}

func TestTopicsAskForTheRightsOfTheirPage(t *testing.T) {
	t.Parallel()
	const id = "01900000-0000-7000-8000-000000000001"
	for topic, want := range map[string]plant.Action{
		"board": plant.SeeBoard, "station/" + id: plant.TakeRounds, "chart/" + id: plant.SeeDesk,
		"": 0, "boards": 0, "station/": 0, "station/x": 0, "chart/" + id + "/": 0, "station/" + strings.ToUpper("0190abcd") + id[8:]: 0, "admin": 0,
	} {
		got, ok := TopicAction(topic)
		if got != want || ok != (want != 0) {
			t.Errorf("%q: %v, %v; want %v", topic, got, ok, want)
		}
	}
}

func TestTopicsNameTheLanguageOfTheirPage(t *testing.T) {
	t.Parallel()
	const id = "01900000-0000-7000-8000-000000000001"
	for topic, want := range map[string]string{
		"station/" + id: "en", "station/" + id + "@de": "de", "station/" + id + "@es": "es", "board": "en",
		// Spelt otherwise, not there, or not spoken by the surface: the hub would render
		// it for nobody.
		"station/" + id + "@en": "", "station/" + id + "@de-AT": "", "station/" + id + "@": "", "station/" + id + "@de@de": "", "board@de": "",
	} {
		got := ""
		if base, w, ok := TopicLanguage(topic); ok && strings.HasPrefix(topic, base) {
			got = w.Lang()
		}
		if _, may := TopicAction(topic); got != want || may != (want != "") {
			t.Errorf("%q is in %q, may be watched: %v; want %q", topic, got, may, want)
		}
	}
	german := words.For("de")
	if got := topicsIn(german, []string{"station/" + id}); len(got) != 1 || got[0] != "station/"+id+"@de" {
		t.Errorf("a German page watches %v", got)
	}
	if got := InEveryLanguage(Board, TopicBoard); len(got) != 1 {
		t.Errorf("the board is said in English alone, its topics are %v", got)
	}
	if got := InEveryLanguage(Station, "station/"+id); len(got) < 3 || got[0] != "station/"+id {
		t.Errorf("the station has the topics %v", got)
	}
}
