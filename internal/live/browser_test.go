package live

import (
	"context"
	"fmt"
	"net/http"
	"net/http/httptest"
	"os"
	"sync/atomic"
	"testing"
	"time"

	"github.com/chromedp/chromedp"
	"github.com/gorilla/websocket"
)

// These tests play static/js/live.js in Chromium, under the content policy of
// the product, against the real hub or a scripted server.

const browserPage = `<!doctype html><html lang="en"><head><meta charset="utf-8"><title>Live</title>
<script type="module" src="/static/js/live.js"></script></head>
<body data-live="/live?topic=board" data-sign-in="/sign-in">
<p id="state" data-live-state role="status" data-live-on="Live" data-live-off="Not live since {time}" data-live-wait="Connecting" data-live-denied="Not live here" data-live-zone="UTC"></p>
%s
<p id="lane">as loaded</p></body></html>`

const browserForm = `<section id="form"><p>%s</p><input id="typed" value="%s"><input id="untouched" value="%s">
<select id="choice"><option>one</option><option>two</option></select>
<details id="more"><summary>More</summary>text</details><p id="kept" data-live-keep>%s</p></section>`

// tab is a page in a browser that shows what the handler serves at /.
type tab struct {
	t   *testing.T
	ctx context.Context
}

// TestPage starts one browser for all of these tests, a tab for each.
func TestPage(t *testing.T) {
	t.Parallel()
	opts := append(chromedp.DefaultExecAllocatorOptions[:], chromedp.UserDataDir(t.TempDir()))
	if os.Getuid() == 0 {
		opts = append(opts, chromedp.NoSandbox)
	}
	alloc, stop := chromedp.NewExecAllocator(context.Background(), opts...)
	t.Cleanup(stop)
	browser, cancel := chromedp.NewContext(alloc)
	t.Cleanup(cancel)
	if err := chromedp.Do(browser); err != nil { // no time limit here: it would be the browser's
		t.Fatalf("start Chromium (on Debian: apt-get install chromium): %v", err)
	}
	for name, test := range map[string]func(*testing.T, context.Context){
		"follows the hub and keeps what a person is at work with": testPageFollowsTheHub,
		"notices silence and ignores older versions":              testPageNoticesSilence,
		"does not try again where it is not allowed":              testPageNotAllowed,
	} {
		t.Run(name, func(t *testing.T) { t.Parallel(); test(t, browser) })
	}
}

func openTab(t *testing.T, browser context.Context, url string) tab {
	t.Helper()
	ctx, cancel := chromedp.NewContext(browser)
	t.Cleanup(cancel)
	if err := chromedp.Do(ctx); err != nil {
		t.Fatalf("open a tab: %v", err)
	}
	b := tab{t, ctx}
	b.do(chromedp.Navigate(url))
	return b
}

func (b tab) do(steps ...chromedp.Action[chromedp.Void]) {
	b.t.Helper()
	ctx, cancel := context.WithTimeout(b.ctx, patience)
	defer cancel()
	if err := chromedp.Do(ctx, steps...); err != nil {
		b.t.Fatal(err)
	}
}

// until waits in the page for a condition. (chromedp's own polling makes a
// function from text, which the content policy refuses.)
func (b tab) until(condition string) {
	b.t.Helper()
	ctx, cancel := context.WithTimeout(b.ctx, patience)
	defer cancel()
	wait := fmt.Sprintf(`new Promise((ok) => { const t = setInterval(() => { if (%s) { clearInterval(t); ok(true); } }, 5); })`, condition)
	if _, err := chromedp.Run(ctx, chromedp.Evaluate[bool](wait, chromedp.EvalAwaitPromise)); err != nil {
		html, _ := chromedp.Run(b.ctx, chromedp.Evaluate[string](`location.href + "\n" + document.body.outerHTML`))
		b.t.Fatalf("the page never came to %s: %v\n%s", condition, err, html)
	}
}

func (b tab) value(expression string) string {
	b.t.Helper()
	ctx, cancel := context.WithTimeout(b.ctx, patience)
	defer cancel()
	v, err := chromedp.Run(ctx, chromedp.Evaluate[string]("String("+expression+")"))
	if err != nil {
		b.t.Fatalf("%s: %v", expression, err)
	}
	return v
}

// browserSite serves the page, the scripts and the socket given.
func browserSite(t *testing.T, extra string, socket http.HandlerFunc) *httptest.Server {
	t.Helper()
	mux := http.NewServeMux()
	mux.Handle("/static/", http.StripPrefix("/static/", http.FileServer(http.Dir("../../static"))))
	mux.HandleFunc("/{$}", func(w http.ResponseWriter, _ *http.Request) {
		w.Header().Set("Content-Security-Policy", "default-src 'none'; script-src 'self'; style-src 'self'; connect-src 'self'")
		fmt.Fprintf(w, browserPage, extra)
	})
	mux.HandleFunc("/sign-in", func(w http.ResponseWriter, _ *http.Request) { fmt.Fprint(w, "<p id=signin>Sign in</p>") })
	mux.HandleFunc("/live", socket)
	srv := httptest.NewServer(mux)
	t.Cleanup(srv.Close)
	return srv
}

func closeHub(t *testing.T, h *Hub) {
	t.Helper()
	ctx, cancel := context.WithTimeout(context.Background(), patience)
	defer cancel()
	if err := h.Close(ctx); err != nil {
		t.Error(err)
	}
}

const isLive = `document.getElementById("state").textContent === "Live"`

func testPageFollowsTheHub(t *testing.T, browser context.Context) {
	var round atomic.Int64
	render := func(context.Context, []string) (map[string][]Fragment, error) {
		n := fmt.Sprint(round.Load())
		return map[string][]Fragment{"board": {
			{ID: "form", HTML: fmt.Appendf(nil, browserForm, "round "+n, "v"+n, "v"+n, "kept "+n)},
			{ID: "lane", HTML: []byte(`<p id="lane">round ` + n + `</p>`)},
			{ID: "not-on-this-page", HTML: []byte(`<p id="not-on-this-page"></p>`)},
		}}, nil
	}
	var hub atomic.Pointer[Hub]
	hub.Store(New(render, calm()))
	srv := browserSite(t, fmt.Sprintf(browserForm, "as loaded", "v0", "v0", "as loaded"), func(w http.ResponseWriter, r *http.Request) {
		hub.Load().Serve(w, r, Watch{Topics: r.URL.Query()["topic"], Session: "s"})
	})
	t.Cleanup(func() { closeHub(t, hub.Load()) })
	b := openTab(t, browser, srv.URL)
	b.until(isLive)
	b.until(`document.getElementById("lane").textContent === "round 0"`)

	b.do(chromedp.SendKeys(chromedp.CSS("#typed"), "12,5"))
	chosen := b.value(`(() => { document.getElementById("choice").selectedIndex = 1; document.getElementById("more").open = true; return document.activeElement.id; })()`)
	if chosen != "typed" {
		t.Fatalf("focus is at %q", chosen)
	}
	round.Store(1)
	hub.Load().Dirty("board")
	b.until(`document.querySelector("#form > p").textContent === "round 1"`)
	for expression, want := range map[string]string{
		`document.getElementById("typed").value`:          "12,5v0",
		`document.getElementById("untouched").value`:      "v1",
		`document.getElementById("choice").selectedIndex`: "1",
		`document.getElementById("more").open`:            "true",
		`document.getElementById("kept").textContent`:     "as loaded",
		`document.activeElement.id`:                       "typed",
	} {
		if got := b.value(expression); got != want {
			t.Errorf("%s = %q; want %q", expression, got, want)
		}
	}

	// Another server takes over: its versions begin again from one.
	old := hub.Load()
	round.Store(2)
	hub.Store(New(render, calm()))
	closeHub(t, old)
	b.until(`document.getElementById("lane").textContent === "round 2"`)
	b.until(isLive)

	hub.Load().Drop("s", SessionEnded)
	b.do(chromedp.WaitVisible(chromedp.CSS("#signin")))
}

func testPageNoticesSilence(t *testing.T, browser context.Context) {
	lane := func(v int, text string) []byte {
		return fmt.Appendf(nil, `{"type":"state","topic":"board","fragments":[{"id":"lane","v":%d,"html":"<p id=\"lane\">%s</p>"}]}`, v, text)
	}
	var connections atomic.Int64
	release := make(chan struct{})
	up := websocket.Upgrader{}
	srv := browserSite(t, "", func(w http.ResponseWriter, r *http.Request) {
		conn, err := up.Upgrade(w, r, nil)
		if err != nil {
			return
		}
		defer conn.Close()
		say := func(messages ...[]byte) {
			for _, m := range messages {
				_ = conn.WriteMessage(websocket.TextMessage, m)
			}
		}
		switch connections.Add(1) {
		case 1:
			say(encodeHello("one", 200*time.Millisecond), lane(5, "five"), lane(4, "four"), lane(5, "five again"))
			<-release // silent, and no close frame: a network that dropped
		case 2:
			say(encodeHello("one", time.Minute), lane(3, "three"), lane(6, "six"), encodeStale("board"))
			<-release
			say(lane(6, "six again"))
			_, _, _ = conn.ReadMessage()
		}
	})
	t.Cleanup(func() {
		select {
		case <-release:
		default:
			close(release)
		}
	})
	b := openTab(t, browser, srv.URL)
	b.until(`document.getElementById("lane").textContent === "five"`)
	b.until(`document.getElementById("lane").textContent === "six"`) // by itself, over a second connection
	b.until(`document.getElementById("state").textContent.startsWith("Not live since ")`)
	text := b.value(`document.getElementById("state").textContent`)
	now := time.Now().UTC()
	// The last sign of life was seconds ago, maybe across a full minute.
	if text != now.Format("Not live since 15:04") && text != now.Add(-time.Minute).Format("Not live since 15:04") {
		t.Errorf("the page says %q at %s", text, now.Format("15:04"))
	}
	close(release)
	b.until(isLive)
	if got := b.value(`document.getElementById("lane").textContent`); got != "six" {
		t.Errorf("lane shows %q; want the newest version it had", got)
	}
}

func testPageNotAllowed(t *testing.T, browser context.Context) {
	hub := New(newPlant().render, calm())
	t.Cleanup(func() { closeHub(t, hub) })
	var tries atomic.Int64
	srv := browserSite(t, "", func(w http.ResponseWriter, r *http.Request) {
		tries.Add(1)
		hub.Refuse(w, r, NotAllowed)
	})
	b := openTab(t, browser, srv.URL)
	b.until(`document.getElementById("state").textContent === "Not live here"`)
	// The first pause of a retry is a quarter of a second at most; after it the
	// page has had its chance.
	b.until(`performance.now() > 1500`)
	if n := tries.Load(); n != 1 {
		t.Errorf("%d tries; want 1", n)
	}
}
