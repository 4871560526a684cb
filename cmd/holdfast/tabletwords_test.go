package main

import (
	"slices"
	"strings"
	"testing"

	"holdfast/internal/browsertest"
	"holdfast/web/words"
)

// tabletSizes are a tablet lying, a smaller one, and one upright.
var tabletSizes = [][2]int64{{1280, 800}, {1024, 768}, {800, 1280}}

// speak makes a browser ask for a language, as the choice at the door does.
func speak(p *browsertest.Page, lang string) {
	p.Value("document.cookie = \"" + words.Cookie + "=" + lang + "; path=/\"")
}

// fitsATablet opens a page in a language and demands that nothing of it is cut off.
func fitsATablet(p *browsertest.Page, lang, path string) {
	p.Open(path)
	p.Want(path+": its language", "document.documentElement.lang", lang)
	for _, size := range tabletSizes {
		p.Size(size[0], size[1])
		p.NothingOverflows(lang + " " + path)
	}
}

// TestTabletsSpeakLongWords opens what stands on a tablet in the languages that are longer
// than English: what a person sees at a station, and what comes before somebody is there.
func TestTabletsSpeakLongWords(t *testing.T) {
	t.Parallel()
	w := serveWorks(t)
	b := browsertest.Start(t)
	person, nobodyThere, stranger := w.windowOf(t, b, atTablet), w.windowOf(t, b, bare), w.windowOf(t, b, nobody)
	stranger.Open("/sign-in")
	var stations []string
	for route, sights := range w.pageTable() {
		if strings.HasPrefix(route, "GET /station/") {
			for _, s := range sights {
				stations = append(stations, s.at...)
			}
		}
	}
	slices.Sort(stations)
	stations = slices.Compact(stations)
	for _, lang := range []string{"de", "es"} {
		for _, p := range []*browsertest.Page{person, nobodyThere, stranger} {
			speak(p, lang)
		}
		for _, path := range append(stations, "/station/nowhere") {
			fitsATablet(person, lang, path)
		}
		for _, path := range []string{"/sign-in", "/sign-in?locked=yes", "/sign-in?password=yes", "/enrol"} {
			fitsATablet(nobodyThere, lang, path)
		}
		for _, path := range []string{"/sign-in", "/enrol"} {
			fitsATablet(stranger, lang, path)
		}
		// Both warnings lie over the bar.
		for _, warning := range []string{"[data-lock-text]", "[data-session-text]"} {
			person.Open(stations[0])
			person.WaitFor(find(warning))
			person.Value(find(warning) + `.hidden = false`)
			person.Value(find(warning) + `.querySelector("span").textContent = Object.values(` + find(warning) + `.querySelector("span").dataset)[0]`)
			for _, size := range tabletSizes {
				person.Size(size[0], size[1])
				for _, f := range person.Overflows() {
					if !strings.Contains(f, " lies on ") { // it lies on the bar
						t.Errorf("%s, the warning %s: %s", lang, warning, f)
					}
				}
			}
		}
	}
}
