// Command summary reads the events of `go test -json` on its input and prints
// what a person wants to see of them: one line a package, and everything that a
// failing test printed. A skipped test is a failing one. It exits with 1 when
// anything failed.
//
//	go test -json ./... | summary -counts FILE
//
// FILE receives "PASSED FAILED". Counted are tests without subtests, examples and
// fuzz seeds included; a package that fails outside its tests, or does not build,
// counts as one failure.
package main

import (
	"flag"
	"fmt"
	"os"
)

func main() {
	counts := flag.String("counts", "", "file for the two counts")
	flag.Parse()
	r := newReport(os.Stdout)
	err := r.read(os.Stdin)
	r.finish()
	if *counts != "" {
		text := fmt.Sprintf("%d %d\n", r.passed, r.failed)
		if e := os.WriteFile(*counts, []byte(text), 0o644); err == nil {
			err = e
		}
	}
	if err != nil {
		fmt.Fprintln(os.Stderr, "summary:", err)
		os.Exit(2)
	}
	if r.failed > 0 {
		os.Exit(1)
	}
}
