package auth

import (
	"cmp"
	"context"
	"crypto/sha256"
	"encoding/base64"
	"fmt"
	"log/slog"
	"net/http"
	"sync"
	"time"

	"github.com/alexedwards/scs/pgxstore"
	"github.com/alexedwards/scs/v2"
	"github.com/google/uuid"
	"github.com/jackc/pgx/v5/pgxpool"

	"holdfast/internal/plant"
)

// People finds a person; somebody who does not exist is a plant.NotFound.
type People interface {
	Person(ctx context.Context, id uuid.UUID) (plant.Person, error)
}

// SessionOptions are the settings of Sessions. Store and People are needed; for
// the others zero means the default.
type SessionOptions struct {
	Store   scs.Store
	People  People
	Devices *Devices // nil where no device is ever enrolled

	Lifetime time.Duration // from sign-in, or from asking to stay; 12 h, a shift with overtime
	Longest  time.Duration // from sign-in, however often somebody asks to stay; 24 h
	Idle     time.Duration // since the last request; 4 h. An open live page is not a request

	// PlainHTTP leaves out the Secure attribute and the __Host- prefix of the
	// cookie, without which browsers do not send it over http. It is for
	// loopback, where nobody listens in between.
	PlainHTTP bool

	Now func() time.Time // for Idle; time.Now
	Log *slog.Logger

	// Fail answers a request whose session cannot be read because of a fault.
	Fail func(w http.ResponseWriter, r *http.Request, err error)
	// OnEnd is told the id of each session that ends on this server, so that
	// its sockets can be ended. It is called during the request.
	OnEnd func(session string)
	// FindMany reads many stored sessions, by their keys, in one go; those that
	// do not exist or have expired are left out. Without it Ended asks for them
	// one by one.
	FindMany func(ctx context.Context, keys []string) (map[string][]byte, error)
	// FindPeople reads many people in one go; those that do not exist are left out.
	// Without it Ended asks for them one by one.
	FindPeople func(ctx context.Context, ids []uuid.UUID) ([]plant.Person, error)
	// DeleteExpired clears away sessions past their expiry; it is called every
	// five minutes.
	DeleteExpired func(ctx context.Context) error
}

const (
	touchEvery  = time.Minute
	cacheFor    = time.Second
	deleteEvery = 5 * time.Minute

	keyPerson = "person" // uuid as text
	keySeen   = "seen"   // seconds since 1970 of the last request, to the minute or so
	keyBegun  = "begun"  // microseconds since 1970 of the sign-in
	keyDevice = "device" // uuid as text of the device that it was begun on; the session is worth nothing elsewhere
	keyPIN    = "pin"    // true when it was begun with a PIN, which opens less
)

// PostgresStore keeps sessions in the table sessions (token text primary key,
// data bytea, expiry timestamptz). The library's own clearing of that table
// cannot be stopped without a data race, so it is left off: give
// SessionOptions.DeleteExpired instead.
func PostgresStore(pool *pgxpool.Pool) scs.Store {
	return pgxstore.NewWithCleanupInterval(pool, 0)
}

// Sessions remembers who is signed in. The browser holds a random token in a
// cookie, the store only the token's hash. It is safe for concurrent use.
type Sessions struct {
	opt    SessionOptions
	scs    *scs.SessionManager
	people *peopleCache
	stored guardedStore

	// writes keeps apart the renewal of a session's last use and its end: the
	// store's write would otherwise bring back what was deleted in between.
	writes sync.Mutex

	stop context.CancelFunc
	done chan struct{}
}

// NewSessions starts keeping sessions. Close must be called to end it.
func NewSessions(opt SessionOptions) *Sessions {
	opt.Lifetime = cmp.Or(opt.Lifetime, 12*time.Hour)
	opt.Longest = cmp.Or(opt.Longest, 24*time.Hour)
	opt.Idle = cmp.Or(opt.Idle, 4*time.Hour)
	if opt.Now == nil {
		opt.Now = time.Now
	}
	opt.Log = cmp.Or(opt.Log, slog.Default())
	if opt.OnEnd == nil {
		opt.OnEnd = func(string) {}
	}
	if opt.Fail == nil {
		opt.Fail = func(w http.ResponseWriter, _ *http.Request, err error) {
			opt.Log.Error("auth: session", "error", err)
			http.Error(w, http.StatusText(http.StatusInternalServerError), http.StatusInternalServerError)
		}
	}
	s := &Sessions{opt: opt, done: make(chan struct{})}
	s.people = &peopleCache{people: opt.People, many: opt.FindPeople, now: opt.Now, entries: make(map[uuid.UUID]cached)}

	m := scs.New()
	s.stored = guardedStore{s, opt.Store, &sessionCache{now: opt.Now, entries: make(map[string]cachedSession)}}
	m.Store = s.stored
	m.Lifetime = opt.Lifetime
	m.IdleTimeout = 0 // it would write at every request; see touch
	m.HashTokenInStore = true
	m.ErrorFunc = opt.Fail
	m.Cookie.HttpOnly = true
	m.Cookie.SameSite = http.SameSiteLaxMode
	m.Cookie.Path = "/"
	m.Cookie.Secure = !opt.PlainHTTP
	m.Cookie.Name = "__Host-session" // browsers accept it only with Secure, Path=/ and no Domain
	if opt.PlainHTTP {
		m.Cookie.Name = "session"
	}
	s.scs = m

	ctx, stop := context.WithCancel(context.Background())
	s.stop = stop
	go s.clear(ctx)
	return s
}

// Close stops the clearing away of expired sessions and waits for it.
func (s *Sessions) Close() {
	s.stop()
	<-s.done
}

func (s *Sessions) clear(ctx context.Context) {
	defer close(s.done)
	if s.opt.DeleteExpired == nil {
		return
	}
	tick := time.NewTicker(deleteEvery)
	defer tick.Stop()
	for {
		if err := s.opt.DeleteExpired(ctx); err != nil && ctx.Err() == nil {
			s.opt.Log.Error("auth: clear away expired sessions", "error", err)
		}
		select {
		case <-ctx.Done():
			return
		case <-tick.C:
		}
	}
}

// SignIn begins a session for a person, under a new token: one that was planted
// in the browser before is worth nothing. It must run inside Middleware.
func (s *Sessions) SignIn(ctx context.Context, p plant.Person) error {
	return s.signIn(ctx, p, false)
}

// SignInByPIN begins a session that a PIN opened: it holds on the tablet of this request
// only, and for the person as plant.Person.AtTablet makes them.
func (s *Sessions) SignInByPIN(ctx context.Context, p plant.Person) error {
	return s.signIn(ctx, p.AtTablet(), true)
}

func (s *Sessions) signIn(ctx context.Context, p plant.Person, pin bool) error {
	v := visitOf(ctx)
	before := s.ID(ctx)
	if err := s.scs.Clear(ctx); err != nil {
		return fmt.Errorf("clear a session: %w", err)
	}
	if err := s.scs.RenewToken(ctx); err != nil {
		return fmt.Errorf("renew a session: %w", err)
	}
	s.scs.Put(ctx, keyPerson, p.ID.String())
	s.scs.Put(ctx, keySeen, s.opt.Now().Unix())
	s.scs.Put(ctx, keyBegun, s.opt.Now().UnixMicro())
	s.scs.Put(ctx, keyPIN, pin)
	if v.device.Active() {
		s.scs.Put(ctx, keyDevice, v.device.ID.String())
		if err := s.opt.Devices.notePresence(ctx, v.device.ID, p.ID); err != nil {
			return err
		}
	}
	v.begun, v.byPIN, v.person, v.signedIn = true, pin, p, true
	if before != "" {
		s.opt.OnEnd(before)
	}
	return nil
}

// Renew lets the session of this request begin now, under a new token: after the person
// has changed a secret, which ends all that began before. It must run inside Middleware,
// for somebody who is signed in.
func (s *Sessions) Renew(ctx context.Context) error {
	v := visitOf(ctx)
	before := s.ID(ctx)
	if err := s.scs.RenewToken(ctx); err != nil {
		return fmt.Errorf("renew a session: %w", err)
	}
	s.scs.Put(ctx, keySeen, s.opt.Now().Unix())
	s.scs.Put(ctx, keyBegun, s.opt.Now().UnixMicro())
	v.begun = true
	s.opt.OnEnd(before)
	return nil
}

// SignOut ends the session. It must run inside Middleware; without a session it
// does nothing.
func (s *Sessions) SignOut(ctx context.Context) error {
	v := visitOf(ctx)
	before := s.ID(ctx)
	if before == "" {
		return nil
	}
	if err := s.scs.Destroy(ctx); err != nil {
		return fmt.Errorf("end a session: %w", err)
	}
	v.person, v.signedIn = plant.Person{}, false
	s.opt.OnEnd(before)
	return nil
}

// PersonID gives who is signed in.
func (s *Sessions) PersonID(ctx context.Context) (uuid.UUID, bool) {
	p, ok := FromContext(ctx)
	return p.ID, ok
}

// ID is the session's name: the same for its whole life, and no secret, since
// the token cannot be had from it. It is "" when there is no session. Sockets
// are served and dropped under it.
func (s *Sessions) ID(ctx context.Context) string {
	token := s.scs.Token(ctx)
	if token == "" {
		return ""
	}
	// The same as the store's key (HashTokenInStore), so that Ended can look it up.
	sum := sha256.Sum256([]byte(token))
	return base64.RawURLEncoding.EncodeToString(sum[:])
}

// Expires is when the session will end if nothing more is requested, so that a
// page can warn in time. It is the zero time when nobody is signed in. That a tablet ends
// unused sessions much sooner is left out: it locks before, and warns of that by itself.
func (s *Sessions) Expires(ctx context.Context) time.Time {
	if _, ok := FromContext(ctx); !ok {
		return time.Time{}
	}
	idle := time.Unix(s.scs.GetInt64(ctx, keySeen), 0).Add(s.opt.Idle)
	if end := s.scs.Deadline(ctx); end.Before(idle) {
		return end
	}
	return idle
}

// Stay puts the end of the session off on somebody's wish: to Lifetime from now, though not
// beyond Longest from the sign-in. It returns when the session ends now, if nothing more is
// requested; the zero time when nobody is signed in.
func (s *Sessions) Stay(ctx context.Context) time.Time {
	if _, ok := FromContext(ctx); !ok {
		return time.Time{}
	}
	end := s.opt.Now().Add(s.opt.Lifetime)
	if last := time.UnixMicro(s.scs.GetInt64(ctx, keyBegun)).Add(s.opt.Longest); last.Before(end) {
		end = last
	}
	if end.After(s.scs.Deadline(ctx)) {
		s.scs.SetDeadline(ctx, end)
	}
	s.touch(ctx)
	return s.Expires(ctx)
}

// slackOfLock is how much later than the tablet itself the server ends a session that
// is not used: the tablet warns first, and tells of use once a minute.
const slackOfLock = 3 * time.Minute

// idle is how long a session may go unused: on a tablet as long as its lock, elsewhere
// Idle.
func (s *Sessions) idle(d plant.Device) time.Duration {
	if d.Kind == plant.Tablet && d.LockAfter > 0 {
		return min(s.opt.Idle, d.LockAfter+slackOfLock)
	}
	return s.opt.Idle
}

// Forget drops what is remembered of a person, for the second that it would be
// used, after their roles were changed on this server.
func (s *Sessions) Forget(person uuid.UUID) { s.people.forget(person) }

// ForgetAll does so for everybody, and for the sessions themselves, after somebody was
// changed or a session ended elsewhere.
func (s *Sessions) ForgetAll() {
	s.people.forgetAll()
	s.stored.known.forgetAll()
}
