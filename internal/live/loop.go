package live

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"maps"
	"slices"
	"time"
)

const (
	retryFirst = 250 * time.Millisecond // pause after a failed rendering, doubled each time
	retryLast  = 5 * time.Second
)

// topic is what the hub knows of something that is watched.
type topic struct {
	name     string
	watchers map[*client]*watcher
	frags    map[string]*fragment // as last rendered
	failures int
	retryAt  time.Time // not before, after a failure
	stale    bool      // watchers were told that rendering fails
}

// watcher is one client's place in one topic.
type watcher struct {
	joined  uint64 // rounds begun before it joined
	waiting bool   // has not been given a full state
}

// round is one rendering, handed to the loop when it is done.
type round struct {
	number uint64
	topics []string
	frags  map[string][]Fragment
	failed map[string]error
	calls  int
}

// loop owns the state of a hub. Its methods run in the hub's goroutine and must
// not wait for anything.
type loop struct {
	h        *Hub
	topics   map[string]*topic
	dirty    map[string]*topic // to be rendered; a subset of topics
	sessions map[string]map[*client]struct{}

	version   uint64
	rounds    uint64    // begun
	lastRound time.Time // when the last one began
	rendering bool
	rendered  chan round

	checking bool
	again    bool // asked for while a question was under way, which may have been answered before
	checked  chan []string
}

func newLoop(h *Hub) *loop {
	return &loop{
		h:        h,
		topics:   make(map[string]*topic),
		dirty:    make(map[string]*topic),
		sessions: make(map[string]map[*client]struct{}),
		rendered: make(chan round, 1),
		checked:  make(chan []string, 1),
	}
}

func (l *loop) run() {
	defer close(l.h.ended)
	refresh, stopRefresh := every(l.h.opt.RefreshEvery)
	defer stopRefresh()
	recheck, stopRecheck := every(l.h.opt.RecheckEvery)
	defer stopRecheck()
	if l.h.opt.Recheck == nil {
		recheck = nil
	}
	timer := time.NewTimer(time.Hour)
	defer timer.Stop()

	for {
		if wait := l.schedule(time.Now()); wait > 0 {
			timer.Reset(wait)
		} else {
			timer.Stop()
		}
		select {
		case <-l.h.ctx.Done():
			l.dropAll(GoingAway)
			return
		case f := <-l.h.commands:
			f(l)
		case <-l.h.wake:
			for name := range l.h.takeDirty() {
				if t := l.topics[name]; t != nil {
					l.dirty[name] = t
				}
			}
		case <-timer.C:
		case <-refresh:
			maps.Copy(l.dirty, l.topics)
		case r := <-l.rendered:
			l.rendering = false
			l.apply(r, time.Now())
		case <-recheck:
			l.recheck()
		case ended := <-l.checked:
			l.checking = false
			for _, s := range ended {
				l.drop(s, SessionEnded)
			}
			if l.again {
				l.again = false
				l.recheck()
			}
		}
	}
}

// every is a ticker, or nothing at all for a negative period.
func every(d time.Duration) (tick <-chan time.Time, stop func()) {
	if d < 0 {
		return nil, func() {}
	}
	t := time.NewTicker(d)
	return t.C, t.Stop
}

// join takes a client in, or says why not. Its topics are rendered afresh even
// if others watch them: the page it belongs to may be newer than the last
// rendering.
func (l *loop) join(c *client) (refused Reason) {
	switch {
	case l.h.ctx.Err() != nil:
		return GoingAway
	case len(l.sessions[c.session]) >= l.h.opt.MaxPerSession:
		l.h.count.refused.Add(1)
		return TooMany
	}
	if l.sessions[c.session] == nil {
		l.sessions[c.session] = make(map[*client]struct{})
	}
	l.sessions[c.session][c] = struct{}{}
	for _, name := range c.topics {
		t := l.topics[name]
		if t == nil {
			t = &topic{name: name, watchers: make(map[*client]*watcher), frags: make(map[string]*fragment)}
			l.topics[name] = t
		}
		t.watchers[c] = &watcher{joined: l.rounds, waiting: true}
		l.dirty[name] = t
	}
	l.h.tasks.Add(1)
	l.h.count.sockets.Add(1)
	l.h.count.topics.Store(int64(len(l.topics)))
	return Reason{}
}

// leave takes a client out; a second time does nothing.
func (l *loop) leave(c *client) {
	clients := l.sessions[c.session]
	if _, in := clients[c]; !in {
		return
	}
	delete(clients, c)
	if len(clients) == 0 {
		delete(l.sessions, c.session)
	}
	for _, name := range c.topics {
		t := l.topics[name]
		delete(t.watchers, c)
		if len(t.watchers) == 0 {
			delete(l.topics, name)
			delete(l.dirty, name)
		}
	}
	l.h.count.sockets.Add(-1)
	l.h.count.topics.Store(int64(len(l.topics)))
}

func (l *loop) drop(session string, why Reason) {
	for c := range l.sessions[session] {
		l.leave(c)
		c.end(why)
		l.h.count.ended.Add(1)
	}
}

func (l *loop) dropAll(why Reason) {
	for _, clients := range l.sessions {
		for c := range clients {
			l.leave(c)
			c.end(why)
		}
	}
}

// schedule begins a round if one is due. Otherwise it says how long until one
// can be; 0 means that something else has to happen first.
func (l *loop) schedule(now time.Time) (wait time.Duration) {
	if l.rendering || len(l.dirty) == 0 {
		return 0
	}
	var due []string
	var soonest time.Time
	for name, t := range l.dirty {
		at := l.lastRound.Add(l.h.opt.Interval)
		if t.retryAt.After(at) {
			at = t.retryAt
		}
		if !at.After(now) {
			due = append(due, name)
		} else if soonest.IsZero() || at.Before(soonest) {
			soonest = at
		}
	}
	if len(due) == 0 {
		return soonest.Sub(now)
	}
	slices.Sort(due)
	for _, name := range due {
		delete(l.dirty, name)
	}
	l.rounds++
	l.lastRound = now
	l.rendering = true
	number := l.rounds
	l.h.tasks.Add(1)
	go func() {
		defer l.h.tasks.Done()
		l.rendered <- l.h.renderRound(number, due) // buffered: one round at a time
	}()
	return 0
}

// renderRound calls the renderer for all topics, and for each by itself when
// that fails, so that one bad topic does not hold up the rest.
func (h *Hub) renderRound(number uint64, topics []string) round {
	ctx, cancel := context.WithTimeout(h.ctx, h.opt.RenderTimeout)
	defer cancel()
	r := round{number: number, topics: topics, calls: 1, failed: make(map[string]error)}
	frags, err := h.callRenderer(ctx, topics)
	if err == nil {
		r.frags = frags
		return r
	}
	if len(topics) == 1 {
		r.failed[topics[0]] = err
		return r
	}
	r.frags = make(map[string][]Fragment)
	for _, name := range topics {
		if ctx.Err() != nil {
			r.failed[name] = err
			continue
		}
		r.calls++
		if one, err := h.callRenderer(ctx, []string{name}); err != nil {
			r.failed[name] = err
		} else {
			r.frags[name] = one[name]
		}
	}
	return r
}

// callRenderer turns a panic into an error: a fault in one page must not end
// the server.
func (h *Hub) callRenderer(ctx context.Context, topics []string) (frags map[string][]Fragment, err error) {
	h.count.renders.Add(1)
	defer func() {
		if p := recover(); p != nil {
			err = fmt.Errorf("renderer panicked: %v", p)
		}
		if err != nil {
			h.count.renderErrors.Add(1)
		}
	}()
	return h.render(ctx, topics)
}

func (l *loop) apply(r round, now time.Time) {
	for _, name := range r.topics {
		t := l.topics[name]
		if t == nil { // nobody watches it any more
			continue
		}
		err := r.failed[name]
		if err == nil {
			err = l.update(t, r.number, r.frags[name])
		}
		if err != nil {
			l.failed(t, err, now)
		}
	}
}

// update takes the newest rendering of a topic and hands out what it changed.
func (l *loop) update(t *topic, number uint64, rendered []Fragment) error {
	next := make(map[string]*fragment, len(rendered))
	var changed []*fragment
	unchanged := 0
	for _, f := range rendered {
		if next[f.ID] != nil {
			return fmt.Errorf("fragment %q was rendered twice", f.ID)
		}
		if old := t.frags[f.ID]; old != nil && bytes.Equal(old.html, f.HTML) {
			next[f.ID] = old
			unchanged++
			continue
		}
		l.version++
		fresh, err := newFragment(f.ID, l.version, f.HTML)
		if err != nil {
			return err
		}
		next[f.ID] = fresh
		changed = append(changed, fresh)
	}
	l.h.count.changed.Add(int64(len(changed)))
	l.h.count.unchanged.Add(int64(unchanged))
	wasStale := t.stale
	t.frags, t.failures, t.retryAt, t.stale = next, 0, time.Time{}, false

	var part, full *bundle // made when the first client needs it
	for c, w := range t.watchers {
		b := &part
		switch {
		case w.waiting && w.joined >= number:
			continue // this rendering may be older than its page; the next is not
		case w.waiting:
			w.waiting = false
			if full == nil {
				full = newBundle(t.name, true, sortedByVersion(next))
			}
			b = &full
		case len(changed) == 0 && !wasStale:
			continue
		case part == nil:
			part = newBundle(t.name, false, changed)
		}
		if c.mail.put(*b) {
			l.h.count.coalesced.Add(1)
		}
	}
	return nil
}

// failed keeps the topic marked for another try after a pause.
func (l *loop) failed(t *topic, err error, now time.Time) {
	l.dirty[t.name] = t
	pause := retryLast
	if t.failures < 5 { // 250 ms doubled five times is past the last pause
		pause = min(retryLast, retryFirst<<t.failures)
	}
	t.failures++
	t.retryAt = now.Add(pause)
	if l.h.ctx.Err() == nil || !errors.Is(err, context.Canceled) {
		l.h.opt.Log.Error("live: render", "topic", t.name, "error", err, "failures", t.failures, "again_in", pause)
	}
	if t.stale {
		return
	}
	t.stale = true
	for c, w := range t.watchers {
		if !w.waiting {
			c.mail.putStale(t.name)
		}
	}
}

// recheck asks which sessions have ended, at most one question at a time.
func (l *loop) recheck() {
	if l.checking {
		l.again = true
		return
	}
	if len(l.sessions) == 0 {
		return
	}
	l.checking = true
	sessions := slices.Sorted(maps.Keys(l.sessions))
	l.h.tasks.Add(1)
	go func() {
		defer l.h.tasks.Done()
		ctx, cancel := context.WithTimeout(l.h.ctx, l.h.opt.RenderTimeout)
		defer cancel()
		ended, err := l.h.opt.Recheck(ctx, sessions)
		if err != nil {
			if l.h.ctx.Err() == nil {
				l.h.opt.Log.Error("live: recheck sessions", "error", err)
			}
			ended = nil
		}
		l.checked <- ended
	}()
}
