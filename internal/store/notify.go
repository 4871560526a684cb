package store

import (
	"context"
	"fmt"
	"log/slog"
	"strings"
	"sync"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"
)

// channel carries the ids of stations that changed, between the servers on one
// database: "NODE ID ID ...", and that people or devices did (admission).
const channel = "holdfast_changed"

// admission is the notice that somebody or some device may be let in no longer, or as
// something else: "admission". It names nobody; who hears it looks again at all.
const admission = "admission"

// perNotice is how many station ids fit into one notice (its limit is 8000 bytes).
const perNotice = 200

// Feed tells this server which stations changed, whoever changed them: its own store
// at once and in memory, other servers by batched notices, and what a server that died
// between commit and notice left unsaid by a slow look at the state rows.
type Feed struct {
	store   *Store
	log     *slog.Logger
	tell    func(stations []uuid.UUID)
	admit   func() // may be nil
	node    string
	gather  time.Duration
	catchUp time.Duration

	mu      sync.Mutex
	pending map[uuid.UUID]bool
	wake    chan struct{}
}

// NewFeed makes the feed of this server; tell must not block. Run starts it.
func (s *Store) NewFeed(log *slog.Logger, tell func(stations []uuid.UUID)) *Feed {
	f := &Feed{
		store: s, log: log, tell: tell, node: newID().String(), gather: 5 * time.Millisecond, catchUp: 1500 * time.Millisecond,
		pending: map[uuid.UUID]bool{}, wake: make(chan struct{}, 1),
	}
	s.OnChange(f.changed)
	return f
}

// OnAdmission sets what is told that people or devices were changed, by whichever server
// or on the command line: what is remembered of them counts no more. It must not block,
// and must be set before Run.
func (f *Feed) OnAdmission(tell func()) { f.admit = tell }

func (f *Feed) admissionChanged() {
	if f.admit != nil {
		f.admit()
	}
}

// admissionChanged tells every server that people or devices were changed. It comes after
// the commit, so who hears it reads the change. That it cannot be said is no reason to
// answer that nothing was changed: the servers look again by themselves within a second.
func (s *Store) admissionChanged(ctx context.Context) {
	ctx, cancel := context.WithTimeout(context.WithoutCancel(ctx), 2*time.Second)
	defer cancel()
	_ = s.notify(ctx, admission)
}

func (f *Feed) changed(stations []uuid.UUID) {
	f.tell(stations)
	f.mu.Lock()
	for _, id := range stations {
		f.pending[id] = true
	}
	f.mu.Unlock()
	select {
	case f.wake <- struct{}{}:
	default:
	}
}

// Run announces and listens until ctx ends.
func (f *Feed) Run(ctx context.Context) {
	var wg sync.WaitGroup
	for _, loop := range []func(context.Context){f.announce, f.listen, f.lookAgain} {
		wg.Go(func() { loop(ctx) })
	}
	wg.Wait()
}

// announce gathers for a moment and sends one notice for all.
func (f *Feed) announce(ctx context.Context) {
	for {
		select {
		case <-ctx.Done():
			return
		case <-f.wake:
		}
		if !sleep(ctx, f.gather) {
			return
		}
		f.mu.Lock()
		ids := make([]string, 0, len(f.pending))
		for id := range f.pending {
			ids = append(ids, id.String())
		}
		clear(f.pending)
		f.mu.Unlock()
		for len(ids) > 0 {
			n := min(len(ids), perNotice)
			if err := f.store.notify(ctx, f.node+" "+strings.Join(ids[:n], " ")); err != nil {
				if ctx.Err() == nil {
					f.log.Warn("could not announce changes; other servers find them later", "error", err)
				}
				break
			}
			ids = ids[n:]
		}
	}
}

// notify sends one notice. It need not outlive a crash, so it waits for no disk and
// takes no turn of those who do.
func (s *Store) notify(ctx context.Context, payload string) error {
	b := &pgx.Batch{}
	b.Queue("begin")
	b.Queue("set local synchronous_commit = off")
	b.Queue("select pg_notify($1, $2)", channel, payload)
	b.Queue("commit")
	return s.pool.SendBatch(ctx, b).Close()
}

// listen keeps one connection of its own, and after each reconnect marks every station,
// since notices may have been missed.
func (f *Feed) listen(ctx context.Context) {
	for pause := 100 * time.Millisecond; ctx.Err() == nil; pause = min(2*pause, 5*time.Second) {
		started := time.Now()
		err := f.listenOnce(ctx)
		if ctx.Err() != nil {
			return
		}
		if time.Since(started) > time.Minute {
			pause = 100 * time.Millisecond
		}
		f.log.Warn("lost the line on which other servers announce changes", "error", err, "pause", pause)
		if !sleep(ctx, pause) {
			return
		}
	}
}

func (f *Feed) listenOnce(ctx context.Context) error {
	conn, err := pgx.ConnectConfig(ctx, f.store.pool.Config().ConnConfig.Copy())
	if err != nil {
		return fmt.Errorf("connect: %w", err)
	}
	defer conn.Close(context.WithoutCancel(ctx))
	if _, err := conn.Exec(ctx, "listen "+channel); err != nil {
		return fmt.Errorf("listen: %w", err)
	}
	if err := f.markAll(ctx); err != nil {
		return err
	}
	f.admissionChanged()
	for {
		wait, cancel := context.WithTimeout(ctx, 20*time.Second)
		n, err := conn.WaitForNotification(wait)
		cancel()
		switch {
		case err == nil:
			f.heard(n.Payload)
		case ctx.Err() != nil:
			return ctx.Err()
		case wait.Err() != nil && !conn.IsClosed():
			// A line that died without a word is found by asking.
			if err := conn.Ping(ctx); err != nil {
				return fmt.Errorf("ping: %w", err)
			}
		default:
			return fmt.Errorf("wait for notices: %w", err)
		}
	}
}

func (f *Feed) heard(payload string) {
	if payload == admission {
		f.admissionChanged()
		return
	}
	fields := strings.Fields(payload)
	if len(fields) == 0 || fields[0] == f.node {
		return
	}
	stations := make([]uuid.UUID, 0, len(fields)-1)
	for _, s := range fields[1:] {
		if id, err := uuid.Parse(s); err == nil {
			stations = append(stations, id)
		}
	}
	f.tell(stations)
}

func (f *Feed) markAll(ctx context.Context) error {
	ids, err := f.stations(ctx, `select id from station`)
	if err == nil {
		f.tell(ids)
	}
	return err
}

// tellAll is markAll where a failure is only worth a line.
func (f *Feed) tellAll(ctx context.Context) {
	if err := f.markAll(ctx); err != nil && ctx.Err() == nil {
		f.log.Warn("could not look for unannounced changes", "error", err)
	}
}

func (f *Feed) stations(ctx context.Context, sql string, args ...any) ([]uuid.UUID, error) {
	rows, err := f.store.pool.Query(ctx, sql, args...)
	if err != nil {
		return nil, fmt.Errorf("read stations: %w", err)
	}
	return pgx.CollectRows(rows, pgx.RowTo[uuid.UUID])
}

// lookAgain finds changes that were never announced: state rows written by
// transactions that were not finished at the last look. Marking twice is harmless.
func (f *Feed) lookAgain(ctx context.Context) {
	const oldest = `select pg_snapshot_xmin(pg_current_snapshot())::text`
	var since string // read at once: what is written before the first look counts as well
	for first := true; first || sleep(ctx, f.catchUp); first = false {
		if since == "" {
			if err := f.store.pool.QueryRow(ctx, oldest).Scan(&since); err != nil {
				since = ""
				continue
			}
			f.tellAll(ctx) // and what was written before it could be read
			continue
		}
		var next string
		err := f.store.pool.QueryRow(ctx, oldest).Scan(&next)
		if err == nil {
			var ids []uuid.UUID
			ids, err = f.stations(ctx, `select distinct station_id from characteristic_state where changed >= $1::text::xid8`, since)
			if err == nil {
				since = next
				if len(ids) > 0 {
					f.tell(ids)
				}
			}
		}
		if err != nil && ctx.Err() == nil {
			f.log.Warn("could not look for unannounced changes", "error", err)
		}
	}
}

// sleep waits, and reports false when ctx ended first.
func sleep(ctx context.Context, d time.Duration) bool {
	t := time.NewTimer(d)
	defer t.Stop()
	select {
	case <-ctx.Done():
		return false
	case <-t.C:
		return true
	}
}
