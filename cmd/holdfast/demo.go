package main

import (
	"cmp"
	"context"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"net"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"syscall"
	"time"

	"github.com/jackc/pgx/v5"
	"golang.org/x/sync/errgroup"

	"holdfast/internal/auth"
	"holdfast/internal/demo"
	"holdfast/internal/localpg"
	"holdfast/internal/store"
)

type demoCmd struct {
	database
	Addr  string `help:"Where to listen; loopback only. The next free port is taken when this one is in use." default:"localhost:8080" env:"HOLDFAST_ADDR"`
	Fresh bool   `help:"Start over: throw the demo's data away and make them anew."`
	Quiet bool   `help:"No simulator: nothing happens but what visitors do."`
}

func (c *demoCmd) Run(ctx context.Context, log *slog.Logger) error {
	out := os.Stdout
	began := time.Now()
	listener, err := c.listen(out)
	if err != nil {
		return err
	}
	defer listener.Close()
	if c.URL == "" && c.Data == "" {
		dir, err := localpg.DefaultDir("holdfast")
		if err != nil {
			return err
		}
		c.Data = filepath.Join(dir, "demo")
	}
	if c.URL != "" && c.Fresh {
		return errors.New("--fresh throws a private cluster away; on a database of your own, make an empty one instead")
	}
	if err := c.refuseForeign(ctx); err != nil {
		return err
	}
	over, err := c.startOver()
	if err != nil {
		return err
	}
	if over {
		fmt.Fprintln(out, "The demo was interrupted while it was made; it is made anew.")
	}
	if c.URL == "" {
		fmt.Fprintf(out, "Starting a private PostgreSQL in %s\n", c.Data)
	}
	db, done, err := c.open(ctx, log, c.Fresh || over)
	if err != nil {
		return err
	}
	defer done()
	people, err := c.build(ctx, db, out)
	if err != nil {
		return err
	}
	p, err := newProgram(ctx, settings{
		Listener: listener, DatabaseURL: db.url, Hosts: loopbackNames(listener), Demo: true, Messages: demo.Messages(), DataDir: c.privateDir(), Log: log,
	})
	if err != nil {
		return err
	}
	defer p.Close()
	fmt.Fprintf(out, "\nKestrel Row is open after %s:\n\n    http://%s\n\n%s\nCtrl-C stops everything. --fresh starts over.\n\n",
		time.Since(began).Round(100*time.Millisecond), loopbackNames(listener)[0], people)
	return c.serve(ctx, db, p, log)
}

func (c *demoCmd) serve(ctx context.Context, db reached, p *program, log *slog.Logger) error {
	ctx = untilPostgresEnds(ctx, db, log)
	serving := ctx
	g, ctx := errgroup.WithContext(serving)
	g.Go(func() error { return p.Run(ctx) })
	if !c.Quiet {
		sim, err := demo.NewSimulator(ctx, p.store, log, time.Now)
		if err != nil {
			return err
		}
		g.Go(func() error {
			sim.Run(ctx)
			return nil
		})
	}
	return errors.Join(g.Wait(), whyEnded(serving))
}

// build fills an empty database and refuses one that holds anything else than the demo.
// It returns who may sign in and how.
func (c *demoCmd) build(ctx context.Context, db reached, out io.Writer) (string, error) {
	st, err := store.Open(ctx, store.Options{URL: db.url})
	if err != nil {
		return "", err
	}
	defer st.Close()
	empty, ours, err := demo.Ours(ctx, st)
	if err != nil {
		return "", err
	}
	if !empty && !ours {
		return "", errForeign
	}
	const oneClick = "On this machine the sign-in page lets each of them in by one click."
	if ours {
		return "The people and their passwords are those printed when the demo was made.\n" + oneClick + "\n", nil
	}
	hasher, err := auth.NewHasher(auth.DefaultCost, 1)
	if err != nil {
		return "", err
	}
	var b strings.Builder
	hash := func(ctx context.Context, login string) (string, error) {
		secret := auth.RandomSecret()
		fmt.Fprintf(&b, "    %-16s %s\n", login, string(secret))
		return hasher.Hash(ctx, secret)
	}
	hashPIN := func(ctx context.Context, pin string) (string, error) { return hasher.Hash(ctx, auth.Secret(pin)) }
	finished, err := c.begin()
	if err != nil {
		return "", err
	}
	fmt.Fprintf(out, "Making Kestrel Row and its last %d days\n", demo.Days)
	err = demo.Build(ctx, st, hash, hashPIN, time.Now(), func(done float64) { fmt.Fprintf(out, "  %3.0f %%\n", 100*done) })
	if err != nil {
		return "", err
	}
	return "Who may sign in, and their passwords:\n" + b.String() + oneClick + "\n", finished()
}

var errForeign = errors.New("this database holds something else; the demo takes only an empty database or its own")

// refuseForeign looks before anything is migrated: a database that holds something else
// is not to be changed at all.
func (c *demoCmd) refuseForeign(ctx context.Context) error {
	at := cmp.Or(c.OwnerURL, c.URL)
	if c.URL == "" {
		return nil
	}
	conn, err := pgx.Connect(ctx, at)
	if err != nil {
		return fmt.Errorf("connect to the database: %w", err)
	}
	defer conn.Close(ctx)
	var tables int
	var plants bool
	if err := conn.QueryRow(ctx, `select count(*), to_regclass('public.plant') is not null from pg_class c join pg_namespace n on n.oid = c.relnamespace
		where c.relkind in ('r', 'p', 'v', 'm', 'f') and n.nspname <> 'information_schema' and n.nspname not like 'pg\_%'`).Scan(&tables, &plants); err != nil {
		return fmt.Errorf("look into the database: %w", err)
	}
	if !plants {
		if tables > 0 {
			return errForeign
		}
		return nil
	}
	var foreign bool
	if err := conn.QueryRow(ctx, `select exists (select from public.plant where not demo)`).Scan(&foreign); err != nil {
		return fmt.Errorf("look into the database: %w", err)
	}
	if foreign {
		return errForeign
	}
	return nil
}

// unfinished is a file beside the private cluster that is there while the demo is made.
func (c *demoCmd) unfinished() string { return c.Data + ".unfinished" }

// startOver reports whether the demo was interrupted while it was made.
func (c *demoCmd) startOver() (bool, error) {
	if c.Data == "" || c.URL != "" {
		return false, nil
	}
	_, err := os.Stat(c.unfinished())
	if errors.Is(err, os.ErrNotExist) {
		return false, nil
	}
	return err == nil, err
}

// begin notes that the demo is being made, until finished is called.
func (c *demoCmd) begin() (finished func() error, err error) {
	if c.URL != "" {
		return func() error { return nil }, nil
	}
	if err := os.WriteFile(c.unfinished(), nil, 0o644); err != nil {
		return nil, fmt.Errorf("note that the demo is being made: %w", err)
	}
	return func() error { return os.Remove(c.unfinished()) }, nil
}

// listen takes the wanted port, or the next free one, and says so.
func (c *demoCmd) listen(out io.Writer) (net.Listener, error) {
	host, portText, err := net.SplitHostPort(c.Addr)
	if err != nil {
		return nil, fmt.Errorf("--addr must be HOST:PORT: %w", err)
	}
	if ip := net.ParseIP(host); host != "localhost" && (ip == nil || !ip.IsLoopback()) {
		return nil, fmt.Errorf("the demo lets people in by one click, so it listens on loopback only, not on %s", host)
	}
	if host == "localhost" {
		host = "127.0.0.1"
	}
	port, err := strconv.Atoi(portText)
	if err != nil {
		return nil, fmt.Errorf("--addr must be HOST:PORT, with a number for the port")
	}
	for next := port; next < port+50; next++ {
		l, err := net.Listen("tcp", net.JoinHostPort(host, strconv.Itoa(next)))
		if err == nil {
			if next != port {
				fmt.Fprintf(out, "Port %d is in use; the demo takes %d instead.\n", port, next)
			}
			return l, nil
		}
		if !errors.Is(err, syscall.EADDRINUSE) {
			return nil, err
		}
	}
	return nil, fmt.Errorf("ports %d to %d are all in use", port, port+49)
}

// loopbackNames are the names under which the demo answers.
func loopbackNames(l net.Listener) []string {
	_, port, _ := net.SplitHostPort(l.Addr().String())
	return []string{"localhost:" + port, "127.0.0.1:" + port, "[::1]:" + port}
}
