package outbox

import (
	"context"
	"log/slog"
	"net"
	"net/netip"
	"sync"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
)

// clock is a clock that a test sets.
type clock struct {
	mu sync.Mutex
	at time.Time
}

func newClock() *clock { return &clock{at: time.Date(2026, 3, 12, 12, 0, 0, 0, time.UTC)} }

func (c *clock) now() time.Time {
	c.mu.Lock()
	defer c.mu.Unlock()
	return c.at
}

// names resolves names as a test says.
type names map[string][]string

func (n names) LookupNetIP(_ context.Context, _, host string) ([]netip.Addr, error) {
	list, ok := n[host]
	if !ok {
		return nil, &net.DNSError{Err: "no such host", Name: host, IsNotFound: true}
	}
	var out []netip.Addr
	for _, a := range list {
		out = append(out, netip.MustParseAddr(a))
	}
	return out, nil
}

func message(target string) plant.Outgoing {
	return plant.Outgoing{ID: uuid.Must(uuid.NewV7()), Attempts: 1, CreatedAt: newClock().now(),
		Message: plant.Message{Target: target, Title: "Hold at Press", Body: `{"type":"call.raised"}`}}
}

// secretsOf is a set of secrets in memory.
func secretsOf(m map[string]string) Secrets {
	return Secrets{Getenv: func(name string) string {
		for k, v := range m {
			if EnvironmentOf(k) == name {
				return v
			}
		}
		return ""
	}}
}

var quietLog = slog.New(slog.DiscardHandler)

func hostPort(t testing.TB, l net.Listener) (host, port string) {
	t.Helper()
	host, port, err := net.SplitHostPort(l.Addr().String())
	if err != nil {
		t.Fatal(err)
	}
	return host, port
}
