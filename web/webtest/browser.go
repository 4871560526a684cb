package webtest

import (
	"bytes"
	"net/http"
	"net/http/cookiejar"
	"net/url"
	"strings"
	"testing"
)

// Browser keeps cookies, runs no scripts and follows no redirect.
type Browser struct {
	T    testing.TB
	HTTP *http.Client
	Base string // address of the server
}

// Answer is what a server answered.
type Answer struct {
	*http.Response
	Text string
}

// Visit is a browser in which somebody has signed in; nobody for "".
func Visit(t testing.TB, base, login string) *Browser {
	t.Helper()
	jar, err := cookiejar.New(nil)
	if err != nil {
		t.Fatal(err)
	}
	b := &Browser{T: t, Base: base, HTTP: &http.Client{Jar: jar, CheckRedirect: func(*http.Request, []*http.Request) error { return http.ErrUseLastResponse }}}
	if login != "" {
		if a := b.Post("/sign-in", url.Values{"login": {login}, "password": {Password}}); a.StatusCode != http.StatusSeeOther {
			t.Fatalf("sign in as %s: status %d", login, a.StatusCode)
		}
	}
	return b
}

// Get asks for a page. Headers are given as names and values.
func (b *Browser) Get(path string, headers ...string) Answer {
	b.T.Helper()
	return b.Do(b.Request(http.MethodGet, path, nil, headers...))
}

// Post sends a form.
func (b *Browser) Post(path string, form url.Values, headers ...string) Answer {
	b.T.Helper()
	return b.Do(b.Request(http.MethodPost, path, form, headers...))
}

// Request makes a request for Do.
func (b *Browser) Request(method, path string, form url.Values, headers ...string) *http.Request {
	b.T.Helper()
	r, err := http.NewRequestWithContext(b.T.Context(), method, b.Base+path, strings.NewReader(form.Encode()))
	if err != nil {
		b.T.Fatal(err)
	}
	if method == http.MethodPost {
		r.Header.Set("Content-Type", "application/x-www-form-urlencoded")
	}
	for i := 0; i+1 < len(headers); i += 2 {
		r.Header.Set(headers[i], headers[i+1])
	}
	return r
}

// Do sends a request and reads the answer, as far as it comes: one that is cut off half-way
// is for the test to judge.
func (b *Browser) Do(r *http.Request) Answer {
	b.T.Helper()
	res, err := b.HTTP.Do(r)
	if err != nil {
		b.T.Fatal(err)
	}
	defer res.Body.Close()
	var text bytes.Buffer
	_, _ = text.ReadFrom(res.Body)
	return Answer{res, text.String()}
}
