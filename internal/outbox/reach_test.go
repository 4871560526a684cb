package outbox

import (
	"context"
	"errors"
	"net"
	"net/netip"
	"slices"
	"testing"
)

// TestNothingElseIsReached tries the ways in which a name or an address could lead to
// where messages must not go.
func TestNothingElseIsReached(t *testing.T) {
	t.Parallel()
	resolver := names{
		"good.example":      {"93.184.215.14"},
		"inside.example":    {"10.20.1.7"},
		"elsewhere.example": {"10.99.1.7"},
		"loop.example":      {"127.0.0.1"},
		"loop6.example":     {"::1"},
		"mapped.example":    {"::ffff:127.0.0.1"},
		"nat64.example":     {"64:ff9b::7f00:1"},
		"6to4.example":      {"2002:7f00:1::"},
		"compat.example":    {"::7f00:1"},
		"meta.example":      {"169.254.169.254"},
		"link.example":      {"fe80::1"},
		"unique.example":    {"fd00::1"},
		"zero.example":      {"0.0.0.0"},
		"shared.example":    {"100.64.0.1"},
		"cast.example":      {"224.0.0.1"},
		"broad.example":     {"255.255.255.255"},
		"half.example":      {"93.184.215.14", "127.0.0.1"},
		"good6.example":     {"2606:2800:21f:cb07:6820:80da:af6b:8b2c"},
	}
	var hosts []string
	for h := range resolver {
		hosts = append(hosts, h)
	}
	hosts = append(hosts, "127.0.0.1", "10.20.1.8", "[::ffff:10.20.1.9]", "::ffff:10.20.1.9", "port.example:8443")
	var reached []string
	r := Reach{Hosts: hosts, Networks: []netip.Prefix{netip.MustParsePrefix("10.20.0.0/16")}, Resolver: resolver,
		Connect: func(_ context.Context, a netip.AddrPort) (net.Conn, error) {
			reached = append(reached, a.String())
			c, _ := net.Pipe()
			return c, nil
		}}
	for _, tc := range []struct{ address, want string }{
		{"good.example:443", "93.184.215.14:443"},
		{"GOOD.example.:443", "93.184.215.14:443"},
		{"good6.example:443", "[2606:2800:21f:cb07:6820:80da:af6b:8b2c]:443"},
		{"inside.example:443", "10.20.1.7:443"},
		{"10.20.1.8:443", "10.20.1.8:443"},
		{"[::ffff:10.20.1.9]:443", "10.20.1.9:443"},
		{"elsewhere.example:443", ""},
		{"loop.example:443", ""}, {"loop6.example:443", ""}, {"mapped.example:443", ""}, {"nat64.example:443", ""},
		{"6to4.example:443", ""}, {"compat.example:443", ""}, {"meta.example:80", ""}, {"link.example:443", ""},
		{"unique.example:443", ""}, {"zero.example:443", ""}, {"shared.example:443", ""}, {"cast.example:443", ""}, {"broad.example:443", ""},
		{"half.example:443", ""},
		{"127.0.0.1:443", ""},
		{"other.example:443", ""}, {"sub.good.example:443", ""}, {"10.20.1.99:443", ""}, {"port.example:443", ""},
		{"good.example", ""}, {"good.example:none", ""},
	} {
		reached = nil
		c, err := r.Dial(context.Background(), tc.address)
		if c != nil {
			_ = c.Close()
		}
		if tc.want == "" {
			if _, refused := errors.AsType[*NotAllowed](err); !refused || len(reached) > 0 {
				t.Errorf("%s: reached %q, %v; want it refused", tc.address, reached, err)
			}
			continue
		}
		if err != nil || !slices.Equal(reached, []string{tc.want}) {
			t.Errorf("%s: reached %q, %v; want %s", tc.address, reached, err, tc.want)
		}
	}
}

// rebinding answers with a good address first and with a bad one after.
type rebinding struct{ asked int }

func (r *rebinding) LookupNetIP(context.Context, string, string) ([]netip.Addr, error) {
	r.asked++
	if r.asked == 1 {
		return []netip.Addr{netip.MustParseAddr("93.184.215.14")}, nil
	}
	return []netip.Addr{netip.MustParseAddr("127.0.0.1")}, nil
}

func TestANameThatChangesMeanwhileIsAskedOnce(t *testing.T) {
	t.Parallel()
	resolver := &rebinding{}
	var reached []netip.AddrPort
	r := Reach{Hosts: []string{"rebind.example"}, Resolver: resolver, Connect: func(_ context.Context, a netip.AddrPort) (net.Conn, error) {
		reached = append(reached, a)
		c, _ := net.Pipe()
		return c, nil
	}}
	if _, err := r.Dial(context.Background(), "rebind.example:443"); err != nil {
		t.Fatal(err)
	}
	if resolver.asked != 1 || len(reached) != 1 || reached[0].Addr() != netip.MustParseAddr("93.184.215.14") {
		t.Errorf("asked %d times, reached %v", resolver.asked, reached)
	}
	if _, err := r.Dial(context.Background(), "rebind.example:443"); err == nil {
		t.Error("the second answer, loopback, was followed")
	}
}

// FuzzReach demands that nothing that is not public is ever reached.
func FuzzReach(f *testing.F) {
	for _, a := range []string{"127.0.0.1", "::ffff:10.0.0.1", "64:ff9b::a00:1", "2002:a00:1::", "8.8.8.8", "fe80::1%eth0", "0x7f.1", "2130706433"} {
		f.Add(a)
	}
	f.Fuzz(func(t *testing.T, host string) {
		r := Reach{Hosts: []string{cleanHost(host)}, Resolver: names{}, Connect: func(_ context.Context, a netip.AddrPort) (net.Conn, error) {
			if ip := a.Addr(); ip.IsLoopback() || ip.IsPrivate() || ip.IsLinkLocalUnicast() || ip.IsUnspecified() || ip.Is4In6() {
				t.Fatalf("%q reaches %s", host, a)
			}
			return nil, errors.New("far enough")
		}}
		_, _ = r.Dial(context.Background(), net.JoinHostPort(host, "443"))
	})
}
