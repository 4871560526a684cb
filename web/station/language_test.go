package station_test

import (
	"fmt"
	"net/http"
	"net/url"
	"strconv"
	"testing"
	"time"

	"holdfast/internal/browsertest"
	"holdfast/web/words"
)

// TestNothingOverflowsInAnyLanguage opens every page of the station at the sizes of a
// tablet, lying and upright, in the languages that are longer than English.
func TestNothingOverflowsInAnyLanguage(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	matter := s.open(t)
	hold := s.MustRecord(t, s.Force, 610, 612, 691, 611, 609, 613)
	s.Clock.Advance(time.Minute)
	tb := s.tablet(t)
	pages := []string{
		"/sign-in", "/station?all", s.at(), s.at() + "?measure=" + s.Diameter.ID.String(), s.at("round", hold.Round.String()), matter,
		s.at("change"), s.at("change", s.Mass.ID.String()), s.at("change", s.Diameter.ID.String()), s.at("machine", s.Machine.ID.String()),
		s.at("correct"), "/station/nowhere",
	}
	for _, lang := range words.Languages() {
		if lang != "de" && lang != "es" {
			continue
		}
		speak(t, tb, lang)
		for _, size := range [][2]int64{{1280, 800}, {1024, 768}, {800, 1280}} {
			tb.Size(size[0], size[1])
			for _, path := range pages {
				tb.Open(path)
				tb.Want(path, `document.documentElement.lang`, lang)
				tb.NothingOverflows(lang + " " + path)
				tb.Want(fmt.Sprint(lang, " ", path, " at ", size[0], ": rows of the top bar"), `document.body.className !== "station" || document.querySelector(".topbar").offsetHeight <= 64`, "true")
			}
		}
		tb.Open(s.at())
		tb.Click(".language summary")
		tb.NothingOverflows(lang + ", the menu of languages")
		tb.Accessible(lang + ", the menu of languages")
	}
}

// speak chooses a language as a person does, in the menu of the station.
func speak(t *testing.T, tb *browsertest.Page, lang string) {
	t.Helper()
	tb.Size(1280, 800)
	tb.Open("/station?all")
	tb.Click(".language summary")
	tb.Click(`.language [value="` + lang + `"]`)
	tb.WaitFor(`document.documentElement.lang === "` + lang + `"`)
}

// TestNumbersAreTypedAndShownInTheLanguage keys a round on a German tablet: the decimal
// key writes the comma, what was typed and what comes of it has commas, and an older
// point is taken as well.
func TestNumbersAreTypedAndShownInTheLanguage(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.steady(t)
	s.Clock.Advance(time.Minute)
	tb := s.tablet(t)
	speak(t, tb, "de")
	tb.Open(s.at() + "?measure=" + s.Diameter.ID.String())
	tb.WaitFor(`document.querySelector("[data-scripted]")`)
	tb.Want("the question", theHeading, "Teil 1 von 5 messen")
	for _, k := range []string{"1", "4", ".", "9", "9", "4"} {
		tb.Click(`[data-key="` + k + `"]`)
	}
	tb.Want("typed by the keypad", theValue, "14,994")
	tb.Keys("\r14.989\r")
	tb.Want("average so far", theAverage, "14,9915")
	tb.Click(`[name="entry"][value="deviation"]`)
	tb.Click(`[name="entry"][value="full"]`)
	tb.Want("there and back", `document.querySelector("[data-reading]").value`, "14,994")
	tb.Value(`document.querySelector('[data-reading][id$="-2"]').focus()`)
	tb.Keys("x\r")
	tb.Want("what is wrong", theProblem, "Teil 3: Das ist keine Zahl. Geben Sie sie neu ein.")
	tb.Keys("14,996\r14,991\r14,992\r")
	tb.WaitFor(`document.activeElement.matches("[data-main]")`)
	tb.Value(`await new Promise((done) => setTimeout(done, 700))`)
	tb.Keys("\r")
	tb.WaitFor(`document.querySelector("[data-testid=verdict]")`)
	tb.Want("verdict", `document.querySelector("h1").textContent`, "Prozess in Ruhe lassen")
	tb.Want("the mean", `document.querySelector(".fact b").textContent`, "14,9924\u00a0mm")
}

// TestRefusalsAreInTheLanguage: what the record says against something is said to a
// Spanish operator in Spanish.
func TestRefusalsAreInTheLanguage(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	b := s.signIn(t, s.Operator)
	at, err := url.Parse(s.url)
	if err != nil {
		t.Fatal(err)
	}
	b.HTTP.Jar.SetCookies(at, []*http.Cookie{{Name: words.Cookie, Value: "es", Path: "/"}})
	form := b.get(s.at()+"?measure="+s.Diameter.ID.String()).is(http.StatusOK).round(s.Diameter, "14.991", "14.992", "14.990", "14.991", "14.992")
	form.Set("taken", strconv.FormatInt(s.Clock.Now().Add(-240*time.Hour).UnixMilli(), 10))
	form.Set("sent", strconv.FormatInt(s.Clock.Now().UnixMilli(), 10))
	b.post(s.at("round"), form).is(http.StatusUnprocessableEntity).says("hace más de 7 días", `lang="es"`).saysNot("This round")
	b.get("/station/01900000-0000-7000-8000-000000000001").is(http.StatusNotFound).says("Esa estación no existe.")
}
