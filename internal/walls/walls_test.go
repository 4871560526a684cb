package walls

import (
	"bytes"
	"encoding/json"
	"errors"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"testing"
)

type pkg struct {
	ImportPath string
	Dir        string
	Imports    []string
	Deps       []string
	Standard   bool
}

// ours lists the packages of the module with all that they depend on.
func ours(t *testing.T) []pkg {
	t.Helper()
	cmd := exec.Command("go", "list", "-json=ImportPath,Dir,Imports,Deps", "holdfast/...")
	cmd.Stderr = os.Stderr
	out, err := cmd.Output()
	if err != nil {
		t.Fatal(err)
	}
	var list []pkg
	for dec := json.NewDecoder(bytes.NewReader(out)); ; {
		var p pkg
		if err := dec.Decode(&p); errors.Is(err, io.EOF) {
			return list
		} else if err != nil {
			t.Fatal(err)
		}
		list = append(list, p)
	}
}

func under(path string, prefixes ...string) bool {
	for _, p := range prefixes {
		if path == p || strings.HasPrefix(path, p+"/") {
			return true
		}
	}
	return false
}

func standard(path string) bool {
	first, _, _ := strings.Cut(path, "/")
	return !strings.Contains(first, ".") && first != "holdfast"
}

// fold are the packages that the fold is made of; they also compile to WebAssembly.
var fold = []string{"holdfast/internal/spc/watch", "holdfast/internal/spc/limits", "holdfast/internal/spc/factor"}

func TestImportsRunOneWay(t *testing.T) {
	t.Parallel()
	// The library for ids knows how to be a database value and reads the machine's
	// address; that is as near as the domain comes to either.
	network := []string{"net/http", "database/sql", "github.com/jackc/pgx/v5"}
	surfaces := []string{"holdfast/web/station", "holdfast/web/board", "holdfast/web/desk", "holdfast/web/admin", "holdfast/web/calls", "holdfast/web/api", "holdfast/web/account"}
	for _, p := range ours(t) {
		bad := func(dep, why string) { t.Errorf("%s depends on %s: %s", p.ImportPath, dep, why) }
		for _, dep := range p.Deps {
			switch {
			case under(p.ImportPath, fold...) && !standard(dep) && !under(dep, "holdfast/internal/spc"):
				bad(dep, "the fold uses the standard library only")
			case under(p.ImportPath, "holdfast/internal/spc") && !standard(dep) && !under(dep, "holdfast/internal/spc", "gonum.org/v1/gonum"):
				bad(dep, "statistics use the standard library and gonum only")
			case under(p.ImportPath, "holdfast/internal/spc", "holdfast/internal/plant") && slices.Contains(network, dep):
				bad(dep, "statistics and domain know no database and no network")
			case under(p.ImportPath, "holdfast/internal/plant") && under(dep, "holdfast/internal/store", "holdfast/internal/live", "holdfast/internal/auth", "holdfast/web"):
				bad(dep, "the domain knows nobody above it")
			case under(p.ImportPath, "holdfast/internal/store") && under(dep, "holdfast/web", "holdfast/internal/live", "holdfast/internal/auth"):
				bad(dep, "the store knows no pages")
			case under(p.ImportPath, "holdfast/internal/live", "holdfast/internal/auth", "holdfast/internal/localpg") && under(dep, "holdfast/web"):
				bad(dep, "it does not know the pages")
			case under(p.ImportPath, "holdfast/web") && under(dep, "holdfast/internal/store"):
				bad(dep, "pages declare the methods that they call")
			}
			if under(p.ImportPath, surfaces...) && under(dep, surfaces...) && surface(p.ImportPath) != surface(dep) {
				bad(dep, "surfaces do not import each other")
			}
		}
		if under(p.ImportPath, "holdfast/internal/plant", "holdfast/internal/spc") && slices.Contains(p.Imports, "time") {
			noClock(t, p)
		}
		if under(p.ImportPath, "holdfast/web", "holdfast/internal/plant", "holdfast/internal/spc") {
			noSQL(t, p)
		}
	}
}

func surface(path string) string { return strings.Split(path, "/")[2] }

// noClock demands that the time is handed in.
func noClock(t *testing.T, p pkg) {
	t.Helper()
	for _, m := range search(t, p.Dir, regexp.MustCompile(`time\.(Now|Since|Until|After|Tick|Sleep)\(`)) {
		// The simulations of the rule price stop after a stated time; that is their contract.
		if !under(p.ImportPath, "holdfast/internal/spc/runlength") {
			t.Errorf("%s reads a clock", m)
		}
	}
}

func noSQL(t *testing.T, p pkg) {
	t.Helper()
	for _, m := range search(t, p.Dir, regexp.MustCompile(`(?i)"?\b(select .+ from|insert into|update \w+ set|delete from) `)) {
		t.Errorf("%s speaks SQL", m)
	}
}

func search(t *testing.T, dir string, what *regexp.Regexp) []string {
	t.Helper()
	files, err := filepath.Glob(filepath.Join(dir, "*.go"))
	if err != nil {
		t.Fatal(err)
	}
	var out []string
	for _, f := range files {
		if strings.HasSuffix(f, "_test.go") {
			continue
		}
		body, err := os.ReadFile(f)
		if err != nil {
			t.Fatal(err)
		}
		for i, line := range strings.Split(string(body), "\n") {
			if code, _, _ := strings.Cut(line, "//"); what.MatchString(code) {
				out = append(out, filepath.Base(f)+":"+strings.TrimSpace(line)+" (line "+strconv.Itoa(i+1)+")")
			}
		}
	}
	return out
}
