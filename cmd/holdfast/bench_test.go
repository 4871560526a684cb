package main

import (
	"context"
	"fmt"
	"net/http"
	"net/url"
	"os"
	"slices"
	"strconv"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5/pgxpool"

	"holdfast/internal/auth"
	"holdfast/internal/localpg"
	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
	"holdfast/internal/store"
	"holdfast/internal/store/storetest"
)

// durable starts a private Postgres that keeps its promises, on the disk that the
// machine has: the floor and the program are measured on the same one.
func durable(b *testing.B) string {
	b.Helper()
	dir, err := os.MkdirTemp("/var/tmp", "holdfast-bench-")
	if err != nil {
		b.Fatal(err)
	}
	if err := os.Chmod(dir, 0o711); err != nil {
		b.Fatal(err)
	}
	pg, err := localpg.Start(context.Background(), localpg.Options{Dir: dir})
	if err != nil {
		b.Fatal(err)
	}
	b.Cleanup(func() {
		if err := pg.Stop(); err != nil {
			b.Error(err)
		}
		if err := os.RemoveAll(dir); err != nil {
			b.Error(err)
		}
	})
	owner := pg.ConnString(localpg.Database)
	if err := store.Migrate(context.Background(), owner); err != nil {
		b.Fatal(err)
	}
	app, err := asApp(context.Background(), owner)
	if err != nil {
		b.Fatal(err)
	}
	return app
}

// hall is a plant with one characteristic at each of many stations, limits frozen.
type hall struct {
	store    *store.Store
	operator plant.Person
	charts   []plant.Characteristic
}

const benchSize = 5

func makeHall(b *testing.B, url string, stations int) *hall {
	b.Helper()
	ctx := context.Background()
	check := func(err error) {
		b.Helper()
		if err != nil {
			b.Fatal(err)
		}
	}
	hasher, err := auth.NewHasher(cheap, 2)
	check(err)
	hash, err := hasher.Hash(ctx, secret)
	check(err)
	st, err := store.Open(ctx, store.Options{URL: url})
	check(err)
	b.Cleanup(st.Close)
	// Samples for the first limits lie back a little.
	back := time.Now().Add(-48 * time.Hour)
	past := st.WithClock(func() time.Time { return back })
	check(past.CreatePlant(ctx, plant.Plant{ID: storetest.ID(), Name: "Hall", Location: time.UTC}))
	h := &hall{store: st, operator: plant.Person{ID: storetest.ID(), Login: "operator1", Name: "Operator 1", Roles: plant.Roles{plant.Operator, plant.Engineer}, Active: true}}
	check(past.AddPerson(ctx, h.operator, hash, uuid.Nil))
	line := plant.Line{ID: storetest.ID(), Name: "Line"}
	check(past.AddLine(ctx, line, uuid.Nil))
	for i := range stations {
		s := plant.Station{ID: storetest.ID(), LineID: line.ID, Name: fmt.Sprint("Station ", i), Position: i}
		check(past.AddStation(ctx, s, uuid.Nil))
		m := plant.Machine{ID: storetest.ID(), StationID: s.ID, Name: fmt.Sprint("Machine ", i), PartsPerHour: 100}
		check(past.AddMachine(ctx, m, uuid.Nil))
		c := plant.Characteristic{ID: storetest.ID(), StationID: s.ID, MachineID: m.ID, Name: "Diameter"}
		check(past.AddCharacteristic(ctx, c, plant.Setup{Unit: "mm", Decimals: 3, Lower: dec("14.900"), Upper: dec("15.100"),
			Chart: limits.XBarR, Size: benchSize, Plan: plant.SamplingPlan{EveryMinutes: 30}}, uuid.Nil))
		h.charts = append(h.charts, c)
		h.fill(b, past, c, back, 20)
		_, err := st.Freeze(ctx, plant.FreezeRequest{Characteristic: c.ID, SetupVersion: 1, Reason: "bench", Person: h.operator.ID,
			Rules: plant.Setup{Chart: limits.XBarR, Size: benchSize}.DefaultRules()})
		check(err)
	}
	return h
}

func dec(s string) *plant.Decimal {
	d, err := plant.ParseDecimal(s)
	if err != nil {
		panic(err)
	}
	return &d
}

// readings are calm: what is measured is saving and judging, not opening matters.
func readings(i int) []int64 {
	d := int64(i % 3)
	return []int64{14990 + d, 14991, 14992 - d, 14989 + d, 14993}
}

func (h *hall) fill(b *testing.B, st *store.Store, c plant.Characteristic, at time.Time, n int) {
	b.Helper()
	for i := range n {
		_, err := st.Record(context.Background(), plant.Round{ID: storetest.ID(), Station: c.StationID, Source: "station", Person: h.operator.ID,
			TakenRaw: at.Add(time.Duration(i) * time.Second), Entries: []plant.Entry{{Characteristic: c.ID, SetupVersion: 1, Readings: readings(i)}}})
		if err != nil {
			b.Fatal(err)
		}
	}
}

// inParallel lets so many clients do n things in all, and returns the rate and the
// 99th percentile of one.
func inParallel(b *testing.B, clients, n int, do func(client, i int) error) (rate float64, p99 time.Duration) {
	b.Helper()
	var next atomic.Int64
	took := make([][]time.Duration, clients)
	var wg sync.WaitGroup
	began := time.Now()
	for c := range clients {
		wg.Go(func() {
			for {
				i := int(next.Add(1)) - 1
				if i >= n {
					return
				}
				at := time.Now()
				if err := do(c, i); err != nil {
					b.Error(err)
					return
				}
				took[c] = append(took[c], time.Since(at))
			}
		})
	}
	wg.Wait()
	all := slices.Concat(took...)
	slices.Sort(all)
	return float64(n) / time.Since(began).Seconds(), all[len(all)*99/100]
}

// BenchmarkRecord saves subgroups through HTTP (session, form, transaction, judgement,
// push) beside bare durable one-row inserts with the same driver, at 1, 8 and 32
// clients, in one run. The bar is a quarter of the bare rate, the goal half of it.
func BenchmarkRecord(b *testing.B) {
	const clients = 32
	url := durable(b)
	h := makeHall(b, url, clients)
	r := serveOn(b, &storetest.Plant{Store: h.store, URL: url}, time.Now)
	visitors := make([]*visitor, clients)
	for i := range visitors {
		visitors[i] = r.visit(b, "operator1")
	}
	save := func(client, i int) error {
		c := h.charts[client]
		form := roundForm(c, storetest.ID(), readings(i))
		res, body := visitors[client].post("/station/"+c.StationID.String()+"/round", form)
		if res.StatusCode != http.StatusSeeOther {
			return fmt.Errorf("saving: %s\n%.600s", res.Status, body)
		}
		return nil
	}
	bare := bareInsert(b, url)
	for _, n := range []int{1, 8, 32} {
		b.Run(fmt.Sprintf("clients=%d", n), func(b *testing.B) {
			// The two take turns, so that a busy moment of the machine meets both.
			var bareRate, rate float64
			var p99, bareP99 time.Duration
			turns := 0
			for b.Loop() {
				const each = 600
				v, bq := inParallel(b, n, each, bare)
				w, q := inParallel(b, n, each, save)
				bareRate, rate, p99, bareP99 = bareRate+v, rate+w, max(p99, q), max(bareP99, bq)
				turns++
			}
			b.ReportMetric(bareRate/float64(turns), "bare/s")
			b.ReportMetric(rate/float64(turns), "saves/s")
			b.ReportMetric(rate/bareRate, "ratio")
			b.ReportMetric(float64(p99.Microseconds())/1000, "p99-ms")
			b.ReportMetric(float64(bareP99.Microseconds())/1000, "bare-p99-ms")
			b.ReportMetric(0, "ns/op")
		})
	}
}

// roundForm is what the station's page posts for one characteristic.
func roundForm(c plant.Characteristic, id uuid.UUID, readings []int64) url.Values {
	now := strconv.FormatInt(time.Now().UnixMilli(), 10)
	form := url.Values{"round": {id.String()}, "characteristic": {c.ID.String()}, "setup-" + c.ID.String(): {"1"}, "entry": {"full"}, "occasion": {""},
		"taken": {now}, "sent": {now}}
	for _, v := range readings {
		form.Add("reading-"+c.ID.String(), plant.FormatUnits(v, 3))
	}
	return form
}

func bareInsert(b *testing.B, url string) func(int, int) error {
	b.Helper()
	ctx := context.Background()
	cfg, err := pgxpool.ParseConfig(url)
	if err != nil {
		b.Fatal(err)
	}
	cfg.MaxConns = 32
	pool, err := pgxpool.NewWithConfig(ctx, cfg)
	if err != nil {
		b.Fatal(err)
	}
	b.Cleanup(pool.Close)
	// The application role may not make tables; a temporary one would not be durable.
	// The plant's own rows serve: one insert into a table without triggers or checks.
	return func(client, i int) error {
		id := storetest.ID()
		_, err := pool.Exec(ctx, `insert into sessions (token, data, expiry) values ($1, $2, now())`, "bare-"+id.String(), id[:])
		return err
	}
}

// pastSite is a served plant of one station with so much history behind it.
type pastSite struct {
	*hall
	visitor *visitor
	chart   plant.Characteristic
}

func makePast(b *testing.B, subgroups int) pastSite {
	b.Helper()
	url := durable(b)
	h := makeHall(b, url, 1)
	grow(b, url, h.charts[0], subgroups)
	r := serveOn(b, &storetest.Plant{Store: h.store, URL: url}, time.Now)
	return pastSite{h, r.visit(b, "operator1"), h.charts[0]}
}

// BenchmarkHistory measures a save, the chart and the board of a plant with 1,000 and of
// one with 1,000,000 subgroups behind it, by turns. They must cost the same: the ratio
// is that of the medians. A correction of the last round and of one 100,000 back is
// measured in the larger.
func BenchmarkHistory(b *testing.B) {
	small, large := makePast(b, 1_000), makePast(b, 1_000_000)
	for _, tc := range []struct {
		name string
		do   func(p pastSite) int
	}{
		{"record", func(p pastSite) int {
			res, _ := p.visitor.post("/station/"+p.chart.StationID.String()+"/round", roundForm(p.chart, storetest.ID(), readings(1)))
			return res.StatusCode - http.StatusSeeOther + http.StatusOK
		}},
		{"chart", func(p pastSite) int {
			res, _ := p.visitor.get("/desk/characteristic/" + p.chart.ID.String())
			return res.StatusCode
		}},
		{"board", func(p pastSite) int { res, _ := p.visitor.get("/board"); return res.StatusCode }},
	} {
		b.Run(tc.name, func(b *testing.B) {
			took := [2][]time.Duration{}
			round := func(keep bool) {
				for i, p := range []pastSite{small, large} {
					at := time.Now()
					if status := tc.do(p); status != http.StatusOK {
						b.Fatalf("status %d", status)
					}
					if keep {
						took[i] = append(took[i], time.Since(at))
					}
				}
			}
			for range 20 {
				round(false) // connections, statements and caches of both are warm
			}
			for b.Loop() {
				round(true)
			}
			m1k, m1M := median(took[0]), median(took[1])
			b.ReportMetric(float64(m1k.Microseconds()), "1k-us")
			b.ReportMetric(float64(m1M.Microseconds()), "1M-us")
			b.ReportMetric(float64(m1M)/float64(m1k), "ratio")
			b.ReportMetric(0, "ns/op")
		})
	}
	for name, back := range map[string]int{"correct/last": 0, "correct/100k-back": 100_000} {
		b.Run(name, func(b *testing.B) { large.correct(b, back) })
	}
}

// correct corrects one subgroup again and again, each time by the version that stands.
func (p pastSite) correct(b *testing.B, back int) {
	b.Helper()
	ctx := context.Background()
	c := plant.Correction{Characteristic: p.chart.ID, Reason: "typing slip", Person: p.operator.ID}
	err := p.store.Pool().QueryRow(ctx, `select taken_at, id, version from subgroup where characteristic_id = $1
		order by taken_at desc, id desc, version desc offset $2 limit 1`, p.chart.ID, back).Scan(&c.TakenAt, &c.Subgroup, &c.Replaces)
	if err != nil {
		b.Fatal(err)
	}
	var took []time.Duration
	for i := 0; b.Loop(); i++ {
		c.Readings = readings(i)
		at := time.Now()
		if _, err := p.store.Correct(ctx, c); err != nil {
			b.Fatal(err)
		}
		took = append(took, time.Since(at))
		c.Replaces++
	}
	b.ReportMetric(float64(median(took).Microseconds()), "median-us")
	b.ReportMetric(0, "ns/op")
}

func median(d []time.Duration) time.Duration {
	slices.Sort(d)
	return d[len(d)/2]
}

// grow gives a characteristic a long past. Rows are copied in behind the program's back,
// before what it has recorded and before any limits, with the checkpoints that a
// program that recorded them would have left.
func grow(b *testing.B, url string, c plant.Characteristic, n int) {
	b.Helper()
	pool, err := pgxpool.New(context.Background(), url)
	if err != nil {
		b.Fatal(err)
	}
	defer pool.Close()
	for done := 0; done < n; done += 100_000 {
		count := min(100_000, n-done)
		_, err := pool.Exec(context.Background(), `insert into subgroup (characteristic_id, taken_at, id, version, plant_id, round_id, setup_version, decimals,
				readings, keyed_by, reading_sum, reading_range, reading_sd, outside, machine_id, recorded_at)
			select s.characteristic_id, s.taken_at - make_interval(mins => 30 * (i + $3)), gen_random_uuid(), 1, s.plant_id, s.round_id, 1, 3,
				s.readings, s.keyed_by, s.reading_sum, s.reading_range, s.reading_sd, 0, s.machine_id, s.recorded_at
			from (select * from subgroup where characteristic_id = $1 order by taken_at limit 1) s, generate_series(1, $2::int) i`, c.ID, count, done)
		if err != nil {
			b.Fatal(err)
		}
	}
	if _, err := pool.Exec(context.Background(), `insert into checkpoint (characteristic_id, taken_at, subgroup_id, plant_id, memory)
		select characteristic_id, taken_at, id, plant_id, '' from (select s.*, row_number() over (order by taken_at, id) n from subgroup s
			where characteristic_id = $1 and taken_at < (select max(taken_at) - interval '2 hours' from subgroup where characteristic_id = $1)) s
		where n % 256 = 0`, c.ID); err != nil {
		b.Fatal(err)
	}
	_, _ = pool.Exec(context.Background(), "analyze subgroup") // only the owner may; what autovacuum does later
}
