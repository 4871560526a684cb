package live

import (
	"cmp"
	"context"
	"crypto/rand"
	"errors"
	"log/slog"
	"net/http"
	"slices"
	"sync"
	"time"

	"github.com/gorilla/websocket"
)

// Renderer renders the fragments of the topics, all from one read of the data if
// it can. A topic that it leaves out has no fragments. It is called from one
// goroutine at a time, under Options.RenderTimeout.
type Renderer func(ctx context.Context, topics []string) (map[string][]Fragment, error)

// Options are the hub's settings; zero means the default.
type Options struct {
	Log *slog.Logger // slog.Default()

	Interval      time.Duration // least time between two renderings; 25 ms
	RefreshEvery  time.Duration // watched topics are rendered again, changed or not; 10 s, negative: never
	RenderTimeout time.Duration // for one call of the renderer and its repeats; 10 s
	Heartbeat     time.Duration // between beats, and between pings; 5 s
	WriteTimeout  time.Duration // a client that takes nothing for so long is cut off; 10 s

	// Recheck is given all sessions that have sockets and returns those that
	// have ended. It may be nil.
	Recheck      func(ctx context.Context, sessions []string) (ended []string, err error)
	RecheckEvery time.Duration // 5 s

	MaxSockets    int // in all; 4000
	MaxPerSession int // 32
}

func (o Options) withDefaults() Options {
	if o.Log == nil {
		o.Log = slog.Default()
	}
	o.Interval = cmp.Or(o.Interval, 25*time.Millisecond)
	o.RefreshEvery = cmp.Or(o.RefreshEvery, 10*time.Second)
	o.RenderTimeout = cmp.Or(o.RenderTimeout, 10*time.Second)
	o.Heartbeat = cmp.Or(o.Heartbeat, 5*time.Second)
	o.WriteTimeout = cmp.Or(o.WriteTimeout, 10*time.Second)
	o.RecheckEvery = cmp.Or(o.RecheckEvery, 5*time.Second)
	o.MaxSockets = cmp.Or(o.MaxSockets, 4000)
	o.MaxPerSession = cmp.Or(o.MaxPerSession, 32)
	return o
}

// maxTopics bounds what one socket may watch.
const maxTopics = 16

// Hub knows who watches what. All that knowledge belongs to one goroutine (see
// loop); the methods talk to it and are safe for concurrent use.
type Hub struct {
	opt      Options
	render   Renderer
	epoch    string
	upgrader websocket.Upgrader
	hello    *websocket.PreparedMessage
	beat     *websocket.PreparedMessage

	ctx    context.Context // ends with Close; renderers and rechecks run under it
	cancel context.CancelFunc
	ended  chan struct{} // closed when the loop has returned

	commands chan func(*loop)
	dirtyMu  sync.Mutex
	dirty    map[string]struct{} // marked, not yet seen by the loop
	wake     chan struct{}

	tasks sync.WaitGroup // sockets, and work that the loop has handed out
	count counters
}

// New starts a hub. Close must be called to end it.
func New(render Renderer, opt Options) *Hub {
	h := &Hub{
		opt:    opt.withDefaults(),
		render: render,
		epoch:  rand.Text(),
		upgrader: websocket.Upgrader{
			// CheckOrigin stays nil: same host only.
			HandshakeTimeout: 5 * time.Second,
			ReadBufferSize:   512,
			WriteBufferSize:  1024, // close frames only; prepared messages bypass it
			WriteBufferPool:  &sync.Pool{},
		},
		ended:    make(chan struct{}),
		commands: make(chan func(*loop)),
		dirty:    make(map[string]struct{}),
		wake:     make(chan struct{}, 1),
	}
	h.hello = prepare(encodeHello(h.epoch, h.opt.Heartbeat))
	h.beat = prepare([]byte(`{"type":"beat"}`))
	h.ctx, h.cancel = context.WithCancel(context.Background())
	go newLoop(h).run()
	return h
}

// Dirty marks topics as changed. It never waits and may be called for topics
// that nobody watches.
func (h *Hub) Dirty(topics ...string) {
	h.dirtyMu.Lock()
	for _, t := range topics {
		h.dirty[t] = struct{}{}
	}
	h.dirtyMu.Unlock()
	select {
	case h.wake <- struct{}{}:
	default:
	}
}

// takeDirty empties the set of marked topics.
func (h *Hub) takeDirty() map[string]struct{} {
	h.dirtyMu.Lock()
	defer h.dirtyMu.Unlock()
	got := h.dirty
	h.dirty = make(map[string]struct{})
	return got
}

// Drop ends all sockets of a session. It returns once they are out of the hub:
// nothing rendered later reaches them. What is being written to them may still
// arrive, for at most two seconds.
func (h *Hub) Drop(session string, why Reason) {
	h.do(func(l *loop) { l.drop(session, why) })
}

// Recheck asks at once which sessions have ended, and not only at the next turn.
func (h *Hub) Recheck() {
	if h.opt.Recheck != nil {
		h.do(func(l *loop) { l.recheck() })
	}
}

// do runs f in the hub's goroutine and waits for it; false means that the hub
// is closed and f has not run.
func (h *Hub) do(f func(*loop)) bool {
	done := make(chan struct{})
	select {
	case h.commands <- func(l *loop) { f(l); close(done) }:
		<-done
		return true
	case <-h.ended:
		return false
	}
}

// Close ends all sockets, tells the browsers to come back, and waits until every
// goroutine of the hub is gone or ctx is done. It may be called again.
// http.Server.Shutdown does not know of sockets, so call it as well.
func (h *Hub) Close(ctx context.Context) error {
	h.cancel()
	gone := make(chan struct{})
	go func() {
		<-h.ended // nothing is added to tasks after it
		h.tasks.Wait()
		close(gone)
	}()
	select {
	case <-gone:
		return nil
	case <-ctx.Done():
		return errors.Join(errors.New("live: sockets were still open"), ctx.Err())
	}
}

// Watch says what a socket is for.
type Watch struct {
	Topics  []string // what it shows; the caller has checked that it may
	Session string   // whose it is, for Drop and Recheck; never a secret
}

// Serve upgrades the request and keeps the socket until it ends. The caller has
// checked who asks and what they may see. Use it outside of middleware that
// buffers, compresses or times out.
func (h *Hub) Serve(w http.ResponseWriter, r *http.Request, watch Watch) {
	topics := slices.Compact(slices.Sorted(slices.Values(watch.Topics)))
	switch {
	case watch.Session == "": // a mistake in our own code: nothing could end the socket
		h.opt.Log.Error("live: a socket without a session was refused", "topics", topics)
		http.Error(w, http.StatusText(http.StatusInternalServerError), http.StatusInternalServerError)
		return
	case len(topics) == 0 || len(topics) > maxTopics:
		http.Error(w, "Name between 1 and 16 topics.", http.StatusBadRequest)
		return
	case h.ctx.Err() != nil:
		http.Error(w, "The server is stopping.", http.StatusServiceUnavailable)
		return
	case h.count.sockets.Load() >= int64(h.opt.MaxSockets):
		h.count.refused.Add(1)
		http.Error(w, "Too many connections.", http.StatusServiceUnavailable)
		return
	}
	conn, err := h.upgrader.Upgrade(w, r, nil)
	if err != nil {
		return // the upgrader has answered
	}
	limitSendBuffer(conn.NetConn())
	c := &client{
		hub: h, conn: conn, session: watch.Session, topics: topics, mail: newMailbox(),
		ended: make(chan struct{}), wrote: make(chan struct{}),
	}
	refused := GoingAway
	if !h.do(func(l *loop) { refused = l.join(c) }) || refused != (Reason{}) {
		writeClose(conn, refused)
		_ = conn.Close()
		return
	}
	defer h.tasks.Done() // added by join
	go c.write(h.hello)
	c.read()
	h.do(func(l *loop) { l.leave(c) })
	c.end(Reason{})
	_ = conn.Close()
	<-c.wrote
}

// Refuse tells a browser why it gets no socket. Scripts cannot read the status
// of a refused upgrade, so the socket is opened and closed with the reason. A
// request that is no upgrade gets the status that belongs to it.
func (h *Hub) Refuse(w http.ResponseWriter, r *http.Request, why Reason) {
	h.count.refused.Add(1)
	if !websocket.IsWebSocketUpgrade(r) {
		status := http.StatusForbidden
		if why == SessionEnded {
			status = http.StatusUnauthorized
		}
		http.Error(w, http.StatusText(status), status)
		return
	}
	conn, err := h.upgrader.Upgrade(w, r, nil)
	if err != nil {
		return
	}
	defer conn.Close()
	writeClose(conn, why)
	// Closing at once could reset the link before the frame is read.
	conn.SetReadLimit(readLimit)
	_ = conn.SetReadDeadline(time.Now().Add(closeGrace))
	for {
		if _, _, err := conn.NextReader(); err != nil {
			return
		}
	}
}
