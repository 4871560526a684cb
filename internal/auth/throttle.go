package auth

import (
	"container/list"
	"crypto/sha256"
	"net/netip"
	"sync"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
)

// Throttle slows down the guessing of secrets. It keeps its counts in memory, a
// bounded number of them; a restart forgets them, which gives a guesser a few
// tries more and nothing else.
//
// The rule. Every try counts as a failure until it is known to have succeeded,
// so that tries sent at once do not slip through together. Three counts each
// allow some failures for free and then ask for a pause that doubles:
//
//   - one login from one source: 5 free, then 1 s doubling up to 5 minutes;
//   - one source, whatever the login: 30 free, then 1 s doubling up to 30 s;
//   - one login from four or more sources: 20 free, then 1 s doubling up to 30 s.
//
// A login that has come in from a source before, and for which nothing wrong was
// typed there since, is not held up by the other two. One wrong try there, and all
// three count: otherwise whoever guesses at tablets that know their people would
// have the free tries of each. So nobody can lock out a plant: failures from one source never
// hold up another, and those from many hold up people at their usual tablets not
// at all, and at a new one for half a minute at most. What a guesser can do is
// hold up logins at the source that they share with them, up to five minutes
// each; behind a proxy the web must therefore be told the true address. A try
// during a pause is refused without being checked or counted. Counts are
// forgotten 15 minutes after the last failure.
//
// A source is an enrolled device, else an address: an IPv4 address or an IPv6 /64
// network, which is what one subscriber commonly has. So tablets behind one
// address do not hold up one another, nor does somebody beside them who has none.
type Throttle struct {
	mu    sync.Mutex
	now   func() time.Time
	pairs counts[pairKey]
	addrs counts[Source]
	names counts[loginKey]
	known lru[pairKey, struct{}]
}

type (
	loginKey [sha256.Size]byte // of a fixed size however long the login that was sent
	pairKey  struct {
		login loginKey
		from  Source
	}
)

const (
	throttleEntries = 10_000 // of each count
	throttleForget  = 15 * time.Minute
	manyAddresses   = 4
)

// NewThrottle makes a throttle that reads the time from now.
func NewThrottle(now func() time.Time) *Throttle {
	return &Throttle{
		now:   now,
		pairs: newCounts[pairKey](5, 5*time.Minute),
		addrs: newCounts[Source](30, 30*time.Second),
		names: newCounts[loginKey](20, 30*time.Second),
		known: newLRU[pairKey, struct{}](throttleEntries),
	}
}

// Attempt is one try that was let through. It counts as failed unless Succeeded
// or Void is called, once.
type Attempt struct {
	t    *Throttle
	pair pairKey
}

// Source is where a try comes from; see AddressSource and DeviceSource.
type Source struct {
	device uuid.UUID
	addr   netip.Addr
}

// AddressSource is a try from an address that is no enrolled device.
func AddressSource(a netip.Addr) Source { return Source{addr: network(a)} }

// DeviceSource is a try on an enrolled device, wherever it stands in the network.
func DeviceSource(id uuid.UUID) Source { return Source{device: id} }

// Try asks to try a login from a source. A pause above zero means no: come back
// after it.
func (t *Throttle) Try(login string, from Source) (a *Attempt, pause time.Duration) {
	p := pairKey{sha256.Sum256([]byte(plant.CleanLogin(login))), from}
	t.mu.Lock()
	defer t.mu.Unlock()
	now := t.now()
	pause = t.pairs.pause(p, now)
	if _, known := t.known.get(p); !known || t.pairs.failing(p, now) {
		pause = max(pause, t.addrs.pause(p.from, now))
		if c, ok := t.names.entries.get(p.login); ok && len(c.from) >= manyAddresses {
			pause = max(pause, t.names.pause(p.login, now))
		}
	}
	if pause > 0 {
		return nil, pause
	}
	t.pairs.add(p, now)
	t.addrs.add(p.from, now)
	if c := t.names.add(p.login, now); len(c.from) < manyAddresses {
		if c.from == nil {
			c.from = make(map[Source]struct{}, manyAddresses)
		}
		c.from[p.from] = struct{}{}
	}
	return &Attempt{t, p}, 0
}

// Succeeded takes the try back and forgets the failures of this login from this
// source. Those of the source stay: otherwise somebody with an account of
// their own could clear it between guesses.
func (a *Attempt) Succeeded() {
	a.t.mu.Lock()
	defer a.t.mu.Unlock()
	a.t.pairs.entries.remove(a.pair)
	a.t.addrs.takeBack(a.pair.from)
	a.t.names.takeBack(a.pair.login)
	a.t.known.put(a.pair, struct{}{})
}

// Void takes the try back: a fault of ours kept it from being checked.
func (a *Attempt) Void() {
	a.t.mu.Lock()
	defer a.t.mu.Unlock()
	a.t.pairs.takeBack(a.pair)
	a.t.addrs.takeBack(a.pair.from)
	a.t.names.takeBack(a.pair.login)
}

func network(a netip.Addr) netip.Addr {
	a = a.Unmap().WithZone("")
	if a.Is6() {
		if p, err := a.Prefix(64); err == nil {
			return p.Addr()
		}
	}
	return a
}

// counts are failures by key.
type counts[K comparable] struct {
	free    int
	longest time.Duration
	entries lru[K, *count]
}

type count struct {
	failures int
	last     time.Time
	from     map[Source]struct{} // for logins: up to manyAddresses of the sources that tried
}

func newCounts[K comparable](free int, longest time.Duration) counts[K] {
	return counts[K]{free: free, longest: longest, entries: newLRU[K, *count](throttleEntries)}
}

// failing reports whether anything wrong is remembered of the key.
func (c *counts[K]) failing(k K, now time.Time) bool {
	e, ok := c.entries.get(k)
	return ok && e.failures > 0 && now.Sub(e.last) < throttleForget
}

// pause is how long the key has to wait from now on.
func (c *counts[K]) pause(k K, now time.Time) time.Duration {
	e, ok := c.entries.get(k)
	if !ok || e.failures < c.free || now.Sub(e.last) >= throttleForget {
		return 0
	}
	wait := c.longest
	if over := e.failures - c.free; over < 20 { // beyond, the doubling has long passed the longest
		wait = min(wait, time.Second<<over)
	}
	return max(0, e.last.Add(wait).Sub(now))
}

func (c *counts[K]) add(k K, now time.Time) *count {
	e, ok := c.entries.get(k)
	if !ok || now.Sub(e.last) >= throttleForget {
		e = &count{}
		c.entries.put(k, e)
	}
	e.failures++
	e.last = now
	return e
}

func (c *counts[K]) takeBack(k K) {
	if e, ok := c.entries.get(k); ok && e.failures > 0 {
		e.failures--
	}
}

// lru is a map that forgets what was used longest ago.
type lru[K comparable, V any] struct {
	most  int
	items map[K]*list.Element
	order *list.List // of *lruItem[K, V], the latest first
}

type lruItem[K comparable, V any] struct {
	key   K
	value V
}

func newLRU[K comparable, V any](most int) lru[K, V] {
	return lru[K, V]{most: most, items: make(map[K]*list.Element), order: list.New()}
}

func (l *lru[K, V]) get(k K) (v V, ok bool) {
	e, ok := l.items[k]
	if !ok {
		return v, false
	}
	l.order.MoveToFront(e)
	return e.Value.(*lruItem[K, V]).value, true
}

func (l *lru[K, V]) put(k K, v V) {
	if e, ok := l.items[k]; ok {
		e.Value.(*lruItem[K, V]).value = v
		l.order.MoveToFront(e)
		return
	}
	l.items[k] = l.order.PushFront(&lruItem[K, V]{k, v})
	if l.order.Len() > l.most {
		l.remove(l.order.Back().Value.(*lruItem[K, V]).key)
	}
}

func (l *lru[K, V]) remove(k K) {
	if e, ok := l.items[k]; ok {
		l.order.Remove(e)
		delete(l.items, k)
	}
}
