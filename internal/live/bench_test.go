package live

import (
	"context"
	"fmt"
	"slices"
	"strconv"
	"strings"
	"sync/atomic"
	"testing"
	"time"

	"github.com/gorilla/websocket"
)

// BenchmarkBroadcast measures one change of a 1 KiB fragment until the last of
// 500 sockets on loopback has read it, the readers' work in the same process
// included. p99 is over all receipts of all sockets.
func BenchmarkBroadcast(b *testing.B) {
	const sockets = 500
	filler := strings.Repeat("x", 1000)
	var now atomic.Int64
	render := func(context.Context, []string) (map[string][]Fragment, error) {
		html := fmt.Sprintf(`<p id="lane">%d %s</p>`, now.Load(), filler)
		return map[string][]Fragment{"board": {{ID: "lane", HTML: []byte(html)}}}, nil
	}
	opt := calm()
	opt.Interval = time.Nanosecond
	opt.MaxPerSession = sockets
	s := serve(b, render, opt)

	type receipt struct {
		change int64
		at     time.Time
	}
	receipts := make(chan receipt, sockets)
	joined := make(chan struct{}, sockets)
	for range sockets {
		w := s.open(b, "topic=board")
		go func() {
			for {
				kind, data, err := w.conn.ReadMessage()
				if err != nil || kind != websocket.TextMessage {
					return
				}
				at := time.Now()
				_, after, ok := strings.Cut(string(data), `id=\"lane\">`)
				if !ok {
					continue
				}
				number, _, _ := strings.Cut(after, " ")
				if n, err := strconv.ParseInt(number, 10, 64); err == nil && n > 0 {
					receipts <- receipt{n, at}
				} else if err == nil {
					joined <- struct{}{}
				}
			}
		}()
	}
	for range sockets {
		<-joined
	}
	var took []time.Duration
	for b.Loop() {
		n := now.Add(1)
		start := time.Now()
		s.hub.Dirty("board")
		for left := sockets; left > 0; {
			if r := <-receipts; r.change == n {
				took = append(took, r.at.Sub(start))
				left--
			}
		}
	}
	slices.Sort(took)
	b.ReportMetric(float64(took[len(took)/2])/1e6, "p50-ms")
	b.ReportMetric(float64(took[len(took)*99/100])/1e6, "p99-ms")
	b.ReportMetric(float64(sockets), "sockets")
}
