package words_test

import (
	"fmt"
	"go/ast"
	"go/parser"
	"go/token"
	"io/fs"
	"path/filepath"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"testing"
	"testing/fstest"
	"unicode"

	"holdfast/internal/plant"
	"holdfast/web/words"
)

// sentence is one literal that becomes the message of a plant.Error.
type sentence struct{ at, text string }

// makers are the functions that make an error of a field and a format.
var makers = []string{"Invalidf", "NotFoundf", "Conflictf", "Forbiddenf"}

// sentencesIn reads the Go files under root and lists the sentences of plant.Error:
// the formats of Invalidf and its sisters, what stands as Message in an Error, and what
// is given to a function that passes its parameter "message" on to one. loose names
// the places where the sentence is no literal, so that no language could find it.
func sentencesIn(t *testing.T, root string) (found []sentence, loose []string) {
	t.Helper()
	fset := token.NewFileSet()
	packages := map[string][]*ast.File{}
	err := filepath.WalkDir(root, func(path string, e fs.DirEntry, err error) error {
		if err == nil && e.IsDir() && e.Name() == "testdata" && path != root {
			return fs.SkipDir
		}
		if err != nil || e.IsDir() || !strings.HasSuffix(path, ".go") || strings.HasSuffix(path, "_test.go") || strings.HasSuffix(path, "_templ.go") {
			return err
		}
		file, err := parser.ParseFile(fset, path, nil, parser.SkipObjectResolution)
		packages[filepath.Dir(path)] = append(packages[filepath.Dir(path)], file)
		return err
	})
	if err != nil {
		t.Fatal(err)
	}
	for _, files := range packages {
		passing := map[string]int{} // functions of the package with a parameter "message", and its place
		for _, file := range files {
			for _, d := range file.Decls {
				if f, ok := d.(*ast.FuncDecl); ok {
					if at := messageParameter(f); at >= 0 {
						passing[f.Name.Name] = at
					}
				}
			}
		}
		note := func(e ast.Expr) {
			at := fset.Position(e.Pos()).String()
			if text, ok := literal(e); ok {
				found = append(found, sentence{at, text})
			} else if !saidAlready(e) {
				loose = append(loose, at)
			}
		}
		for _, file := range files {
			for _, d := range file.Decls {
				f, _ := d.(*ast.FuncDecl)
				if f != nil && file.Name.Name == "plant" && f.Name.Name == "errorf" || f != nil && slices.Contains(makers, f.Name.Name) {
					continue
				}
				ast.Inspect(d, func(n ast.Node) bool {
					switch n := n.(type) {
					case *ast.CallExpr:
						name := calledName(n.Fun)
						if slices.Contains(makers, name) && len(n.Args) >= 2 {
							note(n.Args[1])
						}
						if _, plain := n.Fun.(*ast.Ident); plain {
							if at, ok := passing[name]; ok && at < len(n.Args) {
								note(n.Args[at])
							}
						}
					case *ast.CompositeLit:
						if isError(file, n.Type) {
							for _, el := range n.Elts {
								kv, ok := el.(*ast.KeyValueExpr)
								if ok && calledName(kv.Key) == "Message" && !(f != nil && messageParameter(f) >= 0 && calledName(kv.Value) == "message") {
									note(kv.Value)
								}
							}
						}
					}
					return true
				})
			}
		}
	}
	return found, loose
}

// isError reports whether a composite literal is a plant.Error.
func isError(file *ast.File, typ ast.Expr) bool {
	switch typ := typ.(type) {
	case *ast.Ident:
		return file.Name.Name == "plant" && typ.Name == "Error"
	case *ast.SelectorExpr:
		return calledName(typ.X) == "plant" && typ.Sel.Name == "Error"
	}
	return false
}

func calledName(e ast.Expr) string {
	switch e := e.(type) {
	case *ast.Ident:
		return e.Name
	case *ast.SelectorExpr:
		return e.Sel.Name
	}
	return ""
}

func messageParameter(f *ast.FuncDecl) int {
	at := 0
	for _, field := range f.Type.Params.List {
		for _, name := range field.Names {
			if name.Name == "message" {
				return at
			}
			at++
		}
	}
	return -1
}

// literal is the text of a string literal, or of several joined by +.
func literal(e ast.Expr) (string, bool) {
	switch e := e.(type) {
	case *ast.BasicLit:
		s, err := strconv.Unquote(e.Value)
		return s, err == nil
	case *ast.BinaryExpr:
		a, okA := literal(e.X)
		b, okB := literal(e.Y)
		return a + b, okA && okB
	}
	return "", false
}

// saidAlready reports whether an expression asks the catalogue itself.
func saidAlready(e ast.Expr) bool {
	call, ok := e.(*ast.CallExpr)
	return ok && calledName(call.Fun) == "T"
}

var quoted = strings.NewReplacer("„%s“", "%q", "«%s»", "%q")

// wordless formats, such as "%s", need no other language.
func wordless(format string) bool {
	return !strings.ContainsFunc(verb.ReplaceAllString(format, ""), unicode.IsLetter)
}

// Whoever adds a sentence adds it in the other languages too: those of the record and
// of signing in are met by operators.
func TestEveryProblemIsSaidInEveryLanguage(t *testing.T) {
	t.Parallel()
	sentences := map[string]string{}
	for _, root := range []string{"../../internal", "../../cmd", ".."} {
		found, loose := sentencesIn(t, root)
		for _, at := range loose {
			t.Errorf("%s: the sentence of a plant.Error must be a literal, so that other languages can find their own; give its parts as arguments", at)
		}
		for _, s := range found {
			if !wordless(s.text) {
				sentences[s.text] = s.at
			}
		}
	}
	if len(sentences) < 50 {
		t.Fatalf("only %d sentences were found; the sources were not read", len(sentences))
	}
	for _, lang := range others {
		d := dictionary(t, lang)
		for text, at := range sentences {
			m, ok := d["problem: "+text]
			if !ok {
				t.Errorf("%s: web/words/%s/problems.json lacks %s: add a line with this key and its %s sentence", at, lang, strconv.Quote(text), lang)
				continue
			}
			if strings.Contains(text, "%q") { // the marks of the language stand for Go's own
				m.Text = quoted.Replace(m.Text)
			}
			for _, fault := range differences(words.Message{Text: text}, m) {
				t.Errorf("web/words/%s/problems.json: %q: %s", lang, text, fault)
			}
		}
		for key := range d {
			if text, ok := strings.CutPrefix(key, "problem: "); ok && sentences[text] == "" {
				t.Errorf("web/words/%s/problems.json: %q is said nowhere: remove the line", lang, text)
			}
		}
	}
}

// others are the languages beside English, in which the station is said.
var others = []string{"de", "es"}

func dictionary(t *testing.T, lang string) words.Dictionary {
	t.Helper()
	d, err := words.Read(words.Files(), lang)
	if err != nil {
		t.Fatal(err)
	}
	return d
}

// differences says in what a translation cannot stand for the English message: other
// arguments, or an order that fmt would take in another way.
func differences(english, other words.Message) (faults []string) {
	want := map[int]string{}
	for _, f := range english.Formats() {
		for n, v := range verbsOf(f) {
			want[n] = v
		}
	}
	for form, format := range formsOf(other) {
		got := verbsOf(format)
		for n, v := range got {
			if want[n] != v {
				faults = append(faults, fmt.Sprintf("argument %d is written %%%s in %q, %%%s in English", n, v, format, want[n]))
			}
		}
		for n, v := range want {
			// The number that decides is left out where the form says it in words, and
			// what the English form leaves out.
			_, there := got[n]
			_, asked := verbsOf(english.Forms[form])[n]
			if special := form != "" && form != "other"; !there && !(special && (n == other.Plural || english.Forms[form] != "" && !asked)) {
				faults = append(faults, fmt.Sprintf("%q leaves out argument %d (%%%s)", format, n, v))
			}
		}
		for _, name := range braces.FindAllString(english.Formats()[0], -1) {
			if !strings.Contains(format, name) {
				faults = append(faults, fmt.Sprintf("%q leaves out %s", format, name))
			}
		}
		if strings.Contains(format, "%[") && strings.Count(format, "%[") != len(verb.FindAllString(strings.ReplaceAll(format, "%%", ""), -1)) {
			faults = append(faults, fmt.Sprintf("%q numbers some arguments only: number all or none", format))
		}
	}
	slices.Sort(faults)
	return slices.Compact(faults)
}

// braces are names that a script fills in.
var braces = regexp.MustCompile(`\{[a-z]+\}`)

func formsOf(m words.Message) map[string]string {
	if m.Forms == nil {
		return map[string]string{"": m.Text}
	}
	return m.Forms
}

// verbsOf lists the verbs of a format by the number of their argument.
func verbsOf(format string) map[int]string {
	out, next := map[int]string{}, 0
	for _, m := range verb.FindAllStringSubmatch(format, -1) {
		if m[2] == "%" {
			continue
		}
		next++
		if m[1] != "" {
			next, _ = strconv.Atoi(m[1])
		}
		out[next] = m[2]
	}
	return out
}

func TestTheReaderOfSentencesFindsMistakes(t *testing.T) {
	t.Parallel()
	found, loose := sentencesIn(t, "testdata/problems")
	var texts []string
	for _, s := range found {
		texts = append(texts, s.text)
	}
	slices.Sort(texts)
	if got, want := fmt.Sprint(len(loose), " ", strings.Join(texts, "|")), "2 A plain one.|Passed on.|With %d and a second line."; got != want {
		t.Errorf("found %s, want %s", got, want)
	}
	for _, tc := range []struct {
		english, other words.Message
		faults         int
	}{
		{words.Message{Text: "%d of %s"}, words.Message{Text: "%[2]s: %[1]d"}, 0},
		{words.Message{Text: "%d of %s"}, words.Message{Text: "%s: %d"}, 2},
		{words.Message{Text: "%d of %s"}, words.Message{Text: "%[2]s"}, 1},
		{words.Message{Text: "%s, %s"}, words.Message{Text: "%[2]s %s"}, 3},
		{words.Message{Text: "%d"}, words.Message{Plural: 1, Forms: map[string]string{"one": "eins", "other": "%d"}}, 0},
		{words.Message{Text: "%d"}, words.Message{Plural: 1, Forms: map[string]string{"one": "eins", "other": "viele"}}, 1},
	} {
		if got := differences(tc.english, tc.other); len(got) != tc.faults {
			t.Errorf("%v and %v: %q, want %d faults", tc.english, tc.other, got, tc.faults)
		}
	}
}

func TestProblemsAreSaidInTheLanguageOfTheReader(t *testing.T) {
	files := fstest.MapFS{"nl/problems.json": {Data: []byte(`{
		"%s has more decimals than are measured (%d).": "%s heeft meer decimalen dan er worden gemeten (%d).",
		"Say what was changed.": "Zeg wat er veranderd is."}`)}, "nl/ui.json": {Data: []byte(`{"ui.decimal-sign": ","}`)}}
	d, err := words.Read(files, "nl")
	if err != nil {
		t.Fatal(err)
	}
	if err := words.Register("nl", d); err != nil {
		t.Fatal(err)
	}
	_, err = plant.Decimal{Units: -1250, Decimals: 3}.In(1)
	for _, tc := range []struct {
		err  *plant.Error
		want string
	}{
		{err.(*plant.Error), "−1,250 heeft meer decimalen dan er worden gemeten (1)."},
		{plant.Invalidf("kind", "Say what was changed."), "Zeg wat er veranderd is."},
		{&plant.Error{Kind: plant.Conflict, Message: "Say what was changed."}, "Zeg wat er veranderd is."},
		{plant.Conflictf("", "Nobody translates %d%% of this.", 3), "Nobody translates 3% of this."},
	} {
		if got := words.For("nl").Problem(tc.err); got != tc.want {
			t.Errorf("%q, want %q", got, tc.want)
		}
		if got := words.For("en").Problem(tc.err); got != tc.err.Message {
			t.Errorf("%q, want the English %q", got, tc.err.Message)
		}
	}
}

// What a page shows of a plant.Error goes through Printer.Problem; its Message alone
// would be English on every page.
func TestPagesSayProblemsByTheCatalogue(t *testing.T) {
	t.Parallel()
	fset := token.NewFileSet()
	err := filepath.WalkDir("..", func(path string, e fs.DirEntry, err error) error {
		if err != nil || e.IsDir() || !strings.HasSuffix(path, ".go") || strings.HasSuffix(path, "_test.go") || filepath.Dir(path) == "." {
			return err
		}
		file, err := parser.ParseFile(fset, path, nil, parser.SkipObjectResolution)
		if err != nil {
			return err
		}
		problems := map[string]bool{} // variables that hold a *plant.Error
		ast.Inspect(file, func(n ast.Node) bool {
			a, ok := n.(*ast.AssignStmt)
			if !ok || len(a.Rhs) != 1 {
				return true
			}
			call, ok := a.Rhs[0].(*ast.CallExpr)
			if !ok {
				return true
			}
			if ix, ok := call.Fun.(*ast.IndexExpr); ok && calledName(ix.X) == "AsType" {
				if star, ok := ix.Index.(*ast.StarExpr); ok && isError(file, star.X) {
					problems[calledName(a.Lhs[0])] = true
				}
			}
			return true
		})
		ast.Inspect(file, func(n ast.Node) bool {
			if sel, ok := n.(*ast.SelectorExpr); ok && sel.Sel.Name == "Message" && problems[calledName(sel.X)] {
				t.Errorf("%s: say it by words.Printer.Problem, or ui.ProblemOf at a field", fset.Position(sel.Pos()))
			}
			return true
		})
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
}
