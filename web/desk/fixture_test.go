package desk_test

import (
	"math"
	"math/rand/v2"
	"net/url"
	"strings"
	"testing"
	"time"

	"holdfast/internal/localpg/pgtest"
	"holdfast/internal/plant"
	"holdfast/internal/store"
	"holdfast/internal/store/storetest"
	"holdfast/web"
	"holdfast/web/desk"
	"holdfast/web/webtest"
)

func TestMain(m *testing.M) { pgtest.Main(m, store.Migrate) }

// site is the real router and the real store around the desk.
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
		Desk: desk.New(desk.Deps{Store: p.Store, Signer: known, Log: log})}, p.Store, nil)
	return &site{Plant: p, url: server.URL}
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
