package outbox

import (
	"context"
	"errors"
	"fmt"
	"net"
	"net/netip"
	"slices"
	"strings"
	"time"
)

// Resolver turns a name into addresses; *net.Resolver is one.
type Resolver interface {
	LookupNetIP(ctx context.Context, network, host string) ([]netip.Addr, error)
}

// Reach is what may be connected to, and does it.
type Reach struct {
	Hosts    []string       // names and literal addresses, each as HOST or HOST:PORT; small letters
	Networks []netip.Prefix // of addresses that are not public and may be reached all the same
	Resolver Resolver       // net.DefaultResolver when nil

	// Connect connects to a checked address; a net.Dialer when nil.
	Connect func(ctx context.Context, address netip.AddrPort) (net.Conn, error)
}

// connectLimit is how long connecting to one address may take.
const connectLimit = 5 * time.Second

// NotAllowed says what was refused and why, in words for whoever set up the target.
type NotAllowed struct{ Why string }

func (e *NotAllowed) Error() string { return e.Why }

// AllowsHost reports whether a host is named, under any port or under this one.
func (r *Reach) AllowsHost(host, port string) bool {
	host = cleanHost(host)
	return slices.Contains(r.Hosts, host) || slices.Contains(r.Hosts, net.JoinHostPort(host, port))
}

// cleanHost is the one spelling of a host.
func cleanHost(h string) string { return strings.TrimSuffix(strings.ToLower(h), ".") }

// Dial connects to HOST:PORT if that is allowed. The name is resolved once; every address
// that it has must be allowed, since a name with one forbidden address is not to be
// trusted with the others; and the connection goes to a checked address.
func (r *Reach) Dial(ctx context.Context, address string) (net.Conn, error) {
	host, port, err := net.SplitHostPort(address)
	if err != nil {
		return nil, &NotAllowed{fmt.Sprintf("%q is no host and port.", address)}
	}
	if !r.AllowsHost(host, port) {
		return nil, &NotAllowed{fmt.Sprintf("%s is not among the hosts that the configuration allows.", host)}
	}
	number, err := net.LookupPort("tcp", port)
	if err != nil {
		return nil, &NotAllowed{fmt.Sprintf("%q is no port.", port)}
	}
	addresses, err := r.resolve(ctx, cleanHost(host))
	if err != nil {
		return nil, err
	}
	for _, a := range addresses {
		if !r.allows(a) {
			return nil, &NotAllowed{fmt.Sprintf("%s leads to %s, which is not a public address and is not in a network that the configuration allows.", host, a)}
		}
	}
	connect := r.Connect
	if connect == nil {
		connect = func(ctx context.Context, a netip.AddrPort) (net.Conn, error) {
			return (&net.Dialer{Timeout: connectLimit}).DialContext(ctx, "tcp", a.String())
		}
	}
	var failed []error
	for _, a := range addresses {
		conn, err := connect(ctx, netip.AddrPortFrom(a, uint16(number)))
		if err == nil {
			return conn, nil
		}
		failed = append(failed, err)
	}
	return nil, errors.Join(failed...)
}

func (r *Reach) resolve(ctx context.Context, host string) ([]netip.Addr, error) {
	if a, err := netip.ParseAddr(host); err == nil {
		return []netip.Addr{a.Unmap()}, nil
	}
	resolver := r.Resolver
	if resolver == nil {
		resolver = net.DefaultResolver
	}
	list, err := resolver.LookupNetIP(ctx, "ip", host)
	if err != nil {
		return nil, err
	}
	if len(list) == 0 {
		return nil, &net.DNSError{Err: "no addresses", Name: host, IsNotFound: true}
	}
	for i := range list {
		list[i] = list[i].Unmap()
	}
	return list, nil
}

// allows reports whether an address may be connected to: it is a public one, or lies in
// a network that is listed. An address of IPv4 that is wrapped into IPv6 counts as what
// it leads to.
func (r *Reach) allows(a netip.Addr) bool {
	a = a.Unmap()
	if a.Zone() != "" {
		return false // means something on this machine only
	}
	if slices.ContainsFunc(r.Networks, func(p netip.Prefix) bool { return p.Contains(a) }) {
		return true
	}
	if inner, ok := wrapped(a); ok {
		return r.allows(inner)
	}
	return a.IsGlobalUnicast() && !a.IsPrivate() && !slices.ContainsFunc(special, func(p netip.Prefix) bool { return p.Contains(a) })
}

// special are ranges beyond those that net/netip knows as private, loopback, link-local,
// multicast or unspecified, that do not lead to a public host.
//
// Source: the IANA special-purpose address registries for IPv4 and IPv6 (RFC 6890 and
// what has been entered since), from memory.
var special = prefixes(
	"0.0.0.0/8",       // this network
	"100.64.0.0/10",   // shared address space of providers
	"192.0.0.0/24",    // protocol assignments
	"192.0.2.0/24",    // documentation
	"198.18.0.0/15",   // benchmarking
	"198.51.100.0/24", // documentation
	"203.0.113.0/24",  // documentation
	"240.0.0.0/4",     // reserved, and broadcast
	"100::/64",        // discard only
	"2001::/23",       // protocol assignments, Teredo
	"2001:db8::/32",   // documentation
	"3fff::/20",       // documentation
	"5f00::/16",       // segment routing
	"fec0::/10",       // site-local, as it was
	"64:ff9b:1::/48",  // local translation
)

// wrappings are prefixes that carry an address of IPv4 from this byte on.
var wrappings = []struct {
	netip.Prefix
	at int
}{
	{netip.MustParsePrefix("::/96"), 12},        // IPv4-compatible, as it was
	{netip.MustParsePrefix("64:ff9b::/96"), 12}, // NAT64
	{netip.MustParsePrefix("2002::/16"), 2},     // 6to4
}

func wrapped(a netip.Addr) (netip.Addr, bool) {
	if !a.Is6() {
		return a, false
	}
	b := a.As16()
	for _, w := range wrappings {
		if w.Contains(a) {
			return netip.AddrFrom4([4]byte(b[w.at : w.at+4])), true
		}
	}
	return a, false
}

func prefixes(list ...string) []netip.Prefix {
	out := make([]netip.Prefix, len(list))
	for i, p := range list {
		out[i] = netip.MustParsePrefix(p)
	}
	return out
}
