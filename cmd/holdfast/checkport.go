package main

import (
	"bytes"
	"context"
	"crypto/tls"
	"crypto/x509"
	"errors"
	"fmt"
	"io/fs"
	"net"
	"net/http"
	"net/netip"
	"strings"
	"syscall"
	"time"

	"holdfast/internal/certs"
	"holdfast/internal/localpg"
	"holdfast/web"
)

// checkPort looks whether the server can listen. That the server itself listens there
// already is as it should be: a machine is also checked while it works.
func (c *checkCmd) checkPort(ctx context.Context) finding {
	l, err := net.Listen("tcp", c.Addr)
	if err == nil {
		_ = l.Close()
		return finding{good, "port", c.Addr + " is free.", ""}
	}
	if errors.Is(err, syscall.EADDRINUSE) {
		switch own, ready := c.ownServer(ctx); {
		case own && !c.servesData():
			return finding{wrong, "port", fmt.Sprintf("On %s a Holdfast server runs, and not from the data folder %s.", c.Addr, c.Data), "Choose another address with --addr, or name the folder that is served."}
		case own && ready:
			return finding{good, "port", fmt.Sprintf("On %s this server runs already, and is ready.", c.Addr), ""}
		case own:
			return finding{look, "port", fmt.Sprintf("On %s this server runs already, but it is not ready.", c.Addr), "Its log says why; mostly its database cannot be reached."}
		}
		return finding{wrong, "port", sentence(err), "Choose another with --addr, or end what listens there. It does not answer as this server would with these flags."}
	}
	return finding{wrong, "port", sentence(err), atAnother(err)}
}

// atAnother says what to do where one cannot listen.
func atAnother(err error) string {
	switch {
	case errors.Is(err, syscall.EADDRINUSE):
		return "Choose another with --addr, or end what listens there."
	case errors.Is(err, syscall.EACCES):
		return "Ports below 1024 need a right: setcap cap_net_bind_service=+ep, or AmbientCapabilities in the unit."
	case errors.Is(err, syscall.EADDRNOTAVAIL):
		return "Name an address of this machine with --addr."
	}
	return "Say it with --addr as HOST:PORT, such as 127.0.0.1:8080."
}

// listenAt opens the address to serve at.
func listenAt(addr string) (net.Listener, error) {
	l, err := net.Listen("tcp", addr)
	if err != nil {
		return nil, fmt.Errorf("%w. %s", err, strings.TrimSuffix(atAnother(err), "."))
	}
	return l, nil
}

// servesData reports whether a server may be the one of these flags: nobody serves another
// folder than theirs.
func (c *checkCmd) servesData() bool {
	if c.privateDir() == "" {
		return true
	}
	_, err := localpg.Attach(c.Data, localpg.Database)
	return !errors.Is(err, localpg.ErrNotServed) && !errors.Is(err, fs.ErrNotExist)
}

// ownServer asks what listens at the address whether it is this server, and ready. Over
// https it must also show a certificate that these flags would serve with.
func (c *checkCmd) ownServer(ctx context.Context) (own, ready bool) {
	ctx, cancel := context.WithTimeout(ctx, 5*time.Second)
	defer cancel()
	scheme, transport := "http", &http.Transport{DisableKeepAlives: true}
	if c.TLS == "auto" || c.TLS == "files" {
		scheme, transport.TLSClientConfig = "https", c.expected()
		if transport.TLSClientConfig == nil {
			return false, false
		}
	}
	req, err := http.NewRequestWithContext(ctx, http.MethodGet, scheme+"://"+hereAt(c.Addr)+web.ReadyAddress, nil)
	if err != nil {
		return false, false
	}
	// Not by way of any proxy that the environment names.
	res, err := transport.RoundTrip(req)
	if err != nil {
		return false, false
	}
	defer res.Body.Close()
	return res.Header.Get(web.ServerHeader) != "", res.StatusCode == http.StatusOK
}

// expected accepts only the server's certificate; nil when there is none yet.
func (c *checkCmd) expected() *tls.Config {
	var is func(leaf *x509.Certificate) bool
	switch c.TLS {
	case "auto":
		root, err := certs.ReadRoot(c.authorityDir(c.stateDir()))
		if err != nil {
			return nil
		}
		is = func(leaf *x509.Certificate) bool { return leaf.CheckSignatureFrom(root) == nil }
	case "files":
		way, err := c.prepare(c.Addr, c.stateDir(), time.Now)
		if err != nil || way.leaf == nil {
			return nil
		}
		is = func(leaf *x509.Certificate) bool { return bytes.Equal(leaf.Raw, way.leaf().Raw) }
	}
	return &tls.Config{
		// Names and dates are the business of checkCertificate; who answers is asked below.
		InsecureSkipVerify: true,
		VerifyConnection: func(s tls.ConnectionState) error {
			if !is(s.PeerCertificates[0]) {
				return errors.New("another certificate")
			}
			return nil
		},
	}
}

// hereAt is where a server that listens at addr is reached from this machine.
func hereAt(addr string) string {
	host, port, err := net.SplitHostPort(addr)
	if err != nil {
		return addr
	}
	if ip, err := netip.ParseAddr(host); host == "" || err == nil && ip.IsUnspecified() {
		host = "localhost"
	}
	return net.JoinHostPort(host, port)
}
