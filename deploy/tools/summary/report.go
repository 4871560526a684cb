package main

import (
	"bufio"
	"encoding/json"
	"fmt"
	"io"
	"maps"
	"slices"
	"strings"
)

// event is one line of `go test -json`; see `go doc test2json`.
type event struct {
	Action      string
	Package     string
	ImportPath  string // of a package being built
	Test        string
	Elapsed     float64 // seconds
	Output      string
	FailedBuild string // import path of what did not build
}

// report turns events into counts and text. It is done with a package when the
// package's own result arrives, so no output is kept longer than that.
type report struct {
	out            io.Writer
	packages       map[string]*packageRun
	builds         map[string]*strings.Builder // what the compiler said
	passed, failed int
}

// packageRun is what is known of a package whose tests are running.
type packageRun struct {
	output map[string]*strings.Builder // by test; "" is the package's own
	result map[string]string           // action that ended a test; "" while it runs
	order  []string                    // tests as they began
}

func newReport(out io.Writer) *report {
	return &report{out: out, packages: make(map[string]*packageRun), builds: make(map[string]*strings.Builder)}
}

// read handles every event. A line that is no event is shown as it is: the go
// command prints some of its own errors so.
func (r *report) read(in io.Reader) error {
	lines := bufio.NewReader(in)
	for {
		line, err := lines.ReadBytes('\n')
		if len(line) > 0 {
			var e event
			if json.Unmarshal(line, &e) == nil && e.Action != "" {
				r.handle(e)
			} else {
				fmt.Fprintf(r.out, "      %s", line)
			}
		}
		if err == io.EOF {
			return nil
		}
		if err != nil {
			return err
		}
	}
}

func (r *report) handle(e event) {
	switch e.Action {
	case "build-output":
		write(r.builds, e.ImportPath, e.Output)
		return
	case "build-fail":
		return // the package's own failure names it
	}
	p := r.packages[e.Package]
	if p == nil {
		p = &packageRun{output: make(map[string]*strings.Builder), result: make(map[string]string)}
		r.packages[e.Package] = p
	}
	switch e.Action {
	case "output":
		write(p.output, e.Test, e.Output)
	case "run":
		if _, known := p.result[e.Test]; !known {
			p.order = append(p.order, e.Test)
		}
		p.result[e.Test] = ""
	case "pass", "fail", "skip":
		if e.Test == "" {
			r.close(e, p)
			return
		}
		p.result[e.Test] = e.Action
		if e.Action == "pass" {
			delete(p.output, e.Test)
		}
	}
}

// close counts and prints a package that is done.
func (r *report) close(e event, p *packageRun) {
	delete(r.packages, e.Package)
	var passed int
	var bad []string
	for _, test := range p.order {
		result := p.result[test]
		parent := slices.ContainsFunc(p.order, func(other string) bool { return strings.HasPrefix(other, test+"/") })
		switch {
		case result == "pass":
			if !parent {
				passed++
			}
		case result == "fail" && parent && p.anyBelow(test):
			// Its subtests tell. Its own output is shown with them.
			r.show(p, test)
		default:
			bad = append(bad, test)
		}
	}
	r.passed += passed
	for _, test := range bad {
		r.failed++
		switch p.result[test] {
		case "skip":
			fmt.Fprintf(r.out, "  --- skipped, which counts as failed: %s\n", test)
		case "":
			fmt.Fprintf(r.out, "  --- did not end: %s\n", test)
		default:
			fmt.Fprintf(r.out, "  --- failed: %s\n", test)
		}
		r.show(p, test)
	}
	outside := e.Action == "fail" && len(bad) == 0
	if e.Action == "fail" {
		if e.FailedBuild != "" {
			if text := r.builds[e.FailedBuild]; text != nil {
				fmt.Fprint(r.out, indent(text.String()))
			}
		}
		r.show(p, "")
	}
	if outside {
		r.failed++
	}
	switch {
	case e.Action == "fail" || len(bad) > 0:
		fmt.Fprintf(r.out, "  FAIL %7.1f s  %s: %d passed, %d failed\n", e.Elapsed, e.Package, passed, max(len(bad), 1))
	case passed > 0:
		fmt.Fprintf(r.out, "  ok   %7.1f s  %s: %d passed\n", e.Elapsed, e.Package, passed)
	}
}

// anyBelow tells whether a subtest of the test did not pass.
func (p *packageRun) anyBelow(test string) bool {
	return slices.ContainsFunc(p.order, func(other string) bool {
		return strings.HasPrefix(other, test+"/") && p.result[other] != "pass"
	})
}

func (r *report) show(p *packageRun, test string) {
	if text := p.output[test]; text != nil {
		fmt.Fprint(r.out, indent(text.String()))
	}
}

// finish counts packages that never said how they ended: go test was ended.
func (r *report) finish() {
	for _, name := range slices.Sorted(maps.Keys(r.packages)) {
		r.close(event{Action: "fail", Package: name}, r.packages[name])
	}
}

func write(to map[string]*strings.Builder, key, text string) {
	b := to[key]
	if b == nil {
		b = new(strings.Builder)
		to[key] = b
	}
	b.WriteString(text)
}

func indent(text string) string {
	text = strings.TrimRight(text, "\n")
	if text == "" {
		return ""
	}
	return "      " + strings.ReplaceAll(text, "\n", "\n      ") + "\n"
}
