package live

import (
	"context"
	"errors"
	"net/http"
	"slices"
	"strconv"
	"strings"
	"sync/atomic"
	"testing"
	"time"

	"github.com/gorilla/websocket"
)

// TestSlowClientGetsTheNewestAndNoBacklog lets one client read nothing while a
// thousand changes reach another, then reads.
func TestSlowClientGetsTheNewestAndNoBacklog(t *testing.T) {
	t.Parallel()
	const changes, size = 1000, 8 << 10
	filler := strings.Repeat("x", size)
	p := newPlant()
	p.set("board", "steady", "never changes")
	p.set("board", "lane", "0 "+filler)
	opt := calm()
	opt.WriteTimeout = 5 * time.Minute // it is slow and not stalled, however busy the machine is
	s := serve(t, p.render, opt)
	fast := s.open(t, "topic=board&session=fast")
	fast.nextOf("state")
	slow := s.openWith(t, narrow(), "topic=board&session=slow")
	slow.nextOf("hello") // it has joined

	for i := 1; i <= changes; i++ {
		p.set("board", "lane", strconv.Itoa(i)+" "+filler)
		s.hub.Dirty("board")
		for !strings.HasPrefix(fast.nextOf("state").text("lane"), strconv.Itoa(i)+" ") { // the barrier: it has gone out
		}
	}
	held := 0
	s.hub.do(func(l *loop) {
		for c := range l.sessions["slow"] {
			held = c.mail.held()
		}
	})
	if held == 0 || held > 2 {
		t.Errorf("%d fragments wait for the slow client; want 1 or 2, one state of each", held)
	}

	states := 0
	var last uint64
	for newest := strconv.Itoa(changes) + " "; ; {
		m := slow.nextOf("state")
		states++
		for _, f := range m.Fragments {
			if f.V <= last && f.ID == "lane" {
				t.Errorf("version %d came after %d", f.V, last)
			}
			if f.ID == "lane" {
				last = f.V
			}
		}
		if strings.HasPrefix(m.text("lane"), newest) {
			break
		}
	}
	if states > changes/10 {
		t.Errorf("the slow client was sent %d states of %d changes", states, changes)
	}
	if st := s.hub.Stats(); st.Coalesced < changes/2 || st.Slow != 0 {
		t.Errorf("stats = %+v; want most changes coalesced and nobody cut off", st)
	}
}

func TestStalledClientIsCutOff(t *testing.T) {
	t.Parallel()
	p := newPlant()
	filler := strings.Repeat("x", 512<<10)
	p.set("board", "lane", filler)
	opt := calm()
	opt.WriteTimeout = 50 * time.Millisecond
	s := serve(t, p.render, opt)
	s.openWith(t, narrow(), "topic=board").nextOf("hello") // and reads no more
	var c *client
	s.hub.do(func(l *loop) {
		for c = range l.sessions["someone"] {
		}
	})
	if c == nil {
		t.Fatal("the client did not join")
	}
	select {
	case <-c.wrote:
	case <-time.After(patience):
		t.Fatal("a client that reads nothing was kept")
	}
	if n := s.hub.Stats().Slow; n != 1 {
		t.Errorf("slow clients = %d; want 1", n)
	}
}

func TestHeartbeatsGoBothWays(t *testing.T) {
	t.Parallel()
	opt := calm()
	opt.Heartbeat = 10 * time.Millisecond
	s := serve(t, newPlant().render, opt)
	b := s.open(t, "topic=board")
	var pings atomic.Int64
	answer := b.conn.PingHandler()
	b.conn.SetPingHandler(func(data string) error { pings.Add(1); return answer(data) })
	for range 3 {
		b.nextOf("beat")
	}
	if pings.Load() == 0 {
		t.Error("beats came without pings")
	}
}

func TestSilentClientIsLetGo(t *testing.T) {
	t.Parallel()
	opt := calm()
	opt.Heartbeat = 10 * time.Millisecond
	opt.WriteTimeout = 20 * time.Millisecond
	s := serve(t, newPlant().render, opt)
	b := s.open(t, "topic=board")
	b.conn.SetPingHandler(func(string) error { return nil }) // a dead peer answers nothing
	for {
		if _, err := b.read(); err != nil {
			break
		}
	}
}

func TestDropEndsTheSocketsOfOneSession(t *testing.T) {
	t.Parallel()
	p := newPlant()
	p.set("board", "lane", "0")
	s := serve(t, p.render, calm())
	a1 := s.open(t, "topic=board&session=a")
	a2 := s.open(t, "topic=station/1&session=a")
	other := s.open(t, "topic=board&session=b")
	for _, b := range []browser{a1, a2, other} {
		b.nextOf("state")
	}
	s.hub.Drop("a", SessionEnded)
	if st := s.hub.Stats(); st.Sockets != 1 || st.Topics != 1 || st.Ended != 2 {
		t.Errorf("stats right after Drop = %+v; want one socket, one topic, two ended", st)
	}
	if c1, c2 := a1.closed(), a2.closed(); c1 != 4401 || c2 != 4401 {
		t.Errorf("close codes %d, %d; want 4401", c1, c2)
	}
	p.set("board", "lane", "1")
	s.hub.Dirty("board")
	if m := other.nextOf("state"); m.text("lane") != "1" {
		t.Errorf("the other session got %+v", m)
	}
}

func TestDroppedClientThatDoesNotReadIsClosedAllTheSame(t *testing.T) {
	t.Parallel()
	p := newPlant()
	p.set("board", "lane", strings.Repeat("x", 1<<20))
	s := serve(t, p.render, calm())
	b := s.openWith(t, narrow(), "topic=board&session=a")
	b.nextOf("hello")
	var c *client
	s.hub.do(func(l *loop) {
		for c = range l.sessions["a"] {
		}
	})
	s.hub.Drop("a", SessionEnded)
	select {
	case <-c.wrote:
	case <-time.After(patience):
		t.Fatal("the writer is still stuck")
	}
	for {
		if _, err := b.read(); err != nil {
			break
		}
	}
}

func TestSessionsEndedElsewhereAreFound(t *testing.T) {
	t.Parallel()
	asked := make(chan []string, 100)
	var over atomic.Bool
	opt := calm()
	opt.RecheckEvery = 5 * time.Millisecond
	opt.Recheck = func(_ context.Context, sessions []string) ([]string, error) {
		select {
		case asked <- sessions:
		default:
		}
		if !over.Load() {
			return []string{"a"}, errors.New("cannot tell") // an error drops nobody
		}
		return []string{"a"}, nil
	}
	s := serve(t, newPlant().render, opt)
	a := s.open(t, "topic=board&session=a")
	b := s.open(t, "topic=board&session=b")
	a.nextOf("state")
	b.nextOf("state")
	for got := range asked {
		if slices.Equal(got, []string{"a", "b"}) {
			break
		}
	}
	over.Store(true)
	if code := a.closed(); code != 4401 {
		t.Errorf("close code %d; want 4401", code)
	}
	if n := s.hub.Stats().Sockets; n != 1 {
		t.Errorf("%d sockets left; want 1", n)
	}
}

func TestCloseEndsEverything(t *testing.T) {
	t.Parallel()
	s := serve(t, newPlant().render, calm())
	var all []browser
	for range 10 {
		b := s.open(t, "topic=board")
		b.nextOf("state")
		all = append(all, b)
	}
	done := make(chan error, 1)
	go func() {
		ctx, cancel := context.WithTimeout(context.Background(), patience)
		defer cancel()
		done <- s.hub.Close(ctx)
	}()
	for _, b := range all {
		if code := b.closed(); code != websocket.CloseGoingAway {
			t.Errorf("close code %d; want %d", code, websocket.CloseGoingAway)
		}
	}
	if err := <-done; err != nil {
		t.Error(err)
	}
	s.hub.Dirty("board") // harmless
	s.hub.Drop("someone", SessionEnded)
	_, resp, err := (&websocket.Dialer{}).Dial(s.url+"/live?topic=board", nil)
	if err == nil || resp == nil || resp.StatusCode != http.StatusServiceUnavailable {
		t.Errorf("a closed hub answered %v, %v; want 503", resp, err)
	}
}

func TestRefusals(t *testing.T) {
	t.Parallel()
	opt := calm()
	opt.MaxPerSession = 1
	s := serve(t, newPlant().render, opt)

	t.Run("other origin", func(t *testing.T) {
		_, resp, err := (&websocket.Dialer{}).Dial(s.url+"/live?topic=board", http.Header{"Origin": {"http://elsewhere.example"}})
		if err == nil || resp.StatusCode != http.StatusForbidden {
			t.Errorf("got %v, %v; want 403", resp, err)
		}
	})
	t.Run("same origin", func(t *testing.T) {
		origin := "http" + strings.TrimPrefix(s.url, "ws")
		conn, _, err := (&websocket.Dialer{}).Dial(s.url+"/live?topic=board&session=o", http.Header{"Origin": {origin}})
		if err != nil {
			t.Fatal(err)
		}
		conn.Close()
	})
	t.Run("no topic", func(t *testing.T) {
		_, resp, err := (&websocket.Dialer{}).Dial(s.url+"/live", nil)
		if err == nil || resp.StatusCode != http.StatusBadRequest {
			t.Errorf("got %v, %v; want 400", resp, err)
		}
	})
	t.Run("not an upgrade", func(t *testing.T) {
		for query, want := range map[string]int{"topic=board": http.StatusBadRequest, "session=none": http.StatusUnauthorized} {
			resp, err := http.Get("http" + strings.TrimPrefix(s.url, "ws") + "/live?" + query)
			if err != nil {
				t.Fatal(err)
			}
			resp.Body.Close()
			if resp.StatusCode != want {
				t.Errorf("%s: status %d; want %d", query, resp.StatusCode, want)
			}
		}
	})
	t.Run("session over", func(t *testing.T) {
		if code := s.open(t, "session=none").closed(); code != 4401 {
			t.Errorf("close code %d; want 4401", code)
		}
	})
	t.Run("too many of one session", func(t *testing.T) {
		s.open(t, "topic=board&session=greedy").nextOf("state")
		if code := s.open(t, "topic=board&session=greedy").closed(); code != 4429 {
			t.Errorf("close code %d; want 4429", code)
		}
	})
	t.Run("talkative client", func(t *testing.T) {
		b := s.open(t, "topic=board&session=loud")
		b.nextOf("state")
		if err := b.conn.WriteMessage(websocket.TextMessage, make([]byte, readLimit+1)); err != nil {
			t.Fatal(err)
		}
		if code := b.closed(); code != websocket.CloseMessageTooBig {
			t.Errorf("close code %d; want %d", code, websocket.CloseMessageTooBig)
		}
	})
}
