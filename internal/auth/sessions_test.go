package auth

import (
	"context"
	"errors"
	"io"
	"log/slog"
	"net/http"
	"net/http/cookiejar"
	"net/http/httptest"
	"slices"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/alexedwards/scs/v2/memstore"

	"holdfast/internal/plant"
)

// memory counts what is written to a session store in memory.
type memory struct {
	*memstore.MemStore
	mu      sync.Mutex
	keys    []string // of all commits
	deletes int
}

func (m *memory) Commit(key string, b []byte, expiry time.Time) error {
	m.mu.Lock()
	m.keys = append(m.keys, key)
	m.mu.Unlock()
	return m.MemStore.Commit(key, b, expiry)
}

func (m *memory) Delete(key string) error {
	m.mu.Lock()
	m.deletes++
	m.mu.Unlock()
	return m.MemStore.Delete(key)
}

func (m *memory) commits() int { m.mu.Lock(); defer m.mu.Unlock(); return len(m.keys) }

// house is a small site with sessions, and who uses it.
type house struct {
	*Sessions
	t     *testing.T
	store *memory
	book  *book
	clock *clock
	url   string

	mu    sync.Mutex
	ended []string
	hold  chan struct{} // a request to /held waits for it
	held  chan struct{} // and says so
}

func newHouse(t *testing.T, change func(*SessionOptions)) *house {
	t.Helper()
	h := &house{t: t, book: newBook(), clock: &clock{t: time.Now()}, hold: make(chan struct{}), held: make(chan struct{}),
		store: &memory{MemStore: memstore.NewWithCleanupInterval(0)}}
	h.book.put(anna(), "")
	opt := SessionOptions{Store: h.store, People: h.book, PlainHTTP: true, Now: h.clock.now,
		Log: slog.New(slog.NewTextHandler(io.Discard, nil)),
		OnEnd: func(id string) {
			h.mu.Lock()
			defer h.mu.Unlock()
			h.ended = append(h.ended, id)
		}}
	if change != nil {
		change(&opt)
	}
	h.Sessions = NewSessions(opt)
	t.Cleanup(h.Sessions.Close)

	pages := http.NewServeMux()
	pages.HandleFunc("/in", func(w http.ResponseWriter, r *http.Request) {
		if err := h.SignIn(r.Context(), anna()); err != nil {
			t.Error(err)
		}
		h.tell(w, r)
	})
	pages.HandleFunc("/out", func(w http.ResponseWriter, r *http.Request) {
		if err := h.SignOut(r.Context()); err != nil {
			t.Error(err)
		}
		h.tell(w, r)
	})
	pages.HandleFunc("/who", h.tell)
	pages.HandleFunc("/stay", func(w http.ResponseWriter, r *http.Request) {
		left := time.Duration(0)
		if ends := h.Stay(r.Context()); !ends.IsZero() {
			left = ends.Sub(h.clock.now())
		}
		_, _ = io.WriteString(w, left.Round(time.Minute).String()+" ")
	})
	pages.HandleFunc("/held", func(w http.ResponseWriter, r *http.Request) {
		h.held <- struct{}{}
		<-h.hold
		h.tell(w, r)
	})
	mux := http.NewServeMux()
	mux.Handle("/", h.Middleware(pages))
	mux.Handle("/socket", h.LoadOnly(http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		if _, ok := w.(http.Hijacker); !ok {
			t.Error("a socket cannot be opened behind LoadOnly")
		}
		h.tell(w, r)
	})))
	srv := httptest.NewServer(mux)
	t.Cleanup(srv.Close)
	h.url = srv.URL
	return h
}

// tell answers with who is asking and the session's id.
func (h *house) tell(w http.ResponseWriter, r *http.Request) {
	who := "nobody"
	if p, ok := FromContext(r.Context()); ok {
		who = p.Login
		if id, ok := h.PersonID(r.Context()); !ok || id != p.ID {
			h.t.Errorf("PersonID = %v, %v", id, ok)
		}
		if h.Expires(r.Context()).IsZero() {
			h.t.Error("a session without an end")
		}
	}
	if TimedOut(r.Context()) {
		who += " (timed out)"
	}
	_, _ = io.WriteString(w, who+" "+h.ID(r.Context()))
}

type visitor struct {
	h      *house
	client *http.Client
}

func (h *house) visitor() visitor {
	jar, _ := cookiejar.New(nil) // its error is always nil
	return visitor{h, &http.Client{Jar: jar}}
}

func (v visitor) get(path string) (who, id string, resp *http.Response) {
	v.h.t.Helper()
	resp, err := v.client.Get(v.h.url + path)
	if err != nil {
		v.h.t.Fatal(err)
	}
	defer resp.Body.Close()
	body, err := io.ReadAll(resp.Body)
	if err != nil {
		v.h.t.Fatal(err)
	}
	i := strings.LastIndex(string(body), " ")
	if i < 0 {
		return string(body), "", resp
	}
	return string(body[:i]), string(body[i+1:]), resp
}

func (v visitor) expect(path, who string) (id string) {
	v.h.t.Helper()
	got, id, _ := v.get(path)
	if got != who {
		v.h.t.Errorf("%s was answered to %q; want %q", path, got, who)
	}
	return id
}

func TestSessionLastsFromSignInToSignOut(t *testing.T) {
	t.Parallel()
	h := newHouse(t, nil)
	v := h.visitor()
	if id := v.expect("/who", "nobody"); id != "" {
		t.Errorf("nobody has session %q", id)
	}
	if n := h.store.commits(); n != 0 {
		t.Errorf("a visit without sign-in wrote %d times", n)
	}
	id := v.expect("/in", "anna")
	if id == "" || v.expect("/who", "anna") != id || v.expect("/socket", "anna") != id {
		t.Errorf("the session's id %q does not stay", id)
	}
	v.expect("/out", "nobody")
	v.expect("/who", "nobody")
	v.expect("/socket", "nobody")
	if !slices.Equal(h.ended, []string{id}) {
		t.Errorf("ended sessions told: %v; want %v", h.ended, id)
	}
}

func TestTokenIsNewAtSignInAndOnlyItsHashIsStored(t *testing.T) {
	t.Parallel()
	h := newHouse(t, nil)
	v := h.visitor()
	first := v.expect("/in", "anna")
	token := v.cookie()
	second := v.expect("/in", "anna")
	if first == second || v.cookie() == token {
		t.Error("signing in again kept the token")
	}
	if !slices.Equal(h.ended, []string{first}) {
		t.Errorf("ended sessions told: %v; want the first", h.ended)
	}
	for _, key := range h.store.keys {
		if key == token || key == v.cookie() {
			t.Error("the store holds a token")
		}
	}
	if !slices.Contains(h.store.keys, second) {
		t.Error("the id is not the store's key")
	}
	old := h.visitor() // whoever kept the first cookie
	req, _ := http.NewRequestWithContext(t.Context(), "GET", h.url+"/who", nil)
	req.AddCookie(&http.Cookie{Name: "session", Value: token})
	resp, err := old.client.Do(req)
	if err != nil {
		t.Fatal(err)
	}
	defer resp.Body.Close()
	if body, _ := io.ReadAll(resp.Body); !strings.HasPrefix(string(body), "nobody") {
		t.Errorf("the old token was answered %q", body)
	}
}

func (v visitor) cookie() string {
	req, _ := http.NewRequest("GET", v.h.url, nil)
	for _, c := range v.client.Jar.Cookies(req.URL) {
		return c.Value
	}
	return ""
}

func TestCookieIsClosedToScriptsAndOtherSites(t *testing.T) {
	t.Parallel()
	for _, tc := range []struct {
		plain bool
		name  string
	}{{true, "session"}, {false, "__Host-session"}} {
		h := newHouse(t, func(o *SessionOptions) { o.PlainHTTP = tc.plain })
		_, _, resp := h.visitor().get("/in")
		cookies := resp.Cookies()
		if len(cookies) != 1 {
			t.Fatalf("%d cookies; want 1", len(cookies))
		}
		c := cookies[0]
		if c.Name != tc.name || c.Secure == tc.plain || !c.HttpOnly || c.SameSite != http.SameSiteLaxMode || c.Path != "/" || c.Domain != "" {
			t.Errorf("plain %v: cookie %v", tc.plain, c)
		}
	}
}

func TestUseIsNotedAtMostOnceAMinute(t *testing.T) {
	t.Parallel()
	h := newHouse(t, nil)
	v := h.visitor()
	v.expect("/in", "anna")
	start := h.store.commits()
	for range 59 {
		v.expect("/who", "anna")
		v.expect("/socket", "anna")
		h.clock.add(time.Second)
	}
	if n := h.store.commits() - start; n != 0 {
		t.Errorf("%d writes within a minute", n)
	}
	h.clock.add(time.Second)
	v.expect("/socket", "anna") // a socket never writes
	if n := h.store.commits() - start; n != 0 {
		t.Errorf("%d writes by a socket", n)
	}
	for range 10 {
		v.expect("/who", "anna")
	}
	if n := h.store.commits() - start; n != 1 {
		t.Errorf("%d writes after a minute; want 1", n)
	}
}

func TestUnusedSessionEnds(t *testing.T) {
	t.Parallel()
	h := newHouse(t, func(o *SessionOptions) { o.Idle = 30 * time.Minute })
	v := h.visitor()
	id := v.expect("/in", "anna")
	for range 5 { // used now and then, it goes on past the limit
		h.clock.add(29 * time.Minute)
		v.expect("/who", "anna")
	}
	h.clock.add(30 * time.Minute)
	v.expect("/socket", "nobody (timed out)")
	v.expect("/who", "nobody (timed out)")
	v.expect("/who", "nobody")
	if !slices.Equal(h.ended, []string{id}) {
		t.Errorf("ended sessions told: %v; want %v", h.ended, id)
	}
}

func TestSessionEndsAtItsLifetimeHoweverUsed(t *testing.T) {
	t.Parallel()
	h := newHouse(t, func(o *SessionOptions) { o.Lifetime = time.Hour; o.Idle = 50 * time.Minute })
	v := h.visitor()
	v.expect("/in", "anna")
	h.clock.add(40 * time.Minute)
	v.expect("/who", "anna")
	h.clock.add(21 * time.Minute)
	v.expect("/who", "nobody")
}

func TestSessionIsPutOffOnAWishAndNotForEver(t *testing.T) {
	t.Parallel()
	h := newHouse(t, func(o *SessionOptions) { o.Lifetime, o.Longest, o.Idle = time.Hour, 150*time.Minute, 50*time.Minute })
	v := h.visitor()
	v.expect("/stay", "0s") // nobody has nothing to put off
	v.expect("/in", "anna")
	for i, left := range []string{"50m0s", "50m0s", "50m0s", "30m0s"} { // unused for 50 minutes it ends, and at last after 150
		if i > 0 {
			h.clock.add(40 * time.Minute)
		}
		v.expect("/stay", left)
		v.expect("/who", "anna")
	}
	h.clock.add(29 * time.Minute)
	v.expect("/who", "anna")
	h.clock.add(2 * time.Minute)
	v.expect("/who", "nobody")
}

func TestChangesOfAPersonCountAfterASecond(t *testing.T) {
	t.Parallel()
	h := newHouse(t, nil)
	v := h.visitor()
	v.expect("/in", "anna")
	for range 10 {
		v.expect("/who", "anna")
	}
	if h.book.asked > 1 {
		t.Errorf("asked %d times for a person within a second", h.book.asked)
	}
	gone := anna()
	gone.Active = false
	h.book.put(gone, "")
	h.clock.add(time.Second)
	v.expect("/who", "nobody")
	h.book.put(anna(), "")
	h.clock.add(time.Second)
	v.expect("/who", "nobody") // the session is gone for good
}

func TestForgetMakesAChangeCountAtOnce(t *testing.T) {
	t.Parallel()
	h := newHouse(t, nil)
	v := h.visitor()
	v.expect("/in", "anna")
	v.expect("/who", "anna")
	gone := anna()
	gone.Active = false
	h.book.put(gone, "")
	h.Forget(gone.ID)
	v.expect("/who", "nobody")
}

func TestFaultIsNotTakenForNobody(t *testing.T) {
	t.Parallel()
	h := newHouse(t, nil)
	v := h.visitor()
	v.expect("/in", "anna")
	h.book.fail(errors.New("the database is away"))
	h.clock.add(2 * time.Second)
	for _, path := range []string{"/who", "/socket"} {
		if _, _, resp := v.get(path); resp.StatusCode != http.StatusInternalServerError {
			t.Errorf("%s: status %d; want 500", path, resp.StatusCode)
		}
	}
	h.book.fail(nil)
	v.expect("/who", "anna")
}

// TestEndedSessionDoesNotComeBack signs out while an older request of the same
// session, which is going to note the session's use, is still under way.
func TestEndedSessionDoesNotComeBack(t *testing.T) {
	t.Parallel()
	h := newHouse(t, nil)
	v := h.visitor()
	v.expect("/in", "anna")
	h.clock.add(2 * time.Minute)
	token := v.cookie()
	done := make(chan struct{})
	go func() {
		defer close(done)
		v.get("/held")
	}()
	<-h.held
	v.expect("/out", "nobody")
	h.hold <- struct{}{}
	<-done
	req, _ := http.NewRequestWithContext(t.Context(), "GET", h.url+"/who", nil)
	req.AddCookie(&http.Cookie{Name: "session", Value: token})
	resp, err := http.DefaultClient.Do(req)
	if err != nil {
		t.Fatal(err)
	}
	defer resp.Body.Close()
	if body, _ := io.ReadAll(resp.Body); !strings.HasPrefix(string(body), "nobody") {
		t.Errorf("the ended session was answered %q", body)
	}
}

func TestEndedFindsWhatIsOver(t *testing.T) {
	t.Parallel()
	for _, batched := range []bool{false, true} {
		h := newHouse(t, func(o *SessionOptions) {
			o.Idle = time.Hour
			if batched {
				store := o.Store
				o.FindMany = func(_ context.Context, keys []string) (map[string][]byte, error) {
					out := make(map[string][]byte)
					for _, k := range keys {
						if b, ok, _ := store.Find(k); ok {
							out[k] = b
						}
					}
					return out, nil
				}
			}
		})
		a, b := h.visitor(), h.visitor()
		ids := []string{a.expect("/in", "anna"), b.expect("/in", "anna"), "never was"}
		expect := func(what string, want ...string) {
			t.Helper()
			got, err := h.Ended(t.Context(), ids)
			if err != nil || !slices.Equal(got, want) {
				t.Errorf("batched %v, %s: Ended = %v, %v; want %v", batched, what, got, err, want)
			}
		}
		expect("at first", "never was")
		a.expect("/out", "nobody")
		expect("one signed out", ids[0], "never was")
		h.clock.add(time.Hour)
		expect("the other unused", ids...)
		ids = []string{a.expect("/in", "anna")}
		expect("signed in again")
		gone := anna()
		gone.Active = false
		h.book.put(gone, "")
		h.clock.add(time.Second)
		expect("no longer active", ids...)
		h.book.fail(errors.New("away"))
		h.clock.add(time.Second)
		if got, err := h.Ended(t.Context(), ids); err == nil || got != nil {
			t.Errorf("with a fault Ended = %v, %v; want the fault", got, err)
		}
	}
}

func TestExpiredSessionsAreClearedAwayUntilClose(t *testing.T) {
	t.Parallel()
	called := make(chan struct{}, 1)
	s := NewSessions(SessionOptions{Store: memstore.NewWithCleanupInterval(0), People: newBook(),
		DeleteExpired: func(ctx context.Context) error {
			called <- struct{}{}
			<-ctx.Done() // as a query would that is cut off
			return ctx.Err()
		}})
	<-called
	s.Close() // returns only when that has ended
	s.Close()
}

func TestContextWithoutSessionIsNobody(t *testing.T) {
	t.Parallel()
	if p, ok := FromContext(t.Context()); ok || p.ID != (plant.Person{}).ID {
		t.Errorf("FromContext = %+v, %v", p, ok)
	}
}
