package store

import (
	"cmp"
	"context"
	"errors"
	"fmt"
	"sync"
	"sync/atomic"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgconn"
	"github.com/jackc/pgx/v5/pgtype"
	"github.com/jackc/pgx/v5/pgxpool"
	pgxuuid "github.com/vgarvardt/pgx-google-uuid/v5"

	"holdfast/internal/plant"
)

// Options say how to reach the database.
type Options struct {
	URL      string // of the application role; or of the owner when that is all there is
	MaxConns int    // 0: 16, which halves the slowest saves for a tenth of the throughput
	Clock    func() time.Time

	// SaveLimit is how long a save may take, waiting for its locks included; 0: 15 s.
	SaveLimit time.Duration

	// CheckpointEvery is how many subgroups lie between two checkpoints of a fold; 0: 256.
	CheckpointEvery int

	// OnSave is told how long each save took, for metrics; may be nil.
	OnSave func(took time.Duration)
}

// Store is the plant's record.
type Store struct {
	shared
	clock func() time.Time
}

// shared is what copies of a Store with another clock have in common.
type shared struct {
	pool      *pgxpool.Pool
	plantID   *atomic.Pointer[uuid.UUID]
	revisions *sync.Map // uuid -> *frozen; revisions never change
	setups    *sync.Map // setupKey -> plant.Setup; versions never change
	measured  *sync.Map // station -> measuredStation, for about a second
	settings  *atomic.Pointer[readSettings]
	reaches   *reaches
	onChange  *atomic.Pointer[func([]uuid.UUID)]
	every     int // subgroups between two checkpoints
	limit     time.Duration
	counts    *counts
	noRoomAt  *atomic.Int64 // microseconds since 1970 of the last write that found the disk full; 0 after one that did not
	onSave    func(took time.Duration)
}

// Open connects to a migrated database.
func Open(ctx context.Context, o Options) (*Store, error) {
	cfg, err := pgxpool.ParseConfig(o.URL)
	if err != nil {
		return nil, fmt.Errorf("read database address: %w", err)
	}
	cfg.MaxConns = int32(o.MaxConns)
	if o.MaxConns == 0 {
		cfg.MaxConns = 16
	}
	cfg.AfterConnect = prepareConn
	// Our statements walk the same indexes whatever their parameters are, so planning
	// each anew buys nothing; it was a quarter of the time of a save.
	cfg.ConnConfig.RuntimeParams["plan_cache_mode"] = "force_generic_plan"
	// A generic plan over a long history looks dear enough to compile it to machine code,
	// which takes longer than any of our statements does: 20 ms at each opening of the board.
	cfg.ConnConfig.RuntimeParams["jit"] = "off"
	pool, err := pgxpool.NewWithConfig(ctx, cfg)
	if err != nil {
		return nil, fmt.Errorf("open database: %w", err)
	}
	s := &Store{clock: o.Clock, shared: shared{
		pool: pool, plantID: new(atomic.Pointer[uuid.UUID]),
		revisions: new(sync.Map), setups: new(sync.Map), measured: new(sync.Map),
		settings: new(atomic.Pointer[readSettings]), reaches: new(reaches), onChange: new(atomic.Pointer[func([]uuid.UUID)]), every: o.CheckpointEvery,
		limit: cmp.Or(o.SaveLimit, 15*time.Second), counts: new(counts), noRoomAt: new(atomic.Int64), onSave: o.OnSave,
	}}
	if s.clock == nil {
		s.clock = time.Now
	}
	if s.onSave == nil {
		s.onSave = func(time.Duration) {}
	}
	if s.every <= 0 {
		s.every = 256
	}
	if err := s.findPlant(ctx); err != nil {
		pool.Close()
		return nil, err
	}
	return s, nil
}

func prepareConn(ctx context.Context, c *pgx.Conn) error {
	// Ids travel as sixteen bytes; without this pgx would write and read them as text.
	pgxuuid.Register(c.TypeMap())
	// Times are UTC in code; pgx would hand them out in the zone of the process.
	c.TypeMap().RegisterType(&pgtype.Type{
		Name: "timestamptz", OID: pgtype.TimestamptzOID, Codec: &pgtype.TimestamptzCodec{ScanLocation: time.UTC},
	})
	return nil
}

// Close ends all connections.
func (s *Store) Close() { s.pool.Close() }

// Pool is for what keeps tables of its own in the same database: the session
// library.
func (s *Store) Pool() *pgxpool.Pool { return s.pool }

// WithClock returns the same store under another clock: the demonstration writes
// its history with it, by the same code that writes everything else.
func (s *Store) WithClock(clock func() time.Time) *Store {
	return &Store{shared: s.shared, clock: clock}
}

func (s *Store) now() time.Time { return plant.CutTime(s.clock()) }

// OnChange sets what is told, after each commit, which stations changed. It must
// not block.
func (s *Store) OnChange(f func(stations []uuid.UUID)) { s.onChange.Store(&f) }

func (s *Store) changed(stations ...uuid.UUID) {
	if f := s.onChange.Load(); f != nil {
		(*f)(stations)
	}
}

// Ready reports whether the database answers.
func (s *Store) Ready(ctx context.Context) error {
	ctx, cancel := context.WithTimeout(ctx, 2*time.Second)
	defer cancel()
	if err := s.pool.Ping(ctx); err != nil {
		return err
	}
	if at := s.noRoomAt.Load(); at != 0 && time.Since(time.UnixMicro(at)) < noRoomFor {
		return plant.ErrNoRoom
	}
	return nil
}

// noRoomFor is how long a write that found the disk full keeps the server from being called
// ready, unless another one succeeds before.
const noRoomFor = time.Minute

const diskFull = "53100" // SQLSTATE disk_full

// noticeRoom remembers whether the database had room for a transaction, and marks the
// error of one for which it had none.
func (s *Store) noticeRoom(err error) error {
	if err == nil {
		s.noRoomAt.Store(0)
		return nil
	}
	if pe, ok := errors.AsType[*pgconn.PgError](err); ok && pe.Code == diskFull {
		s.noRoomAt.Store(time.Now().UnixMicro())
		return fmt.Errorf("%w: %w", plant.ErrNoRoom, err)
	}
	return err
}

// Guarded reports whether the database itself keeps the application from changing
// samples and the ledger: false when the pool runs as their owner.
func (s *Store) Guarded(ctx context.Context) (bool, error) {
	var may bool
	err := s.pool.QueryRow(ctx, `select has_table_privilege('subgroup', 'update') or has_table_privilege('subgroup', 'delete')
		or has_table_privilege('ledger', 'update') or has_table_privilege('ledger', 'delete')`).Scan(&may)
	if err != nil {
		return false, fmt.Errorf("ask for privileges: %w", err)
	}
	return !may, nil
}

// rollbackLimit is how long a rollback may take before its connection is given up.
const rollbackLimit = 5 * time.Second

// saving is the context of a save. It does not end with the request: somebody who leaves
// the page has still pressed the key.
func (s *Store) saving(ctx context.Context) (context.Context, context.CancelFunc) {
	return context.WithTimeout(context.WithoutCancel(ctx), s.limit)
}

// inTx runs f in one transaction. It retries nothing: locks are taken in one order,
// so there is no deadlock to retry for.
func (s *Store) inTx(ctx context.Context, f func(tx pgx.Tx) error) error {
	tx, err := s.pool.Begin(ctx)
	if err != nil {
		return fmt.Errorf("begin: %w", err)
	}
	// This runs also when f panics, or its context was cut short: a transaction left open
	// would keep its locks and its connection for good. After the commit it does nothing.
	defer func() {
		ctx, cancel := context.WithTimeout(context.WithoutCancel(ctx), rollbackLimit)
		defer cancel()
		_ = tx.Rollback(ctx)
	}()
	if err := f(tx); err != nil {
		return s.noticeRoom(err)
	}
	if err := tx.Commit(ctx); err != nil {
		return s.noticeRoom(fmt.Errorf("commit: %w", err))
	}
	return s.noticeRoom(nil)
}

// newID makes an id that sorts by the time it was made.
func newID() uuid.UUID { return uuid.Must(uuid.NewV7()) }

// violates reports whether err is a violation of the named constraint or index.
func violates(err error, constraint string) bool {
	pe, ok := errors.AsType[*pgconn.PgError](err)
	return ok && pe.ConstraintName == constraint
}

// missing turns no rows into the NotFound error with this message.
func missing(err error, message string) error {
	if errors.Is(err, pgx.ErrNoRows) {
		return &plant.Error{Kind: plant.NotFound, Message: message, Err: err}
	}
	return err
}

// orNull is nil for the zero id.
func orNull(id uuid.UUID) *uuid.UUID {
	if id == uuid.Nil {
		return nil
	}
	return &id
}

func orNil(id *uuid.UUID) uuid.UUID {
	if id == nil {
		return uuid.Nil
	}
	return *id
}

// timeOrNull is nil for the zero time.
func timeOrNull(t time.Time) *time.Time {
	if t.IsZero() {
		return nil
	}
	return &t
}

func orZero(t *time.Time) time.Time {
	if t == nil {
		return time.Time{}
	}
	return *t
}

// decimalOrNull is the decimal as text for a numeric parameter.
func decimalOrNull(d *plant.Decimal) *string {
	if d == nil {
		return nil
	}
	s := d.String()
	return &s
}

func decimalFrom(text *string) (*plant.Decimal, error) {
	if text == nil {
		return nil, nil
	}
	d, err := plant.ParseDecimal(*text)
	if err != nil {
		return nil, fmt.Errorf("read numeric: %w", err)
	}
	return &d, nil
}
