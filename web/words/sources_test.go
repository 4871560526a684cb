package words_test

import (
	"fmt"
	"go/ast"
	"go/parser"
	"go/token"
	"io/fs"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"

	"holdfast/web/words"
)

// use is one place in the sources that asks for words.
type use struct {
	at     string
	key    string // a whole key, or with prefix the literal that it begins with
	prefix bool
	args   int
}

// usesIn reads the Go files under root, the generated ones included, and lists what
// is asked of the catalogue. Outside of package words every key must be a literal or
// begin with one that ends in a point.
func usesIn(t *testing.T, root string) (uses []use, loose []string) {
	t.Helper()
	fset := token.NewFileSet()
	err := filepath.WalkDir(root, func(path string, e fs.DirEntry, err error) error {
		if err == nil && e.IsDir() && e.Name() == "testdata" && path != root {
			return fs.SkipDir
		}
		if err != nil || e.IsDir() || !strings.HasSuffix(path, ".go") || strings.HasSuffix(path, "_test.go") {
			return err
		}
		file, err := parser.ParseFile(fset, path, nil, parser.SkipObjectResolution)
		if err != nil {
			return err
		}
		own := file.Name.Name == "words"
		ast.Inspect(file, func(n ast.Node) bool {
			if lit, ok := n.(*ast.BasicLit); ok && own && lit.Kind == token.STRING {
				// The package's own functions build keys from parts.
				if s, err := strconv.Unquote(lit.Value); err == nil && strings.HasPrefix(s, "ui.") {
					uses = append(uses, use{key: s, prefix: true, args: -1})
				}
			}
			call, ok := n.(*ast.CallExpr)
			if !ok || own || len(call.Args) == 0 {
				return true
			}
			sel, ok := call.Fun.(*ast.SelectorExpr)
			if !ok || sel.Sel.Name != "T" {
				return true
			}
			u := use{at: fset.Position(call.Pos()).String(), args: len(call.Args) - 1}
			if call.Ellipsis.IsValid() {
				u.args = -1
			}
			arg := call.Args[0]
			for {
				b, ok := arg.(*ast.BinaryExpr)
				if !ok {
					break
				}
				arg, u.prefix = b.X, true
			}
			lit, ok := arg.(*ast.BasicLit)
			if ok {
				u.key, _ = strconv.Unquote(lit.Value)
			}
			if !ok || u.prefix && !strings.HasSuffix(u.key, ".") {
				loose = append(loose, u.at)
				return true
			}
			uses = append(uses, u)
			return true
		})
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
	return uses, loose
}

var verb = regexp.MustCompile(`%(?:\[(\d+)\])?[-+# 0]*(?:\.\d+)?([a-zA-Z%])`)

// argsOf is how many arguments a format takes.
func argsOf(format string) int {
	most, next := 0, 0
	for _, m := range verb.FindAllStringSubmatch(format, -1) {
		if m[2] == "%" {
			continue
		}
		next++
		if m[1] != "" {
			next, _ = strconv.Atoi(m[1])
		}
		most = max(most, next)
	}
	return most
}

func messageArgs(m words.Message) int {
	most := m.Plural
	for _, f := range m.Formats() {
		most = max(most, argsOf(f))
	}
	return most
}

func TestEveryWordIsThereAndUsedAsItIsWritten(t *testing.T) {
	t.Parallel()
	uses, loose := usesIn(t, "..")
	for _, at := range loose {
		t.Errorf("%s: the key must be a literal, or begin with one that ends in a point", at)
	}
	if len(uses) < 20 {
		t.Fatalf("only %d uses were found; the sources were not read", len(uses))
	}
	all := words.English()
	used := make(map[string]bool)
	for _, u := range uses {
		found := false
		for key, m := range all {
			if key != u.key && !(u.prefix && strings.HasPrefix(key, u.key)) {
				continue
			}
			found, used[key] = true, true
			takes := messageArgs(m)
			if u.args >= 0 && (takes > u.args || !u.prefix && takes < u.args) {
				t.Errorf("%s: %q takes %d arguments and gets %d", u.at, key, takes, u.args)
			}
		}
		if !found {
			t.Errorf("%s: %q is not in the catalogue", u.at, u.key)
		}
	}
	for key := range all {
		if !used[key] {
			t.Errorf("%q is in the catalogue and used nowhere", key)
		}
	}
}

func TestTheReaderOfSourcesFindsMistakes(t *testing.T) {
	t.Parallel()
	for format, want := range map[string]int{"": 0, "%s to %s": 2, "%[2]d of %[3]d beyond %[1]s": 3, "100 %%": 0, "%[2]s then %d": 3, "%.2f": 1} {
		if got := argsOf(format); got != want {
			t.Errorf("%q takes %d, found %d", format, want, got)
		}
	}
	uses, loose := usesIn(t, "testdata/uses")
	got := fmt.Sprint(len(loose))
	for _, u := range uses {
		got += fmt.Sprintf(" %s/%v/%d", u.key, u.prefix, u.args)
	}
	if want := "2 x.whole/false/0 x.with/false/2 x.part./true/0"; got != want {
		t.Errorf("found %s, want %s", got, want)
	}
}
