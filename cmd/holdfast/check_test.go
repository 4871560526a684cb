package main

import (
	"context"
	"net"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"holdfast/internal/certs"
	"holdfast/internal/store/storetest"
)

// says runs the check and gives what it printed.
func says(t *testing.T, c checkCmd) (string, error) {
	t.Helper()
	var b strings.Builder
	err := report(&b, c.findings(context.Background()))
	return b.String(), err
}

func TestCheckOfAGoodMachine(t *testing.T) {
	p := storetest.New(t, "x")
	before, err := os.ReadDir(os.TempDir())
	if err != nil {
		t.Fatal(err)
	}
	c := checkCmd{database: database{URL: p.URL}, Addr: "127.0.0.1:0"}
	out := c.findings(context.Background())
	for _, f := range out {
		// The clusters of tests run without fsync, and the machine need not follow a time server.
		if f.grade == wrong && !strings.Contains(f.text, "fsync") {
			t.Errorf("%s: %s", f.about, f.text)
		}
	}
	after, err := os.ReadDir(os.TempDir())
	if err != nil || len(after) > len(before)+3 {
		t.Errorf("the check left files behind: %d before, %d after, %v", len(before), len(after), err)
	}
}

func TestCheckSaysWhatIsWrong(t *testing.T) {
	taken, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	defer taken.Close()
	open := filepath.Join(t.TempDir(), "open")
	if err := os.Mkdir(open, 0o700); err != nil {
		t.Fatal(err)
	}
	if err := os.Chmod(open, 0o777); err != nil {
		t.Fatal(err)
	}
	old := t.TempDir()
	if _, err := certs.OpenAuthority(filepath.Join(old, "tls"), []string{"works.example"}, func() time.Time { return time.Now().AddDate(-11, 0, 0) }); err != nil {
		t.Fatal(err)
	}
	for name, c := range map[string]struct {
		checkCmd
		want string
	}{
		"no database":        {checkCmd{database: database{URL: "postgres://nobody@127.0.0.1:1/none?connect_timeout=2"}, Addr: "127.0.0.1:0"}, "cannot be reached"},
		"nothing said":       {checkCmd{Addr: "127.0.0.1:0"}, "not said where the record is"},
		"no such PostgreSQL": {checkCmd{database: database{Data: t.TempDir(), PGBin: "/nonexistent"}, Addr: "127.0.0.1:0"}, "PostgreSQL is not installed"},
		"port taken":         {checkCmd{database: database{Data: t.TempDir()}, Addr: taken.Addr().String()}, "address already in use"},
		"no such address":    {checkCmd{database: database{Data: t.TempDir()}, Addr: "8080"}, "Say it with --addr as HOST:PORT"},
		"no place for it":    {checkCmd{database: database{Data: "/proc/holdfast/data"}, Addr: "127.0.0.1:0"}, "/proc/holdfast/data cannot be made: this user may not write in /proc: "},
		"open folder":        {checkCmd{database: database{Data: open}, Addr: "127.0.0.1:0"}, "Others may write"},
		"plain to all":       {checkCmd{database: database{Data: t.TempDir()}, Addr: "0.0.0.0:0", transport: transport{TLS: "off"}}, "for this machine only"},
		"ended authority":    {checkCmd{database: database{Data: old}, Addr: "127.0.0.1:0", transport: transport{TLS: "auto"}}, "It has ended"},
	} {
		t.Run(name, func(t *testing.T) {
			out, err := says(t, c.checkCmd)
			if err == nil || !strings.Contains(out, c.want) || !strings.Contains(out, "WRONG") {
				t.Errorf("%v, without %q:\n%s", err, c.want, out)
			}
		})
	}
}

func TestCheckMakesNoAuthority(t *testing.T) {
	dir := t.TempDir()
	out, _ := says(t, checkCmd{database: database{Data: dir}, Addr: "127.0.0.1:0", transport: transport{TLS: "auto"}})
	if !strings.Contains(out, "An authority will be made") {
		t.Error(out)
	}
	if left, err := os.ReadDir(dir); err != nil || len(left) > 0 {
		t.Errorf("left behind: %v %v", left, err)
	}
}

func TestReportPutsTheGravestLast(t *testing.T) {
	var b strings.Builder
	err := report(&b, []finding{{wrong, "disk", "full", "do this"}, {good, "port", "free", ""}, {look, "clock", "loose", ""}})
	if err == nil {
		t.Error("it passes")
	}
	if s := b.String(); strings.Index(s, "free") > strings.Index(s, "loose") || strings.Index(s, "loose") > strings.Index(s, "full") || !strings.Contains(s, "do this") {
		t.Error(s)
	}
	if err := report(&b, []finding{{look, "clock", "loose", ""}}); err != nil {
		t.Error(err)
	}
}

// TestCheckBesideTheRunningServer: a port that the server itself holds is as it should be,
// over https only with the certificate that these flags mean.
func TestCheckBesideTheRunningServer(t *testing.T) {
	own, foreign := t.TempDir(), t.TempDir()
	tr := transport{TLS: "auto", TLSDir: own, TLSNames: []string{"works.example"}}
	https := serveWith(t, func(s *settings) {
		way, err := tr.prepare(s.Addr, "", time.Now)
		if err != nil {
			t.Fatal(err)
		}
		s.Transport = way
	})
	plain := serve(t)
	if _, err := certs.OpenAuthority(foreign, []string{"works.example"}, time.Now); err != nil {
		t.Fatal(err)
	}
	for name, tc := range map[string]struct {
		checkCmd
		want grade
	}{
		"plain":                   {checkCmd{Addr: plain.program.listener.Addr().String(), transport: transport{TLS: "off"}}, good},
		"https":                   {checkCmd{Addr: https.program.listener.Addr().String(), transport: tr}, good},
		"another folder":          {checkCmd{database: database{Data: t.TempDir()}, Addr: plain.program.listener.Addr().String(), transport: transport{TLS: "off"}}, wrong},
		"another authority":       {checkCmd{Addr: https.program.listener.Addr().String(), transport: transport{TLS: "auto", TLSDir: foreign}}, wrong},
		"plain where it is https": {checkCmd{Addr: https.program.listener.Addr().String(), transport: transport{TLS: "off"}}, wrong},
	} {
		if f := tc.checkPort(t.Context()); f.grade != tc.want {
			t.Errorf("%s: %+v", name, f)
		}
	}
}
