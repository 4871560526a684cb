package relay_test

import (
	"context"
	"encoding/json"
	"errors"
	"log/slog"
	"net"
	"net/http"
	"net/http/httptest"
	"os"
	"path/filepath"
	"slices"
	"sync"
	"testing"
	"time"

	mqtt "github.com/eclipse/paho.mqtt.golang"
	"github.com/google/uuid"
	broker "github.com/mochi-mqtt/server/v2"
	"github.com/mochi-mqtt/server/v2/hooks/auth"
	"github.com/mochi-mqtt/server/v2/listeners"

	"holdfast/internal/relay"
)

var quiet = slog.New(slog.DiscardHandler)

// server stands for Holdfast: it takes each number once, and can be out of reach.
type server struct {
	*httptest.Server
	mu    sync.Mutex
	down  bool
	deaf  bool // it takes and does not answer
	taken []string
	sent  map[string]map[string]any
}

func serve(t *testing.T) *server {
	s := &server{sent: map[string]map[string]any{}}
	s.Server = httptest.NewServer(http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		s.mu.Lock()
		defer s.mu.Unlock()
		if s.down {
			w.WriteHeader(http.StatusBadGateway)
			return
		}
		var body map[string]any
		_ = json.NewDecoder(r.Body).Decode(&body)
		id, _ := body["id"].(string)
		if _, known := s.sent[id]; !known {
			s.taken = append(s.taken, r.URL.Path[len("/api/v1/"):])
			s.sent[id] = body
		}
		if s.deaf {
			panic(http.ErrAbortHandler)
		}
		_, _ = w.Write([]byte(`{"verdict":"leave"}`))
	}))
	t.Cleanup(s.Close)
	return s
}

func (s *server) set(down, deaf bool) {
	s.mu.Lock()
	defer s.mu.Unlock()
	s.down, s.deaf = down, deaf
}

func (s *server) has() []string {
	s.mu.Lock()
	defer s.mu.Unlock()
	return slices.Clone(s.taken)
}

func until(t *testing.T, what string, f func() bool) {
	t.Helper()
	for end := time.Now().Add(20 * time.Second); !f(); time.Sleep(5 * time.Millisecond) {
		if time.Now().After(end) {
			t.Fatalf("it did not happen that %s", what)
		}
	}
}

func open(t *testing.T, path string) *relay.Spool {
	t.Helper()
	s, err := relay.OpenSpool(path, quiet)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// post sends until the test stops it.
func post(t *testing.T, s *relay.Spool, to *server) (stop func()) {
	ctx, cancel := context.WithCancel(context.Background())
	var g sync.WaitGroup
	p := relay.Poster{Spool: s, Server: to.URL, HTTP: to.Client(), Now: time.Now, Log: quiet, Pause: 5 * time.Millisecond}
	g.Go(func() { p.Run(ctx) })
	stop = sync.OnceFunc(func() { cancel(); g.Wait() })
	t.Cleanup(stop)
	return stop
}

func gather(s *relay.Spool) *relay.Gather {
	return &relay.Gather{Spool: s, Now: time.Now, Source: relay.Source{Characteristic: "Diameter", Size: 3, Pattern: relay.Pattern{Unit: "mm"}}}
}

func take(t *testing.T, g *relay.Gather, lines ...string) {
	t.Helper()
	for _, l := range lines {
		if _, err := g.Take(l, ""); err != nil {
			t.Fatalf("%s: %v", l, err)
		}
	}
}

func TestParse(t *testing.T) {
	t.Parallel()
	plain := relay.Pattern{Unit: "mm"}
	framed := relay.Pattern{Unit: "µm", Prefix: "#", Suffix: "<", Sequence: true}
	for _, c := range []struct {
		p    relay.Pattern
		text string
		want relay.Line
		err  error
	}{
		{plain, "14.991", relay.Line{Number: "14.991"}, nil},
		{plain, " +14,991 mm\r\n", relay.Line{Number: "+14,991"}, nil},
		{plain, "-.5mm", relay.Line{Number: "-.5"}, nil},
		{plain, "0.5902 in", relay.Line{}, relay.ErrUnit},
		{plain, "14.991 MM", relay.Line{}, relay.ErrUnit},
		{plain, "14.991 14.992", relay.Line{}, relay.ErrNumber},
		{plain, "14.991.2", relay.Line{}, relay.ErrNumber},
		{plain, "1,499.10", relay.Line{}, relay.ErrNumber},
		{plain, "1.5e3", relay.Line{}, relay.ErrUnit},
		{plain, "ERR 4", relay.Line{}, relay.ErrNumber},
		{plain, "", relay.Line{}, relay.ErrNumber},
		{framed, "#0042;-3 µm<", relay.Line{Sequence: "0042", Number: "-3"}, nil},
		{framed, "#-3 µm<", relay.Line{}, relay.ErrNumber},
		{framed, "42;-3", relay.Line{}, relay.ErrNumber},
	} {
		if got, err := c.p.Parse(c.text); got != c.want || !errors.Is(err, c.err) {
			t.Errorf("%q: %+v, %v; want %+v, %v", c.text, got, err, c.want, c.err)
		}
	}
}

// Out of reach, in the middle of a subgroup, started again, with its answer lost: every
// reading arrives, once.
func TestNothingIsLostAndNothingTwice(t *testing.T) {
	t.Parallel()
	to := serve(t)
	to.set(true, false)
	path := filepath.Join(t.TempDir(), "spool")
	s := open(t, path)
	if _, err := relay.OpenSpool(path, quiet); err == nil {
		t.Error("two processes may use one spool")
	}
	stop := post(t, s, to)
	take(t, gather(s), "1.1", "1.2", "1.3", "2.1", "0.5 in", "2.1") // a repeated line is a second reading
	stop()
	if err := s.Close(); err != nil {
		t.Fatal(err)
	}
	f, err := os.OpenFile(path, os.O_APPEND|os.O_WRONLY, 0)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := f.WriteString(`{"put":{"id":"torn`); err != nil {
		t.Fatal(err)
	}
	_ = f.Close()

	s = open(t, path)
	to.set(false, true)
	stop = post(t, s, to)
	take(t, gather(s), "2.3")
	until(t, "the server took something", func() bool { return len(to.has()) > 0 })
	to.set(false, false)
	until(t, "all was sent", func() bool { return s.Len() == 0 })
	stop()
	_ = s.Close()
	if got, want := to.has(), []string{"rounds", "lines", "rounds"}; !slices.Equal(got, want) {
		t.Errorf("the server took %v, want %v", got, want)
	}
	var numbers []any
	for _, body := range to.sent {
		if e, ok := body["entries"].([]any); ok {
			numbers = append(numbers, e[0].(map[string]any)["readings"].([]any)...)
		}
	}
	if len(numbers) != 6 {
		t.Errorf("readings %v, want six", numbers)
	}
	s = open(t, path)
	defer s.Close()
	if s.Len() != 0 || len(s.Waiting("Diameter")) != 0 {
		t.Errorf("after a restart %d messages and %v wait", s.Len(), s.Waiting("Diameter"))
	}
}

func TestASequenceNumberTellsARepeatedLine(t *testing.T) {
	t.Parallel()
	s := open(t, filepath.Join(t.TempDir(), "spool"))
	defer s.Close()
	g := gather(s)
	g.Sequence = true
	take(t, g, "1 5.0", "2 5.0", "2 5.0")
	if got := s.Waiting("Diameter"); len(got) != 2 {
		t.Errorf("%v wait, want two", got)
	}
}

func TestAnOldBeginningIsSentAsAShortSubgroup(t *testing.T) {
	t.Parallel()
	s := open(t, filepath.Join(t.TempDir(), "spool"))
	defer s.Close()
	now := time.Now()
	g := gather(s)
	g.Within, g.Now = time.Minute, func() time.Time { return now }
	take(t, g, "1.1", "1.2")
	now = now.Add(2 * time.Minute)
	take(t, g, "2.1")
	m, ok := s.Next(nil)
	if !ok || len(s.Waiting("Diameter")) != 1 || !json.Valid(m.Body) || !slices.Contains([]string{"rounds"}, m.Path) {
		t.Errorf("%s waits, with %v", m.Body, s.Waiting("Diameter"))
	}
}

func TestAFullDisk(t *testing.T) {
	t.Parallel()
	to := serve(t)
	to.set(true, false)
	path := filepath.Join(t.TempDir(), "spool")
	s := open(t, path)
	g := gather(s)
	take(t, g, "1.1", "1.2", "1.3", "2.1")
	relay.FillDisk(s, true)
	stop := post(t, s, to)
	take(t, g, "2.2", "2.3") // held in memory
	if s.Len() != 2 {
		t.Fatalf("%d messages wait, want 2", s.Len())
	}
	s.Strict = true
	if durable, err := g.Take("3.1", "mark"); !errors.Is(err, relay.ErrFull) || durable || s.Seen("Diameter", "mark", false) {
		t.Errorf("what the disk does not take was taken: %v", err)
	}
	s.Strict = false
	to.set(false, false)
	until(t, "all was sent", func() bool { return s.Len() == 0 })
	relay.FillDisk(s, false)
	take(t, g, "4.1")
	stop()
	_ = s.Close()

	// That the first was taken could not be noted: it is sent again under its number.
	s = open(t, path)
	defer s.Close()
	post(t, s, to)
	until(t, "all was sent", func() bool { return s.Len() == 0 })
	if got := to.has(); len(got) != 2 {
		t.Errorf("the server took %v, want two rounds", got)
	}
}

// startBroker starts the plant's broker.
func startBroker(t *testing.T, l net.Listener) *broker.Server {
	t.Helper()
	b := broker.New(&broker.Options{InlineClient: true, Logger: quiet})
	if err := b.AddHook(new(auth.AllowHook), nil); err != nil {
		t.Fatal(err)
	}
	if err := b.AddListener(listeners.NewNet("t", l)); err != nil {
		t.Fatal(err)
	}
	if err := b.Serve(); err != nil {
		t.Fatal(err)
	}
	return b
}

func TestFromTheBroker(t *testing.T) {
	t.Parallel()
	l := listen(t)
	at := l.Addr().String()
	hub := startBroker(t, l)
	defer hub.Close()
	to := serve(t)
	s := open(t, filepath.Join(t.TempDir(), "spool"))
	defer s.Close()
	s.Strict = true
	post(t, s, to)
	g := gather(s)
	run := func() (stop func()) {
		ctx, cancel := context.WithCancel(context.Background())
		var wait sync.WaitGroup
		b := relay.Broker{URL: "tcp://" + at, Client: "holdfast", Rounds: "rounds", Readings: map[string]*relay.Gather{"diameter": g}, Spool: s, Now: time.Now, Log: quiet}
		wait.Go(func() { _ = b.Run(ctx) })
		return func() { cancel(); wait.Wait() }
	}
	stop := run()
	until(t, "it subscribed", func() bool {
		c, ok := hub.Clients.Get("holdfast")
		return ok && len(c.State.Subscriptions.GetAll()) == 2
	})
	pub := mqtt.NewClient(mqtt.NewClientOptions().AddBroker("tcp://" + at).SetClientID("machine"))
	if tok := pub.Connect(); tok.Wait() && tok.Error() != nil {
		t.Fatal(tok.Error())
	}
	defer pub.Disconnect(0)
	say := func(topic, text string) {
		t.Helper()
		if tok := pub.Publish(topic, 1, false, text); tok.Wait() && tok.Error() != nil {
			t.Fatal(tok.Error())
		}
	}
	say("diameter", "1.1")
	say("diameter", "1.2 mm")
	until(t, "two readings wait", func() bool { return len(s.Waiting("Diameter")) == 2 })
	stop() // the connection is broken, and the broker keeps what comes
	say("diameter", "1.3")
	say("rounds", `{"id":"`+uuid.Must(uuid.NewV7()).String()+`","entries":[]}`)
	say("rounds", "no round")
	say("diameter", "0.5 in")
	stop = run()
	defer stop()
	until(t, "all arrived", func() bool { return len(to.has()) == 4 })
	got := to.has()
	slices.Sort(got)
	if want := []string{"lines", "lines", "rounds", "rounds"}; !slices.Equal(got, want) {
		t.Errorf("the server took %v, want %v", got, want)
	}
}
