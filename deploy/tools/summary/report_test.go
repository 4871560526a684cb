package main

import (
	"strings"
	"testing"
)

// The events are what the go command prints (go doc test2json), cut to what
// matters.
func TestReport(t *testing.T) {
	t.Parallel()
	for _, tc := range []struct {
		name           string
		events         string
		passed, failed int
		shown, hidden  []string
	}{
		{"leaves are counted",
			`{"Action":"run","Package":"p","Test":"A"}
			{"Action":"run","Package":"p","Test":"A/one"}
			{"Action":"output","Package":"p","Test":"A/one","Output":"noise\n"}
			{"Action":"pass","Package":"p","Test":"A/one"}
			{"Action":"run","Package":"p","Test":"A/two"}
			{"Action":"pass","Package":"p","Test":"A/two"}
			{"Action":"pass","Package":"p","Test":"A"}
			{"Action":"run","Package":"p","Test":"B"}
			{"Action":"pass","Package":"p","Test":"B"}
			{"Action":"output","Package":"p","Output":"PASS\n"}
			{"Action":"pass","Package":"p","Elapsed":1.5}`,
			3, 0, []string{"ok       1.5 s  p: 3 passed"}, []string{"noise", "PASS"}},
		{"a failure is shown in full",
			`{"Action":"run","Package":"p","Test":"A"}
			{"Action":"output","Package":"p","Test":"A","Output":"setup\n"}
			{"Action":"run","Package":"p","Test":"A/one"}
			{"Action":"output","Package":"p","Test":"A/one","Output":"got 1\n"}
			{"Action":"output","Package":"p","Test":"A/one","Output":"want 2\n"}
			{"Action":"fail","Package":"p","Test":"A/one"}
			{"Action":"fail","Package":"p","Test":"A"}
			{"Action":"fail","Package":"p"}`,
			0, 1, []string{"failed: A/one", "got 1\n      want 2", "setup", "p: 0 passed, 1 failed"}, nil},
		{"a parent that fails by itself",
			`{"Action":"run","Package":"p","Test":"A"}
			{"Action":"run","Package":"p","Test":"A/one"}
			{"Action":"pass","Package":"p","Test":"A/one"}
			{"Action":"fail","Package":"p","Test":"A"}
			{"Action":"fail","Package":"p"}`,
			1, 1, []string{"failed: A\n"}, nil},
		{"a skipped test fails",
			`{"Action":"run","Package":"p","Test":"A"}
			{"Action":"output","Package":"p","Test":"A","Output":"no database\n"}
			{"Action":"skip","Package":"p","Test":"A"}
			{"Action":"pass","Package":"p"}`,
			0, 1, []string{"skipped, which counts as failed: A", "no database", "FAIL"}, nil},
		{"a skipped subtest fails",
			`{"Action":"run","Package":"p","Test":"A"}
			{"Action":"run","Package":"p","Test":"A/one"}
			{"Action":"skip","Package":"p","Test":"A/one"}
			{"Action":"pass","Package":"p","Test":"A"}
			{"Action":"pass","Package":"p"}`,
			0, 1, []string{"skipped, which counts as failed: A/one"}, nil},
		{"a package without tests is no skipped test",
			`{"Action":"output","Package":"p","Output":"?   \tp\t[no test files]\n"}
			{"Action":"skip","Package":"p"}`,
			0, 0, nil, []string{"p"}},
		{"a package that does not build",
			`{"ImportPath":"p [p.test]","Action":"build-output","Output":"x.go:1:1: undefined: y\n"}
			{"ImportPath":"p [p.test]","Action":"build-fail"}
			{"Action":"fail","Package":"p","FailedBuild":"p [p.test]"}`,
			0, 1, []string{"undefined: y", "FAIL"}, nil},
		{"a process that dies outside its tests",
			`{"Action":"run","Package":"p","Test":"A"}
			{"Action":"pass","Package":"p","Test":"A"}
			{"Action":"output","Package":"p","Output":"cannot stop the server\n"}
			{"Action":"fail","Package":"p"}`,
			1, 1, []string{"cannot stop the server"}, nil},
		{"tests that a panic cut short",
			`{"Action":"run","Package":"p","Test":"A"}
			{"Action":"run","Package":"p","Test":"B"}
			{"Action":"output","Package":"p","Test":"B","Output":"panic: oh\n"}
			{"Action":"fail","Package":"p","Test":"B"}
			{"Action":"fail","Package":"p"}`,
			0, 2, []string{"did not end: A", "failed: B", "panic: oh"}, nil},
		{"a run that was cut short",
			`{"Action":"run","Package":"p","Test":"A"}
			{"Action":"output","Package":"p","Test":"A","Output":"halfway\n"}`,
			0, 1, []string{"did not end: A", "halfway"}, nil},
		{"words that are no events", "go: no such module\n", 0, 0, []string{"go: no such module"}, nil},
	} {
		t.Run(tc.name, func(t *testing.T) {
			t.Parallel()
			var out strings.Builder
			r := newReport(&out)
			if err := r.read(strings.NewReader(tc.events)); err != nil {
				t.Fatal(err)
			}
			r.finish()
			if r.passed != tc.passed || r.failed != tc.failed {
				t.Errorf("%d passed, %d failed; want %d, %d", r.passed, r.failed, tc.passed, tc.failed)
			}
			for _, text := range tc.shown {
				if !strings.Contains(out.String(), text) {
					t.Errorf("does not show %q:\n%s", text, out.String())
				}
			}
			for _, text := range tc.hidden {
				if strings.Contains(out.String(), text) {
					t.Errorf("shows %q:\n%s", text, out.String())
				}
			}
		})
	}
}
