package auth

import (
	"context"
	"fmt"
	"sync"
	"time"

	"github.com/alexedwards/scs/v2"
	"github.com/google/uuid"

	"holdfast/internal/plant"
)

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
	// A note of the last use that cannot be written, because the disk is full for one,
	// costs nobody their page.
	if err := g.note(key, data, expiry); err != nil {
		g.s.opt.Log.Warn("note the last use of a session", "error", err)
	}
	return nil
}

func (g guardedStore) note(key string, data []byte, expiry time.Time) error {
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
// as soon as that server tells, or within that second.
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

func (c *sessionCache) forgetAll() {
	c.mu.Lock()
	defer c.mu.Unlock()
	c.writes++
	clear(c.entries)
}

// peopleCache remembers people for about a second: a page with its parts and its
// socket asks once, and a change of roles still counts at once to human eyes.
type peopleCache struct {
	people People
	many   func(ctx context.Context, ids []uuid.UUID) ([]plant.Person, error) // may be nil
	now    func() time.Time

	mu      sync.Mutex
	forgets uint64 // how often something was forgotten: what was read before counts no more
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
	forgets := c.forgets
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
	if c.forgets == forgets {
		if len(c.entries) >= cacheMost {
			clear(c.entries)
		}
		c.entries[id] = cached{p, c.now().Add(cacheFor)}
	}
	return p, nil
}

// fill reads those of the people that are not remembered in one go.
func (c *peopleCache) fill(ctx context.Context, ids []uuid.UUID) error {
	if c.many == nil {
		return nil
	}
	var missing []uuid.UUID
	c.mu.Lock()
	forgets := c.forgets
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
	if c.forgets != forgets {
		return nil // each is asked for by itself
	}
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
	c.forgets++
	delete(c.entries, id)
}

func (c *peopleCache) forgetAll() {
	c.mu.Lock()
	defer c.mu.Unlock()
	c.forgets++
	clear(c.entries)
}
