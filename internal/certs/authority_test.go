package certs_test

import (
	"crypto/tls"
	"crypto/x509"
	"errors"
	"io"
	"net"
	"net/http"
	"net/http/httptest"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"holdfast/internal/certs"
)

var start = time.Date(2026, 3, 2, 6, 0, 0, 0, time.UTC)

// clock is a time that a test moves.
type clock struct{ t time.Time }

func (c *clock) now() time.Time { return c.t }

func open(t *testing.T, dir string, c *clock, names ...string) *certs.Authority {
	t.Helper()
	a, err := certs.OpenAuthority(dir, names, c.now)
	if err != nil {
		t.Fatal(err)
	}
	return a
}

func leaf(t *testing.T, a *certs.Authority) *x509.Certificate {
	t.Helper()
	c, err := a.Certificate(nil)
	if err != nil {
		t.Fatal(err)
	}
	return c.Leaf
}

// verify is what a tablet does that has installed the authority.
func verify(a *certs.Authority, c *x509.Certificate, name string, at time.Time) error {
	roots := x509.NewCertPool()
	roots.AddCert(a.Root())
	_, err := c.Verify(x509.VerifyOptions{Roots: roots, DNSName: name, CurrentTime: at})
	return err
}

func TestServerIsTrustedUnderItsNames(t *testing.T) {
	c := &clock{start}
	a := open(t, t.TempDir(), c, "Works.Plant.Example", "10.4.0.7", "localhost")
	for _, name := range []string{"works.plant.example", "10.4.0.7", "localhost"} {
		if err := verify(a, leaf(t, a), name, start); err != nil {
			t.Errorf("%s: %v", name, err)
		}
	}
	for _, name := range []string{"plant.example", "other.example", "10.4.0.8"} {
		if err := verify(a, leaf(t, a), name, start); err == nil {
			t.Errorf("%s is accepted", name)
		}
	}
	// A tablet that is a day behind must be able to connect, or nobody can set its clock.
	if err := verify(a, leaf(t, a), "localhost", start.Add(-24*time.Hour)); err != nil {
		t.Errorf("with a clock a day behind: %v", err)
	}
	if life := leaf(t, a).NotAfter.Sub(leaf(t, a).NotBefore); life > 398*24*time.Hour {
		t.Errorf("the certificate lives %v, longer than browsers accept (398 days, CA/Browser Forum Baseline Requirements 6.3.2)", life)
	}
}

func TestAuthorityStaysAndServerIsRenewed(t *testing.T) {
	dir, c := t.TempDir(), &clock{start}
	a := open(t, dir, c, "works.example")
	root, first := certs.Fingerprint(a.Root()), leaf(t, a)
	if len(root) != 32*3-1 || strings.Trim(root, "0123456789ABCDEF:") != "" {
		t.Errorf("fingerprint %q", root)
	}

	c.t = start.AddDate(0, 6, 0)
	a = open(t, dir, c, "works.example")
	if !leaf(t, a).Equal(first) {
		t.Error("after half a year the certificate was made anew")
	}
	c.t = start.AddDate(0, 10, 0)
	if err := a.Renew([]string{"works.example"}); err != nil {
		t.Fatal(err)
	}
	if leaf(t, a).Equal(first) {
		t.Error("after ten months it was not renewed")
	}
	if err := verify(a, leaf(t, a), "works.example", c.t.AddDate(0, 8, 0)); err != nil {
		t.Error(err)
	}
	again := open(t, dir, c, "works.example")
	if certs.Fingerprint(again.Root()) != root || !leaf(t, again).Equal(leaf(t, a)) {
		t.Error("a restart changed what tablets trust")
	}
	read, err := certs.ReadRoot(dir)
	if err != nil || certs.Fingerprint(read) != root {
		t.Errorf("the folder holds another authority: %v", err)
	}
}

func TestNewAddressGetsIntoTheCertificate(t *testing.T) {
	c := &clock{start}
	a := open(t, t.TempDir(), c, "works.example", "192.168.1.5")
	if err := a.Renew([]string{"works.example", "192.168.1.77", "8.8.8.8"}); err != nil {
		t.Fatal(err)
	}
	if err := verify(a, leaf(t, a), "192.168.1.77", start); err != nil {
		t.Error(err)
	}
	if err := verify(a, leaf(t, a), "8.8.8.8", start); err == nil {
		t.Error("an address of the internet got into the certificate")
	}
}

// A stolen key of the authority must not make a certificate for another site that the
// plant's tablets would trust.
func TestAuthorityIsHeldToItsNames(t *testing.T) {
	dir, c := t.TempDir(), &clock{start}
	a := open(t, dir, c, "works.example")
	if len(a.Root().PermittedDNSDomains) != 2 || !a.Root().PermittedDNSDomainsCritical {
		t.Errorf("constraints %v", a.Root().PermittedDNSDomains)
	}
	_, err := certs.OpenAuthority(dir, []string{"bank.example"}, c.now)
	if err == nil || !strings.Contains(err.Error(), "bank.example") {
		t.Errorf("a name outside: %v", err)
	}
	if _, err := certs.OpenAuthority(dir, []string{"press.works.example"}, c.now); err != nil {
		t.Errorf("a name below one of its own: %v", err)
	}
}

func TestKeysAreForTheirOwnerOnly(t *testing.T) {
	dir := t.TempDir()
	open(t, dir, &clock{start}, "works.example")
	for _, name := range []string{"authority.key", "server.key"} {
		info, err := os.Stat(filepath.Join(dir, name))
		if err != nil {
			t.Fatal(err)
		}
		if info.Mode().Perm() != 0o600 {
			t.Errorf("%s has mode %o", name, info.Mode().Perm())
		}
	}
	left, _ := filepath.Glob(filepath.Join(dir, ".new-*"))
	if len(left) > 0 {
		t.Errorf("left behind: %v", left)
	}
}

func TestBrokenAuthorityIsNotReplaced(t *testing.T) {
	for name, breakIt := range map[string]func(dir string) error{
		"key gone": func(dir string) error { return os.Remove(filepath.Join(dir, "authority.key")) },
		"key of others": func(dir string) error {
			return os.Rename(filepath.Join(dir, "server.key"), filepath.Join(dir, "authority.key"))
		},
		"cert torn": func(dir string) error { return os.Truncate(filepath.Join(dir, "authority.crt"), 100) },
	} {
		t.Run(name, func(t *testing.T) {
			dir, c := t.TempDir(), &clock{start}
			open(t, dir, c, "works.example")
			before, err := os.ReadFile(filepath.Join(dir, "authority.crt"))
			if err := errors.Join(err, breakIt(dir)); err != nil {
				t.Fatal(err)
			}
			if _, err := certs.OpenAuthority(dir, []string{"works.example"}, c.now); err == nil {
				t.Fatal("it was opened")
			}
			after, err := os.ReadFile(filepath.Join(dir, "authority.crt"))
			if err != nil || name != "cert torn" && string(after) != string(before) {
				t.Errorf("the authority was replaced: %v", err)
			}
		})
	}
	dir, c := t.TempDir(), &clock{start}
	open(t, dir, c, "works.example")
	c.t = start.AddDate(11, 0, 0)
	if _, err := certs.OpenAuthority(dir, []string{"works.example"}, c.now); err == nil {
		t.Error("an authority that has ended was opened")
	}
}

// The handshake itself, by Go's client and, as somebody else's judgement of the files, by
// OpenSSL where it is installed.
func TestHandshake(t *testing.T) {
	dir := t.TempDir()
	a, err := certs.OpenAuthority(dir, []string{"works.example", "127.0.0.1"}, time.Now)
	if err != nil {
		t.Fatal(err)
	}
	s := httptest.NewUnstartedServer(http.HandlerFunc(func(w http.ResponseWriter, _ *http.Request) { _, _ = io.WriteString(w, "ok") }))
	s.TLS = &tls.Config{GetCertificate: a.Certificate, MinVersion: tls.VersionTLS12}
	s.StartTLS()
	t.Cleanup(s.Close)
	roots := x509.NewCertPool()
	roots.AddCert(a.Root())
	client := &http.Client{Transport: &http.Transport{TLSClientConfig: &tls.Config{RootCAs: roots, ServerName: "works.example"}}}
	defer client.CloseIdleConnections()
	res, err := client.Get("https://" + s.Listener.Addr().(*net.TCPAddr).String())
	if err != nil {
		t.Fatal(err)
	}
	res.Body.Close()

	openssl, err := exec.LookPath("openssl")
	if err != nil {
		t.Log("no openssl here: its judgement was not asked")
		return
	}
	out, err := exec.Command(openssl, "verify", "-x509_strict", "-verify_hostname", "works.example",
		"-CAfile", filepath.Join(dir, "authority.crt"), filepath.Join(dir, "server.crt")).CombinedOutput()
	if err != nil {
		t.Errorf("openssl: %v\n%s", err, out)
	}
}

func TestFilesAreReadAgainWhenTheyChange(t *testing.T) {
	dir, c := t.TempDir(), &clock{start}
	a := open(t, dir, c, "works.example")
	cert, key := filepath.Join(dir, "server.crt"), filepath.Join(dir, "server.key")
	f, err := certs.OpenFiles(cert, key)
	if err != nil {
		t.Fatal(err)
	}
	first := f.Leaf()
	if err := a.Renew([]string{"works.example", "10.0.0.1"}); err != nil {
		t.Fatal(err)
	}
	later := time.Now().Add(time.Minute)
	if err := errors.Join(os.Chtimes(cert, later, later), f.Reload()); err != nil {
		t.Fatal(err)
	}
	if f.Leaf().Equal(first) || !f.Leaf().Equal(leaf(t, a)) {
		t.Error("the new certificate is not in use")
	}
	if err := errors.Join(os.Truncate(key, 10), os.Chtimes(key, later, later)); err != nil {
		t.Fatal(err)
	}
	if err := f.Reload(); err == nil {
		t.Error("a torn key was read")
	}
	if !f.Leaf().Equal(leaf(t, a)) {
		t.Error("a torn key cost the certificate in use")
	}
	if _, err := certs.OpenFiles(cert, filepath.Join(dir, "nothing")); err == nil {
		t.Error("a missing key was read")
	}
}

func TestMachineNames(t *testing.T) {
	names, err := certs.MachineNames()
	if err != nil {
		t.Fatal(err)
	}
	if !strings.Contains(strings.Join(names, " "), "localhost") {
		t.Errorf("names %v", names)
	}
	if _, err := certs.OpenAuthority(t.TempDir(), names, time.Now); err != nil {
		t.Error(err)
	}
	if _, err := certs.OpenAuthority(t.TempDir(), nil, time.Now); err == nil {
		t.Error("no name at all makes a certificate")
	}
}
