package main

import (
	"bytes"
	"context"
	"log/slog"
	"net/http"
	"net/url"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/google/uuid"
	"github.com/gorilla/websocket"
	"github.com/jackc/pgx/v5"
	"golang.org/x/sync/errgroup"

	"holdfast/internal/auth"
	"holdfast/internal/live"
	"holdfast/internal/plant"
	"holdfast/internal/store/storetest"
)

// roundOf is what the station's page posts for the fixture's diameter.
func (r *running) roundOf(id uuid.UUID, readings ...string) (path string, form url.Values) {
	c := r.Diameter
	form = url.Values{"round": {id.String()}, "characteristic": {c.ID.String()}, "setup-" + c.ID.String(): {"1"}, "entry": {"full"}, "occasion": {""}}
	form["reading-"+c.ID.String()] = readings
	return "/station/" + c.StationID.String() + "/round", form
}

// TestStoppingLetsASaveFinish holds the row that a save needs, asks the program to stop,
// and lets go: the save is answered and on record.
func TestStoppingLetsASaveFinish(t *testing.T) {
	t.Parallel()
	r := serve(t) // another program, only for its fixture and its visitor's session
	v := r.visit(t, "operator1")
	ctx := context.Background()
	prog, err := newProgram(ctx, settings{Addr: "127.0.0.1:0", DatabaseURL: r.Plant.URL, Cost: cheap, Log: silent, Clock: r.Clock.Now})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(prog.Close)
	running, stop := context.WithCancel(ctx)
	var ended errgroup.Group
	ended.Go(func() error { return prog.Run(running) })
	conn, err := pgx.Connect(ctx, r.Plant.URL)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { _ = conn.Close(ctx) })
	tx, err := conn.Begin(ctx)
	if err != nil {
		t.Fatal(err)
	}
	if _, err := tx.Exec(ctx, `select from characteristic_state where characteristic_id = $1 for update`, r.Diameter.ID); err != nil {
		t.Fatal(err)
	}

	second := *v
	second.base = prog.URL()
	at, _ := url.Parse(v.base)
	there, _ := url.Parse(second.base)
	v.http.Jar.SetCookies(there, v.http.Jar.Cookies(at))
	id := storetest.ID()
	path, form := r.roundOf(id, "14.990", "14.991", "14.992", "14.990", "14.991")
	answered := make(chan int, 1)
	go func() {
		res, _ := second.post(path, form)
		answered <- res.StatusCode
	}()
	awaitLock(t, r)
	stop()
	select {
	case status := <-answered:
		t.Fatalf("answered %d while its row was held", status)
	case <-time.After(300 * time.Millisecond):
	}
	if _, err := (&http.Client{Timeout: time.Second}).Get(second.base + "/healthz"); err == nil {
		t.Error("a stopping program takes new connections")
	}
	if err := tx.Rollback(ctx); err != nil {
		t.Fatal(err)
	}
	if status := <-answered; status != http.StatusSeeOther {
		t.Errorf("the save was answered %d, want 303", status)
	}
	if err := ended.Wait(); err != nil {
		t.Errorf("the program ended with %v", err)
	}
	if _, err := r.Answer(ctx, id); err != nil {
		t.Errorf("the save is not on record: %v", err)
	}
}

// awaitLock returns once somebody waits for a lock. It asks on a connection of its own:
// inside a transaction Postgres keeps showing what it showed first.
func awaitLock(t *testing.T, r *running) {
	t.Helper()
	for range 1500 {
		var n int
		if err := r.Pool().QueryRow(context.Background(), `select count(*) from pg_stat_activity
			where datname = current_database() and wait_event_type = 'Lock'`).Scan(&n); err != nil {
			t.Fatal(err)
		}
		if n > 0 {
			return
		}
		time.Sleep(10 * time.Millisecond)
	}
	t.Fatal("the save never came to its row")
}

// dial opens the live socket as this visitor.
func (v *visitor) dial(topics ...string) *websocket.Conn {
	v.t.Helper()
	at, err := url.Parse(v.base)
	if err != nil {
		v.t.Fatal(err)
	}
	header := http.Header{"Origin": {v.base}}
	for _, c := range v.http.Jar.Cookies(at) {
		header.Add("Cookie", c.String())
	}
	conn, res, err := websocket.DefaultDialer.Dial("ws://"+at.Host+"/live?"+url.Values{"topic": topics}.Encode(), header)
	if err != nil {
		v.t.Fatalf("open the socket: %v", err)
	}
	_ = res.Body.Close()
	v.t.Cleanup(func() { _ = conn.Close() })
	return conn
}

// hears reads from a socket until a message says all of this.
func hears(t *testing.T, conn *websocket.Conn, within time.Duration, words ...string) {
	t.Helper()
	_ = conn.SetReadDeadline(time.Now().Add(within))
	for {
		_, message, err := conn.ReadMessage()
		if err != nil {
			t.Fatalf("waiting for %q: %v", words, err)
		}
		all := true
		for _, w := range words {
			all = all && strings.Contains(string(message), w)
		}
		if all {
			return
		}
	}
}

// ends reads from a socket until it ends and returns the code.
func ends(t *testing.T, conn *websocket.Conn, within time.Duration) int {
	t.Helper()
	_ = conn.SetReadDeadline(time.Now().Add(within))
	for {
		if _, _, err := conn.ReadMessage(); err != nil {
			if closed, ok := err.(*websocket.CloseError); ok {
				return closed.Code
			}
			t.Fatalf("the socket did not end in order: %v", err)
		}
	}
}

// TestASocketShowsWhatAnotherServerSaved: two programs on one database. The first saves
// and is heard on the second, also when it dies right after its commit, before it could
// announce anything.
func TestASocketShowsWhatAnotherServerSaved(t *testing.T) {
	t.Parallel()
	first := serve(t)
	first.calm(t, 22)
	first.MustFreeze(t, first.Diameter)
	first.Clock.Advance(30 * time.Minute)
	second := serveOn(t, first.Plant, first.Clock.Now)
	board := second.visit(t, "supervisor1").dial("board")
	hears(t, board, 30*time.Second, `"full":true`)

	path, form := first.roundOf(storetest.ID(), "14.998", "14.999", "14.998", "14.999", "14.998")
	if res, body := first.visit(t, "operator1").post(path, form); res.StatusCode != http.StatusSeeOther {
		t.Fatalf("%s\n%s", res.Status, body)
	}
	hears(t, board, 30*time.Second, "Look, Axle seat diameter")

	// The fixture's own store has no feed: it commits and says nothing, as a server does
	// that dies in between.
	m := first.openMatter(t)
	if err := first.TakeMatter(context.Background(), m.ID, m.Version, first.Operator.ID); err != nil {
		t.Fatal(err)
	}
	hears(t, board, 30*time.Second, "Operator 1")
}

// TestWhoMayNoLongerIsOut covers signing out, also on another server, and a person set
// inactive: pages within a second or two, sockets within the recheck.
func TestWhoMayNoLongerIsOut(t *testing.T) {
	t.Parallel()
	r := serve(t)
	other := serveOn(t, r.Plant, r.Clock.Now)
	out := func(v *visitor) {
		t.Helper()
		if res, _ := v.get("/board"); res.StatusCode != http.StatusSeeOther || !strings.HasPrefix(res.Header.Get("Location"), "/sign-in") {
			t.Errorf("/board answers %s to %s", res.Status, res.Header.Get("Location"))
		}
	}
	v := r.visit(t, "supervisor1")
	twin := *v
	twin.base = other.url
	here, _ := url.Parse(v.base)
	there, _ := url.Parse(twin.base)
	v.http.Jar.SetCookies(there, v.http.Jar.Cookies(here))
	cookies := v.http.Jar.Cookies(here)
	a, b := v.dial("board"), twin.dial("board")
	hears(t, a, 30*time.Second, `"full":true`)
	hears(t, b, 30*time.Second, `"full":true`)
	v.post("/sign-out", nil)
	if code := ends(t, a, 15*time.Second); code != live.SessionEnded.Code {
		t.Errorf("the socket here ended with %d", code)
	}
	if code := ends(t, b, 30*time.Second); code != live.SessionEnded.Code {
		t.Errorf("the socket on the other server ended with %d", code)
	}
	r.Clock.Advance(2 * time.Second)
	v.http.Jar.SetCookies(here, cookies) // somebody kept the cookie
	out(v)
	out(&twin)

	v = r.visit(t, "operator1")
	socket := v.dial("board")
	hears(t, socket, 30*time.Second, `"full":true`)
	if err := r.SetActive(context.Background(), r.Operator.ID, false, r.Administrator.ID); err != nil {
		t.Fatal(err)
	}
	r.Clock.Advance(2 * time.Second)
	out(v)
	if code := ends(t, socket, 30*time.Second); code != live.SessionEnded.Code {
		t.Errorf("the socket of somebody inactive ended with %d", code)
	}
	if res, _ := r.visit(t, "").post("/sign-in", url.Values{"login": {"operator1"}, "password": {secret}}); res.StatusCode != http.StatusUnprocessableEntity {
		t.Errorf("somebody inactive signs in: %s", res.Status)
	}
}

// TestASessionCannotBePlanted: a cookie that was in the browser before somebody signed in
// is worth nothing afterwards, and the one that is given has all its attributes.
func TestASessionCannotBePlanted(t *testing.T) {
	t.Parallel()
	r := serve(t)
	intruder := r.visit(t, "operator1")
	at, _ := url.Parse(r.url)
	planted := intruder.http.Jar.Cookies(at)
	victim := r.visit(t, "")
	victim.http.Jar.SetCookies(at, planted)
	res, _ := victim.post("/sign-in", url.Values{"login": {"engineer1"}, "password": {secret}})
	var given *http.Cookie
	for _, c := range res.Cookies() {
		if c.Name == "session" {
			given = c
		}
	}
	switch {
	case given == nil:
		t.Fatalf("signing in gave no cookie: %v", res.Cookies())
	case !given.HttpOnly || given.SameSite != http.SameSiteLaxMode || given.Path != "/" || given.Domain != "":
		t.Errorf("cookie = %v", given)
	}
	for _, c := range planted {
		if c.Name == given.Name && c.Value == given.Value {
			t.Error("the planted token was kept")
		}
	}
	r.Clock.Advance(2 * time.Second)
	if res, _ := intruder.get("/desk"); res.StatusCode == http.StatusOK {
		t.Error("who planted the cookie is signed in as the engineer")
	}

	secure, err := newProgram(context.Background(), settings{Addr: "127.0.0.1:0", DatabaseURL: r.Plant.URL, Cost: cheap, Log: silent, Clock: r.Clock.Now, Transport: secured{https: true}})
	if err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithCancel(context.Background())
	var g errgroup.Group
	g.Go(func() error { return secure.Run(ctx) })
	t.Cleanup(func() { cancel(); _ = g.Wait(); secure.Close() })
	v := r.visit(t, "")
	v.base = secure.URL()
	res, _ = v.post("/sign-in", url.Values{"login": {"engineer1"}, "password": {secret}})
	if got := strings.Join(res.Header["Set-Cookie"], "\n"); !strings.Contains(got, "__Host-session=") || !strings.Contains(got, "Secure") {
		t.Errorf("behind https the cookie is %s", got)
	}
}

// TestNoSecretIsLogged plays a journey with every kind of secret in it and reads the log
// of all of it, at its most talkative.
func TestNoSecretIsLogged(t *testing.T) {
	t.Parallel()
	hasher, err := auth.NewHasher(cheap, 2)
	if err != nil {
		t.Fatal(err)
	}
	hash, err := hasher.Hash(context.Background(), secret)
	if err != nil {
		t.Fatal(err)
	}
	p := storetest.New(t, hash)
	var log lockedBuffer // a socket's last line may come after all is over
	logger := slog.New(slog.NewJSONHandler(&log, &slog.HandlerOptions{Level: slog.LevelDebug}))
	prog, err := newProgram(context.Background(), settings{Addr: "127.0.0.1:0", DatabaseURL: p.URL, Cost: cheap, Log: logger, Clock: p.Clock.Now})
	if err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithCancel(context.Background())
	var g errgroup.Group
	g.Go(func() error { return prog.Run(ctx) })
	r := &running{Plant: p, program: prog, url: prog.URL()}
	v := r.visit(t, "")
	v.post("/sign-in?password=typed-into-the-address", url.Values{"login": {"login-of-nobody"}, "password": {"wrong-secret-1"}})
	v.post("/sign-in", url.Values{"login": {"supervisor1"}, "password": {"wrong-secret-2"}})
	v.post("/sign-in", url.Values{"login": {"supervisor1"}, "password": {secret}})
	socket := v.dial("board")
	hears(t, socket, 30*time.Second, `"full":true`)
	id := storetest.ID()
	path, form := r.roundOf(id, "14.990", "14.991", "14.992", "14.990", "14.991")
	if res, _ := v.post(path, form); res.StatusCode != http.StatusSeeOther {
		t.Fatal(res.Status)
	}
	v.post("/station/"+p.Station.ID.String()+"/correct", url.Values{"characteristic": {p.Diameter.ID.String()}, "subgroup": {plant.SubgroupID(id, p.Diameter.ID).String()},
		"replaces": {"1"}, "do": {"void"}, "reason": {"typing slip"}, "password": {"wrong-secret-3"}})
	v.do(http.MethodPost, "/sign-in", "application/x-www-form-urlencoded", strings.NewReader("password=wrong-secret-4&%zz"))
	v.do(http.MethodPost, "/sign-in", "multipart/form-data; boundary=x", strings.NewReader("--x\r\nContent-Disposition: form-data; name=\"password\"\r\n\r\nwrong-secret-5"))
	at, _ := url.Parse(r.url)
	token := v.http.Jar.Cookies(at)[0].Value
	v.post("/sign-out", nil)
	cancel()
	if err := g.Wait(); err != nil {
		t.Error(err)
	}
	prog.Close()
	text := log.String()
	if !strings.Contains(text, `"path":"/sign-in"`) {
		t.Fatalf("nothing was logged: %s", text)
	}
	for _, never := range []string{"wrong-secret", secret, token, hash, "typed-into-the-address", "login-of-nobody", "supervisor1"} {
		if strings.Contains(text, never) {
			t.Errorf("the log holds %q:\n%s", never, text)
		}
	}
}

// lockedBuffer is a log that may be read while it is written.
type lockedBuffer struct {
	mu  sync.Mutex
	buf bytes.Buffer
}

func (b *lockedBuffer) Write(p []byte) (int, error) {
	b.mu.Lock()
	defer b.mu.Unlock()
	return b.buf.Write(p)
}

func (b *lockedBuffer) String() string {
	b.mu.Lock()
	defer b.mu.Unlock()
	return b.buf.String()
}
