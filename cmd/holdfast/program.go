package main

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"net"
	"net/http"
	"os"
	"runtime/debug"
	"sync"
	"sync/atomic"
	"time"

	"holdfast/internal/auth"
	"holdfast/internal/certs"
	"holdfast/internal/live"
	"holdfast/internal/metrics"
	"holdfast/internal/outbox"
	"holdfast/internal/plant"
	"holdfast/internal/store"
	"holdfast/web"
	"holdfast/web/admin"
	"holdfast/web/api"
	"holdfast/web/board"
	"holdfast/web/calls"
	"holdfast/web/desk"
	doorpages "holdfast/web/door"
	"holdfast/web/station"
)

// settings say how the program serves.
type settings struct {
	Addr        string       // host:port; port 0 takes a free one
	Listener    net.Listener // instead of Addr, when it is open already
	DatabaseURL string
	Hosts       []string // names under which it answers; empty: any
	Transport   secured  // how browsers reach it; zero: plain http
	Demo        bool     // let invented people in by one click
	Cost        auth.Cost
	Metrics     watching       // who may read the figures about this server
	Messages    *outbox.Config // where messages go; nil: nowhere
	DataDir     string         // of a private cluster; "" when the database is elsewhere
	Log         *slog.Logger
	Clock       func() time.Time
}

// program is a serving Holdfast: everything that has to be started and ended, joined.
// Tests start the same program that the command line does, on port 0.
type program struct {
	settings
	store    *store.Store
	feed     *store.Feed
	hub      *live.Hub
	sessions *auth.Sessions
	devices  *auth.Devices
	admin    *admin.Admin
	first    *doorpages.First // nil when there is somebody already
	listener net.Listener
	server   *http.Server
	metrics  *metrics.Metrics
	started  time.Time
	plant    atomic.Pointer[plant.Plant]

	background context.CancelFunc
	running    sync.WaitGroup
}

// recheckEvery is how soon sockets end whose device was revoked, or whose person was kept
// out, on another server or on the command line. It costs three small queries.
const recheckEvery = 700 * time.Millisecond

// shutdownLimit is how long requests that are under way may take to end.
const shutdownLimit = 20 * time.Second

// newProgram opens the store and listens; Run serves. Close must be called.
func newProgram(ctx context.Context, s settings) (*program, error) {
	if os.Getenv("GOGC") == "" {
		// The live heap is a few megabytes; at the default the collector would run many
		// times a second under load to save memory that every box has.
		debug.SetGCPercent(400)
	}
	if s.Clock == nil {
		s.Clock = time.Now
	}
	if s.Cost == (auth.Cost{}) {
		s.Cost = auth.DefaultCost
	}
	if s.Messages == nil {
		s.Messages = &outbox.Config{}
	}
	p := &program{settings: s, metrics: metrics.New(), started: s.Clock()}
	var err error
	if p.store, err = store.Open(ctx, store.Options{URL: s.DatabaseURL, Clock: s.Clock, OnSave: p.metrics.Saved}); err != nil {
		return nil, err
	}
	if err := p.join(ctx); err != nil {
		p.Close()
		return nil, err
	}
	return p, nil
}

// join makes the parts and ties them together.
func (p *program) join(ctx context.Context) error {
	if err := p.readPlant(ctx); err != nil {
		return err
	}
	pl := p.plant.Load()
	if guarded, err := p.store.Guarded(ctx); err != nil {
		return err
	} else if !guarded {
		p.Log.Warn("the database does not guard samples and ledger: the application runs as their owner; see DATABASE_OWNER_URL in the README")
	}
	hasher, err := auth.NewHasher(p.Cost, 2)
	if err != nil {
		return err
	}
	views := newViews(p.store, &p.plant, p.Clock)
	p.hub = live.New(views.render, live.Options{Log: p.Log, RecheckEvery: recheckEvery, Recheck: func(ctx context.Context, ids []string) ([]string, error) {
		return p.sessions.Ended(ctx, ids)
	}})
	p.feed = p.store.NewFeed(p.Log, func(stations []plantID) { p.hub.Dirty(views.changed(stations)...) })
	p.devices = auth.NewDevices(auth.DeviceOptions{Store: p.store, PlainHTTP: !p.Transport.https, Now: p.Clock, Log: p.Log})
	p.sessions = auth.NewSessions(auth.SessionOptions{
		Store: auth.PostgresStore(p.store.Pool()), People: p.store, Devices: p.devices, PlainHTTP: !p.Transport.https, Log: p.Log, Now: p.Clock,
		OnEnd:    func(session string) { p.hub.Drop(session, live.SessionEnded) },
		Fail:     web.SessionFault(p.Log),
		FindMany: p.store.FindSessions, FindPeople: p.store.PeopleByID, DeleteExpired: p.store.DeleteExpiredSessions,
	})
	p.feed.OnAdmission(p.admissionChanged)
	door := &auth.Door{Credentials: p.store, Hasher: hasher, Throttle: auth.NewThrottle(p.Clock), Pins: auth.NewThrottle(p.Clock), Log: p.Log}
	machine, err := os.Hostname()
	if err != nil {
		p.Log.Warn("the machine does not tell its name", "error", err)
	}
	p.admin = admin.New(admin.Deps{Log: p.Log, Machine: machine, Store: p.store, Signer: door, Hasher: hasher, Changed: p.readPlant, Forget: p.sessions.Forget, About: p.about, Messages: p.messagesPage(), Staff: p.staff(hasher)})
	cfg := web.Config{
		Log: p.Log, Now: p.Clock, Plant: func() plant.Plant { return *p.plant.Load() },
		Sessions: p.sessions, Checker: door, Hub: p.hub,
		Station: station.New(station.Deps{Store: p.store, Signer: door, Log: p.Log}),
		Board:   board.New(board.Deps{Store: p.store, Handovers: p.store, Log: p.Log}),
		Desk:    desk.New(desk.Deps{Store: p.store, Signer: door, Log: p.Log}),
		Admin:   p.admin,
		API:     api.New(api.Deps{Store: p.store, Devices: p.devices, Log: p.Log}),
		Tablet:  p.tablet(door),
		Calls:   calls.New(calls.Deps{Store: p.store, Log: p.Log}),
		Account: p.account(door, hasher),
		Ready:   p.store.Ready, Hosts: p.Hosts, Secure: p.Transport.https, Strict: p.Transport.strict, Addr: p.Transport.from, Authority: p.Transport.root,
	}
	p.watch()
	if p.Metrics.token != "" {
		cfg.Metrics = p.metrics.Handler(p.Metrics.token)
	}
	cfg.SetLanguage = func(ctx context.Context, person plantID, language string) error {
		defer p.sessions.Forget(person)
		return p.store.SetLanguage(ctx, person, language)
	}
	cfg.SetDeviceLanguage = func(ctx context.Context, device plantID, language string) error {
		defer p.devices.Forget()
		return p.store.SetDeviceLanguage(ctx, device, language)
	}
	if p.Demo && pl.Demo {
		cfg.DemoPeople = p.store.People
	}
	if err := p.openFirst(ctx, hasher); err != nil {
		return err
	}
	cfg.First = p.first
	if p.listener = p.Listener; p.listener == nil {
		if p.listener, err = listenAt(p.Addr); err != nil {
			return err
		}
	}
	p.server = &http.Server{
		Handler:           p.Transport.guard(web.New(cfg)),
		TLSConfig:         p.Transport.config,
		ReadHeaderTimeout: 10 * time.Second,
		ReadTimeout:       60 * time.Second,
		IdleTimeout:       120 * time.Second,
		MaxHeaderBytes:    64 << 10,
		ErrorLog:          slog.NewLogLogger(p.Log.Handler(), slog.LevelDebug),
	}
	return nil
}

// readPlant reads name, time zone and shifts anew.
func (p *program) readPlant(ctx context.Context) error {
	pl, err := p.store.Plant(ctx)
	if err != nil {
		return fmt.Errorf("read the plant: %w", err)
	}
	p.plant.Store(&pl)
	return nil
}

// keepPlant reads the plant now and then: another server may have changed it.
func (p *program) keepPlant(ctx context.Context) {
	tick := time.NewTicker(time.Minute)
	defer tick.Stop()
	for {
		select {
		case <-ctx.Done():
			return
		case <-tick.C:
			if err := p.readPlant(ctx); err != nil && ctx.Err() == nil {
				p.Log.Warn("the plant could not be read again", "error", err)
			}
		}
	}
}

// URL is the address at which the program answers on this machine.
func (p *program) URL() string {
	if p.Transport.config != nil {
		return "https://" + p.listener.Addr().String()
	}
	return "http://" + p.listener.Addr().String()
}

// Run serves until ctx ends and then lets what is under way finish: a save that was
// begun is answered.
func (p *program) Run(ctx context.Context) error {
	background, cancel := context.WithCancel(context.WithoutCancel(ctx))
	p.background = cancel
	p.running.Go(func() { p.feed.Run(background) })
	p.lookAfter(background)
	p.running.Go(func() { p.store.KeepStandings(background, p.Log) })
	p.running.Go(func() { p.keepPlant(background) })
	served := make(chan error, 1)
	p.running.Go(func() { served <- p.listen() })
	p.running.Go(func() { p.Transport.keep(background, p.Log) })
	p.running.Go(func() { p.keepRoots(background) })
	if p.Metrics.listener != nil {
		p.running.Go(func() { p.Metrics.serve(background, p.metrics.Handler(p.Metrics.token), p.Log) })
	}
	p.Log.Info("serving", "address", p.URL(), "version", version())
	p.tellFirst()
	if root := p.Transport.root; root != nil {
		p.Log.Info("certificate fingerprint "+certs.Fingerprint(root), "compare it at", p.fromOutside()+web.AuthorityAddress)
	}
	select {
	case err := <-served:
		return fmt.Errorf("serve: %w", err)
	case <-ctx.Done():
	}
	p.Log.Info("stopping")
	limit, done := context.WithTimeout(context.WithoutCancel(ctx), shutdownLimit)
	defer done()
	// Sockets are not known to the server; they are told to come back.
	err := errors.Join(p.server.Shutdown(limit), p.hub.Close(limit))
	if err != nil {
		return fmt.Errorf("stop: %w", err)
	}
	return nil
}

// rootEvery is how often it is looked whether the day of the plant has its root yet.
const rootEvery = 5 * time.Minute

// keepRoots makes the daily root of the ledger, which the handover prints.
func (p *program) keepRoots(ctx context.Context) {
	tick := time.NewTicker(rootEvery)
	defer tick.Stop()
	for {
		if err := p.store.KeepRoot(ctx); err != nil && ctx.Err() == nil {
			p.Log.Error("keeping the root of the day", "error", err)
		}
		select {
		case <-ctx.Done():
			return
		case <-tick.C:
		}
	}
}

func (p *program) listen() error {
	if p.Transport.config == nil {
		return p.server.Serve(p.listener)
	}
	secure := newSniffer(p.listener)
	p.running.Go(secure.run)
	return p.server.ServeTLS(secure, "", "")
}

// Close ends everything that Run did not.
func (p *program) Close() {
	if p.server != nil {
		_ = p.server.Close()
	}
	if p.listener != nil {
		_ = p.listener.Close()
	}
	if p.hub != nil {
		limit, done := context.WithTimeout(context.Background(), 2*time.Second)
		_ = p.hub.Close(limit)
		done()
	}
	if p.background != nil {
		p.background()
	}
	p.running.Wait()
	if p.admin != nil {
		p.admin.Close()
	}
	if p.sessions != nil {
		p.sessions.Close()
	}
	p.store.Close()
}
