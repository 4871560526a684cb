package main

import (
	"bytes"
	"context"
	"errors"
	"strings"
	"testing"
	"time"

	"holdfast/internal/qualify"
)

func TestQualificationPrint(t *testing.T) {
	t.Parallel()
	var out bytes.Buffer
	p := &qualifyPrinter{out: &out}
	p.begin(qualify.Record{Program: "holdfast", Version: "v1.2.3", Go: "go1.26", OS: "linux", Arch: "amd64", CPUs: 2, Began: time.Date(2026, 3, 4, 5, 6, 7, 0, time.UTC)})
	p.each(qualify.Result{Group: "factors", Name: "d2 for n = 2", Source: "a table", Status: qualify.FromMemory, Expected: 1.128, Obtained: 1.12838, Difference: 0.00038, Allowance: 0.0005, Basis: "printed", Passed: true})
	p.each(qualify.Result{Group: "factors", Name: "d2 for n = 3", Source: "a table", Status: qualify.FromMemory, Expected: 1.693, Problem: "no such factor"})
	p.group(qualify.GroupTotal{Name: "factors", Passed: 1, Failed: 1, Seconds: 0.5})
	want := `Installation qualification of holdfast
version v1.2.3, revision not recorded in this build
built with go1.26 for linux/amd64, on 2 processors
begun 2026-03-04 05:06:07 UTC

factors
 source: from memory; a table
  passed  d2 for n = 2: expected 1.128, obtained 1.12838, difference 0.00038, allowance 0.0005 (printed)
  FAILED  d2 for n = 3: expected 1.693, obtained nothing: no such factor
 factors: 1 passed, 1 failed in 0.50 s
`
	if out.String() != want {
		t.Errorf("printed\n%s\nwant\n%s", out.String(), want)
	}
}

func TestQualificationStopsWhenAsked(t *testing.T) {
	t.Parallel()
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	var out bytes.Buffer
	err := (&qualifyCmd{}).qualify(ctx, &out)
	if !errors.Is(err, context.Canceled) || strings.Contains(out.String(), "passed") {
		t.Errorf("got %v after %q", err, out.String())
	}
}
