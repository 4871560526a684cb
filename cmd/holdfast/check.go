package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"strings"
)

// checkCmd says in words what is wrong with a machine before it is used. It takes the flags
// of serve, so that what it looks at is what will be used, and it leaves nothing behind.
type checkCmd struct {
	database
	Addr string `help:"Where the server will listen, HOST:PORT." default:"127.0.0.1:8080" env:"HOLDFAST_ADDR"`
	transport
}

// grade is how much a finding asks of people.
type grade int

const (
	good  grade = iota
	look        // it works, but somebody should know
	wrong       // it will not work, or records could be lost
)

func (g grade) String() string { return [...]string{"good ", "look ", "WRONG"}[g] }

// finding is one sentence about the machine, and what to do about it.
type finding struct {
	grade grade
	about string
	text  string
	do    string // "" when there is nothing to do
}

var errUnfit = errors.New("this machine is not ready: see what is marked WRONG")

func (c *checkCmd) Run(ctx context.Context) error { return report(os.Stdout, c.findings(ctx)) }

func (c *checkCmd) findings(ctx context.Context) []finding {
	var out []finding
	add := func(fs ...finding) { out = append(out, fs...) }
	if c.URL != "" {
		add(checkDatabase(ctx, "database", c.URL, c.OwnerURL)...)
	} else {
		add(checkPrivate(ctx, c.Data, c.PGBin)...)
	}
	if dir := c.stateDir(); dir != "" {
		add(checkFolder(dir)...)
	}
	add(c.checkPort(ctx), checkClock())
	add(c.checkCertificate()...)
	return out
}

// report prints the findings, the gravest last so that they are in sight, and fails when
// one of them is wrong.
func report(w io.Writer, all []finding) error {
	worst := good
	for g := good; g <= wrong; g++ {
		for _, f := range all {
			if f.grade != g {
				continue
			}
			worst = max(worst, g)
			fmt.Fprintf(w, "%s  %-12s %s\n", f.grade, f.about, f.text)
			if f.do != "" {
				fmt.Fprintf(w, "%s%s\n", strings.Repeat(" ", 20), f.do)
			}
		}
	}
	switch worst {
	case wrong:
		return errUnfit
	case look:
		fmt.Fprintln(w, "The machine can be used. What is marked look is worth a look first.")
	default:
		fmt.Fprintln(w, "The machine is ready.")
	}
	return nil
}
