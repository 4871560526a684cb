package main

import (
	"bytes"
	"fmt"
	"net/http"
	"slices"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"github.com/gorilla/websocket"

	"holdfast/internal/store/storetest"
)

// BenchmarkDashboards saves 100 subgroups a second through HTTP while 500 dashboards
// watch the board, and measures from each request's start until each dashboard has read
// the card that shows it; the saving and the reading are in the same process. The bar is
// 100 ms at the 99th percentile. One turn lasts ten seconds.
//
// Each station saves every 640 ms. A dashboard that has not read the station's card by
// then missed it and counts as that long.
func BenchmarkDashboards(b *testing.B) {
	const (
		dashboards = 500
		stations   = 64
		each       = 10 * time.Millisecond // 100 a second
		aTurn      = 1000                  // saves
		a          = stations * each       // the time between two saves of one station
	)
	url := durable(b)
	h := makeHall(b, url, stations)
	r := serveOn(b, &storetest.Plant{Store: h.store, URL: url}, time.Now)
	place := map[string]int{}
	for i, c := range h.charts {
		place[c.StationID.String()] = i
	}
	var began [stations]atomic.Int64 // when the running save of a station was sent
	watchers := make([]*watcher, dashboards)
	var visitors []*visitor
	for i := range watchers {
		if i%25 == 0 {
			visitors = append(visitors, r.visit(b, "operator1"))
		}
		watchers[i] = &watcher{conn: visitors[i/25].dial("board"), seen: make([]int64, stations)}
	}
	var reading sync.WaitGroup
	for _, w := range watchers {
		reading.Go(func() { w.read(place, began[:]) })
	}
	savers := make(chan int, aTurn)
	var saving sync.WaitGroup
	for range 16 {
		v := r.visit(b, "operator1")
		go func() {
			for i := range savers {
				c := h.charts[i%stations]
				began[i%stations].Store(time.Now().UnixNano())
				res, body := v.post("/station/"+c.StationID.String()+"/round", roundForm(c, storetest.ID(), readings(i)))
				if res.StatusCode != http.StatusSeeOther {
					b.Error(fmt.Errorf("saving: %s\n%.600s", res.Status, body))
				}
				saving.Done()
			}
		}()
	}
	saved := 0
	for b.Loop() {
		tick := time.NewTicker(each)
		for range aTurn {
			<-tick.C
			saving.Add(1)
			savers <- saved
			saved++
		}
		tick.Stop()
		saving.Wait()
		time.Sleep(a)
	}
	close(savers)
	for _, w := range watchers {
		_ = w.conn.Close()
	}
	reading.Wait()
	var took []time.Duration
	for _, w := range watchers {
		took = append(took, w.took...)
	}
	missed := saved*dashboards - len(took)
	for range missed {
		took = append(took, a)
	}
	slices.Sort(took)
	b.ReportMetric(float64(took[len(took)/2].Microseconds())/1000, "p50-ms")
	b.ReportMetric(float64(took[len(took)*99/100].Microseconds())/1000, "p99-ms")
	b.ReportMetric(float64(missed), "missed")
	b.ReportMetric(float64(saved), "saves")
	b.ReportMetric(0, "ns/op")
}

// watcher is one dashboard.
type watcher struct {
	conn *websocket.Conn
	seen []int64 // by station: the save that was seen last, by when it was sent
	took []time.Duration
}

// read takes the station of every card out of the messages. It looks at as little of
// them as it can: 500 readers share the machine with what is measured.
func (w *watcher) read(place map[string]int, began []atomic.Int64) {
	card := []byte(`"id":"card-`)
	var message bytes.Buffer
	for {
		_, r, err := w.conn.NextReader()
		if err != nil {
			return
		}
		message.Reset()
		if _, err := message.ReadFrom(r); err != nil {
			return
		}
		at := time.Now().UnixNano()
		for rest := message.Bytes(); ; {
			_, after, ok := bytes.Cut(rest, card)
			if !ok || len(after) < 36 {
				break
			}
			rest = after
			i, ok := place[string(after[:36])]
			if !ok {
				continue
			}
			if sent := began[i].Load(); sent != 0 && sent != w.seen[i] {
				w.seen[i] = sent
				w.took = append(w.took, time.Duration(at-sent))
			}
		}
	}
}
