package auth

import (
	"context"
	"fmt"
	"net/http"
	"sync"
	"time"

	"github.com/alexedwards/scs/v2"
	"github.com/google/uuid"

	"holdfast/internal/plant"
)

// visit is what one request knows of its session. A handler that signs in or
// out changes it, and who reads it afterwards sees that.
type visit struct {
	person   plant.Person
	signedIn bool
	timedOut bool
	begun    bool // signed in during this request
	device   plant.Device
	revoked  bool // it came with the secret of a device that was revoked
}

type visitKey struct{}

// visitOf panics outside of the middleware, which is a mistake in the wiring.
func visitOf(ctx context.Context) *visit {
	v, ok := ctx.Value(visitKey{}).(*visit)
	if !ok {
		panic("auth: no session middleware around this handler")
	}
	return v
}

// FromContext gives who is signed in; false when nobody is.
func FromContext(ctx context.Context) (plant.Person, bool) {
	v, ok := ctx.Value(visitKey{}).(*visit)
	if !ok || !v.signedIn {
		return plant.Person{}, false
	}
	return v.person, true
}

// TimedOut reports that this request came with a session that had not been used
// for too long, so that the sign-in page can say why it appears.
func TimedOut(ctx context.Context) bool {
	v, ok := ctx.Value(visitKey{}).(*visit)
	return ok && v.timedOut
}

// Middleware loads the session and who it belongs to, and writes the session and
// its cookie when they changed. It turns nobody away. The response is wrapped,
// so sockets need LoadOnly.
func (s *Sessions) Middleware(next http.Handler) http.Handler {
	inner := s.scs.LoadAndSave(http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		ctx := r.Context()
		over, err := s.admit(ctx)
		if err == nil && over {
			err = s.SignOut(ctx)
		}
		if err != nil {
			s.opt.Fail(w, r, err)
			return
		}
		s.opt.Devices.renew(w, r)
		s.touch(ctx)
		next.ServeHTTP(w, r)
	}))
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		r, err := s.withVisit(r)
		if err != nil {
			s.opt.Fail(w, r, err)
			return
		}
		inner.ServeHTTP(w, r)
	})
}

// LoadOnly loads the session and who it belongs to and writes nothing: neither
// the session nor its last use nor a cookie. The response is not wrapped, so
// sockets can be opened behind it.
func (s *Sessions) LoadOnly(next http.Handler) http.Handler {
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		w.Header().Add("Vary", "Cookie")
		var token string
		if c, err := r.Cookie(s.scs.Cookie.Name); err == nil {
			token = c.Value
		}
		r, err := s.withVisit(r)
		if err != nil {
			s.opt.Fail(w, r, err)
			return
		}
		ctx, err := s.scs.Load(r.Context(), token)
		if err == nil {
			_, err = s.admit(ctx)
		}
		if err != nil {
			s.opt.Fail(w, r, err)
			return
		}
		next.ServeHTTP(w, r.WithContext(ctx))
	})
}

// withVisit begins the visit with the device that the request comes from, if it is one.
func (s *Sessions) withVisit(r *http.Request) (*http.Request, error) {
	v := &visit{}
	r = r.WithContext(context.WithValue(r.Context(), visitKey{}, v))
	device, err := s.opt.Devices.fromRequest(r)
	if err != nil {
		return r, err
	}
	switch {
	case device.Active():
		v.device = device
	case device.ID != uuid.Nil:
		v.revoked = true
	}
	return r, nil
}

// admit finds out who the loaded session belongs to. over means that there is a
// session that must not be used any more.
func (s *Sessions) admit(ctx context.Context) (over bool, err error) {
	text := s.scs.GetString(ctx, keyPerson)
	if text == "" {
		return false, nil
	}
	v := visitOf(ctx)
	id, err := uuid.Parse(text)
	if err != nil {
		return false, fmt.Errorf("read who a session belongs to: %w", err)
	}
	now := s.opt.Now()
	if !now.Before(s.scs.Deadline(ctx)) {
		return true, nil
	}
	if on := s.scs.GetString(ctx, keyDevice); on != "" && on != v.device.ID.String() {
		return true, nil // begun on a device that this is not, or no longer
	}
	if now.Sub(time.Unix(s.scs.GetInt64(ctx, keySeen), 0)) >= s.idle(v.device) {
		v.timedOut = true
		return true, nil
	}
	p, err := s.people.find(ctx, id)
	switch {
	case plant.IsKind(err, plant.NotFound) || (err == nil && !p.Active):
		return true, nil
	case err != nil:
		return false, fmt.Errorf("find who is signed in: %w", err)
	}
	if time.UnixMicro(s.scs.GetInt64(ctx, keyBegun)).Before(p.SessionsSince) {
		return true, nil
	}
	if s.scs.GetBool(ctx, keyPIN) {
		p = p.AtTablet()
	}
	v.person, v.signedIn = p, true
	return false, nil
}

// touch notes the use of the session, at most once a minute, because each note
// is a write to the store.
func (s *Sessions) touch(ctx context.Context) {
	if !visitOf(ctx).signedIn {
		return
	}
	now := s.opt.Now()
	if now.Sub(time.Unix(s.scs.GetInt64(ctx, keySeen), 0)) >= touchEvery {
		s.scs.Put(ctx, keySeen, now.Unix())
	}
}

// guardedStore keeps a session that has ended from coming back: the note of its
// last use, written at the end of a request that began before, would insert it
// again. Only a request that signed in may insert. Between servers a gap of one
// statement remains.
type guardedStore struct {
	s     *Sessions
	store scs.Store
	known *sessionCache
}

func (g guardedStore) Find(key string) ([]byte, bool, error) { return g.store.Find(key) }
func (g guardedStore) Delete(key string) error {
	g.s.writes.Lock()
	defer g.s.writes.Unlock()
	g.known.forget(key)
	defer g.known.forget(key)
	return g.store.Delete(key)
}
func (g guardedStore) Commit(key string, data []byte, expiry time.Time) error {
	defer g.known.forget(key)
	return g.store.Commit(key, data, expiry)
}

// CommitCtx is what the session library calls in place of Commit.
func (g guardedStore) CommitCtx(ctx context.Context, key string, data []byte, expiry time.Time) error {
	if visitOf(ctx).begun {
		return g.Commit(key, data, expiry)
	}
	g.s.writes.Lock()
	defer g.s.writes.Unlock()
	if _, there, err := g.store.Find(key); err != nil || !there {
		return err
	}
	return g.Commit(key, data, expiry)
}

func (g guardedStore) FindCtx(_ context.Context, key string) ([]byte, bool, error) {
	return g.known.find(key, g.store.Find)
}
func (g guardedStore) DeleteCtx(_ context.Context, key string) error { return g.Delete(key) }

// sessionCache remembers stored sessions for about a second: a page and its parts ask
// once. A session that ends here is forgotten at once, one that ends on another server
// within that second.
type sessionCache struct {
	now func() time.Time

	mu      sync.Mutex
	writes  uint64 // how often something was forgotten: what was read before counts no more
	entries map[string]cachedSession
}

type cachedSession struct {
	data  []byte
	until time.Time
}

func (c *sessionCache) find(key string, read func(string) ([]byte, bool, error)) ([]byte, bool, error) {
	c.mu.Lock()
	e, ok := c.entries[key]
	writes := c.writes
	c.mu.Unlock()
	if ok && c.now().Before(e.until) {
		return e.data, true, nil
	}
	data, there, err := read(key)
	if err != nil || !there {
		return data, there, err
	}
	c.mu.Lock()
	defer c.mu.Unlock()
	if c.writes == writes {
		if len(c.entries) >= cacheMost {
			clear(c.entries)
		}
		c.entries[key] = cachedSession{data, c.now().Add(cacheFor)}
	}
	return data, true, nil
}

func (c *sessionCache) forget(key string) {
	c.mu.Lock()
	defer c.mu.Unlock()
	c.writes++
	delete(c.entries, key)
}

// peopleCache remembers people for about a second: a page with its parts and its
// socket asks once, and a change of roles still counts at once to human eyes.
type peopleCache struct {
	people People
	many   func(ctx context.Context, ids []uuid.UUID) ([]plant.Person, error) // may be nil
	now    func() time.Time

	mu      sync.Mutex
	entries map[uuid.UUID]cached
}

type cached struct {
	person plant.Person
	until  time.Time
}

const cacheMost = 5000

func (c *peopleCache) find(ctx context.Context, id uuid.UUID) (plant.Person, error) {
	c.mu.Lock()
	e, ok := c.entries[id]
	c.mu.Unlock()
	if ok && c.now().Before(e.until) {
		return e.person, nil
	}
	p, err := c.people.Person(ctx, id)
	if err != nil {
		return plant.Person{}, err
	}
	c.mu.Lock()
	defer c.mu.Unlock()
	if len(c.entries) >= cacheMost {
		clear(c.entries)
	}
	c.entries[id] = cached{p, c.now().Add(cacheFor)}
	return p, nil
}

// fill reads those of the people that are not remembered in one go.
func (c *peopleCache) fill(ctx context.Context, ids []uuid.UUID) error {
	if c.many == nil {
		return nil
	}
	var missing []uuid.UUID
	c.mu.Lock()
	now := c.now()
	for _, id := range ids {
		if e, ok := c.entries[id]; !ok || !now.Before(e.until) {
			missing = append(missing, id)
		}
	}
	c.mu.Unlock()
	if len(missing) == 0 {
		return nil
	}
	found, err := c.many(ctx, missing)
	if err != nil {
		return fmt.Errorf("find people: %w", err)
	}
	c.mu.Lock()
	defer c.mu.Unlock()
	if len(c.entries)+len(found) > cacheMost {
		clear(c.entries)
	}
	for _, p := range found {
		c.entries[p.ID] = cached{p, c.now().Add(cacheFor)}
	}
	return nil
}

func (c *peopleCache) forget(id uuid.UUID) {
	c.mu.Lock()
	defer c.mu.Unlock()
	delete(c.entries, id)
}
