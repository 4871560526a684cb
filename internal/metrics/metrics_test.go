package metrics_test

import (
	"context"
	"errors"
	"io"
	"net/http"
	"net/http/httptest"
	"strings"
	"testing"
	"time"

	"github.com/prometheus/common/expfmt"
	"github.com/prometheus/common/model"

	"holdfast/internal/live"
	"holdfast/internal/metrics"
	"holdfast/internal/store"
)

func full() *metrics.Metrics {
	m := metrics.New()
	m.Saved(7 * time.Millisecond)
	m.Watch(metrics.Sources{
		Version: "v1",
		Store: func() store.Counts {
			return store.Counts{Saves: 41, Refused: 2, Judged: 55, Busy: 3, Idle: 4, Waited: 1500 * time.Millisecond}
		},
		Hub: func() live.Stats { return live.Stats{Sockets: 12, Renders: 9, RenderErrors: 1, Messages: 77} },
		Outbox: func(context.Context) (metrics.Outbox, error) {
			return metrics.Outbox{Waiting: 5, OldestAge: time.Minute}, nil
		},
		Certificate: func() time.Time { return time.Unix(1_800_000_000, 0) },
		Ready:       func(context.Context) error { return errors.New("no database") },
	})
	return m
}

func scrape(t *testing.T, h http.Handler, token string) (int, string) {
	t.Helper()
	r := httptest.NewRequest(http.MethodGet, "/metrics", nil)
	if token != "" {
		r.Header.Set("Authorization", "Bearer "+token)
	}
	w := httptest.NewRecorder()
	h.ServeHTTP(w, r)
	body, err := io.ReadAll(w.Result().Body)
	if err != nil {
		t.Fatal(err)
	}
	return w.Code, string(body)
}

// The text is read by the parser of the format's own project, which also holds names and
// types to the format's rules.
func TestScrape(t *testing.T) {
	status, body := scrape(t, full().Handler(""), "")
	if status != http.StatusOK {
		t.Fatalf("status %d\n%s", status, body)
	}
	parser := expfmt.NewTextParser(model.LegacyValidation)
	families, err := parser.TextToMetricFamilies(strings.NewReader(body))
	if err != nil {
		t.Fatal(err)
	}
	value := func(name string, labels ...string) float64 {
		f := families[name]
		if f == nil {
			t.Errorf("no %s", name)
			return -1
		}
		for _, m := range f.Metric {
			if len(labels) > 0 && (len(m.Label) != 1 || m.Label[0].GetValue() != labels[0]) {
				continue
			}
			return m.GetGauge().GetValue() + m.GetCounter().GetValue() + float64(m.GetHistogram().GetSampleCount())
		}
		t.Errorf("%s has no %v", name, labels)
		return -1
	}
	for _, c := range []struct {
		name, label string
		want        float64
	}{
		{"holdfast_build_info", "v1", 1}, {"holdfast_ready", "", 0},
		{"holdfast_rounds_total", "saved", 41}, {"holdfast_rounds_total", "refused", 2},
		{"holdfast_judgements_total", "", 55}, {"holdfast_database_connections", "busy", 3},
		{"holdfast_database_waited_seconds_total", "", 1.5}, {"holdfast_sockets", "", 12},
		{"holdfast_renders_total", "good", 8}, {"holdfast_pushes_total", "", 77},
		{"holdfast_outbox_messages", "waiting", 5}, {"holdfast_outbox_oldest_seconds", "", 60},
		{"holdfast_certificate_ends_timestamp_seconds", "", 1_800_000_000}, {"holdfast_save_seconds", "", 1},
	} {
		var labels []string
		if c.label != "" {
			labels = append(labels, c.label)
		}
		if got := value(c.name, labels...); got != c.want {
			t.Errorf("%s %s = %v, want %v", c.name, c.label, got, c.want)
		}
	}
}

func TestTokenIsAsked(t *testing.T) {
	h := full().Handler("a long token")
	for token, want := range map[string]int{"": 401, "wrong": 401, "a long token ": 401, "a long token": 200} {
		if status, body := scrape(t, h, token); status != want || want == 401 && strings.Contains(body, "holdfast_") {
			t.Errorf("token %q: %d", token, status)
		}
	}
}

// Two collections in one process, as in tests that serve twice, do not meet.
func TestCollectionsAreApart(t *testing.T) {
	a, b := full(), full()
	a.Saved(time.Second)
	_, body := scrape(t, b.Handler(""), "")
	if !strings.Contains(body, "holdfast_save_seconds_count 1\n") {
		t.Error("the one counts what happened to the other")
	}
}
