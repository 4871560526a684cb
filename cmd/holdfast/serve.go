package main

import (
	"context"
	"crypto/tls"
	"crypto/x509"
	"errors"
	"fmt"
	"log/slog"
	"net/http"
	"strings"
	"time"

	"holdfast/internal/certs"
	"holdfast/internal/store"
)

type serveCmd struct {
	database
	Addr  string   `help:"Where to listen, HOST:PORT." default:"127.0.0.1:8080" env:"HOLDFAST_ADDR"`
	Hosts []string `help:"Names, with port, under which browsers reach the server; any when empty." env:"HOLDFAST_HOSTS" placeholder:"HOST:PORT"`
	transport
	monitor
	messaging
	Plant    string `help:"Name of the plant, used once, on an empty database." default:"Plant" env:"HOLDFAST_PLANT"`
	TimeZone string `help:"Its time zone, used once, on an empty database." default:"UTC" env:"HOLDFAST_TIME_ZONE"`
}

func (c *serveCmd) Run(ctx context.Context, log *slog.Logger) error {
	watching, err := c.monitor.prepare()
	if err != nil {
		return err
	}
	// Before anything is made: that the address is taken must not leave a new database behind.
	listener, err := listenAt(c.Addr)
	if err != nil {
		return err
	}
	defer listener.Close()
	way, err := c.transport.prepare(c.Addr, c.stateDir(), time.Now)
	if err != nil {
		return err
	}
	messages, err := c.messaging.load()
	if err != nil {
		return err
	}
	sayMessages(log, messages)
	return c.with(ctx, log, func(db reached) error {
		st, err := store.Open(ctx, store.Options{URL: db.url})
		if err != nil {
			return err
		}
		err = firstPlant(ctx, st, c.Plant, c.TimeZone)
		st.Close()
		if err != nil {
			return err
		}
		p, err := newProgram(ctx, settings{Listener: listener, DatabaseURL: db.url, Hosts: c.Hosts, Transport: way, Metrics: watching, Messages: messages, DataDir: c.privateDir(), Log: log})
		if err != nil {
			return err
		}
		defer p.Close()
		ctx = untilPostgresEnds(ctx, db, log)
		return errors.Join(p.Run(ctx), whyEnded(ctx))
	})
}

// untilPostgresEnds is ctx, ended as well when the private Postgres ends by itself:
// there is nothing left to serve then, and a service manager starts both afresh.
func untilPostgresEnds(ctx context.Context, db reached, log *slog.Logger) context.Context {
	if db.private == nil {
		return ctx
	}
	ctx, cancel := context.WithCancelCause(ctx)
	go func() {
		defer cancel(nil)
		select {
		case <-ctx.Done():
		case <-db.private.Done():
			if ctx.Err() == nil {
				cancel(errPostgresEnded)
				log.Error("the private Postgres ended by itself", "its log ends with", db.private.LogTail())
			}
		}
	}()
	return ctx
}

var errPostgresEnded = errors.New("the private Postgres ended by itself")

// whyEnded is nil when serving ended because it was asked to: an error makes a service
// manager start it again.
func whyEnded(ctx context.Context) error {
	if err := context.Cause(ctx); errors.Is(err, errPostgresEnded) {
		return err
	}
	return nil
}

type healthCmd struct {
	URL    string `arg:"" help:"Address of the server." default:"http://127.0.0.1:8080" env:"HOLDFAST_HEALTH_URL"`
	TLSDir string `name:"tls-dir" help:"Folder of the authority to trust, as for serve --tls auto." env:"HOLDFAST_TLS_DIR" placeholder:"FOLDER"`
}

func (c *healthCmd) Run(ctx context.Context) error {
	ctx, cancel := context.WithTimeout(ctx, 5*time.Second)
	defer cancel()
	req, err := http.NewRequestWithContext(ctx, http.MethodGet, strings.TrimRight(c.URL, "/")+"/readyz", nil)
	if err != nil {
		return err
	}
	client := &http.Client{CheckRedirect: func(*http.Request, []*http.Request) error { return http.ErrUseLastResponse }}
	if c.TLSDir != "" && req.URL.Scheme == "https" {
		root, err := certs.ReadRoot(c.TLSDir)
		if err != nil {
			return err
		}
		trusted := x509.NewCertPool()
		trusted.AddCert(root)
		client.Transport = &http.Transport{TLSClientConfig: &tls.Config{RootCAs: trusted}, DisableKeepAlives: true}
	}
	res, err := client.Do(req)
	if err != nil {
		return err
	}
	defer res.Body.Close()
	if res.StatusCode != http.StatusOK {
		return fmt.Errorf("the server answers %s", res.Status)
	}
	fmt.Println("ready")
	return nil
}
