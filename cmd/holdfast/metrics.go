package main

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"net"
	"net/http"
	"os"
	"strings"
	"time"

	"holdfast/internal/metrics"
)

// monitor says who may read the figures about this server.
type monitor struct {
	MetricsAddr  string `name:"metrics-addr" help:"Listener of its own for /metrics, HOST:PORT; beyond this machine it needs --metrics-token." env:"HOLDFAST_METRICS_ADDR" placeholder:"HOST:PORT"`
	MetricsToken string `name:"metrics-token" help:"File with a token; with one, /metrics is also served under the server's own address." env:"HOLDFAST_METRICS_TOKEN" placeholder:"FILE"`
}

// watching is a monitor that was prepared.
type watching struct {
	token    string
	listener net.Listener
}

// shortToken is too short to withstand guessing.
const shortToken = 16

func (m monitor) prepare() (w watching, err error) {
	if m.MetricsToken != "" {
		data, err := os.ReadFile(m.MetricsToken)
		if err != nil {
			return w, fmt.Errorf("read the token for metrics: %w", err)
		}
		if w.token = strings.TrimSpace(string(data)); len(w.token) < shortToken {
			return w, fmt.Errorf("the token in %s is too short: at least %d characters", m.MetricsToken, shortToken)
		}
	}
	if m.MetricsAddr == "" {
		return w, nil
	}
	if w.token == "" && !loopback(m.MetricsAddr) {
		return w, fmt.Errorf("metrics on %s can be read from other machines: --metrics-token is needed", m.MetricsAddr)
	}
	if w.listener, err = net.Listen("tcp", m.MetricsAddr); err != nil {
		return w, fmt.Errorf("listen for metrics: %w", err)
	}
	return w, nil
}

// serve answers scrapes on the listener of its own until ctx ends.
func (w watching) serve(ctx context.Context, h http.Handler, log *slog.Logger) {
	mux := http.NewServeMux()
	mux.Handle("GET /metrics", h)
	s := &http.Server{Handler: mux, ReadHeaderTimeout: 5 * time.Second, WriteTimeout: 30 * time.Second, MaxHeaderBytes: 8 << 10,
		ErrorLog: slog.NewLogLogger(log.Handler(), slog.LevelDebug)}
	stop := context.AfterFunc(ctx, func() { _ = s.Close() })
	defer stop()
	log.Info("metrics", "address", "http://"+w.listener.Addr().String()+"/metrics")
	if err := s.Serve(w.listener); !errors.Is(err, http.ErrServerClosed) {
		log.Error("serving metrics", "error", err)
	}
}

// watch tells the metrics where to read.
func (p *program) watch() {
	s := metrics.Sources{Version: version(), Store: p.store.Counts, Hub: p.hub.Stats, Ready: p.store.Ready}
	s.Outbox = func(ctx context.Context) (metrics.Outbox, error) {
		o, err := p.store.OutboxState(ctx)
		out := metrics.Outbox{Waiting: o.Waiting, GivenUp: o.GivenUp}
		if !o.Oldest.IsZero() {
			out.OldestAge = p.Clock().Sub(o.Oldest)
		}
		return out, err
	}
	if leaf := p.Transport.leaf; leaf != nil {
		s.Certificate = func() time.Time { return leaf().NotAfter }
	}
	p.metrics.Watch(s)
}
