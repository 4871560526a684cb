package main

import (
	"context"
	"crypto/tls"
	"crypto/x509"
	"errors"
	"fmt"
	"log/slog"
	"net"
	"net/http"
	"net/netip"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"time"

	"holdfast/internal/certs"
)

// transport says how browsers reach the server.
type transport struct {
	TLS          string         `help:"off: plain http, on this machine only. auto: an authority of the plant's own. files: --tls-cert and --tls-key. proxy: a trusted proxy ends TLS." enum:"off,auto,files,proxy" default:"off" env:"HOLDFAST_TLS"`
	TLSDir       string         `name:"tls-dir" help:"Folder of the authority for --tls auto; the folder tls beside a private cluster when empty." env:"HOLDFAST_TLS_DIR" placeholder:"FOLDER"`
	TLSNames     []string       `name:"tls-names" help:"Names and addresses that the certificate of --tls auto is for; those of this machine when empty." env:"HOLDFAST_TLS_NAMES" placeholder:"NAME"`
	TLSCert      string         `name:"tls-cert" help:"Certificate with its chain, in PEM; read again when it changes." env:"HOLDFAST_TLS_CERT" placeholder:"FILE"`
	TLSKey       string         `name:"tls-key" help:"Its key, in PEM." env:"HOLDFAST_TLS_KEY" placeholder:"FILE"`
	TrustedProxy []netip.Prefix `name:"trusted-proxy" help:"Addresses from which the proxy of --tls proxy connects; all others are refused." env:"HOLDFAST_TRUSTED_PROXY" placeholder:"CIDR"`
}

// secured is how a transport was prepared.
type secured struct {
	config *tls.Config       // nil: the server itself speaks plain http
	root   *x509.Certificate // of the plant's own authority, when it has one
	leaf   func() *x509.Certificate
	tend   func() error // renews or reads again what needs it; nil when nothing does
	https  bool         // browsers see https
	strict time.Duration
	proxy  []netip.Prefix
}

// With an authority of the plant's own a lost folder means new certificates on all
// tablets; a browser that was told to insist for a year could not be helped until then.
const (
	strictOwn   = 30 * 24 * time.Hour
	strictKnown = 365 * 24 * time.Hour
	tendEvery   = 10 * time.Minute
)

// prepare checks that the choices fit together and opens certificates. stateDir is where
// the authority lives when --tls-dir does not say.
func (t transport) prepare(addr, stateDir string, now func() time.Time) (secured, error) {
	switch t.TLS {
	case "auto":
		return t.own(stateDir, now)
	case "files":
		if t.TLSCert == "" || t.TLSKey == "" {
			return secured{}, errors.New("--tls files needs --tls-cert and --tls-key")
		}
		f, err := certs.OpenFiles(t.TLSCert, t.TLSKey)
		if err != nil {
			return secured{}, err
		}
		return secured{config: serverTLS(f.Certificate), leaf: f.Leaf, tend: f.Reload, https: true, strict: strictKnown}, nil
	case "proxy":
		if len(t.TrustedProxy) == 0 {
			return secured{}, errors.New("--tls proxy needs --trusted-proxy: the address from which the proxy connects")
		}
		return secured{https: true, strict: strictKnown, proxy: t.TrustedProxy}, nil
	}
	if !loopback(addr) {
		return secured{}, fmt.Errorf("plain http is for this machine only, and %s can be reached from others: choose --tls auto, files or proxy", addr)
	}
	return secured{}, nil
}

func (t transport) own(stateDir string, now func() time.Time) (secured, error) {
	dir := t.authorityDir(stateDir)
	if dir == "" {
		return secured{}, errors.New("--tls auto needs a folder for its authority: say it with --tls-dir")
	}
	names := func() ([]string, error) {
		if len(t.TLSNames) > 0 {
			// The machine itself must be able to ask whether the server is ready.
			return append(slices.Clone(t.TLSNames), "localhost", "127.0.0.1", "::1"), nil
		}
		return certs.MachineNames()
	}
	list, err := names()
	if err != nil {
		return secured{}, err
	}
	a, err := certs.OpenAuthority(dir, list, now)
	if err != nil {
		return secured{}, err
	}
	leaf := func() *x509.Certificate {
		c, _ := a.Certificate(nil) // never fails once opened
		return c.Leaf
	}
	tend := func() error {
		list, err := names()
		if err != nil {
			return err
		}
		return a.Renew(list)
	}
	return secured{config: serverTLS(a.Certificate), root: a.Root(), leaf: leaf, tend: tend, https: true, strict: strictOwn}, nil
}

// authorityDir is the folder of the authority, "" when nobody said where.
func (t transport) authorityDir(stateDir string) string {
	if t.TLSDir == "" && stateDir != "" {
		return filepath.Join(stateDir, "tls")
	}
	return t.TLSDir
}

func serverTLS(get func(*tls.ClientHelloInfo) (*tls.Certificate, error)) *tls.Config {
	return &tls.Config{GetCertificate: get, MinVersion: tls.VersionTLS12, NextProtos: []string{"h2", "http/1.1"}}
}

// loopback reports whether nobody but this machine reaches addr.
func loopback(addr string) bool {
	host, _, err := net.SplitHostPort(addr)
	if err != nil {
		return false
	}
	if host == "localhost" {
		return true
	}
	ip, err := netip.ParseAddr(host)
	return err == nil && ip.IsLoopback()
}

// fromOutside is the address for people: with the name that the certificate is for.
func (p *program) fromOutside() string {
	if at := p.otherMachines(); at != "" {
		return at
	}
	return p.URL()
}

// otherMachines is the address at which other machines reach the server, "" when it is not
// known or none does.
func (p *program) otherMachines() string {
	if p.Transport.leaf == nil {
		return ""
	}
	return outside(p.listener.Addr().String(), p.Transport.leaf())
}

// outside is the address under the first name of a certificate that leads to a server
// from other machines, or "" when there is none or only this machine reaches the server.
func outside(listening string, c *x509.Certificate) string {
	_, port, err := net.SplitHostPort(listening)
	if err != nil || loopback(listening) {
		return ""
	}
	for _, n := range namesIn(c) {
		if host := net.JoinHostPort(n, port); !loopback(host) && !strings.HasPrefix(n, "*") {
			return "https://" + host
		}
	}
	return ""
}

// namesIn are the names and addresses that a certificate is for.
func namesIn(c *x509.Certificate) []string {
	names := slices.Clone(c.DNSNames)
	for _, ip := range c.IPAddresses {
		names = append(names, ip.String())
	}
	return names
}

// keep tends certificates until ctx ends. What fails is logged and tried again: the
// certificate in use goes on meanwhile.
func (s secured) keep(ctx context.Context, log *slog.Logger) {
	if s.tend == nil {
		return
	}
	tick := time.NewTicker(tendEvery)
	defer tick.Stop()
	for {
		select {
		case <-ctx.Done():
			return
		case <-tick.C:
			if err := s.tend(); err != nil {
				log.Error("tending the certificate", "error", err)
			}
		}
	}
}

// from is the client's address: the peer, or what the trusted proxy says of it.
func (s secured) from(r *http.Request) netip.Addr {
	peer := peerOf(r)
	if !s.trusts(peer) {
		return peer
	}
	// The header grows at its end; what stands before the last address that a trusted
	// proxy wrote may be anybody's invention.
	hops := strings.Split(strings.Join(r.Header.Values("X-Forwarded-For"), ","), ",")
	for _, hop := range slices.Backward(hops) {
		addr, err := netip.ParseAddr(strings.TrimSpace(hop))
		if err != nil {
			break
		}
		if addr = addr.Unmap(); !s.trusts(addr) {
			return addr
		}
	}
	return peer
}

func (s secured) trusts(a netip.Addr) bool {
	return slices.ContainsFunc(s.proxy, func(p netip.Prefix) bool { return p.Contains(a) })
}

func peerOf(r *http.Request) netip.Addr {
	ap, err := netip.ParseAddrPort(r.RemoteAddr)
	if err != nil {
		return netip.Addr{}
	}
	return ap.Addr().Unmap()
}

// guard lets nobody past the proxy where one is named: what comes another way did not come
// over TLS. The machine itself may ask whether the server is well.
func (s secured) guard(next http.Handler) http.Handler {
	if len(s.proxy) == 0 {
		return next
	}
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		peer := peerOf(r)
		probe := peer.IsLoopback() && (r.URL.Path == "/healthz" || r.URL.Path == "/readyz")
		if !probe && (!s.trusts(peer) || r.Header.Get("X-Forwarded-Proto") == "http") {
			http.Error(w, "This server is reached over https, through its proxy.", http.StatusForbidden)
			return
		}
		next.ServeHTTP(w, r)
	})
}

// stateDir is where the program keeps what is not in the database.
func (d *database) stateDir() string {
	if d.Data != "" {
		return d.Data
	}
	// A service manager names a folder of the service's own here.
	first, _, _ := strings.Cut(os.Getenv("STATE_DIRECTORY"), ":")
	return first
}
