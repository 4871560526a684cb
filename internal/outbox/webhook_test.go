package outbox

import (
	"context"
	"crypto/hmac"
	"crypto/sha256"
	"encoding/base64"
	"fmt"
	"io"
	"net"
	"net/http"
	"net/http/httptest"
	"strconv"
	"strings"
	"sync"
	"testing"
	"time"
)

// The one published example of a signature that is known to us, quoted from memory and
// confirmed by computing it a second way: Standard Webhooks, reference libraries' tests.
func TestSignatureOfThePublishedExample(t *testing.T) {
	t.Parallel()
	keys, err := SigningKeys("whsec_MfKQ9r8GKYqrTwjUPD8ILPZIo2LaLaSw")
	if err != nil {
		t.Fatal(err)
	}
	got := Sign(keys, "msg_p5jXN8AQM9LWM0D4loKWxJek", "1614265330", `{"test": 2432232314}`)
	if want := "v1,g0hM9SsE+OTPJTGt/tmIKtSyZlE3uFJELVlNIOLJ1OE="; got != want {
		t.Errorf("signature %s, want %s", got, want)
	}
}

const signing = "a signing secret of more than enough characters"

// receiver is a webhook's other end. It keeps what it took, verified as the standard asks.
type receiver struct {
	*httptest.Server
	mu     sync.Mutex
	answer func(w http.ResponseWriter, r *http.Request, n int)
	asked  int
	ids    []string
	bodies []string
	bad    []string
}

func newReceiver(t testing.TB, answer func(w http.ResponseWriter, r *http.Request, n int)) *receiver {
	t.Helper()
	r := &receiver{answer: answer}
	r.Server = httptest.NewServer(http.HandlerFunc(r.serve))
	t.Cleanup(r.Close)
	return r
}

func (r *receiver) serve(w http.ResponseWriter, req *http.Request) {
	body, _ := io.ReadAll(req.Body)
	r.mu.Lock()
	r.asked++
	n := r.asked
	id, stamp := req.Header.Get("webhook-id"), req.Header.Get("webhook-timestamp")
	r.ids, r.bodies = append(r.ids, id), append(r.bodies, string(body))
	mac := hmac.New(sha256.New, []byte(signing))
	fmt.Fprintf(mac, "%s.%s.%s", id, stamp, body)
	if want := "v1," + base64.StdEncoding.EncodeToString(mac.Sum(nil)); req.Header.Get("webhook-signature") != want {
		r.bad = append(r.bad, "signature "+req.Header.Get("webhook-signature"))
	}
	if _, err := strconv.ParseInt(stamp, 10, 64); err != nil || req.Method != http.MethodPost || req.Header.Get("Content-Type") != "application/json" {
		r.bad = append(r.bad, req.Method+" "+stamp)
	}
	r.mu.Unlock()
	r.answer(w, req, n)
}

// times is how often it was asked.
func (r *receiver) times() int {
	r.mu.Lock()
	defer r.mu.Unlock()
	return r.asked
}

// webhookTo reads a configuration with the receiver as its only target.
func webhookTo(t testing.TB, url string, now func() time.Time) Sender {
	t.Helper()
	host := strings.TrimPrefix(url, "http://")
	host, _, _ = strings.Cut(host, "/")
	c, err := Parse(fmt.Sprintf("[allow]\nhosts = [%q]\nnetworks = [\"127.0.0.0/8\"]\n[[target]]\nname = \"tickets\"\nwebhook = %q\nsecret = \"tickets-signing\"\n", host, url+"/hook"),
		Options{Secrets: secretsOf(map[string]string{"tickets-signing": signing}), Now: now})
	if err != nil {
		t.Fatal(err)
	}
	return c.Sender("tickets")
}

func TestWebhookAnswersAreUnderstood(t *testing.T) {
	t.Parallel()
	elsewhere := 0
	trap := httptest.NewServer(http.HandlerFunc(func(http.ResponseWriter, *http.Request) { elsewhere++ }))
	t.Cleanup(trap.Close)
	for _, tc := range []struct {
		name    string
		answer  func(w http.ResponseWriter, r *http.Request)
		why     string // "": delivered
		lasting bool
	}{
		{"200", func(w http.ResponseWriter, _ *http.Request) {}, "", false},
		{"204", func(w http.ResponseWriter, _ *http.Request) { w.WriteHeader(http.StatusNoContent) }, "", false},
		{"500", func(w http.ResponseWriter, _ *http.Request) { http.Error(w, "database password is hunter2", 500) }, "It answered 500 Internal Server Error.", false},
		{"429", func(w http.ResponseWriter, _ *http.Request) { w.WriteHeader(http.StatusTooManyRequests) }, "It answered 429 Too Many Requests.", false},
		{"404", func(w http.ResponseWriter, _ *http.Request) { w.WriteHeader(http.StatusNotFound) }, "It answered 404 Not Found.", true},
		{"redirect", func(w http.ResponseWriter, r *http.Request) {
			http.Redirect(w, r, trap.URL, http.StatusTemporaryRedirect)
		},
			"It answered with a redirect (307), and redirects are not followed. Set its final address.", true},
		{"redirect to a file", func(w http.ResponseWriter, _ *http.Request) {
			w.Header().Set("Location", "file:///etc/passwd")
			w.WriteHeader(http.StatusFound)
		}, "It answered with a redirect (302), and redirects are not followed. Set its final address.", true},
		{"cut off", func(w http.ResponseWriter, _ *http.Request) {
			c, _, _ := w.(http.Hijacker).Hijack()
			_ = c.Close()
		}, "It broke off the connection.", false},
		{"garbage", func(w http.ResponseWriter, _ *http.Request) {
			c, _, _ := w.(http.Hijacker).Hijack()
			_, _ = c.Write([]byte("\x16\x03\x01 what is this\r\n\r\n"))
			_ = c.Close()
		}, "The connection failed, or what came back made no sense.", false},
		{"a header without end", func(w http.ResponseWriter, _ *http.Request) {
			w.Header().Set("X", strings.Repeat("x", 64<<10))
		}, "The connection failed, or what came back made no sense.", false},
	} {
		r := newReceiver(t, func(w http.ResponseWriter, req *http.Request, _ int) { tc.answer(w, req) })
		err := webhookTo(t, r.URL, time.Now).Send(context.Background(), message("tickets"))
		if tc.why == "" {
			if err != nil {
				t.Errorf("%s: %v, want it delivered", tc.name, err)
			}
		} else if err == nil || explain(err) != tc.why {
			t.Errorf("%s: %v, want %q", tc.name, err, tc.why)
		}
		if refused, ok := err.(*Refused); ok && refused.Lasting != tc.lasting {
			t.Errorf("%s: lasting = %v", tc.name, refused.Lasting)
		}
		for _, bad := range r.bad {
			t.Errorf("%s: %s", tc.name, bad)
		}
	}
	if elsewhere > 0 {
		t.Error("a redirect was followed")
	}
}

// TestAnAnswerWithoutEndIsCutOff: only its beginning is read.
func TestAnAnswerWithoutEndIsCutOff(t *testing.T) {
	t.Parallel()
	done := make(chan struct{})
	r := newReceiver(t, func(w http.ResponseWriter, _ *http.Request, _ int) {
		defer close(done)
		for {
			if _, err := w.Write(make([]byte, 32<<10)); err != nil {
				return
			}
		}
	})
	began := time.Now()
	if err := webhookTo(t, r.URL, time.Now).Send(context.Background(), message("tickets")); err != nil {
		t.Errorf("%v, want it delivered: the answer was 200", err)
	}
	<-done
	if took := time.Since(began); took > 5*time.Second {
		t.Errorf("it took %s", took)
	}
}

func TestAReceiverThatHangsIsLeft(t *testing.T) {
	t.Parallel()
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { _ = l.Close() })
	ctx, cancel := context.WithTimeout(context.Background(), 200*time.Millisecond)
	defer cancel()
	err = webhookTo(t, "http://"+l.Addr().String(), time.Now).Send(ctx, message("tickets")) // accepted by the system, never answered
	if err == nil || explain(err) != "It did not answer in time." {
		t.Errorf("%v", err)
	}
	_ = l.Close()
	err = webhookTo(t, "http://"+l.Addr().String(), time.Now).Send(context.Background(), message("tickets"))
	if err == nil || explain(err) != "It refused the connection." {
		t.Errorf("%v", err)
	}
}

// TestNoProxyOfTheEnvironment: a proxy would resolve the name once more, unchecked.
func TestNoProxyOfTheEnvironment(t *testing.T) {
	hit := false
	proxy := httptest.NewServer(http.HandlerFunc(func(http.ResponseWriter, *http.Request) { hit = true }))
	defer proxy.Close()
	t.Setenv("HTTP_PROXY", proxy.URL)
	t.Setenv("http_proxy", proxy.URL)
	c, err := Parse("[allow]\nhosts = [\"inside.example\"]\n[[target]]\nname = \"tickets\"\nwebhook = \"http://inside.example/\"\nsecret = \"s\"\n",
		Options{Secrets: secretsOf(map[string]string{"s": signing}), Reach: Reach{Resolver: names{"inside.example": {"127.0.0.1"}}}})
	if err != nil {
		t.Fatal(err)
	}
	err = c.Sender("tickets").Send(context.Background(), message("tickets"))
	if err == nil || !strings.Contains(explain(err), "not a public address") || hit {
		t.Errorf("%v, through the proxy: %v", err, hit)
	}
}

func TestRetryAfterIsBelieved(t *testing.T) {
	t.Parallel()
	now := newClock().now()
	for text, want := range map[string]time.Duration{
		"": 0, "120": 2 * time.Minute, "-5": 0, "999999": 0, "soon": 0,
		now.Add(10 * time.Minute).Format(http.TimeFormat): 10 * time.Minute, now.Add(100 * time.Hour).Format(http.TimeFormat): time.Hour,
	} {
		res := &http.Response{Header: http.Header{"Retry-After": {text}}}
		if got := retryAfter(res, now); got != want {
			t.Errorf("%q: %s, want %s", text, got, want)
		}
	}
}
