package main

import (
	"fmt"
	"net/http"
	"net/netip"
	"net/url"
	"testing"
	"time"

	"holdfast/internal/plant"
)

// TestGuessingAtTheDoor goes through the real server, where the counts have to be the right
// ones: somebody guesses from one address and from forty, at a tablet, and with a tablet's
// page but no device; meanwhile the others come in at those very places, and the owner of
// what is guessed at where they usually do.
func TestGuessingAtTheDoor(t *testing.T) {
	t.Parallel()
	r := serveWith(t, func(s *settings) { s.Transport.proxy = []netip.Prefix{netip.MustParsePrefix("127.0.0.0/8")} })
	const usual = 900
	for i, p := range []plant.Person{r.Operator, r.Supervisor, r.Engineer} {
		r.badge(t, p.ID, fmt.Sprint(1001+i))
	}
	r.Clock.Advance(time.Minute)
	v := r.visit(t, "")
	behind := &forwarded{next: v.http.Transport}
	v.http.Transport = behind
	address := func(i int) { behind.addr = netip.AddrFrom4([4]byte{10, 0, byte(i / 250), byte(1 + i%250)}) }
	password := func(login, typed string) int {
		res, _ := v.post("/sign-in", url.Values{"login": {login}, "password": {typed}})
		return res.StatusCode
	}
	comesIn := func(what, login string, at int) {
		t.Helper()
		address(at)
		if got := password(login, secret); got != http.StatusSeeOther {
			t.Errorf("%s: %s is answered %d", what, login, got)
		}
	}
	comesIn("before", "supervisor1", usual)
	for _, tc := range []struct {
		name   string
		at     func(i int) int
		atMost int // tries in ten minutes
	}{
		{"one address", func(int) int { return 0 }, 5 + 8 + 2}, // five free, then 1, 2, 4 s and so on
		{"one address that invents others", func(i int) int { behind.invents = true; return 0 }, 5 + 8 + 2},
		{"forty addresses", func(i int) int { return i % 40 }, 60}, // twenty free, then one in thirty seconds
	} {
		r.Clock.Advance(time.Hour) // what was before is forgotten
		checked := 0
		for second := range 600 {
			r.Clock.Advance(time.Second)
			address(tc.at(second))
			switch got := password("supervisor1", "a wrong one"); got {
			case http.StatusUnprocessableEntity:
				checked++
			case http.StatusTooManyRequests:
			default:
				t.Fatalf("a wrong password is answered %d", got)
			}
			if second%60 == 0 {
				comesIn("from "+tc.name, "supervisor1", usual)
				comesIn("from "+tc.name, "operator1", tc.at(second)) // somebody else where the guesser is
			}
		}
		t.Logf("from %s %d passwords were tried in ten minutes", tc.name, checked)
		if checked > tc.atMost {
			t.Errorf("from %s %d passwords were tried in ten minutes, want at most %d", tc.name, checked, tc.atMost)
		}
	}

	// PINs at one tablet, and with no tablet at all.
	r.Clock.Advance(time.Hour)
	tablet, beside := r.tabletVisitor(t, "1"), r.tabletVisitor(t, "2")
	byBadge := func(v *visitor, badge, pin string) int {
		res, _ := v.post("/sign-in/badge", url.Values{"badge": {badge}, "pin": {pin}})
		return res.StatusCode
	}
	checked := 0
	for second := range 600 {
		r.Clock.Advance(time.Second)
		if got := byBadge(v, "1001", pin); got != http.StatusForbidden {
			t.Fatalf("a PIN in a browser that is no device: %d", got)
		}
		if byBadge(tablet, "1001", fmt.Sprintf("%06d", 200_000+second)) == http.StatusUnprocessableEntity {
			checked++
		}
		if second%60 == 0 {
			for badge, at := range map[string]*visitor{"1001": beside, "1002": tablet} {
				if got := byBadge(at, badge, pin); got != http.StatusSeeOther {
					t.Errorf("after %d s badge %s is answered %d", second, badge, got)
				}
			}
		}
	}
	t.Logf("at one tablet %d PINs of one badge were tried in ten minutes", checked)
	if checked > 15 {
		t.Errorf("at one tablet %d PINs of one badge were tried in ten minutes, want at most 15", checked)
	}
	if got := byBadge(tablet, "1001", pin); got != http.StatusTooManyRequests {
		t.Errorf("the right PIN where it is guessed at: %d, want a pause", got)
	}
}

// forwarded is the proxy: it writes down from where a request comes, behind what the
// client itself has written there.
type forwarded struct {
	next    http.RoundTripper
	addr    netip.Addr
	invents bool
	n       int
}

func (f *forwarded) RoundTrip(r *http.Request) (*http.Response, error) {
	r = r.Clone(r.Context())
	f.n++
	if f.invents {
		r.Header.Add("X-Forwarded-For", fmt.Sprintf("10.9.%d.%d", f.n/250%250, 1+f.n%250))
	}
	r.Header.Add("X-Forwarded-For", f.addr.String())
	return f.next.RoundTrip(r)
}
