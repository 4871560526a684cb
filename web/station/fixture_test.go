package station_test

import (
	"bytes"
	"context"
	"io"
	"log/slog"
	"net/http"
	"net/http/cookiejar"
	"net/http/httptest"
	"net/netip"
	"net/url"
	"strconv"
	"strings"
	"testing"

	"github.com/alexedwards/scs/v2/memstore"

	"holdfast/internal/auth"
	"holdfast/internal/live"
	"holdfast/internal/localpg/pgtest"
	"holdfast/internal/plant"
	"holdfast/internal/store"
	"holdfast/internal/store/storetest"
	"holdfast/web"
	"holdfast/web/station"
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

// site is the real router and the real store around the station.
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
		Station: station.New(station.Deps{Store: p.Store, Signer: checker{p.Store}, Log: logger})}))
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

// browser is somebody at a tablet.
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
	if got := b.post("/sign-in", url.Values{"login": {p.Login}, "password": {"right"}}); got.status != http.StatusSeeOther {
		t.Fatalf("sign in as %s: status %d", p.Login, got.status)
	}
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

func (p page) says(words ...string) page {
	p.t.Helper()
	for _, w := range words {
		if !strings.Contains(p.body, w) {
			p.t.Errorf("the page does not say %q\n%s", w, p.main())
		}
	}
	return p
}

func (p page) saysNot(words ...string) page {
	p.t.Helper()
	for _, w := range words {
		if strings.Contains(p.body, w) {
			p.t.Errorf("the page says %q", w)
		}
	}
	return p
}

// main is the page without its head, for messages.
func (p page) main() string {
	_, rest, _ := strings.Cut(p.body, "</header>")
	return rest
}

// field reads the value of a hidden field.
func (p page) field(name string) string {
	p.t.Helper()
	_, rest, ok := strings.Cut(p.body, `name="`+name+`" value="`)
	if !ok {
		p.t.Fatalf("no field %q\n%s", name, p.main())
	}
	value, _, _ := strings.Cut(rest, `"`)
	return value
}

// round is the form of a round of one characteristic as a browser would send it.
func (p page) round(c plant.Characteristic, readings ...string) url.Values {
	id := c.ID.String()
	return url.Values{"round": {p.field("round")}, "due": {p.field("due")}, "occasion": {p.field("occasion")},
		"characteristic": {id}, "setup-" + id: {p.field("setup-" + id)}, "reading-" + id: readings}
}

func (s *site) at(parts ...string) string {
	return "/station/" + s.Station.ID.String() + strings.Join(append([]string{""}, parts...), "/")
}

func itoa(n int64) string { return strconv.FormatInt(n, 10) }
