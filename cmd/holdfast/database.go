package main

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"net/url"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/localpg"
	"holdfast/internal/plant"
	"holdfast/internal/plant/ledger"
	"holdfast/internal/store"
)

// database says where the record is: on a server that is there already, or in a
// private cluster in a folder.
type database struct {
	URL      string `name:"database-url" help:"Postgres to use, as the application role." env:"DATABASE_URL" placeholder:"URL"`
	OwnerURL string `name:"database-owner-url" help:"The same database as its owner, for migrations; without it the application role migrates and the guard on samples and ledger is absent." env:"DATABASE_OWNER_URL" placeholder:"URL"`
	Data     string `help:"Folder of a private Postgres cluster, when there is no database URL." env:"HOLDFAST_DATA" placeholder:"FOLDER"`
	PGBin    string `name:"pg-bin" help:"Folder of PostgreSQL's binaries for the private cluster; looked for when empty." env:"PGBINDIR" placeholder:"FOLDER"`
}

// appRole is the role that the first migration makes: it can add to samples and ledger
// and neither change nor delete there.
const appRole = "holdfast_app"

// reached is a migrated database and, when it is a private one, its server.
type reached struct {
	url     string
	private *localpg.Server // nil on a server of the plant's own
}

// open reaches the database, starting the private cluster if there is one, and
// migrates it. close is always to be called.
func (d *database) open(ctx context.Context, log *slog.Logger, fresh bool) (r reached, close func(), err error) {
	close = func() {}
	owner := d.OwnerURL
	r.url = d.URL
	if r.url == "" {
		if owner != "" {
			return r, close, errors.New("there is a DATABASE_OWNER_URL but no DATABASE_URL")
		}
		if d.Data == "" {
			return r, close, errors.New("say where the record is: --database-url for a Postgres of your own, or --data for a private one in a folder")
		}
		pg, err := localpg.Start(ctx, localpg.Options{Dir: d.Data, Fresh: fresh, Binaries: d.PGBin, Log: log})
		if err != nil {
			return r, close, err
		}
		r.private = pg
		close = func() {
			if err := pg.Stop(); err != nil {
				log.Error("stopping the private Postgres", "error", err)
			}
		}
		owner = pg.ConnString(localpg.Database)
	} else if owner == "" {
		owner = r.url
	}
	if err := store.Migrate(ctx, owner); err != nil {
		close()
		return r, func() {}, err
	}
	if r.private != nil {
		if r.url, err = asApp(ctx, owner); err != nil {
			close()
			return r, func() {}, err
		}
	}
	return r, close, nil
}

// asApp lets the application role into a private cluster and returns its address. The
// cluster is reached through a folder that only its owner may enter, so the role needs
// no password.
func asApp(ctx context.Context, owner string) (string, error) {
	conn, err := pgx.Connect(ctx, owner)
	if err != nil {
		return "", fmt.Errorf("connect to private Postgres: %w", err)
	}
	defer conn.Close(ctx)
	if _, err := conn.Exec(ctx, "alter role "+appRole+" login"); err != nil {
		return "", fmt.Errorf("let the application role in: %w", err)
	}
	u, err := url.Parse(owner)
	if err != nil {
		return "", fmt.Errorf("read address of private Postgres: %w", err)
	}
	u.User = url.User(appRole)
	return u.String(), nil
}

// privateDir is the folder of the private cluster, "" when the database is elsewhere.
func (d *database) privateDir() string {
	if d.URL != "" {
		return ""
	}
	return d.Data
}

// beside reaches the database for small work while another program may be serving it:
// a private cluster that is served already is used as it stands. Its schema must be the
// one that this program knows, since a running server is not migrated under its feet.
func (d *database) beside(ctx context.Context, log *slog.Logger, f func(*store.Store) error) error {
	if d.URL != "" || d.Data == "" {
		return d.withStore(ctx, log, f)
	}
	owner, err := localpg.Attach(d.Data, localpg.Database)
	if errors.Is(err, localpg.ErrNotServed) {
		return d.withStore(ctx, log, f)
	}
	if err != nil {
		return err
	}
	current, err := store.Current(ctx, owner)
	if err != nil {
		return err
	}
	if !current {
		return errors.New("the program that serves this data folder is of another version; stop it first, or use its own command")
	}
	app, err := asApp(ctx, owner)
	if err != nil {
		return err
	}
	return openStore(ctx, app, f)
}

func openStore(ctx context.Context, url string, f func(*store.Store) error) error {
	st, err := store.Open(ctx, store.Options{URL: url})
	if err != nil {
		return err
	}
	defer st.Close()
	return f(st)
}

func (d *database) with(ctx context.Context, log *slog.Logger, f func(reached) error) error {
	r, done, err := d.open(ctx, log, false)
	if err != nil {
		return err
	}
	defer done()
	return f(r)
}

func (d *database) withStore(ctx context.Context, log *slog.Logger, f func(*store.Store) error) error {
	return d.with(ctx, log, func(r reached) error { return openStore(ctx, r.url, f) })
}

func rootOf(heads map[uuid.UUID]ledger.Head) [ledger.Size]byte { return ledger.Root(heads) }

func createPlant(ctx context.Context, st *store.Store, name, zone string) error {
	loc, err := time.LoadLocation(zone)
	if err != nil {
		return fmt.Errorf("there is no time zone %q", zone)
	}
	id, err := uuid.NewV7()
	if err != nil {
		return err
	}
	return st.CreatePlant(ctx, plant.Plant{ID: id, Name: name, Location: loc})
}
