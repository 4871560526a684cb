// Package metrics tells a Prometheus server how this server is: saves, judgements,
// judging again, pushes, sockets, database connections, the outbox. It holds no figure about a
// person or a process: those are on the board and on the desk, with their meaning.
//
// The parts count for themselves; this package only reads them when it is asked.
package metrics

import (
	"context"
	"crypto/sha256"
	"crypto/subtle"
	"net/http"
	"strings"
	"time"

	"github.com/prometheus/client_golang/prometheus"
	"github.com/prometheus/client_golang/prometheus/collectors"
	"github.com/prometheus/client_golang/prometheus/promhttp"

	"holdfast/internal/live"
	"holdfast/internal/store"
)

// Outbox is how the messages to the outside stand.
type Outbox struct {
	Waiting   int           // not delivered yet
	GivenUp   int           // could not be delivered and wait for a person
	OldestAge time.Duration // of those waiting
}

// Sources are read at each scrape. Those that are nil are left out.
type Sources struct {
	Version     string
	Store       func() store.Counts
	Hub         func() live.Stats
	Outbox      func(ctx context.Context) (Outbox, error)
	Certificate func() time.Time // when the certificate in use ends
	Ready       func(ctx context.Context) error
}

// Metrics collects the figures.
type Metrics struct {
	registry *prometheus.Registry
	saves    prometheus.Histogram
}

// scrapeLimit ends a scrape that waits for the database: a monitor that hangs tells nothing.
const scrapeLimit = 3 * time.Second

// New makes the collection. Save is fed by the store; see Saved.
func New() *Metrics {
	m := &Metrics{
		registry: prometheus.NewRegistry(),
		saves: prometheus.NewHistogram(prometheus.HistogramOpts{
			Name: "holdfast_save_seconds", Help: "Time from a round's arrival in the store to its durable answer.",
			Buckets: []float64{.001, .0025, .005, .01, .025, .05, .1, .25, .5, 1, 2.5, 5, 10},
		}),
	}
	m.registry.MustRegister(m.saves, collectors.NewGoCollector(), collectors.NewProcessCollector(collectors.ProcessCollectorOpts{}))
	return m
}

// Saved takes the time of one save.
func (m *Metrics) Saved(took time.Duration) { m.saves.Observe(took.Seconds()) }

// Watch adds the sources. It is called once.
func (m *Metrics) Watch(s Sources) { m.registry.MustRegister(&collector{s}) }

// Handler answers scrapes. With a token it answers only those that bear it.
func (m *Metrics) Handler(token string) http.Handler {
	h := promhttp.HandlerFor(m.registry, promhttp.HandlerOpts{Timeout: 2 * scrapeLimit, MaxRequestsInFlight: 4})
	if token == "" {
		return h
	}
	want := sha256.Sum256([]byte(token))
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		given, bears := strings.CutPrefix(r.Header.Get("Authorization"), "Bearer ")
		have := sha256.Sum256([]byte(given))
		if !bears || subtle.ConstantTimeCompare(have[:], want[:]) != 1 {
			w.Header().Set("WWW-Authenticate", `Bearer realm="metrics"`)
			http.Error(w, "These figures are for the plant's monitor.", http.StatusUnauthorized)
			return
		}
		h.ServeHTTP(w, r)
	})
}

// collector reads the sources at each scrape.
type collector struct{ s Sources }

func desc(name, help string, labels ...string) *prometheus.Desc {
	return prometheus.NewDesc("holdfast_"+name, help, labels, nil)
}

var (
	build       = desc("build_info", "1, with the version as a label.", "version")
	ready       = desc("ready", "1 while the server reaches its database.")
	rounds      = desc("rounds_total", "Rounds that came, by how they ended: saved, refused or failed.", "outcome")
	judged      = desc("judgements_total", "Subgroups judged as they came.")
	refolds     = desc("refolds_total", "Times that history was judged again: late, corrected and voided subgroups, new boundaries.")
	refolded    = desc("refolded_subgroups_total", "Subgroups walked over when history was judged again.")
	connections = desc("database_connections", "Connections of the pool, by state.", "state")
	limit       = desc("database_connections_limit", "The most that the pool opens.")
	waits       = desc("database_waits_total", "Times that somebody had to wait for a connection.")
	waited      = desc("database_waited_seconds_total", "Time waited for connections.")
	sockets     = desc("sockets", "Dashboards and tablets connected now.")
	topics      = desc("topics", "Topics that somebody watches now.")
	renders     = desc("renders_total", "Times that changed fragments were rendered, by outcome.", "outcome")
	pushes      = desc("pushes_total", "Messages written to sockets.")
	coalesced   = desc("pushes_merged_total", "States merged into a newer one because a client had not taken them yet.")
	cut         = desc("sockets_ended_total", "Sockets ended by the server, by reason.", "reason")
	outbox      = desc("outbox_messages", "Messages to the outside, by state.", "state")
	oldest      = desc("outbox_oldest_seconds", "Age of the oldest message that still waits.")
	certificate = desc("certificate_ends_timestamp_seconds", "When the certificate in use ends, in seconds since 1970.")
)

// Describe sends no descriptions, which makes the collector an unchecked one: what it
// collects depends on which sources there are.
func (c *collector) Describe(chan<- *prometheus.Desc) {}

// Collect reads the sources.
func (c *collector) Collect(out chan<- prometheus.Metric) {
	ctx, cancel := context.WithTimeout(context.Background(), scrapeLimit)
	defer cancel()
	count := func(d *prometheus.Desc, v float64, labels ...string) {
		out <- prometheus.MustNewConstMetric(d, prometheus.CounterValue, v, labels...)
	}
	gauge := func(d *prometheus.Desc, v float64, labels ...string) {
		out <- prometheus.MustNewConstMetric(d, prometheus.GaugeValue, v, labels...)
	}
	gauge(build, 1, c.s.Version)
	if c.s.Ready != nil {
		up := 0.0
		if c.s.Ready(ctx) == nil {
			up = 1
		}
		gauge(ready, up)
	}
	if c.s.Store != nil {
		n := c.s.Store()
		count(rounds, float64(n.Saves), "saved")
		count(rounds, float64(n.Refused), "refused")
		count(rounds, float64(n.Failed), "failed")
		count(judged, float64(n.Judged))
		count(refolds, float64(n.Refolds))
		count(refolded, float64(n.Refolded))
		gauge(connections, float64(n.Idle), "idle")
		gauge(connections, float64(n.Busy), "busy")
		gauge(limit, float64(n.Limit))
		count(waits, float64(n.Waits))
		count(waited, n.Waited.Seconds())
	}
	if c.s.Hub != nil {
		h := c.s.Hub()
		gauge(sockets, float64(h.Sockets))
		gauge(topics, float64(h.Topics))
		count(renders, float64(h.Renders-h.RenderErrors), "good")
		count(renders, float64(h.RenderErrors), "failed")
		count(pushes, float64(h.Messages))
		count(coalesced, float64(h.Coalesced))
		count(cut, float64(h.Slow), "slow")
		count(cut, float64(h.Ended), "session ended")
		count(cut, float64(h.Refused), "refused")
	}
	if c.s.Outbox != nil {
		// A database that does not answer leaves a gap, which a monitor sees as one.
		if o, err := c.s.Outbox(ctx); err == nil {
			gauge(outbox, float64(o.Waiting), "waiting")
			gauge(outbox, float64(o.GivenUp), "given up")
			gauge(oldest, o.OldestAge.Seconds())
		}
	}
	if c.s.Certificate != nil {
		gauge(certificate, float64(c.s.Certificate().Unix()))
	}
}
