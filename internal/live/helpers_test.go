package live

import (
	"context"
	"encoding/json"
	"fmt"
	"io"
	"log/slog"
	"net"
	"net/http"
	"net/http/httptest"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/gorilla/websocket"
)

// patience bounds every wait of these tests; nothing sleeps for it.
const patience = 20 * time.Second

// plant is what the tests render from: the text of each fragment of each topic.
type plant struct {
	mu     sync.Mutex
	topics map[string]map[string]string
	calls  [][]string // what the renderer was asked for
	fail   map[string]error
}

func newPlant() *plant {
	return &plant{topics: make(map[string]map[string]string), fail: make(map[string]error)}
}

func (p *plant) set(topic, id, text string) {
	p.mu.Lock()
	defer p.mu.Unlock()
	if p.topics[topic] == nil {
		p.topics[topic] = make(map[string]string)
	}
	p.topics[topic][id] = text
}

func (p *plant) failing(topic string, err error) {
	p.mu.Lock()
	defer p.mu.Unlock()
	if err == nil {
		delete(p.fail, topic)
		return
	}
	p.fail[topic] = err
}

func (p *plant) asked() [][]string {
	p.mu.Lock()
	defer p.mu.Unlock()
	return append([][]string(nil), p.calls...)
}

func (p *plant) render(_ context.Context, topics []string) (map[string][]Fragment, error) {
	p.mu.Lock()
	defer p.mu.Unlock()
	p.calls = append(p.calls, topics)
	out := make(map[string][]Fragment)
	for _, name := range topics {
		if err := p.fail[name]; err != nil {
			return nil, err
		}
		for id, text := range p.topics[name] {
			out[name] = append(out[name], Fragment{ID: id, HTML: fmt.Appendf(nil, `<p id="%s">%s</p>`, id, text)})
		}
	}
	return out, nil
}

// calm are options under which nothing happens unless the test makes it happen.
func calm() Options {
	return Options{
		Log:          slog.New(slog.NewTextHandler(io.Discard, nil)),
		Interval:     time.Millisecond,
		RefreshEvery: -1,
		RecheckEvery: -1,
	}
}

type site struct {
	hub *Hub
	url string // ws://…
}

func serve(t testing.TB, render Renderer, opt Options) site {
	t.Helper()
	hub := New(render, opt)
	srv := httptest.NewServer(http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		q := r.URL.Query()
		switch q.Get("session") {
		case "none":
			hub.Refuse(w, r, SessionEnded)
			return
		case "":
			q.Set("session", "someone")
		}
		hub.Serve(w, r, Watch{Topics: q["topic"], Session: q.Get("session")})
	}))
	t.Cleanup(func() {
		ctx, cancel := context.WithTimeout(context.Background(), patience)
		defer cancel()
		if err := hub.Close(ctx); err != nil {
			t.Errorf("close the hub: %v", err)
		}
		srv.Close()
	})
	return site{hub: hub, url: "ws" + strings.TrimPrefix(srv.URL, "http")}
}

type message struct {
	Type      string
	Epoch     string
	Beat      int
	Topic     string
	Full      bool
	Fragments []struct {
		ID   string
		V    uint64
		HTML string
	}
}

func (m message) text(id string) string {
	for _, f := range m.Fragments {
		if f.ID == id {
			_, after, _ := strings.Cut(f.HTML, ">")
			return strings.TrimSuffix(after, "</p>")
		}
	}
	return ""
}

type browser struct {
	t    testing.TB
	conn *websocket.Conn
}

func (s site) open(t testing.TB, query string) browser {
	t.Helper()
	return s.openWith(t, &websocket.Dialer{}, query)
}

func (s site) openWith(t testing.TB, d *websocket.Dialer, query string) browser {
	t.Helper()
	conn, _, err := d.Dial(s.url+"/live?"+query, nil)
	if err != nil {
		t.Fatalf("dial: %v", err)
	}
	t.Cleanup(func() { conn.Close() })
	return browser{t, conn}
}

// narrow is a dialer whose sockets take in very little before they are read.
func narrow() *websocket.Dialer {
	return &websocket.Dialer{NetDialContext: func(ctx context.Context, network, addr string) (net.Conn, error) {
		var d net.Dialer
		c, err := d.DialContext(ctx, network, addr)
		if err == nil {
			err = c.(*net.TCPConn).SetReadBuffer(32 << 10)
		}
		return c, err
	}}
}

func (b browser) read() (message, error) {
	_ = b.conn.SetReadDeadline(time.Now().Add(patience))
	_, data, err := b.conn.ReadMessage()
	if err != nil {
		return message{}, err
	}
	var m message
	if err := json.Unmarshal(data, &m); err != nil {
		b.t.Errorf("message is not JSON: %v: %.200s", err, data)
	}
	return m, nil
}

func (b browser) next() message {
	b.t.Helper()
	m, err := b.read()
	if err != nil {
		b.t.Fatalf("read: %v", err)
	}
	return m
}

// nextOf skips messages of other types.
func (b browser) nextOf(kind string) message {
	b.t.Helper()
	for {
		if m := b.next(); m.Type == kind {
			return m
		}
	}
}

// closed reads to the end and gives the close code.
func (b browser) closed() int {
	b.t.Helper()
	for {
		_, err := b.read()
		if err == nil {
			continue
		}
		if ce, ok := err.(*websocket.CloseError); ok {
			return ce.Code
		}
		b.t.Fatalf("ended without a close frame: %v", err)
	}
}
