package ui

import (
	"context"
	"io"
	"net/http"
	"net/http/httptest"
	"net/url"
	"regexp"
	"strings"
	"testing"
	"time"

	"github.com/a-h/templ"
	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/words"
	"holdfast/web/words/wordstest"
)

func frame(t *testing.T) Frame {
	return Frame{
		Person: plant.Person{Name: "Operator <1>", Roles: plant.Roles{plant.Operator}, Active: true}, SignedIn: true,
		Plant: plant.Plant{Name: "Kestrel Row", Location: berlin(t), Demo: true},
		Now:   time.Date(2026, 3, 12, 11, 24, 0, 0, time.UTC),
	}
}

func pageOf(t *testing.T, r *http.Request, change func(*Shell)) string {
	t.Helper()
	s := ShellFor(r, Board, "Board")
	if change != nil {
		change(&s)
	}
	content := templ.Raw("<h1>Lines</h1>")
	return rendered(t, templ.ComponentFunc(func(c context.Context, w io.Writer) error {
		return Page(s).Render(templ.WithChildren(c, content), w)
	}))
}

func TestPageHasWhatEveryPageHas(t *testing.T) {
	t.Parallel()
	r := WithFrame(httptest.NewRequest("GET", "/board?line=2", nil), frame(t))
	html := pageOf(t, r, func(s *Shell) {
		s.Topics = []string{TopicBoard}
		s.Bar = templ.Raw(`<span class="place">Hall 1</span>`)
	})
	mustContain(t, html,
		`<html lang="en" data-theme="day">`, `<title>Board · Kestrel Row</title>`, `<a class="skip" href="#main">`,
		`<main id="main" tabindex="-1"><h1>Lines</h1></main>`, `<span class="place">Hall 1</span>`, `Operator &lt;1&gt;`,
		`data-testid="demo"`, `data-live="/live?topic=board"`, `data-sign-in="/sign-in?to=%2Fboard%3Fline%3D2"`,
		`data-live-state`, `data-live-off="not live since {time}"`, `data-live-zone="Europe/Berlin"`, `as of 12:24`,
		`name="to" value="/board?line=2"`, `action="/sign-out"`, `/static/css/board.css?v=`, `/static/js/live.js?v=`)
	mustNotContain(t, html, "[ui.")

	r = WithFrame(httptest.NewRequest("GET", "/board", nil), Frame{})
	html = pageOf(t, r, func(s *Shell) { s.OwnMain = true })
	mustNotContain(t, html, `data-testid="demo"`, "data-live", "live.js", "/sign-out", `<main`)
	html = pageOf(t, r, func(s *Shell) { s.Bare = true })
	mustNotContain(t, html, "topbar")
}

// The content policy refuses script, style and handlers that stand in a page.
func TestPagesHoldNothingInline(t *testing.T) {
	t.Parallel()
	r := WithFrame(httptest.NewRequest("GET", "/board", nil), frame(t))
	html := pageOf(t, r, func(s *Shell) { s.Topics = []string{TopicBoard} })
	for _, bad := range []string{`(?i)<script(?:[^>]*)>[^<]`, `(?i)<style`, `(?i)\sstyle=`, `(?i)\son[a-z]+=`, `(?i)javascript:`} {
		if m := regexp.MustCompile(bad).FindString(html); m != "" {
			t.Errorf("the page holds %q", m)
		}
	}
}

func TestEveryWordOfThePageComesFromTheCatalogue(t *testing.T) {
	t.Parallel()
	f := frame(t)
	f.Words = wordstest.Register(t)
	html := pageOf(t, WithFrame(httptest.NewRequest("GET", "/board", nil), f), func(s *Shell) {
		s.Title, s.Topics = "", []string{TopicBoard}
	})
	mustContain(t, html, `lang="en-XA"`)
	texts := regexp.MustCompile(`>([^<]+)<`).FindAllStringSubmatch(html, -1)
	for _, m := range texts {
		text := strings.TrimSpace(m[1])
		if text == "" || text == "Lines" || strings.Contains(text, "Kestrel Row") || strings.HasPrefix(text, "Operator") {
			continue
		}
		if !strings.HasPrefix(text, "⟦") || !strings.HasSuffix(text, "⟧") {
			t.Errorf("%q bypasses the catalogue or is cut off", text)
		}
	}
}

func TestThemeIsKeptAndLeadsBack(t *testing.T) {
	t.Parallel()
	post := func(form url.Values) *http.Response {
		r := httptest.NewRequest("POST", "/theme", strings.NewReader(form.Encode()))
		r.Header.Set("Content-Type", "application/x-www-form-urlencoded")
		w, _ := try(r, SetTheme)
		return w.Result()
	}
	res := post(url.Values{"theme": {"night"}, "to": {"/board?x=1"}})
	if res.StatusCode != http.StatusSeeOther || res.Header.Get("Location") != "/board?x=1" {
		t.Fatalf("%d to %s", res.StatusCode, res.Header.Get("Location"))
	}
	r := httptest.NewRequest("GET", "/board", nil)
	r.AddCookie(res.Cookies()[0])
	if ThemeOf(r) != Night {
		t.Error("the night theme was not kept")
	}
	mustContain(t, pageOf(t, r, nil), `data-theme="night"`, `name="theme" value="day"`)
	res = post(url.Values{"theme": {"<script>"}, "to": {"//evil.example"}})
	if res.Header.Get("Location") != "/" || res.Cookies()[0].Value != "day" {
		t.Errorf("to %q with %q", res.Header.Get("Location"), res.Cookies()[0].Value)
	}
}

func TestRequire(t *testing.T) {
	t.Parallel()
	operator := plant.Person{Roles: plant.Roles{plant.Operator}, Active: true}
	gone := operator
	gone.Active = false
	for _, tc := range []struct {
		name   string
		method string
		header [2]string
		frame  Frame
		status int
		to     string
	}{
		{"may", "GET", [2]string{}, Frame{Person: operator, SignedIn: true}, 200, ""},
		{"nobody opens a page", "GET", [2]string{}, Frame{}, 303, "/sign-in?to=%2Fx%3Fa%3Db"},
		{"nobody posts a form", "POST", [2]string{"Referer", "http://example.com/station/7"}, Frame{}, 303, "/sign-in?to=%2Fstation%2F7"},
		{"nobody's script", "POST", [2]string{"Sec-Fetch-Dest", "empty"}, Frame{}, 401, ""},
		{"nobody's program", "GET", [2]string{"Accept", "application/json"}, Frame{}, 401, ""},
		{"no longer active", "GET", [2]string{}, Frame{Person: gone, SignedIn: true}, 403, ""},
		{"another role", "GET", [2]string{}, Frame{Person: plant.Person{Roles: plant.Roles{plant.Administrator}, Active: true}, SignedIn: true}, 403, ""},
	} {
		r := httptest.NewRequest(tc.method, "http://example.com/x?a=b", nil)
		if tc.header[0] != "" {
			r.Header.Set(tc.header[0], tc.header[1])
		}
		w := httptest.NewRecorder()
		reached := false
		Require(plant.TakeRounds, plant.SeeBoard)(http.HandlerFunc(func(http.ResponseWriter, *http.Request) { reached = true })).ServeHTTP(w, WithFrame(r, tc.frame))
		if w.Code != tc.status || w.Header().Get("Location") != tc.to || reached != (tc.status == 200) {
			t.Errorf("%s: %d to %q, reached %v", tc.name, w.Code, w.Header().Get("Location"), reached)
		}
	}
}

func TestAStationIsRemembered(t *testing.T) {
	t.Parallel()
	id := uuid.MustParse("01900000-0000-7000-8000-000000000001")
	w := httptest.NewRecorder()
	RememberStation(w, httptest.NewRequest("GET", "/", nil), id)
	r := httptest.NewRequest("GET", "/", nil)
	r.AddCookie(w.Result().Cookies()[0])
	if got, ok := LastStation(r); !ok || got != id {
		t.Errorf("remembered %v, %v", got, ok)
	}
	again := httptest.NewRecorder()
	RememberStation(again, r, id)
	if len(again.Result().Cookies()) != 0 {
		t.Error("the cookie is written again with nothing new in it")
	}
	r = httptest.NewRequest("GET", "/", nil)
	r.AddCookie(&http.Cookie{Name: "station", Value: "../../admin"})
	if _, ok := LastStation(r); ok {
		t.Error("a cookie that is no id was believed")
	}
}

func TestFrameHasDefaults(t *testing.T) {
	t.Parallel()
	f := FrameOf(httptest.NewRequest("GET", "/", nil))
	if f.Words != words.For("en") || f.Theme != Day || f.Plant.Location == nil || f.Now.IsZero() || f.SignedIn {
		t.Errorf("got %+v", f)
	}
}
