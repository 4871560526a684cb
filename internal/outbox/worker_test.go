package outbox

import (
	"bytes"
	"context"
	"fmt"
	"log/slog"
	"net"
	"net/http"
	"slices"
	"strings"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/localpg/pgtest"
	"holdfast/internal/plant"
	"holdfast/internal/store"
	"holdfast/internal/store/storetest"
)

func TestMain(m *testing.M) { pgtest.Main(m, store.Migrate) }

// put writes messages into the outbox of a plant as an escalation does: with a step of a
// matter that was opened just now.
func put(t testing.TB, p *storetest.Plant, messages ...plant.Message) {
	t.Helper()
	ctx := context.Background()
	for range 20 {
		p.Clock.Advance(30 * time.Minute)
		p.MustRecord(t, p.Diameter, 14990, 14991, 14992, 14990, 14991)
	}
	p.MustFreeze(t, p.Diameter)
	p.Clock.Advance(time.Minute)
	p.MustRecord(t, p.Diameter, 14998, 14999, 14998, 14999, 14998)
	states, err := p.StationStates(ctx, 0)
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range plant.CallsDue(states, p.Clock.Now().Add(time.Hour)) {
		if c.Step == plant.ByMessage && c.Matter != nil {
			if fired, err := p.FireStep(ctx, c, messages); err != nil || !fired {
				t.Fatalf("fired = %v, %v", fired, err)
			}
		}
	}
}

func worker(p *storetest.Plant, st *store.Store, senders map[string]Sender) *Worker {
	return &Worker{Store: st, Senders: senders, Log: quietLog, Now: p.Clock.Now}
}

func outboxOf(t testing.TB, p *storetest.Plant) plant.OutboxState {
	t.Helper()
	o, err := p.OutboxState(context.Background())
	if err != nil {
		t.Fatal(err)
	}
	return o
}

// TestAReceiverThatComesBackGetsEverything: it refuses the connection, fails, hangs up,
// answers garbage, and comes back.
func TestAReceiverThatComesBackGetsEverything(t *testing.T) {
	t.Parallel()
	p := storetest.New(t, "x")
	put(t, p, plant.Message{Target: "tickets", Title: "Hold at Press", Body: `{"n":1}`})
	r := newReceiver(t, func(w http.ResponseWriter, _ *http.Request, n int) {
		switch n {
		case 1:
			w.WriteHeader(http.StatusBadGateway)
		case 2:
			c, _, _ := w.(http.Hijacker).Hijack()
			_ = c.Close()
		case 3:
			c, _, _ := w.(http.Hijacker).Hijack()
			_, _ = c.Write([]byte("what\r\n\r\n"))
			_ = c.Close()
		}
	})
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	down := webhookTo(t, "http://"+l.Addr().String(), p.Clock.Now)
	_ = l.Close()
	ctx := context.Background()
	if err := worker(p, p.Store, map[string]Sender{"tickets": down}).Deliver(ctx, "tickets"); err != nil {
		t.Fatal(err)
	}
	w := worker(p, p.Store, map[string]Sender{"tickets": webhookTo(t, r.URL, p.Clock.Now)})
	if err := w.Deliver(ctx, "tickets"); err != nil || r.times() != 0 {
		t.Errorf("asked %d times while the target is left alone, %v", r.times(), err)
	}
	for n := 1; n <= 4; n++ {
		p.Clock.Advance(longPause)
		if err := w.Deliver(ctx, "tickets"); err != nil || r.times() != n {
			t.Fatalf("asked %d times, want %d; %v", r.times(), n, err)
		}
	}
	if o := outboxOf(t, p); o.Waiting != 0 || o.GivenUp != 0 {
		t.Errorf("%+v", o)
	}
	if len(slices.Compact(slices.Clone(r.ids))) != 1 || len(slices.Compact(slices.Clone(r.bodies))) != 1 || len(r.bad) > 0 {
		t.Errorf("ids %q, bodies %q, %q: a repetition must look the same", r.ids, r.bodies, r.bad)
	}
	states, err := p.TargetStates(ctx)
	if err != nil || len(states) != 1 || states[0].Failures != 0 || states[0].LastOK.IsZero() {
		t.Errorf("%+v, %v", states, err)
	}
}

func TestWhatIsNeverTakenIsGivenUpAndSentAgain(t *testing.T) {
	t.Parallel()
	p := storetest.New(t, "x")
	put(t, p, plant.Message{Target: "tickets", Title: "Hold at Press", Body: "{}"}, plant.Message{Target: "gone", Title: "Hold at Press", Body: "{}"})
	ctx := context.Background()
	var back atomic.Bool
	r := newReceiver(t, func(w http.ResponseWriter, _ *http.Request, _ int) {
		if !back.Load() {
			w.WriteHeader(http.StatusServiceUnavailable)
		}
	})
	w := worker(p, p.Store, map[string]Sender{"tickets": webhookTo(t, r.URL, p.Clock.Now)})
	for range 24 * 6 {
		if err := w.Deliver(ctx, "tickets"); err != nil {
			t.Fatal(err)
		}
		p.Clock.Advance(10 * time.Minute)
	}
	if err := w.GiveUp(ctx); err != nil {
		t.Fatal(err)
	}
	lost, err := p.Undelivered(ctx, 10)
	if err != nil || len(lost) != 2 {
		t.Fatalf("%+v, %v", lost, err)
	}
	byTarget := map[string]plant.Undelivered{}
	for _, u := range lost {
		byTarget[u.Target] = u
	}
	if u := byTarget["tickets"]; u.LastError != "It answered 503 Service Unavailable." || u.Attempts < 60 || u.Attempts > 24*6 || u.Title != "Hold at Press" {
		t.Errorf("%+v", u)
	}
	if u := byTarget["gone"]; u.Attempts != 0 || !strings.Contains(u.LastError, "in its configuration") {
		t.Errorf("%+v", u)
	}
	back.Store(true)
	asked := r.times()
	if err := p.SendAgain(ctx, byTarget["tickets"].ID, p.Administrator.ID); err != nil {
		t.Fatal(err)
	}
	if err := p.SendAgain(ctx, byTarget["tickets"].ID, p.Administrator.ID); !plant.IsKind(err, plant.NotFound) {
		t.Errorf("sent again twice: %v", err)
	}
	if err := w.Deliver(ctx, "tickets"); err != nil || r.times() != asked+1 {
		t.Errorf("asked %d times more, %v", r.times()-asked, err)
	}
	if o := outboxOf(t, p); o.Waiting != 0 || o.GivenUp != 1 {
		t.Errorf("%+v", o)
	}
	if len(slices.Compact(slices.Clone(r.ids))) != 1 {
		t.Errorf("sent again under another id: %q", r.ids[len(r.ids)-2:])
	}
	if _, err := p.VerifyLedger(ctx); err != nil {
		t.Error(err)
	}
}

func TestARefusalForGoodIsGivenUpSoon(t *testing.T) {
	t.Parallel()
	p := storetest.New(t, "x")
	put(t, p, plant.Message{Target: "tickets", Title: "Hold at Press", Body: "{}"})
	r := newReceiver(t, func(w http.ResponseWriter, _ *http.Request, _ int) { w.WriteHeader(http.StatusGone) })
	w := worker(p, p.Store, map[string]Sender{"tickets": webhookTo(t, r.URL, p.Clock.Now)})
	told := 0
	w.Failed = func() { told++ }
	for range 10 {
		if err := w.Deliver(context.Background(), "tickets"); err != nil {
			t.Fatal(err)
		}
		p.Clock.Advance(longPause)
	}
	if o := outboxOf(t, p); r.times() != lastingMost || o.GivenUp != 1 || told != 1 {
		t.Errorf("asked %d times, told %d times, %+v", r.times(), told, o)
	}
}

// stuck hangs until it is released, and counts.
type stuck struct {
	began chan struct{}
	n     atomic.Int64
}

func (s *stuck) Send(ctx context.Context, _ plant.Outgoing) error {
	s.n.Add(1)
	s.began <- struct{}{}
	<-ctx.Done()
	return ctx.Err()
}

// TestAServerThatDiesLosesItsClaim: what it was about to send is sent by another, once the
// claim has run out, and not before.
func TestAServerThatDiesLosesItsClaim(t *testing.T) {
	t.Parallel()
	p := storetest.New(t, "x")
	put(t, p, plant.Message{Target: "tickets", Title: "Hold at Press", Body: "{}"})
	ctx, die := context.WithCancel(context.Background())
	hangs := &stuck{began: make(chan struct{}, 1)}
	var wg sync.WaitGroup
	wg.Go(func() { _ = worker(p, p.Store, map[string]Sender{"tickets": hangs}).Deliver(ctx, "tickets") })
	<-hangs.began
	r := newReceiver(t, func(http.ResponseWriter, *http.Request, int) {})
	other := worker(p, p.Store, map[string]Sender{"tickets": webhookTo(t, r.URL, p.Clock.Now)})
	for range 3 {
		if err := other.Deliver(context.Background(), "tickets"); err != nil {
			t.Fatal(err)
		}
	}
	if r.times() != 0 {
		t.Error("another server sent what was being sent")
	}
	die()
	wg.Wait()
	p.Clock.Advance(lease)
	if err := other.Deliver(context.Background(), "tickets"); err != nil || r.times() != 1 {
		t.Errorf("asked %d times after the claim ran out, %v", r.times(), err)
	}
}

// counting takes everything and counts how often it got each message.
type counting struct {
	mu   sync.Mutex
	seen map[uuid.UUID]int
}

func (c *counting) Send(_ context.Context, m plant.Outgoing) error {
	c.mu.Lock()
	defer c.mu.Unlock()
	c.seen[m.ID]++
	return nil
}

func TestManyWorkersSendEachMessageOnce(t *testing.T) {
	t.Parallel()
	p := storetest.New(t, "x")
	put(t, p)
	ctx := context.Background()
	if _, err := p.Pool().Exec(ctx, `insert into outbox (id, plant_id, target, title, body, created_at, next_at, give_up_at)
		select gen_random_uuid(), plant.id, 'tickets', 'x', '{}', $1::timestamptz, $1, $1::timestamptz + interval '1 day' from plant, generate_series(1, 200)`, p.Clock.Now()); err != nil {
		t.Fatal(err)
	}
	c := &counting{seen: map[uuid.UUID]int{}}
	var wg sync.WaitGroup
	for range 6 {
		wg.Go(func() {
			if err := worker(p, p.Store, map[string]Sender{"tickets": c}).Deliver(ctx, "tickets"); err != nil {
				t.Error(err)
			}
		})
	}
	wg.Wait()
	if len(c.seen) != 200 {
		t.Errorf("%d messages, want 200", len(c.seen))
	}
	for id, n := range c.seen {
		if n != 1 {
			t.Errorf("%s was sent %d times", id, n)
		}
	}
}

// TestSecretsAreNeitherLoggedNorStored looks for them in the log and in every table.
func TestSecretsAreNeitherLoggedNorStored(t *testing.T) {
	t.Parallel()
	p := storetest.New(t, "x")
	put(t, p, plant.Message{Target: "tickets", Title: "Hold at Press", Body: "{}"}, plant.Message{Target: "shift lead", Title: "Hold at Press", Body: "Hold"})
	var log bytes.Buffer
	r := newReceiver(t, func(w http.ResponseWriter, _ *http.Request, _ int) { w.WriteHeader(http.StatusInternalServerError) })
	cert, pool := certificate(t)
	server := newPost(t, &post{conf: tlsOf(cert), starttls: true, auth: "holdfast:another password"})
	w := worker(p, p.Store, map[string]Sender{"tickets": webhookTo(t, r.URL, p.Clock.Now), "shift lead": server.mailThrough(pool, StartTLS, "holdfast")})
	w.Log = slog.New(slog.NewTextHandler(&log, &slog.HandlerOptions{Level: slog.LevelDebug}))
	ctx := context.Background()
	for target := range w.Senders {
		if err := w.Deliver(ctx, target); err != nil {
			t.Fatal(err)
		}
	}
	if log.Len() == 0 {
		t.Fatal("nothing was logged")
	}
	text := log.String()
	tables, err := p.Pool().Query(ctx, `select relname::text from pg_class where relkind = 'r' and relnamespace = 'public'::regnamespace`)
	if err != nil {
		t.Fatal(err)
	}
	var list []string
	for tables.Next() {
		var name string
		if err := tables.Scan(&name); err != nil {
			t.Fatal(err)
		}
		list = append(list, name)
	}
	for _, name := range list {
		var all string
		if err := p.Pool().QueryRow(ctx, fmt.Sprintf(`select coalesce(string_agg(t::text, ' '), '') from %q t`, name)).Scan(&all); err != nil {
			t.Fatal(err)
		}
		text += all
	}
	for _, secret := range []string{signing, goodSecrets["mail-password"], "hunter2", "another password"} {
		if strings.Contains(text, secret) {
			t.Errorf("the secret %q stands in the log or in a table", secret)
		}
	}
}

func TestBackoffDoublesUpToItsCap(t *testing.T) {
	t.Parallel()
	for failures, most := range map[int]time.Duration{0: firstPause, 1: 2 * firstPause, 3: 8 * firstPause, 6: longPause, 100: longPause} {
		seen := map[time.Duration]bool{}
		for range 200 {
			d := Backoff(failures)
			if d < most/2 || d > most {
				t.Fatalf("after %d failures %s, want %s to %s", failures, d, most/2, most)
			}
			seen[d] = true
		}
		if len(seen) < 100 {
			t.Errorf("after %d failures there are only %d different pauses", failures, len(seen))
		}
	}
}
