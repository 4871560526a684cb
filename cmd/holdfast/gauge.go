package main

import (
	"bufio"
	"context"
	"crypto/tls"
	"crypto/x509"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"net/http"
	"os"
	"strings"
	"sync"
	"time"

	"go.bug.st/serial"

	"holdfast/internal/relay"
)

// sending is how a sender reaches the server, and where it keeps what is not taken yet.
type sending struct {
	Server    string `help:"Address of the server, https://HOST:PORT." required:"" env:"HOLDFAST_SERVER"`
	TokenFile string `help:"File that holds the token of this sender." required:"" type:"existingfile" env:"HOLDFAST_TOKEN_FILE"`
	CA        string `name:"ca" help:"Certificate of the plant's authority, from /authority of the server, PEM or DER." type:"existingfile" env:"HOLDFAST_CA"`
	Spool     string `help:"File that keeps what the server has not taken yet." required:"" env:"HOLDFAST_SPOOL"`
}

// with runs f while what is in the spool is sent.
func (c *sending) with(ctx context.Context, log *slog.Logger, f func(ctx context.Context, s *relay.Spool) error) error {
	if _, err := readSecret(c.TokenFile); err != nil {
		return err
	}
	client, err := c.client()
	if err != nil {
		return err
	}
	s, err := relay.OpenSpool(c.Spool, log)
	if err != nil {
		return err
	}
	defer s.Close()
	p := relay.Poster{Spool: s, Server: c.Server, Token: func() (string, error) { return readSecret(c.TokenFile) }, Now: time.Now, Log: log, Pause: time.Second, HTTP: client}
	background, stop := context.WithCancel(ctx)
	var running sync.WaitGroup
	running.Go(func() { p.Run(background) })
	err = f(ctx, s)
	stop()
	running.Wait()
	return err
}

// client is the way to the server.
func (c *sending) client() (*http.Client, error) {
	trust, err := trusting(c.CA)
	if err != nil {
		return nil, err
	}
	return &http.Client{Timeout: 30 * time.Second,
		Transport:     knowing{&http.Transport{Proxy: http.ProxyFromEnvironment, TLSClientConfig: trust, IdleConnTimeout: time.Minute}, *c},
		CheckRedirect: func(*http.Request, []*http.Request) error { return http.ErrUseLastResponse }}, nil
}

func readSecret(path string) (string, error) {
	body, err := os.ReadFile(path)
	if err != nil {
		return "", err
	}
	if secret := strings.TrimSpace(string(body)); secret != "" {
		return secret, nil
	}
	return "", fmt.Errorf("%s holds nothing", path)
}

// trusting is TLS that trusts this authority, or those of the machine when none is named.
func trusting(ca string) (*tls.Config, error) {
	c := &tls.Config{MinVersion: tls.VersionTLS12}
	if ca == "" {
		return c, nil
	}
	body, err := os.ReadFile(ca)
	if err != nil {
		return nil, err
	}
	c.RootCAs = x509.NewCertPool()
	if c.RootCAs.AppendCertsFromPEM(body) {
		return c, nil
	}
	root, err := x509.ParseCertificate(body) // in DER, as tablets load it
	if err != nil {
		return nil, fmt.Errorf("%s holds no certificate", ca)
	}
	c.RootCAs.AddCert(root)
	return c, nil
}

// knowing says what to do about a server whose authority the sender does not know.
type knowing struct {
	http.RoundTripper
	sending
}

func (k knowing) RoundTrip(r *http.Request) (*http.Response, error) {
	res, err := k.RoundTripper.RoundTrip(r)
	if _, unknown := errors.AsType[x509.UnknownAuthorityError](err); unknown {
		at := strings.TrimRight(k.Server, "/") + "/authority"
		if k.CA != "" {
			return nil, fmt.Errorf("%w; --ca %s is not of the authority that signed it: load it again from %s, and compare the fingerprint", err, k.CA, at)
		}
		return nil, fmt.Errorf("%w; load the certificate of the plant's authority from %s, compare its fingerprint, and name the file with --ca", err, at)
	}
	return res, err
}

// gaugeCmd sends what a gauge tells.
type gaugeCmd struct {
	sending
	Port           string        `arg:"" help:"Serial port, such as /dev/ttyUSB0, or - for standard input." default:"-"`
	Baud           int           `help:"Speed of the serial port; 8 bits, no parity, 1 stop bit." default:"9600"`
	Characteristic string        `help:"What is measured: name, \"Machine / name\" where the name is there twice, or id." required:""`
	Station        string        `help:"Id of the station, where the sender belongs to no single one."`
	Unit           string        `help:"Unit of the readings. A line that states another is not taken." required:""`
	Size           int           `help:"Readings of a subgroup." required:""`
	Streams        []string      `name:"stream" help:"Stream of the machine that the readings come from: one for all of them, or one for each reading of a subgroup in their order." sep:"none"`
	Lot            string        `help:"Order or lot that is measured. Left out: the one that the machine runs."`
	Prefix         string        `help:"What stands before every reading."`
	Suffix         string        `help:"What stands behind every reading."`
	Sequence       bool          `help:"A running number stands before the reading: a line that comes twice under one is one reading. Otherwise it is two."`
	Within         time.Duration `help:"A subgroup that is not whole after so long is sent as a short one when the next reading comes." default:"30m"`
}

func (c *gaugeCmd) Run(ctx context.Context, log *slog.Logger) error {
	source := relay.Source{Characteristic: c.Characteristic, Station: c.Station, Size: c.Size, Streams: c.Streams, Within: c.Within,
		Pattern: relay.Pattern{Prefix: c.Prefix, Suffix: c.Suffix, Unit: c.Unit, Sequence: c.Sequence}}
	if err := source.Check(); err != nil {
		return err
	}
	client, err := c.client()
	if err != nil {
		return err
	}
	m := &measured{sending: c.sending, station: c.Station, characteristic: c.Characteristic, client: client}
	switch err := m.agrees(ctx, c.Unit, c.Size); {
	case errors.Is(err, errOther) && c.Port == "-":
		return fmt.Errorf("nothing was read: %w", err)
	case errors.Is(err, errOther): // a port goes on: what the gauge tells meanwhile would be lost
		log.Error("what the gauge tells does not fit what the station measures", "error", err)
	case err != nil:
		log.Warn("the server does not say what the station measures", "error", err)
	}
	return c.with(ctx, log, func(ctx context.Context, s *relay.Spool) error {
		source.Fits = c.measuring(ctx, client, c.Station, c.Characteristic)
		g := &relay.Gather{Spool: s, Now: time.Now, Source: source, Lot: func() string { return c.Lot }}
		if err := g.Flush(); err != nil {
			log.Error("what waited could not be kept", "error", err)
		}
		if c.Port == "-" {
			readLines(ctx, os.Stdin, g, log)
			return ended(ctx, s, g, log)
		}
		return c.listen(ctx, g, log)
	})
}

// listen reads the port until ctx ends, and opens it again when the gauge was unplugged.
func (c *gaugeCmd) listen(ctx context.Context, g *relay.Gather, log *slog.Logger) error {
	for ctx.Err() == nil {
		port, err := serial.Open(c.Port, &serial.Mode{BaudRate: c.Baud})
		if err == nil {
			log.Info("the gauge is read", "port", c.Port)
			readLines(ctx, port, g, log)
			_ = port.Close()
		}
		if ctx.Err() == nil {
			log.Warn("the gauge cannot be read; its port is tried again", "port", c.Port, "error", err)
			pauseFor(ctx, 2*time.Second)
		}
	}
	return nil
}

func pauseFor(ctx context.Context, d time.Duration) {
	select {
	case <-ctx.Done():
	case <-time.After(d):
	}
}

// readLines takes every line until the reader or ctx ends. What stands at the end without
// a line break is no whole line: on a port it may be half a number.
func readLines(ctx context.Context, from io.ReadCloser, g *relay.Gather, log *slog.Logger) {
	defer context.AfterFunc(ctx, func() { _ = from.Close() })()
	lines := bufio.NewReaderSize(from, 4096)
	for {
		text, err := lines.ReadSlice('\n')
		if err != nil && !errors.Is(err, bufio.ErrBufferFull) {
			if len(text) > 0 {
				log.Warn("the last line did not end and was not taken", "line", string(text))
			}
			return
		}
		line := strings.TrimSpace(strings.ToValidUTF8(string(text), "\uFFFD"))
		if line == "" {
			continue
		}
		if durable, err := g.Take(line, ""); err != nil {
			log.Error("a line could not be kept: measure again when there is room", "line", line, "error", err)
		} else if !durable {
			log.Warn("a line is held in memory only", "line", line)
		}
	}
}

// ended says what became of standard input: what waits for the rest of its subgroup, what is
// not sent, and what was refused.
func ended(ctx context.Context, s *relay.Spool, g *relay.Gather, log *slog.Logger) error {
	if n := g.Waiting(); n > 0 {
		log.Warn("readings wait in the spool for the rest of their subgroup", "readings", n, "of", g.Size)
	}
	if err := drain(ctx, s); err != nil {
		return err
	}
	if n := s.Refused(); n > 0 {
		return fmt.Errorf("subgroups refused: %d; they are put aside in %s", n, s.RefusedFile())
	}
	return nil
}

// drain waits until everything is sent, or for a while: what is left stays in the file.
func drain(ctx context.Context, s *relay.Spool) error {
	limit := time.Now().Add(10 * time.Second)
	for s.Len() > 0 && ctx.Err() == nil {
		if time.Now().After(limit) {
			return fmt.Errorf("%d messages are not sent yet; they are kept in the spool for the next start", s.Len())
		}
		pauseFor(ctx, 50*time.Millisecond)
	}
	return nil
}
