// Package static holds the style sheets, small scripts and fonts, embedded in
// the program, and serves them.
//
// URL gives an address with the content's hash. A request that carries the
// right hash may be kept for a year; any other is checked against an ETag. The
// addresses inside a style sheet or script ("../fonts/x.woff2", "./y.js") are
// stamped the same way when the program starts, so that a font is fetched once
// whether a page or a style sheet names it.
//
// Packages of others are in vendor, each with its licence beside it.
package static

import (
	"bytes"
	"crypto/sha256"
	"embed"
	"encoding/hex"
	"fmt"
	"io/fs"
	"net/http"
	"path"
	"regexp"
	"sort"
	"strings"
	"sync"
	"time"
)

//go:embed css js fonts vendor
var files embed.FS

// Prefix is the path under which Handler expects its requests.
const Prefix = "/static/"

type asset struct {
	body []byte
	kind string // content type
	hash string
}

// kinds are set here, since the tables of operating systems differ.
var kinds = map[string]string{
	".css":   "text/css; charset=utf-8",
	".js":    "text/javascript; charset=utf-8",
	".woff2": "font/woff2",
	".svg":   "image/svg+xml",
	".txt":   "text/plain; charset=utf-8",
	".md":    "text/plain; charset=utf-8",
	"":       "text/plain; charset=utf-8", // LICENSE
}

var load = sync.OnceValue(func() map[string]*asset {
	assets, err := read(files)
	if err != nil {
		panic("static: " + err.Error()) // the embedded files are part of the program
	}
	return assets
})

// reference is an address relative to the file that holds it.
var reference = regexp.MustCompile(`(url\(|from |import )"(\.\.?/[^"?]+)"`)

func read(fsys fs.FS) (map[string]*asset, error) {
	assets := make(map[string]*asset)
	err := fs.WalkDir(fsys, ".", func(name string, e fs.DirEntry, err error) error {
		if err != nil || e.IsDir() {
			return err
		}
		body, err := fs.ReadFile(fsys, name)
		if err != nil {
			return err
		}
		kind, ok := kinds[path.Ext(name)]
		if !ok {
			return fmt.Errorf("%s: no content type for this ending", name)
		}
		assets[name] = &asset{body: body, kind: kind}
		return nil
	})
	if err != nil {
		return nil, err
	}
	names := make([]string, 0, len(assets))
	for name := range assets {
		names = append(names, name)
	}
	sort.Strings(names)
	for _, name := range names {
		if err := stamp(assets, name, nil); err != nil {
			return nil, err
		}
	}
	return assets, nil
}

// stamp adds hashes to the addresses in a file, dependencies first, and then
// hashes the file itself.
func stamp(assets map[string]*asset, name string, via []string) error {
	a := assets[name]
	if a.hash != "" {
		return nil
	}
	for _, v := range via {
		if v == name {
			return fmt.Errorf("%s refers to itself through %s", name, strings.Join(via, ", "))
		}
	}
	var failed error
	if own(name) {
		a.body = reference.ReplaceAllFunc(a.body, func(m []byte) []byte {
			part := reference.FindSubmatch(m)
			target := path.Join(path.Dir(name), string(part[2]))
			to, ok := assets[target]
			if !ok {
				failed = fmt.Errorf("%s refers to %s, which is not there", name, part[2])
				return m
			}
			if err := stamp(assets, target, append(via, name)); err != nil {
				failed = err
				return m
			}
			return fmt.Appendf(nil, `%s"%s?v=%s"`, part[1], part[2], to.hash)
		})
	}
	sum := sha256.Sum256(a.body)
	a.hash = hex.EncodeToString(sum[:6])
	return failed
}

// own says whether addresses in the file are ours to stamp.
func own(name string) bool {
	ext := path.Ext(name)
	return !strings.HasPrefix(name, "vendor/") && (ext == ".css" || ext == ".js")
}

// URL returns the address of a file, with its hash: URL("css/base.css"). It
// panics for a name that is not there, since names are written in the program.
func URL(name string) string {
	a, ok := load()[name]
	if !ok {
		panic("static: no file " + name)
	}
	return Prefix + name + "?v=" + a.hash
}

// URLs returns the addresses of all files whose name begins with prefix, in
// order: a list that a station can keep for times without a network.
func URLs(prefix string) []string {
	var out []string
	for name := range load() {
		if strings.HasPrefix(name, prefix) {
			out = append(out, URL(name))
		}
	}
	sort.Strings(out)
	return out
}

// Handler serves the files under Prefix.
func Handler() http.Handler {
	assets := load()
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		if r.Method != http.MethodGet && r.Method != http.MethodHead {
			w.Header().Set("Allow", "GET, HEAD")
			http.Error(w, "Only reading is possible here.", http.StatusMethodNotAllowed)
			return
		}
		name := strings.TrimPrefix(r.URL.Path, Prefix)
		a, ok := assets[name]
		if !ok {
			http.Error(w, "There is no such file.", http.StatusNotFound)
			return
		}
		h := w.Header()
		h.Set("Content-Type", a.kind)
		h.Set("X-Content-Type-Options", "nosniff")
		h.Set("ETag", `"`+a.hash+`"`)
		if r.URL.Query().Get("v") == a.hash {
			h.Set("Cache-Control", "public, max-age=31536000, immutable")
		} else {
			h.Set("Cache-Control", "no-cache")
		}
		http.ServeContent(w, r, "", time.Time{}, bytes.NewReader(a.body))
	})
}
