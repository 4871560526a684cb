package main

import (
	"context"
	"encoding/json"
	"fmt"
	"io"
	"os"

	"holdfast/internal/qualify"
)

// qualifyCmd is the installation qualification: it recomputes the reference cases that
// the program carries, on this machine.
type qualifyCmd struct {
	JSON bool `help:"Print one JSON object, for the records, instead of lines."`
}

func (c *qualifyCmd) Run(ctx context.Context) error { return c.qualify(ctx, os.Stdout) }

func (c *qualifyCmd) qualify(ctx context.Context, out io.Writer) error {
	var opt qualify.Options
	if !c.JSON {
		p := &qualifyPrinter{out: out}
		opt = qualify.Options{Begin: p.begin, Each: p.each, Group: p.group}
	}
	record, err := qualify.Report(ctx, opt)
	if err != nil {
		return fmt.Errorf("qualification: %w", err)
	}
	if c.JSON {
		enc := json.NewEncoder(out)
		enc.SetIndent("", "  ")
		err = enc.Encode(record)
	} else {
		_, err = fmt.Fprintf(out, "\n%.1f seconds in all.\n%d passed, %d failed\n", record.Seconds, record.Passed, record.Failed)
	}
	if err != nil {
		return fmt.Errorf("write the qualification: %w", err)
	}
	if record.Failed > 0 {
		return fmt.Errorf("this machine did not reproduce %d of %d reference values", record.Failed, record.Passed+record.Failed)
	}
	return nil
}

// qualifyPrinter writes results as they come, under headings of group and source.
type qualifyPrinter struct {
	out           io.Writer
	title, source string
}

func (p *qualifyPrinter) begin(r qualify.Record) {
	fmt.Fprintf(p.out, "Installation qualification of %s\n", r.Program)
	revision := r.Revision
	if revision == "" {
		revision = "not recorded in this build"
	}
	if r.Modified {
		revision += ", changed after it"
	}
	fmt.Fprintf(p.out, "version %s, revision %s\nbuilt with %s for %s/%s, on %d processors\nbegun %s\n",
		r.Version, revision, r.Go, r.OS, r.Arch, r.CPUs, r.Began.Format("2006-01-02 15:04:05 MST"))
}

func (p *qualifyPrinter) each(r qualify.Result) {
	if r.Group != p.title {
		p.title, p.source = r.Group, ""
		fmt.Fprintf(p.out, "\n%s\n", r.Group)
	}
	if source := fmt.Sprintf("%s; %s", r.Status, r.Source); source != p.source {
		p.source = source
		fmt.Fprintf(p.out, " source: %s\n", source)
	}
	verdict := "passed"
	if !r.Passed {
		verdict = "FAILED"
	}
	fmt.Fprintf(p.out, "  %s  %s: expected %.12g", verdict, r.Name, r.Expected)
	if r.Problem != "" {
		fmt.Fprintf(p.out, ", obtained nothing: %s\n", r.Problem)
		return
	}
	fmt.Fprintf(p.out, ", obtained %.12g, difference %.2g, allowance %.2g (%s)\n", r.Obtained, r.Difference, r.Allowance, r.Basis)
}

func (p *qualifyPrinter) group(g qualify.GroupTotal) {
	fmt.Fprintf(p.out, " %s: %d passed, %d failed in %.2f s\n", g.Name, g.Passed, g.Failed, g.Seconds)
}
