package relay_test

import (
	"context"
	"encoding/json"
	"fmt"
	"io"
	"log/slog"
	"net/http"
	"net/http/httptest"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"sync"
	"testing"
	"time"

	"holdfast/internal/relay"
)

// script is a server that answers each message, by its name, with what is written for it,
// and takes it once nothing is left.
type script struct {
	*httptest.Server
	mu    sync.Mutex
	says  map[string][]reply
	taken []string
	lines []map[string]any
	token string
}

type reply struct {
	status int
	body   string
	kept   string
}

const ours = `{"error":{"kind":"k","message":"It cannot be."}}`

func newScript(t *testing.T, says map[string][]reply) *script {
	s := &script{says: says}
	s.Server = httptest.NewServer(http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		var body map[string]any
		raw, _ := io.ReadAll(r.Body)
		_ = json.Unmarshal(raw, &body)
		s.mu.Lock()
		defer s.mu.Unlock()
		if s.token != "" && r.Header.Get("Authorization") != "Bearer "+s.token {
			w.WriteHeader(http.StatusUnauthorized)
			return
		}
		name := fmt.Sprint(body["name"])
		if next := s.says[name]; len(next) > 0 {
			s.says[name] = next[1:]
			if next[0].kept != "" {
				w.Header().Set("Holdfast-Kept", next[0].kept)
			}
			w.WriteHeader(next[0].status)
			_, _ = io.WriteString(w, next[0].body)
			return
		}
		if r.URL.Path == "/api/v1/lines" {
			s.lines = append(s.lines, body)
		} else {
			s.taken = append(s.taken, name)
		}
		_, _ = io.WriteString(w, "{}")
	}))
	t.Cleanup(s.Close)
	return s
}

func (s *script) got() (taken []string, lines []map[string]any) {
	s.mu.Lock()
	defer s.mu.Unlock()
	return slices.Clone(s.taken), slices.Clone(s.lines)
}

func put(t *testing.T, s *relay.Spool, names ...string) {
	t.Helper()
	for _, n := range names {
		if _, err := s.Put("source", "", false, relay.Message{ID: n, Path: "rounds", Body: json.RawMessage(`{"id":"` + n + `","name":"` + n + `"}`)}); err != nil {
			t.Fatal(err)
		}
	}
}

// logged is a log that a test reads.
type logged struct {
	mu sync.Mutex
	b  strings.Builder
}

func (l *logged) Write(b []byte) (int, error) {
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.b.Write(b)
}

func (l *logged) has(text string) bool {
	l.mu.Lock()
	defer l.mu.Unlock()
	return strings.Contains(l.b.String(), text)
}

func (l *logged) text() string {
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.b.String()
}

func (l *logged) log() *slog.Logger { return slog.New(slog.NewTextHandler(l, nil)) }

func send(t *testing.T, s *relay.Spool, to *script, log *slog.Logger, token func() (string, error)) (stop func()) {
	ctx, cancel := context.WithCancel(context.Background())
	var g sync.WaitGroup
	p := relay.Poster{Spool: s, Server: to.URL, Token: token, HTTP: to.Client(), Now: time.Now, Log: log, Pause: 5 * time.Millisecond}
	g.Go(func() { p.Run(ctx) })
	stop = sync.OnceFunc(func() { cancel(); g.Wait() })
	t.Cleanup(stop)
	return stop
}

func refusedLines(t *testing.T, s *relay.Spool) (ids []string) {
	t.Helper()
	body, err := os.ReadFile(s.RefusedFile())
	if err != nil {
		t.Fatal(err)
	}
	for line := range strings.Lines(string(body)) {
		var r struct {
			ID, Path, Says string
			Status         int
			Body           map[string]any
			At             time.Time
		}
		if err := json.Unmarshal([]byte(line), &r); err != nil || r.Says == "" || r.At.IsZero() || r.Body["name"] != r.ID || r.Path != "rounds" {
			t.Errorf("kept for a person: %s, %v", line, err)
		}
		ids = append(ids, fmt.Sprintf("%s %d", r.ID, r.Status))
	}
	return ids
}

// What can never be taken is put aside for a person, the station is told of it unless the
// server has kept it, and what comes after it goes on.
func TestWhatIsRefusedIsPutAsideAndHoldsNothingUp(t *testing.T) {
	t.Parallel()
	to := newScript(t, map[string][]reply{
		"gone": {{404, ours, ""}}, "large": {{413, "<html>too large</html>", ""}}, "wrong": {{422, ours, "station"}}, "other": {{409, ours, "station"}},
		"broken": {{400, ours, ""}}, "gone too": {{410, ours, ""}}, "nowhere": {{422, ours, "record"}},
	})
	s := open(t, filepath.Join(t.TempDir(), "spool"))
	put(t, s, "gone", "large", "wrong", "other", "broken", "gone too", "nowhere", "good")
	var l logged
	stop := send(t, s, to, l.log(), nil)
	until(t, "all was done", func() bool { return s.Len() == 0 })
	stop()
	taken, lines := to.got()
	if !slices.Equal(taken, []string{"good"}) {
		t.Errorf("taken: %v", taken)
	}
	var told []string
	for _, line := range lines {
		if line["why"] != "refused" || line["id"] == nil {
			t.Errorf("the station is told %v", line)
		}
		told = append(told, fmt.Sprint(line["line"]))
	}
	if want := []string{"rounds gone: 404 It cannot be.", "rounds large: 413 413 Request Entity Too Large", "rounds broken: 400 It cannot be.", "rounds gone too: 410 It cannot be."}; !slices.Equal(told, want) {
		t.Errorf("the station is told %q, want %q", told, want)
	}
	if got, want := refusedLines(t, s), []string{"gone 404", "large 413", "wrong 422", "other 409", "broken 400", "gone too 410", "nowhere 422"}; !slices.Equal(got, want) {
		t.Errorf("put aside: %q, want %q", got, want)
	}
	if !l.has("put aside for a person") || !l.has(s.RefusedFile()) {
		t.Error("the log does not say where it was put")
	}
	if err := s.Close(); err != nil {
		t.Fatal(err)
	}
	s = open(t, strings.TrimSuffix(s.RefusedFile(), ".refused"))
	defer s.Close()
	if s.Len() != 0 {
		t.Errorf("after a restart %d messages wait", s.Len())
	}
}

// What may be taken later is kept and sent again: one that the server does not take now
// lets the rest go on; where it takes nothing, everything waits.
func TestWhatMayBeTakenLaterIsSentAgain(t *testing.T) {
	t.Parallel()
	const proxy = "<html>nothing here</html>"
	to := newScript(t, map[string][]reply{
		"forbidden": slices.Repeat([]reply{{403, ours, ""}}, 100_000), "no server of ours": {{404, proxy, ""}, {404, proxy, ""}}, "fault": {{500, ours, ""}},
		"busy": {{429, "", ""}, {429, "", ""}}, "down": {{502, "", ""}, {503, "", ""}, {504, "", ""}}, "moved": {{301, "", ""}}, "late": {{408, "", ""}},
	})
	s := open(t, filepath.Join(t.TempDir(), "spool"))
	defer s.Close()
	put(t, s, "forbidden", "no server of ours", "good", "fault", "busy", "down", "moved", "late", "last")
	var l logged
	send(t, s, to, l.log(), nil)
	until(t, "all but what may not be sent was sent", func() bool { return s.Len() == 1 })
	to.mu.Lock()
	to.says["forbidden"] = nil
	to.mu.Unlock()
	until(t, "all was sent", func() bool { return s.Len() == 0 })
	taken, lines := to.got()
	sorted := slices.Sorted(slices.Values(taken))
	if want := []string{"busy", "down", "fault", "forbidden", "good", "last", "late", "moved", "no server of ours"}; !slices.Equal(sorted, want) || len(lines) > 0 {
		t.Errorf("taken %q, lines %v; want each once", taken, lines)
	}
	for _, status := range []string{"status=403", "status=404", "status=500", "status=429", "status=502"} {
		if !l.has(status) {
			t.Errorf("the log does not tell %s", status)
		}
	}
	if _, err := os.Stat(s.RefusedFile()); !os.IsNotExist(err) {
		t.Errorf("something was put aside: %v", err)
	}
}

// A token that is worth nothing any more keeps everything, and a new one in its file
// counts at once.
func TestANewTokenCountsAtOnce(t *testing.T) {
	t.Parallel()
	to := newScript(t, nil)
	to.token = "new"
	s := open(t, filepath.Join(t.TempDir(), "spool"))
	defer s.Close()
	put(t, s, "one", "two")
	var mu sync.Mutex
	token := "revoked"
	var l logged
	send(t, s, to, l.log(), func() (string, error) {
		mu.Lock()
		defer mu.Unlock()
		return token, nil
	})
	until(t, "the log tells of the token", func() bool { return l.has("enrol it again") })
	if taken, _ := to.got(); len(taken) > 0 || s.Len() != 2 {
		t.Errorf("taken %v, %d wait", taken, s.Len())
	}
	mu.Lock()
	token = "new"
	mu.Unlock()
	until(t, "all was sent", func() bool { return s.Len() == 0 })
	if taken, _ := to.got(); !slices.Equal(taken, []string{"one", "two"}) {
		t.Errorf("taken %v", taken)
	}
}

// What cannot be put aside, since the disk is full, stays where it is and holds up nothing.
func TestWhatCannotBePutAsideStays(t *testing.T) {
	t.Parallel()
	to := newScript(t, map[string][]reply{"wrong": slices.Repeat([]reply{{422, ours, "station"}}, 50)})
	s := open(t, filepath.Join(t.TempDir(), "spool"))
	defer s.Close()
	if err := os.Mkdir(s.RefusedFile(), 0o700); err != nil { // no file can be written there
		t.Fatal(err)
	}
	put(t, s, "wrong", "good")
	var l logged
	send(t, s, to, l.log(), nil)
	until(t, "the rest was sent", func() bool { return s.Len() == 1 })
	until(t, "the log tells", func() bool { return l.has("could not be put aside") })
	if err := os.Remove(s.RefusedFile()); err != nil {
		t.Fatal(err)
	}
	until(t, "it was put aside", func() bool { return s.Len() == 0 })
	if got := refusedLines(t, s); !slices.Equal(got, []string{"wrong 422"}) {
		t.Errorf("put aside: %q", got)
	}
}

// A subgroup does not mix lots, and says where its readings come from.
func TestLotsAndStreams(t *testing.T) {
	t.Parallel()
	path := filepath.Join(t.TempDir(), "spool")
	s := open(t, path)
	lot := "K-1"
	g := gather(s)
	g.Lot, g.Streams = func() string { return lot }, []string{"a", "b", "c"}
	one, two := gather(s), gather(s)
	one.Characteristic, two.Characteristic = "Bore", "Bore"
	one.Streams, two.Streams = []string{"a"}, []string{"b"}
	take(t, g, "1", "2", "3", "4")
	lot = "K-2"
	take(t, g, "5", "6", "7")
	take(t, one, "1")
	if err := s.Close(); err != nil {
		t.Fatal(err)
	}
	s = open(t, path)
	defer s.Close()
	one.Spool, two.Spool = s, s
	take(t, two, "2")
	take(t, one, "3")
	var got []string
	done := map[string]bool{}
	for {
		m, ok := s.Next(func(id string) bool { return done[id] })
		if !ok {
			break
		}
		done[m.ID] = true
		var body struct {
			Lot     string
			Entries []struct {
				Readings, Streams []string
				Short             string
			}
		}
		if err := json.Unmarshal(m.Body, &body); err != nil {
			t.Fatal(err)
		}
		e := body.Entries[0]
		got = append(got, fmt.Sprint(body.Lot, e.Readings, e.Streams, e.Short))
	}
	if want := []string{"K-1[1 2 3] [a b c]", "K-1[4] [a]other", "K-2[5 6 7] [a b c]", "[1 2 3] [a b a]"}; !slices.Equal(got, want) {
		t.Errorf("rounds %q, want %q", got, want)
	}
	for n, ok := range map[int]bool{0: true, 1: true, 2: false, 3: true, 4: false} {
		src := relay.Source{Characteristic: "D", Pattern: relay.Pattern{Unit: "mm"}, Size: 3, Streams: make([]string, n)}
		if err := src.Check(); (err == nil) != ok {
			t.Errorf("%d streams: %v", n, err)
		}
	}
}
