package main

import (
	"context"
	"crypto/sha256"
	"crypto/tls"
	"crypto/x509"
	"encoding/base64"
	"errors"
	"io"
	"log/slog"
	"net"
	"net/http"
	"net/netip"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"holdfast/internal/browsertest"
	"holdfast/internal/certs"
	"holdfast/internal/relay"
)

func TestPlainHTTPIsForThisMachineOnly(t *testing.T) {
	t.Parallel()
	for addr, good := range map[string]bool{
		"127.0.0.1:80": true, "[::1]:80": true, "localhost:80": true,
		":80": false, "0.0.0.0:80": false, "10.0.0.5:80": false, "[::]:80": false, "works.example:80": false, "nonsense": false,
	} {
		_, err := transport{TLS: "off"}.prepare(addr, "", time.Now)
		if (err == nil) != good {
			t.Errorf("%s: %v", addr, err)
		}
	}
	for name, bad := range map[string]transport{
		"files without a key": {TLS: "files", TLSCert: "a.crt"},
		"files not there":     {TLS: "files", TLSCert: "a.crt", TLSKey: "a.key"},
		"proxy unnamed":       {TLS: "proxy"},
		"auto without folder": {TLS: "auto"},
	} {
		if _, err := bad.prepare("0.0.0.0:443", "", time.Now); err == nil {
			t.Errorf("%s: accepted", name)
		}
	}
}

// serveTLS starts the program over https with an authority of its own.
func serveTLS(t *testing.T, names ...string) (*running, secured, string) {
	t.Helper()
	state := t.TempDir()
	way, err := transport{TLS: "auto", TLSNames: names}.prepare("127.0.0.1:0", state, time.Now)
	if err != nil {
		t.Fatal(err)
	}
	r := serveWith(t, func(s *settings) { s.Transport = way })
	return r, way, filepath.Join(state, "tls")
}

func (s secured) client(t *testing.T) *http.Client {
	roots := x509.NewCertPool()
	roots.AddCert(s.root)
	c := &http.Client{Timeout: 20 * time.Second, Transport: &http.Transport{TLSClientConfig: &tls.Config{RootCAs: roots}, ForceAttemptHTTP2: true},
		CheckRedirect: func(*http.Request, []*http.Request) error { return http.ErrUseLastResponse }}
	t.Cleanup(c.CloseIdleConnections)
	return c
}

func fetch(t *testing.T, c *http.Client, url string) (*http.Response, string) {
	t.Helper()
	res, err := c.Get(url)
	if err != nil {
		t.Fatal(err)
	}
	defer res.Body.Close()
	body, err := io.ReadAll(res.Body)
	if err != nil {
		t.Fatal(err)
	}
	return res, string(body)
}

func TestServesOverItsOwnAuthority(t *testing.T) {
	t.Parallel()
	r, way, dir := serveTLS(t)
	c := way.client(t)
	if !strings.HasPrefix(r.url, "https://") {
		t.Fatalf("address %s", r.url)
	}
	res, body := fetch(t, c, r.url+"/authority")
	print := certs.Fingerprint(way.root)
	if res.StatusCode != http.StatusOK || !strings.Contains(body, print[:47]) || !strings.Contains(body, print[48:]) {
		t.Errorf("the page of the authority: %s, fingerprint %s\n%.800s", res.Status, print, body)
	}
	if got := res.Header.Get("Strict-Transport-Security"); got != "max-age=2592000" {
		t.Errorf("browsers are told %q", got)
	}
	res, body = fetch(t, c, r.url+"/authority.crt")
	if res.Header.Get("Content-Type") != "application/x-x509-ca-cert" || body != string(way.root.Raw) {
		t.Errorf("the certificate came as %q, %d bytes", res.Header.Get("Content-Type"), len(body))
	}
	if res, body = fetch(t, c, r.url+"/authority.pem"); body != string(certs.PEM(way.root)) || !strings.HasSuffix(res.Header.Get("Content-Disposition"), `.pem"`) {
		t.Errorf("for programs the certificate came as %q\n%s", res.Header.Get("Content-Disposition"), body)
	}

	// Whoever types the address without its scheme is told where to go, and nothing else.
	plain := "http://" + strings.TrimPrefix(r.url, "https://")
	res, body = fetch(t, c, plain+"/station?a=b")
	if res.StatusCode != http.StatusPermanentRedirect || res.Header.Get("Location") != r.url+"/station?a=b" {
		t.Errorf("over http: %s to %q\n%s", res.Status, res.Header.Get("Location"), body)
	}
	if res.Header.Get("Set-Cookie") != "" {
		t.Error("a cookie went out in clear")
	}

	// A client that connects and says nothing holds up nobody.
	silent, err := net.Dial("tcp", r.program.listener.Addr().String())
	if err != nil {
		t.Fatal(err)
	}
	defer silent.Close()
	if res, _ := fetch(t, c, r.url+"/healthz"); res.StatusCode != http.StatusOK {
		t.Errorf("beside a silent client: %s", res.Status)
	}

	if err := (&healthCmd{URL: r.url, TLSDir: dir}).Run(context.Background()); err != nil {
		t.Errorf("asking for health: %v", err)
	}
	if err := (&healthCmd{URL: r.url}).Run(context.Background()); err == nil {
		t.Error("health trusts a certificate that it does not know")
	}
}

// A sender is told what it lacks, and takes the certificate in both forms.
func TestASenderTrustsTheAuthority(t *testing.T) {
	t.Parallel()
	r, way, _ := serveTLS(t)
	folder := t.TempDir()
	pem, der, token := filepath.Join(folder, "a.pem"), filepath.Join(folder, "a.crt"), filepath.Join(folder, "token")
	for path, body := range map[string][]byte{pem: certs.PEM(way.root), der: way.root.Raw, token: []byte("of nobody")} {
		if err := os.WriteFile(path, body, 0o600); err != nil {
			t.Fatal(err)
		}
	}
	// Whoever is told that the token is worth nothing has reached the server.
	for ca, want := range map[string]string{"": "name the file with --ca", pem: "worth nothing", der: "worth nothing"} {
		var log lockedBuffer
		s := sending{Server: r.url, TokenFile: token, CA: ca, Spool: filepath.Join(folder, "spool"+filepath.Base(ca))}
		err := s.with(context.Background(), slog.New(slog.NewTextHandler(&log, nil)), func(ctx context.Context, spool *relay.Spool) error {
			g := &relay.Gather{Spool: spool, Now: r.Clock.Now, Source: relay.Source{Characteristic: r.Diameter.Name, Size: 1, Pattern: relay.Pattern{Unit: "mm"}}}
			if _, err := g.Take("nothing", ""); err != nil { // a line that the station is shown
				return err
			}
			for end := time.Now().Add(20 * time.Second); !strings.Contains(log.String(), want); time.Sleep(5 * time.Millisecond) {
				if time.Now().After(end) {
					t.Errorf("with --ca %q: no %q in\n%s", ca, want, log.String())
					break
				}
			}
			return nil
		})
		if err != nil {
			t.Error(err)
		}
	}
}

func TestStartPrintsTheFingerprint(t *testing.T) {
	t.Parallel()
	state := t.TempDir()
	way, err := transport{TLS: "auto"}.prepare("127.0.0.1:0", state, time.Now)
	if err != nil {
		t.Fatal(err)
	}
	var log lockedBuffer
	serveWith(t, func(s *settings) { s.Transport, s.Log = way, slog.New(slog.NewTextHandler(&log, nil)) })
	want := "certificate fingerprint " + certs.Fingerprint(way.root)
	for deadline := time.Now().Add(10 * time.Second); !strings.Contains(log.String(), want); time.Sleep(5 * time.Millisecond) {
		if time.Now().After(deadline) {
			t.Fatalf("no %q in\n%s", want, log.String())
		}
	}
	if data, err := os.ReadFile(filepath.Join(state, "tls", "authority.key")); err != nil || strings.Contains(log.String(), string(data[40:80])) {
		t.Errorf("the key is in the log, or is not there: %v", err)
	}
}

func TestAddressesForPeopleHaveTheNameOfTheCertificate(t *testing.T) {
	t.Parallel()
	for _, c := range []struct {
		listening string
		names     []string
		want      string
	}{
		{"[::]:8443", []string{"works.plant.example"}, "https://works.plant.example:8443"},
		{"0.0.0.0:8443", []string{"10.0.0.5", "localhost"}, "https://10.0.0.5:8443"},
		{"0.0.0.0:8443", []string{"fd00::5"}, "https://[fd00::5]:8443"},
		{"0.0.0.0:8443", []string{"localhost"}, ""},
		{"127.0.0.1:8443", []string{"works.plant.example"}, ""}, // it would lead nowhere
	} {
		way, err := transport{TLS: "auto", TLSNames: c.names}.prepare(c.listening, t.TempDir(), time.Now)
		if err != nil {
			t.Fatal(err)
		}
		if got := outside(c.listening, way.leaf()); got != c.want {
			t.Errorf("%s with %v: %q, want %q", c.listening, c.names, got, c.want)
		}
	}
}

func TestNobodyGetsPastTheProxy(t *testing.T) {
	t.Parallel()
	proxied := func(r string, forwarded ...string) (*http.Request, secured) {
		req, err := http.NewRequest(http.MethodGet, "http://works.example/station", nil)
		if err != nil {
			t.Fatal(err)
		}
		req.RemoteAddr = r
		for _, f := range forwarded {
			req.Header.Add("X-Forwarded-For", f)
		}
		return req, secured{https: true, proxy: []netip.Prefix{netip.MustParsePrefix("10.0.0.2/32"), netip.MustParsePrefix("10.0.9.0/24")}}
	}
	for _, c := range []struct {
		peer      string
		forwarded []string
		want      string
	}{
		{"192.168.1.9:1", []string{"1.2.3.4"}, "192.168.1.9"}, // not the proxy: its word counts nothing
		{"10.0.0.2:1", nil, "10.0.0.2"},
		{"10.0.0.2:1", []string{"192.168.1.9"}, "192.168.1.9"},
		{"10.0.0.2:1", []string{"6.6.6.6, 192.168.1.9"}, "192.168.1.9"}, // the client invented the first
		{"10.0.0.2:1", []string{"6.6.6.6", "192.168.1.9, 10.0.9.4"}, "192.168.1.9"},
		{"10.0.0.2:1", []string{"192.168.1.9, nonsense"}, "10.0.0.2"},
		{"[::ffff:10.0.0.2]:1", []string{"::ffff:192.168.1.9"}, "192.168.1.9"},
	} {
		req, way := proxied(c.peer, c.forwarded...)
		if got := way.from(req).String(); got != c.want {
			t.Errorf("%s saying %q: %s, want %s", c.peer, c.forwarded, got, c.want)
		}
	}

	r := serveWith(t, func(s *settings) {
		s.Transport = secured{https: true, strict: strictKnown, proxy: []netip.Prefix{netip.MustParsePrefix("10.0.0.2/32")}}
	})
	for path, want := range map[string]int{"/sign-in": http.StatusForbidden, "/station": http.StatusForbidden, "/healthz": http.StatusOK, "/readyz": http.StatusOK} {
		if res, _ := fetch(t, http.DefaultClient, r.url+path); res.StatusCode != want {
			t.Errorf("%s past the proxy: %s", path, res.Status)
		}
	}
	r = serveWith(t, func(s *settings) {
		s.Transport = secured{https: true, strict: strictKnown, proxy: []netip.Prefix{netip.MustParsePrefix("127.0.0.1/32")}}
	})
	res, _ := fetch(t, http.DefaultClient, r.url+"/sign-in")
	if res.StatusCode != http.StatusOK || res.Header.Get("Strict-Transport-Security") != "max-age=31536000" {
		t.Errorf("through the proxy: %s, %q", res.Status, res.Header.Get("Strict-Transport-Security"))
	}
}

// A browser that trusts the generated authority, under a name that is not localhost, has
// all that the station needs for its queue.
func TestBrowserOverHTTPS(t *testing.T) {
	t.Parallel()
	const name = "works.plant.example"
	r, way, _ := serveTLS(t, name)
	key := sha256.Sum256(way.root.RawSubjectPublicKeyInfo)
	b := browsertest.Start(t,
		browsertest.Flag{Name: "host-resolver-rules", Value: "MAP " + name + " 127.0.0.1"},
		browsertest.Flag{Name: "ignore-certificate-errors-spki-list", Value: base64.StdEncoding.EncodeToString(key[:])})
	_, port, err := net.SplitHostPort(r.program.listener.Addr().String())
	if err != nil {
		t.Fatal(err)
	}
	p := b.Person("https://" + net.JoinHostPort(name, port))
	p.Open("/authority")
	p.ForEverybody("the page of the authority")
	for _, lang := range []string{"de", "es"} {
		speak(p, lang)
		fitsATablet(p, lang, "/authority")
	}
	speak(p, "en")
	p.Size(1280, 800)
	p.Open("/sign-in")
	p.Fill("#login", "operator1")
	p.Fill("#password", secret)
	p.Keys("\r")
	p.WaitFor(`location.pathname.startsWith("/station")`)
	p.Want("a secure context", `isSecureContext && "serviceWorker" in navigator && "randomUUID" in crypto`, "true")
	p.Want("the cookie is out of reach of scripts", `document.cookie.includes("session")`, "false")
	p.Open("/board")
	p.WaitFor(`(s => s && s.textContent.includes(s.dataset.liveOn))(document.querySelector("[data-live-state]"))`)
}

func TestHealthOfNobody(t *testing.T) {
	t.Parallel()
	err := (&healthCmd{URL: "http://127.0.0.1:1"}).Run(context.Background())
	if op, ok := errors.AsType[*net.OpError](err); !ok {
		t.Errorf("nobody there: %v, %v", err, op)
	}
}
