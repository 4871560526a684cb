package main

import (
	"bufio"
	"context"
	"flag"
	"fmt"
	"net/http"
	"net/http/cookiejar"
	"net/url"
	"os"
	"os/exec"
	"strconv"
	"strings"
	"sync"
	"sync/atomic"
	"syscall"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/auth"
	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
	"holdfast/internal/store"
	"holdfast/internal/store/storetest"
)

// A serving process that can be killed is this test binary, told by its environment to
// be the program.
const serveInstead = "HOLDFAST_TEST_SERVE"

func init() {
	url := os.Getenv(serveInstead)
	if url == "" {
		return
	}
	p, err := newProgram(context.Background(), settings{Addr: "127.0.0.1:0", DatabaseURL: url, Cost: cheap, Log: silent})
	if err != nil {
		fmt.Println("error:", err)
		os.Exit(1)
	}
	fmt.Println(p.URL())
	go func() { // an end of the test, however it ends, ends this
		_, _ = bufio.NewReader(os.Stdin).ReadByte()
		os.Exit(0)
	}()
	if err := p.Run(context.Background()); err != nil {
		fmt.Println("error:", err)
	}
	os.Exit(1)
}

// startServing starts a serving process and returns its address and how to kill it.
func startServing(t *testing.T, database string) (address string, kill func()) {
	t.Helper()
	cmd := exec.Command("/proc/self/exe")
	cmd.Env = append(os.Environ(), serveInstead+"="+database)
	cmd.Stderr = os.Stderr
	input, err := cmd.StdinPipe()
	if err != nil {
		t.Fatal(err)
	}
	output, err := cmd.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	var once sync.Once
	kill = func() {
		once.Do(func() {
			_ = cmd.Process.Kill()
			_ = cmd.Wait()
			_ = input.Close()
		})
	}
	t.Cleanup(kill)
	line, err := bufio.NewReader(output).ReadString('\n')
	if err != nil || !strings.HasPrefix(line, "http://") {
		t.Fatalf("the serving process did not start: %v, %q", err, line)
	}
	return strings.TrimSpace(line), kill
}

// hurtPlant is a plant with three stations of one characteristic each.
func hurtPlant(t *testing.T, url string) (*store.Store, []plant.Characteristic) {
	t.Helper()
	ctx := context.Background()
	check := func(err error) {
		t.Helper()
		if err != nil {
			t.Fatal(err)
		}
	}
	hasher, err := auth.NewHasher(cheap, 2)
	check(err)
	hash, err := hasher.Hash(ctx, secret)
	check(err)
	st, err := store.Open(ctx, store.Options{URL: url})
	check(err)
	t.Cleanup(func() { st.Close() })
	check(st.CreatePlant(ctx, plant.Plant{ID: storetest.ID(), Name: "Hall", Location: time.UTC}))
	check(st.AddPerson(ctx, plant.Person{ID: storetest.ID(), Login: "operator1", Name: "Operator 1", Roles: plant.Roles{plant.Operator}, Active: true}, hash, uuid.Nil))
	line := plant.Line{ID: storetest.ID(), Name: "Line"}
	check(st.AddLine(ctx, line, uuid.Nil))
	var charts []plant.Characteristic
	for i := range 3 {
		s := plant.Station{ID: storetest.ID(), LineID: line.ID, Name: fmt.Sprint("Station ", i), Position: i}
		check(st.AddStation(ctx, s, uuid.Nil))
		m := plant.Machine{ID: storetest.ID(), StationID: s.ID, Name: fmt.Sprint("Machine ", i), PartsPerHour: 100}
		check(st.AddMachine(ctx, m, uuid.Nil))
		c := plant.Characteristic{ID: storetest.ID(), StationID: s.ID, MachineID: m.ID, Name: "Diameter"}
		check(st.AddCharacteristic(ctx, c, plant.Setup{Unit: "mm", Decimals: 3, Lower: dec("14.980"), Upper: dec("15.000"),
			Chart: limits.XBarR, Size: 5, Plan: plant.SamplingPlan{EveryMinutes: 30}}, uuid.Nil))
		charts = append(charts, c)
	}
	return st, charts
}

// tablet posts rounds one after another and sends each again, under its number, until
// it is answered: what the queue of a tablet does.
type tablet struct {
	address *atomic.Pointer[string]
	http    *http.Client
	chart   plant.Characteristic
	sends   int
	told    map[uuid.UUID]bool
}

// login signs in; sessions are in the database and outlive the server.
func (b *tablet) login(base string) bool {
	res, err := b.http.PostForm(base+"/sign-in", url.Values{"login": {"operator1"}, "password": {secret}})
	if err != nil {
		return false
	}
	_ = res.Body.Close()
	return res.StatusCode == http.StatusSeeOther
}

func (b *tablet) round(ctx context.Context, i int) error {
	id := storetest.ID()
	c := b.chart
	taken := time.Now().UnixMilli()
	for ; ctx.Err() == nil; time.Sleep(20 * time.Millisecond) {
		base := *b.address.Load()
		form := url.Values{"round": {id.String()}, "characteristic": {c.ID.String()}, "setup-" + c.ID.String(): {"1"}, "entry": {"full"}, "occasion": {""},
			"taken": {strconv.FormatInt(taken, 10)}, "sent": {strconv.FormatInt(time.Now().UnixMilli(), 10)}}
		for k := range 5 {
			form.Add("reading-"+c.ID.String(), plant.FormatUnits(14988+int64((i*7+k*3)%6), 3))
		}
		b.sends++
		res, err := b.http.PostForm(base+"/station/"+c.StationID.String()+"/round", form)
		if err != nil {
			continue
		}
		to := res.Header.Get("Location")
		_ = res.Body.Close()
		switch {
		case res.StatusCode == http.StatusSeeOther && strings.HasSuffix(to, "/round/"+id.String()):
			b.told[id] = true
			return nil
		case res.StatusCode == http.StatusSeeOther: // the cookie was made for another port's jar, or never
			b.login(base)
		case res.StatusCode < 500:
			return fmt.Errorf("round %d was answered %s", i, res.Status)
		}
	}
	return ctx.Err()
}

// How long the kill test is. The bar, 20,000 answered rounds, takes minutes:
//
//	go test -run NothingAnswered ./cmd/holdfast -kill-rounds 6700 -kills 30 -timeout 30m -v
var (
	killRounds = flag.Int("kill-rounds", 100, "rounds of each of three tablets in the kill test")
	killTimes  = flag.Int("kills", 6, "kills of server and PostgreSQL in the kill test")
)

// TestNothingAnsweredIsLostOrDoubled kills the server and the private Postgres by turns
// while three tablets save, with durability on. Everything that was answered is on
// record once, the judgements are those of one fold and the ledger holds.
func TestNothingAnsweredIsLostOrDoubled(t *testing.T) {
	t.Parallel()
	dir := privateFolder(t)
	pg := privateServerIn(t, dir)
	if err := store.Migrate(context.Background(), pg.URL()); err != nil {
		t.Fatal(err)
	}
	app, err := asApp(context.Background(), pg.URL())
	if err != nil {
		t.Fatal(err)
	}
	st, charts := hurtPlant(t, app)
	st.Close() // its connections would outlive nothing here

	each, kills := *killRounds, *killTimes
	var address atomic.Pointer[string]
	base, kill := startServing(t, app)
	first := base // tablets read it while base moves on
	address.Store(&first)
	ctx, cancel := context.WithTimeout(context.Background(), max(3*time.Minute, time.Duration(each)*200*time.Millisecond))
	defer cancel()
	tablets := make([]*tablet, len(charts))
	failed := make([]error, len(charts))
	var done atomic.Int64
	var wg sync.WaitGroup
	for i, c := range charts {
		jar, err := cookiejar.New(nil)
		if err != nil {
			t.Fatal(err)
		}
		b := &tablet{address: &address, chart: c, told: map[uuid.UUID]bool{}, http: &http.Client{Jar: jar, Timeout: 20 * time.Second,
			CheckRedirect: func(*http.Request, []*http.Request) error { return http.ErrUseLastResponse }}}
		tablets[i] = b
		wg.Go(func() {
			for n := range each {
				if failed[i] = b.round(ctx, n); failed[i] != nil {
					return
				}
				done.Add(1)
			}
		})
	}
	for n := range kills {
		for want := int64(len(charts) * each * (n + 1) / (kills + 2)); done.Load() < want && ctx.Err() == nil; {
			time.Sleep(time.Millisecond)
		}
		if n%2 == 1 {
			if err := syscall.Kill(pg.PID(), syscall.SIGKILL); err != nil {
				t.Fatal(err)
			}
			<-pg.Done()
			if err := pg.Stop(); err != nil {
				t.Fatal(err)
			}
			kill()
			pg = privateServerIn(t, dir)
			if app, err = asApp(context.Background(), pg.URL()); err != nil {
				t.Fatal(err)
			}
		} else {
			kill()
		}
		base, kill = startServing(t, app)
		next := base
		address.Store(&next)
	}
	wg.Wait()
	kill()

	sends := 0
	told := map[uuid.UUID]bool{}
	for i, b := range tablets {
		if failed[i] != nil {
			t.Errorf("tablet %d: %v", i, failed[i])
		}
		sends += b.sends
		for id := range b.told {
			told[id] = true
		}
	}
	t.Logf("%d rounds answered in %d sends over %d kills", len(told), sends, kills)
	verifyRecord(t, app, told, len(charts)*each)
}

func verifyRecord(t *testing.T, url string, told map[uuid.UUID]bool, want int) {
	t.Helper()
	ctx := context.Background()
	st, err := store.Open(ctx, store.Options{URL: url})
	if err != nil {
		t.Fatal(err)
	}
	defer st.Close()
	rows, err := st.Pool().Query(ctx, `select r.id, count(s.id) from round r left join subgroup s on s.round_id = r.id group by r.id`)
	if err != nil {
		t.Fatal(err)
	}
	defer rows.Close()
	n := 0
	for rows.Next() {
		var id uuid.UUID
		var subgroups int
		if err := rows.Scan(&id, &subgroups); err != nil {
			t.Fatal(err)
		}
		n++
		if !told[id] || subgroups != 1 {
			t.Errorf("round %s: answered %v, %d subgroups", id, told[id], subgroups)
		}
		delete(told, id)
	}
	if rows.Err() != nil || n != want || len(told) > 0 {
		t.Errorf("%d rounds on record, %d answered ones are missing, %v; want %d and none", n, len(told), rows.Err(), want)
	}
	if _, differences, err := st.CheckJudgements(ctx); err != nil || len(differences) > 0 {
		t.Errorf("judgements: %v, %v", differences, err)
	}
	if n, err := st.VerifyLedger(ctx); err != nil {
		t.Errorf("ledger breaks after %d entries: %v", n, err)
	}
	var aside int
	if err := st.Pool().QueryRow(ctx, `select count(*) from set_aside`).Scan(&aside); err != nil || aside != 0 {
		t.Errorf("%d rounds were set aside, %v; want none", aside, err)
	}
}
