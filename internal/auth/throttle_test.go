package auth

import (
	"fmt"
	"net/netip"
	"sync"
	"sync/atomic"
	"testing"
	"time"
)

type clock struct {
	mu sync.Mutex
	t  time.Time
}

func newClock() *clock { return &clock{t: time.Date(2031, 3, 4, 6, 0, 0, 0, time.UTC)} }

func (c *clock) now() time.Time { c.mu.Lock(); defer c.mu.Unlock(); return c.t }
func (c *clock) add(d time.Duration) {
	c.mu.Lock()
	defer c.mu.Unlock()
	c.t = c.t.Add(d)
}

var tablet, intruder = netip.MustParseAddr("192.0.2.10"), netip.MustParseAddr("192.0.2.66")

func addr(n int) netip.Addr { return netip.AddrFrom4([4]byte{198, 51, byte(n >> 8), byte(n)}) }

func TestPauseForOneLoginFromOneAddressDoubles(t *testing.T) {
	t.Parallel()
	c := newClock()
	th := NewThrottle(c.now)
	for i := range 5 {
		if _, p := th.Try("anna", AddressSource(tablet)); p != 0 {
			t.Fatalf("free try %d has to wait %v", i+1, p)
		}
	}
	for _, want := range []time.Duration{1, 2, 4, 8, 16, 32, 64, 128, 256, 300, 300} {
		want *= time.Second
		if _, p := th.Try(" ANNA ", AddressSource(tablet)); p != want {
			t.Fatalf("pause = %v; want %v", p, want)
		}
		c.add(want - time.Millisecond)
		if _, p := th.Try("anna", AddressSource(tablet)); p != time.Millisecond {
			t.Fatalf("just before the end of %v: pause = %v", want, p)
		}
		c.add(time.Millisecond)
		if _, p := th.Try("anna", AddressSource(tablet)); p != 0 {
			t.Fatalf("after %v: pause = %v", want, p)
		}
	}
}

func TestSuccessForgetsTheFailuresOfThatLoginThere(t *testing.T) {
	t.Parallel()
	c := newClock()
	th := NewThrottle(c.now)
	for range 100 { // somebody who mistypes four times out of five is never held up
		for range 4 {
			if _, p := th.Try("anna", AddressSource(tablet)); p != 0 {
				t.Fatalf("pause %v", p)
			}
		}
		a, p := th.Try("anna", AddressSource(tablet))
		if p != 0 {
			t.Fatalf("pause %v", p)
		}
		a.Succeeded()
		c.add(20 * time.Minute)
	}
}

func TestFailuresAreForgottenAfterAWhile(t *testing.T) {
	t.Parallel()
	c := newClock()
	th := NewThrottle(c.now)
	for range 6 {
		th.Try("anna", AddressSource(tablet))
	}
	c.add(throttleForget)
	for i := range 5 {
		if _, p := th.Try("anna", AddressSource(tablet)); p != 0 {
			t.Errorf("try %d: pause %v", i+1, p)
		}
	}
}

// TestOneAddressCannotLockOutThePlant guesses every login from one address for
// an hour, while people come in from their own.
func TestOneAddressCannotLockOutThePlant(t *testing.T) {
	t.Parallel()
	c := newClock()
	th := NewThrottle(c.now)
	checked := 0
	for minute := range 60 {
		for range 60 {
			for login := range 20 {
				if _, p := th.Try(fmt.Sprint("operator", login), AddressSource(intruder)); p == 0 {
					checked++
				}
			}
			c.add(time.Second)
		}
		login := fmt.Sprint("operator", minute%20)
		a, p := th.Try(login, AddressSource(addr(minute))) // an address it has never used
		if p != 0 {
			t.Fatalf("minute %d: %s has to wait %v at another address", minute, login, p)
		}
		a.Succeeded()
	}
	if checked > 30+10+120 { // the free ones, the first pauses, two a minute
		t.Errorf("the intruder had %d tries in an hour", checked)
	}
}

// TestManyAddressesCannotLockOutUsualTablets guesses one login from a thousand
// addresses.
func TestManyAddressesCannotLockOutUsualTablets(t *testing.T) {
	t.Parallel()
	c := newClock()
	th := NewThrottle(c.now)
	a, _ := th.Try("anna", AddressSource(tablet))
	a.Succeeded()
	checked := 0
	for second := range 1000 {
		if _, p := th.Try("anna", AddressSource(addr(second))); p == 0 {
			checked++
		}
		c.add(time.Second)
		if second%10 == 0 {
			a, p := th.Try("anna", AddressSource(tablet))
			if p != 0 {
				t.Fatalf("second %d: the usual tablet has to wait %v", second, p)
			}
			a.Succeeded()
		}
	}
	if checked > 20+10+1000/30 {
		t.Errorf("%d guesses in 1000 s", checked)
	}
	if _, p := th.Try("anna", AddressSource(netip.MustParseAddr("203.0.113.5"))); p > 30*time.Second {
		t.Errorf("a new tablet has to wait %v; want 30 s at most", p)
	}
	if _, p := th.Try("bert", AddressSource(netip.MustParseAddr("203.0.113.5"))); p != 0 {
		t.Errorf("another login has to wait %v", p)
	}
}

func TestTriesAtOnceDoNotSlipThrough(t *testing.T) {
	t.Parallel()
	th := NewThrottle(newClock().now)
	var through atomic.Int64
	var wg sync.WaitGroup
	for range 200 {
		wg.Go(func() {
			if _, p := th.Try("anna", AddressSource(tablet)); p == 0 {
				through.Add(1)
			}
		})
	}
	wg.Wait()
	if through.Load() != 5 {
		t.Errorf("%d of 200 tries at once were let through; want the 5 free ones", through.Load())
	}
}

func TestVoidedTriesDoNotCount(t *testing.T) {
	t.Parallel()
	th := NewThrottle(newClock().now)
	for i := range 100 {
		a, p := th.Try("anna", AddressSource(tablet))
		if p != 0 {
			t.Fatalf("try %d: pause %v", i, p)
		}
		a.Void()
	}
}

func TestAddressesOfOneNetworkAreOne(t *testing.T) {
	t.Parallel()
	for _, tc := range []struct{ a, b string }{
		{"2001:db8:1:2::1", "2001:db8:1:2:ffff::9"},
		{"::ffff:192.0.2.1", "192.0.2.1"},
		{"fe80::1%eth0", "fe80::2%eth1"},
	} {
		if a, b := network(netip.MustParseAddr(tc.a)), network(netip.MustParseAddr(tc.b)); a != b {
			t.Errorf("%s and %s count as %s and %s", tc.a, tc.b, a, b)
		}
	}
	if network(netip.MustParseAddr("2001:db8:1:2::1")) == network(netip.MustParseAddr("2001:db8:1:3::1")) {
		t.Error("two networks count as one")
	}
	if got := network(netip.Addr{}); got.IsValid() {
		t.Errorf("no address became %s", got)
	}
}

func TestCountsAreBounded(t *testing.T) {
	t.Parallel()
	c := newClock()
	th := NewThrottle(c.now)
	for i := range 3 * throttleEntries {
		a, p := th.Try(fmt.Sprint("login", i), AddressSource(netip.AddrFrom4([4]byte{10, byte(i >> 16), byte(i >> 8), byte(i)})))
		if p != 0 {
			t.Fatalf("try %d: pause %v", i, p)
		}
		if i%2 == 0 {
			a.Succeeded()
		}
	}
	for name, n := range map[string]int{
		"pairs": len(th.pairs.entries.items), "addresses": len(th.addrs.entries.items),
		"logins": len(th.names.entries.items), "known": len(th.known.items),
	} {
		if n > throttleEntries {
			t.Errorf("%d %s are kept; want at most %d", n, name, throttleEntries)
		}
	}
	// What was used last is what is kept.
	if _, ok := th.addrs.entries.get(AddressSource(netip.AddrFrom4([4]byte{10, 0, byte((3*throttleEntries - 1) >> 8), byte((3*throttleEntries - 1) & 255)}))); !ok {
		t.Error("the newest count was forgotten")
	}
}
