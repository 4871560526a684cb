package main

import (
	"context"
	"io"
	"log/slog"
	"net/http"
	"net/http/cookiejar"
	"net/url"
	"strings"
	"testing"
	"time"

	"golang.org/x/sync/errgroup"

	"holdfast/internal/auth"
	"holdfast/internal/localpg/pgtest"
	"holdfast/internal/store"
	"holdfast/internal/store/storetest"
)

func TestMain(m *testing.M) { pgtest.Main(m, store.Migrate) }

// cheap is an argon2id cost for tests: they sign in often and have nothing to guard.
var cheap = auth.Cost{MemoryKiB: 64, Time: 1, Threads: 1}

const secret = "seven quiet kestrels"

// running is a program that serves a fixture plant, as the command line would.
type running struct {
	*storetest.Plant
	program *program
	url     string
}

// serve starts the program on a fixture, under the fixture's clock.
func serve(t testing.TB) *running { return serveWith(t, func(*settings) {}) }

// serveWith does so with other settings.
func serveWith(t testing.TB, change func(*settings)) *running {
	t.Helper()
	ctx := context.Background()
	hasher, err := auth.NewHasher(cheap, 2)
	if err != nil {
		t.Fatal(err)
	}
	hash, err := hasher.Hash(ctx, secret)
	if err != nil {
		t.Fatal(err)
	}
	p := storetest.New(t, hash)
	return start(t, p, p.Clock.Now, change)
}

func serveOn(t testing.TB, p *storetest.Plant, clock func() time.Time) *running {
	t.Helper()
	return start(t, p, clock, func(*settings) {})
}

func start(t testing.TB, p *storetest.Plant, clock func() time.Time, change func(*settings)) *running {
	t.Helper()
	s := settings{Addr: "127.0.0.1:0", DatabaseURL: p.URL, Cost: cheap, Log: slog.New(slog.DiscardHandler), Clock: clock}
	change(&s)
	prog, err := newProgram(context.Background(), s)
	if err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithCancel(context.Background())
	var g errgroup.Group
	g.Go(func() error { return prog.Run(ctx) })
	t.Cleanup(func() {
		cancel()
		if err := g.Wait(); err != nil {
			t.Errorf("the program ended with %v", err)
		}
		prog.Close()
	})
	return &running{Plant: p, program: prog, url: prog.URL()}
}

// visitor is a browser without scripts.
type visitor struct {
	t     testing.TB
	http  *http.Client
	base  string
	token string // of a sender
}

// visit signs in; an empty login stays outside.
func (r *running) visit(t testing.TB, login string) *visitor {
	t.Helper()
	jar, err := cookiejar.New(nil)
	if err != nil {
		t.Fatal(err)
	}
	v := &visitor{t: t, base: r.url, http: &http.Client{Jar: jar, Timeout: 30 * time.Second,
		Transport:     &http.Transport{MaxIdleConnsPerHost: 4},
		CheckRedirect: func(*http.Request, []*http.Request) error { return http.ErrUseLastResponse }}}
	t.Cleanup(v.http.CloseIdleConnections)
	if login != "" {
		if res, body := v.post("/sign-in", url.Values{"login": {login}, "password": {secret}}); res.StatusCode != http.StatusSeeOther {
			t.Fatalf("signing in as %s: %s\n%s", login, res.Status, body)
		}
	}
	return v
}

func (v *visitor) get(path string) (*http.Response, string) {
	v.t.Helper()
	return v.do(http.MethodGet, path, "", nil)
}

func (v *visitor) post(path string, form url.Values) (*http.Response, string) {
	v.t.Helper()
	return v.do(http.MethodPost, path, "application/x-www-form-urlencoded", strings.NewReader(form.Encode()))
}

func (v *visitor) do(method, path, kind string, body io.Reader) (*http.Response, string) {
	v.t.Helper()
	return v.send(method, path, kind, "text/html", body)
}

func (v *visitor) send(method, path, kind, accept string, body io.Reader) (*http.Response, string) {
	v.t.Helper()
	req, err := http.NewRequest(method, v.base+path, body)
	if err != nil {
		v.t.Fatal(err)
	}
	if kind != "" {
		req.Header.Set("Content-Type", kind)
	}
	req.Header.Set("Accept", accept)
	if v.token != "" {
		req.Header.Set("Authorization", "Bearer "+v.token)
	}
	res, err := v.http.Do(req)
	if err != nil {
		v.t.Fatal(err)
	}
	defer res.Body.Close()
	b, err := io.ReadAll(res.Body)
	if err != nil {
		v.t.Fatal(err)
	}
	return res, string(b)
}
