package static

import (
	"io/fs"
	"net/http"
	"net/http/httptest"
	"path"
	"regexp"
	"strings"
	"testing"
	"testing/fstest"
)

func get(t *testing.T, method, target string, header ...string) *http.Response {
	t.Helper()
	r := httptest.NewRequest(method, target, nil)
	for i := 0; i+1 < len(header); i += 2 {
		r.Header.Set(header[i], header[i+1])
	}
	w := httptest.NewRecorder()
	Handler().ServeHTTP(w, r)
	return w.Result()
}

func TestHashedRequestMayBeKeptForAYear(t *testing.T) {
	t.Parallel()
	res := get(t, "GET", URL("css/base.css"))
	if res.StatusCode != 200 || res.Header.Get("Content-Type") != "text/css; charset=utf-8" {
		t.Fatalf("got %d %q", res.StatusCode, res.Header.Get("Content-Type"))
	}
	if c := res.Header.Get("Cache-Control"); c != "public, max-age=31536000, immutable" {
		t.Errorf("Cache-Control %q", c)
	}
}

func TestUnhashedOrStaleRequestIsCheckedByETag(t *testing.T) {
	t.Parallel()
	for _, target := range []string{"/static/css/base.css", "/static/css/base.css?v=000000000000"} {
		res := get(t, "GET", target)
		if res.StatusCode != 200 || res.Header.Get("Cache-Control") != "no-cache" {
			t.Fatalf("%s: %d %q", target, res.StatusCode, res.Header.Get("Cache-Control"))
		}
		again := get(t, "GET", target, "If-None-Match", res.Header.Get("ETag"))
		if again.StatusCode != http.StatusNotModified {
			t.Errorf("%s: second request got %d, want 304", target, again.StatusCode)
		}
	}
}

func TestOnlyFilesAnswerAndOnlyToReading(t *testing.T) {
	t.Parallel()
	for _, target := range []string{"/static/", "/static/css", "/static/css/none.css", "/static/../embed.go", "/static/embed.go"} {
		if res := get(t, "GET", target); res.StatusCode != http.StatusNotFound {
			t.Errorf("%s: %d, want 404", target, res.StatusCode)
		}
	}
	if res := get(t, "POST", "/static/css/base.css"); res.StatusCode != http.StatusMethodNotAllowed {
		t.Errorf("POST: %d, want 405", res.StatusCode)
	}
}

func TestFontIsNamedAlikeByPageAndStyleSheet(t *testing.T) {
	t.Parallel()
	font := URL("fonts/atkinson-hyperlegible-next-latin-wght-normal.woff2")
	css := string(load()["css/tokens.css"].body)
	if want := `url("..` + strings.TrimPrefix(font, "/static") + `")`; !strings.Contains(css, want) {
		t.Errorf("tokens.css does not hold %s", want)
	}
	if res := get(t, "GET", font); res.Header.Get("Content-Type") != "font/woff2" {
		t.Errorf("font served as %q", res.Header.Get("Content-Type"))
	}
}

func TestBrokenReferencesAndCirclesAreFound(t *testing.T) {
	t.Parallel()
	for name, fsys := range map[string]fstest.MapFS{
		"missing": {"css/a.css": {Data: []byte(`@import url("./b.css");`)}},
		"circle":  {"js/a.js": {Data: []byte(`import "./b.js";`)}, "js/b.js": {Data: []byte(`import "./a.js";`)}},
		"kind":    {"css/a.exe": {Data: []byte(`x`)}},
	} {
		if _, err := read(fsys); err == nil {
			t.Errorf("%s: no error", name)
		}
	}
}

// A strict content policy and an offline plant: nothing is fetched from outside.
func TestStyleSheetsFetchNothingFromOutside(t *testing.T) {
	t.Parallel()
	outside := regexp.MustCompile(`(?i)(https?:)?//[a-z0-9.-]+\.[a-z]{2,}`)
	for name, a := range load() {
		if strings.HasPrefix(name, "vendor/") || path.Ext(name) != ".css" && path.Ext(name) != ".js" {
			continue
		}
		for _, line := range strings.Split(string(a.body), "\n") {
			if !strings.Contains(line, "w3.org/2000/svg") && outside.MatchString(line) {
				t.Errorf("%s: %s", name, line)
			}
		}
	}
}

func TestEveryFolderOfOthersHasItsLicence(t *testing.T) {
	t.Parallel()
	folders, err := fs.ReadDir(files, "vendor")
	if err != nil {
		t.Fatal(err)
	}
	n := 0
	for _, f := range folders {
		if !f.IsDir() {
			continue
		}
		n++
		if _, err := fs.Stat(files, path.Join("vendor", f.Name(), "LICENSE")); err != nil {
			t.Errorf("vendor/%s has no LICENSE", f.Name())
		}
	}
	if n == 0 {
		t.Error("no folders checked")
	}
	fonts, err := fs.Glob(files, "fonts/LICENSE-*")
	if err != nil || len(fonts) != 2 {
		t.Errorf("font licences: %v, %v", fonts, err)
	}
}

func TestRawColoursStandOnlyInTokens(t *testing.T) {
	t.Parallel()
	raw := regexp.MustCompile(`#[0-9a-fA-F]{3,8}\b|\brgba?\(`)
	for name, a := range load() {
		if path.Dir(name) != "css" || name == "css/tokens.css" {
			continue
		}
		if m := raw.FindString(string(a.body)); m != "" {
			t.Errorf("%s holds the raw colour %s", name, m)
		}
	}
}
