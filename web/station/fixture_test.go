package station_test

import (
	"net/url"
	"strconv"
	"strings"
	"testing"

	"holdfast/internal/localpg/pgtest"
	"holdfast/internal/plant"
	"holdfast/internal/store"
	"holdfast/internal/store/storetest"
	"holdfast/web"
	"holdfast/web/station"
	"holdfast/web/webtest"
)

func TestMain(m *testing.M) { pgtest.Main(m, store.Migrate) }

// site is the real router and the real store around the station.
type site struct {
	*storetest.Plant
	url string
}

func newSite(t testing.TB) *site {
	t.Helper()
	p := storetest.New(t, "")
	known, log := webtest.Recorded{Store: p.Store}, webtest.Log(t)
	pl, err := p.Store.Plant(t.Context())
	if err != nil {
		t.Fatal(err)
	}
	server, _ := webtest.Serve(t, &web.Config{Log: log, Now: p.Clock.Now, Plant: func() plant.Plant { return pl }, Checker: known,
		Station: station.New(station.Deps{Store: p.Store, Signer: known, Log: log})}, p.Store, nil)
	return &site{Plant: p, url: server.URL}
}

// browser is somebody at a tablet.
type browser struct {
	*webtest.Browser
	site *site
}

func (s *site) signIn(t testing.TB, p plant.Person) *browser {
	t.Helper()
	return &browser{webtest.Visit(t, s.url, p.Login), s}
}

// page is an answer.
type page struct {
	t      testing.TB
	status int
	to     string // where a redirect leads
	body   string
}

func (b *browser) get(path string) page {
	b.T.Helper()
	return b.page(b.Get(path))
}

func (b *browser) post(path string, form url.Values) page {
	b.T.Helper()
	return b.page(b.Post(path, form))
}

func (b *browser) page(a webtest.Answer) page {
	return page{b.T, a.StatusCode, a.Header.Get("Location"), a.Text}
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
