package outbox

import (
	"context"
	"crypto/hmac"
	"crypto/sha256"
	"encoding/base64"
	"errors"
	"fmt"
	"io"
	"net"
	"net/http"
	"net/url"
	"strconv"
	"strings"
	"time"

	"holdfast/internal/plant"
)

const (
	sendLimit = 15 * time.Second // one attempt, from resolving the name to the end of the answer
	readLimit = 4 << 10          // of an answer that nobody reads
)

// webhook sends messages to one address.
type webhook struct {
	address *url.URL
	keys    []Secret // raw keys
	reach   *Reach
	client  *http.Client
	now     func() time.Time
}

func newWebhook(address *url.URL, keys []Secret, reach *Reach, now func() time.Time) *webhook {
	return &webhook{address: address, keys: keys, reach: reach, now: now, client: &http.Client{
		Timeout: sendLimit,
		CheckRedirect: func(*http.Request, []*http.Request) error {
			return http.ErrUseLastResponse
		},
		Transport: &http.Transport{
			Proxy:                  nil, // a proxy would resolve the name anew, unchecked
			DialContext:            func(ctx context.Context, _, address string) (net.Conn, error) { return reach.Dial(ctx, address) },
			TLSHandshakeTimeout:    connectLimit,
			ResponseHeaderTimeout:  sendLimit,
			MaxResponseHeaderBytes: 16 << 10,
			DisableKeepAlives:      true, // messages are rare, and each is to be checked anew
			DisableCompression:     true,
		},
	}}
}

// Send posts a message.
func (w *webhook) Send(ctx context.Context, m plant.Outgoing) error {
	ctx, cancel := context.WithTimeout(ctx, sendLimit)
	defer cancel()
	req, err := http.NewRequestWithContext(ctx, http.MethodPost, w.address.String(), strings.NewReader(m.Body))
	if err != nil {
		return fmt.Errorf("make a request: %w", err)
	}
	stamp := strconv.FormatInt(w.now().Unix(), 10)
	req.Header.Set("Content-Type", "application/json")
	req.Header.Set("User-Agent", "Holdfast")
	req.Header.Set("Webhook-Id", m.ID.String())
	req.Header.Set("Webhook-Timestamp", stamp)
	req.Header.Set("Webhook-Signature", Sign(w.keys, m.ID.String(), stamp, m.Body))
	res, err := w.client.Do(req)
	if err != nil {
		return err
	}
	defer res.Body.Close()
	_, _ = io.Copy(io.Discard, io.LimitReader(res.Body, readLimit))
	switch {
	case res.StatusCode >= 200 && res.StatusCode <= 299:
		return nil
	case res.StatusCode >= 300 && res.StatusCode <= 399:
		return &Refused{Why: fmt.Sprintf("It answered with a redirect (%d), and redirects are not followed. Set its final address.", res.StatusCode), Lasting: true}
	}
	lasting := res.StatusCode >= 400 && res.StatusCode <= 499
	switch res.StatusCode {
	case http.StatusRequestTimeout, http.StatusTooEarly, http.StatusTooManyRequests:
		lasting = false
	}
	return &Refused{Why: fmt.Sprintf("It answered %d %s.", res.StatusCode, http.StatusText(res.StatusCode)), Lasting: lasting, After: retryAfter(res, w.now())}
}

// retryAfter is how long an answer asks to be left alone, at most an hour.
func retryAfter(res *http.Response, now time.Time) time.Duration {
	v := res.Header.Get("Retry-After")
	d := time.Duration(0)
	if n, err := strconv.Atoi(v); err == nil && n > 0 && n <= int(time.Hour/time.Second) {
		d = time.Duration(n) * time.Second
	} else if at, err := http.ParseTime(v); err == nil {
		d = at.Sub(now)
	}
	return min(max(d, 0), time.Hour)
}

// Sign makes the signature header of a message: one signature for each key.
//
// Source: Standard Webhooks specification 1.0.0, symmetric signatures ("v1").
func Sign(keys []Secret, id, timestamp, body string) string {
	out := make([]string, len(keys))
	for i, key := range keys {
		mac := hmac.New(sha256.New, []byte(string(key)))
		mac.Write([]byte(id + "." + timestamp + "." + body))
		out[i] = "v1," + base64.StdEncoding.EncodeToString(mac.Sum(nil))
	}
	return strings.Join(out, " ")
}

// leastKey is the shortest key that the specification allows, in bytes.
const leastKey = 24

// SigningKeys reads the keys of a webhook from its secret: a line each, as "whsec_" and
// Base64 or as plain text.
func SigningKeys(s Secret) ([]Secret, error) {
	var keys []Secret
	for line := range strings.Lines(string(s)) {
		if line = strings.TrimSpace(line); line == "" {
			continue
		}
		key := []byte(line)
		if coded, ok := strings.CutPrefix(line, "whsec_"); ok {
			var err error
			if key, err = base64.StdEncoding.DecodeString(coded); err != nil {
				return nil, errors.New("what follows whsec_ in a signing secret is not Base64") // err would quote it
			}
		}
		if len(key) < leastKey {
			return nil, fmt.Errorf("a signing secret has at least %d bytes", leastKey)
		}
		keys = append(keys, Secret(key))
	}
	if len(keys) == 0 {
		return nil, errors.New("the signing secret is empty")
	}
	return keys, nil
}
