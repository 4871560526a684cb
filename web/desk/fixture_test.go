package desk_test

import (
	"bytes"
	"context"
	"io"
	"log/slog"
	"math"
	"math/rand/v2"
	"net/http"
	"net/http/cookiejar"
	"net/http/httptest"
	"net/netip"
	"net/url"
	"strings"
	"testing"
	"time"

	"github.com/alexedwards/scs/v2/memstore"

	"holdfast/internal/auth"
	"holdfast/internal/live"
	"holdfast/internal/localpg/pgtest"
	"holdfast/internal/plant"
	"holdfast/internal/store"
	"holdfast/internal/store/storetest"
	"holdfast/web"
	"holdfast/web/desk"
)

func TestMain(m *testing.M) { pgtest.Main(m, store.Migrate) }

// checker lets everybody in whose password is "right".
type checker struct{ *store.Store }

func (c checker) Check(ctx context.Context, login string, s auth.Secret, _ netip.Addr) (plant.Person, error) {
	p, _, err := c.Credential(ctx, login)
	if err != nil || string(s) != "right" {
		return plant.Person{}, plant.Invalidf("password", "Name or password is wrong.")
	}
	return p, nil
}

// site is the real router and the real store around the desk.
type site struct {
	*storetest.Plant
	url string
}

func newSite(t testing.TB) *site {
	t.Helper()
	p := storetest.New(t, "")
	logger := slog.New(slog.NewTextHandler(logWriter{t}, &slog.HandlerOptions{Level: slog.LevelWarn}))
	hub := live.New(func(context.Context, []string) (map[string][]live.Fragment, error) { return nil, nil }, live.Options{Log: logger})
	sessions := auth.NewSessions(auth.SessionOptions{Store: memstore.NewWithCleanupInterval(0), People: p.Store, PlainHTTP: true, Log: logger})
	pl, err := p.Store.Plant(t.Context())
	if err != nil {
		t.Fatal(err)
	}
	server := httptest.NewServer(web.New(web.Config{Log: logger, Now: p.Clock.Now, Plant: func() plant.Plant { return pl },
		Sessions: sessions, Checker: checker{p.Store}, Hub: hub,
		Desk: desk.New(desk.Deps{Store: p.Store, Signer: checker{p.Store}, Log: logger})}))
	t.Cleanup(func() {
		server.Close()
		_ = hub.Close(context.Background())
		sessions.Close()
	})
	return &site{Plant: p, url: server.URL}
}

type logWriter struct{ t testing.TB }

func (w logWriter) Write(p []byte) (int, error) {
	w.t.Logf("%s", bytes.TrimSpace(p))
	return len(p), nil
}

// fill records n steady subgroups of a characteristic, half an hour apart, in the last
// digit about the centre with so much standard deviation. at changes single subgroups.
func (s *site) fill(t testing.TB, c plant.Characteristic, n, size int, centre, sigma float64, seed uint64, at map[int]float64) {
	t.Helper()
	rng := rand.New(rand.NewPCG(seed, 1))
	for i := range n {
		s.Clock.Advance(30 * time.Minute)
		readings := make([]int64, size)
		for k := range readings {
			readings[k] = int64(math.Round(centre + at[i] + sigma*rng.NormFloat64()))
		}
		s.MustRecord(t, c, readings...)
	}
}

// browser is somebody at the desk.
type browser struct {
	t    testing.TB
	site *site
	http *http.Client
}

func (s *site) signIn(t testing.TB, p plant.Person) *browser {
	t.Helper()
	jar, err := cookiejar.New(nil)
	if err != nil {
		t.Fatal(err)
	}
	b := &browser{t: t, site: s, http: &http.Client{Jar: jar, CheckRedirect: func(*http.Request, []*http.Request) error { return http.ErrUseLastResponse }}}
	b.post("/sign-in", url.Values{"login": {p.Login}, "password": {"right"}}).is(http.StatusSeeOther)
	return b
}

// page is an answer.
type page struct {
	t      testing.TB
	status int
	to     string // where a redirect leads
	body   string
}

func (b *browser) get(path string) page { return b.do(http.MethodGet, path, nil) }

func (b *browser) post(path string, form url.Values) page { return b.do(http.MethodPost, path, form) }

func (b *browser) do(method, path string, form url.Values) page {
	b.t.Helper()
	var body io.Reader
	if form != nil {
		body = strings.NewReader(form.Encode())
	}
	r, err := http.NewRequestWithContext(b.t.Context(), method, b.site.url+path, body)
	if err != nil {
		b.t.Fatal(err)
	}
	if form != nil {
		r.Header.Set("Content-Type", "application/x-www-form-urlencoded")
	}
	res, err := b.http.Do(r)
	if err != nil {
		b.t.Fatal(err)
	}
	defer res.Body.Close()
	text, err := io.ReadAll(res.Body)
	if err != nil {
		b.t.Fatal(err)
	}
	return page{b.t, res.StatusCode, res.Header.Get("Location"), string(text)}
}

func (p page) is(status int) page {
	p.t.Helper()
	if p.status != status {
		p.t.Fatalf("status %d, want %d\n%s", p.status, status, p.body)
	}
	return p
}

// has fails unless each text stands in the page.
func (p page) has(texts ...string) page {
	p.t.Helper()
	for _, text := range texts {
		if !strings.Contains(p.body, text) {
			p.t.Errorf("%q is not on the page", text)
		}
	}
	if p.t.Failed() {
		p.t.Log(p.body)
		p.t.FailNow()
	}
	return p
}

// hasNot fails when one of the texts stands in the page.
func (p page) hasNot(texts ...string) page {
	p.t.Helper()
	for _, text := range texts {
		if strings.Contains(p.body, text) {
			p.t.Errorf("%q is on the page", text)
		}
	}
	return p
}

// count is how often a text stands in the page.
func (p page) count(text string) int { return strings.Count(p.body, text) }

func path(c plant.Characteristic, parts ...string) string {
	return strings.Join(append([]string{"/desk/characteristic", c.ID.String()}, parts...), "/")
}

// with puts a query behind an address.
func with(path string, q url.Values) string { return path + "?" + q.Encode() }
