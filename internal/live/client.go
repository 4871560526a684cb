package live

import (
	"context"
	"errors"
	"log/slog"
	"net"
	"sync"
	"time"

	"github.com/gorilla/websocket"
)

const (
	readLimit = 512 // clients have nothing to say but pongs and close frames

	// The kernel would let an unread socket grow to megabytes, a backlog that
	// no coalescing of ours can reach.
	sendBuffer = 64 << 10

	// closeGrace is how long the other side has to answer a close frame.
	closeGrace = 2 * time.Second
)

// Reason says why a socket was ended: the close code, and a short text for logs
// and for somebody who reads the browser's console. No page shows the text.
type Reason struct {
	Code int
	Text string
}

var (
	SessionEnded = Reason{4401, "the session ended"}
	NotAllowed   = Reason{4403, "not allowed"}
	TooSlow      = Reason{4408, "too slow"}
	TooMany      = Reason{4429, "too many connections"}
	GoingAway    = Reason{websocket.CloseGoingAway, "the server stops"}
)

// client is one socket. The hub's goroutine alone decides that it ends; its
// reader and writer only report that it has.
type client struct {
	hub     *Hub
	conn    *websocket.Conn
	session string
	topics  []string
	mail    *mailbox

	endOnce sync.Once
	ended   chan struct{} // closed by end
	reason  Reason        // set before ended is closed; zero: the link is gone, write nothing
	wrote   chan struct{} // closed when the writer has returned
}

// end lets the writer send a close frame and stop. It may be called more than
// once and from anywhere; the first reason counts.
func (c *client) end(why Reason) {
	c.endOnce.Do(func() {
		c.reason = why
		close(c.ended)
		if why != (Reason{}) {
			// The writer may be stuck in a full link: whoever may no longer
			// watch gets no second chance to drain it.
			time.AfterFunc(closeGrace, func() { _ = c.conn.NetConn().Close() })
		}
	})
}

// read discards what the client sends until the socket ends or stays silent,
// pongs included, for longer than three heartbeats and a bit.
func (c *client) read() {
	patience := 3*c.hub.opt.Heartbeat + c.hub.opt.WriteTimeout
	c.conn.SetReadLimit(readLimit)
	alive := func() error { return c.conn.SetReadDeadline(time.Now().Add(patience)) }
	c.conn.SetPongHandler(func(string) error { return alive() })
	if alive() != nil {
		return
	}
	for {
		if _, _, err := c.conn.NextReader(); err != nil {
			return
		}
		if alive() != nil {
			return
		}
	}
}

// write is the only place that writes data frames to the socket.
func (c *client) write(hello *websocket.PreparedMessage) {
	defer close(c.wrote)
	err := c.send(hello)
	beat := time.NewTicker(c.hub.opt.Heartbeat)
	defer beat.Stop()
	for err == nil {
		select {
		case <-c.ended:
			c.sayGoodbye()
			return
		case <-c.mail.wake:
			err = c.deliver()
		case <-beat.C:
			if err = c.send(c.hub.beat); err == nil {
				err = c.conn.WriteControl(websocket.PingMessage, nil, time.Now().Add(c.hub.opt.WriteTimeout))
			}
		}
	}
	select {
	case <-c.ended: // the link was closed on purpose while a write was under way
	default:
		c.failed(err)
	}
	_ = c.conn.Close() // wakes the reader, which takes the client out of the hub
}

// deliver writes what waits for one topic. It returns after one, so that the
// heartbeat has its turn however much there is to write.
func (c *client) deliver() error {
	topic, w, ok := c.mail.take()
	if !ok {
		return nil
	}
	for _, m := range w.messages(topic) {
		if err := c.send(m); err != nil {
			return err
		}
		c.hub.count.messages.Add(1)
	}
	return nil
}

func (c *client) send(m *websocket.PreparedMessage) error {
	if err := c.conn.SetWriteDeadline(time.Now().Add(c.hub.opt.WriteTimeout)); err != nil {
		return err
	}
	return c.conn.WritePreparedMessage(m)
}

// failed records why a write did not succeed. Only a stall is worth a line:
// links that break are ordinary.
func (c *client) failed(err error) {
	if timeout, ok := errors.AsType[net.Error](err); ok && timeout.Timeout() {
		c.hub.count.slow.Add(1)
		c.hub.opt.Log.LogAttrs(context.Background(), slog.LevelInfo, "live: dropped a client",
			slog.String("reason", TooSlow.Text), slog.Any("topics", c.topics),
			slog.Duration("stalled", c.hub.opt.WriteTimeout))
	}
}

func (c *client) sayGoodbye() {
	if c.reason == (Reason{}) {
		return
	}
	writeClose(c.conn, c.reason)
	// The reader ends when the other side answers, or now plus the grace.
	_ = c.conn.SetReadDeadline(time.Now().Add(closeGrace))
}

func writeClose(conn *websocket.Conn, why Reason) {
	frame := websocket.FormatCloseMessage(why.Code, why.Text)
	_ = conn.WriteControl(websocket.CloseMessage, frame, time.Now().Add(closeGrace))
}

// limitSendBuffer bounds what the kernel holds for a client that does not read.
// A transport that cannot be told (a pipe in a test) is left as it is.
func limitSendBuffer(conn net.Conn) {
	if inner, ok := conn.(interface{ NetConn() net.Conn }); ok { // TLS
		conn = inner.NetConn()
	}
	if tcp, ok := conn.(*net.TCPConn); ok {
		_ = tcp.SetWriteBuffer(sendBuffer)
	}
}
