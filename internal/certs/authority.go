package certs

import (
	"bytes"
	"crypto/ecdsa"
	"crypto/elliptic"
	"crypto/rand"
	"crypto/sha256"
	"crypto/tls"
	"crypto/x509"
	"crypto/x509/pkix"
	"encoding/pem"
	"errors"
	"fmt"
	"io/fs"
	"math/big"
	"net"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"sync"
	"time"
)

const (
	authorityLife = 10 * 365 * 24 * time.Hour
	// serverLife is the longest that browsers accept from any authority but one that was
	// installed by hand; keeping to it asks nothing of them.
	serverLife = 397 * 24 * time.Hour
	// early lets a tablet whose clock is behind accept a fresh certificate.
	early = 25 * time.Hour
)

// Files of an authority's folder.
const (
	authorityCert = "authority.crt"
	authorityKey  = "authority.key"
	serverCert    = "server.crt"
	serverKey     = "server.key"
)

// Authority signs the server's certificate. It is safe for use by several goroutines.
type Authority struct {
	dir  string
	now  func() time.Time
	cert *x509.Certificate
	key  *ecdsa.PrivateKey

	mu     sync.Mutex
	server *tls.Certificate
	names  []string // that server was made for
}

// OpenAuthority reads the authority in dir or makes one there, held to these names: host
// names and addresses under which the server is reached. An authority that is there
// already and may not sign for one of them is an error that says what to do: tablets trust
// the old one, and exchanging it unasked would lock them out.
func OpenAuthority(dir string, names []string, now func() time.Time) (*Authority, error) {
	names = clean(names)
	if len(names) == 0 {
		return nil, errors.New("a certificate needs at least one name or address of the server")
	}
	if err := os.MkdirAll(dir, 0o700); err != nil {
		return nil, fmt.Errorf("make the folder of certificates: %w", err)
	}
	a := &Authority{dir: dir, now: now}
	err := a.read()
	if errors.Is(err, fs.ErrNotExist) {
		err = a.make(names)
	}
	if err != nil {
		return nil, err
	}
	if !a.cert.NotAfter.After(now()) {
		return nil, fmt.Errorf("the authority in %s ended on %s: move the folder away, start again, and install the new certificate on the tablets",
			dir, a.cert.NotAfter.Format(time.DateOnly))
	}
	if name := a.firstForbidden(names); name != "" {
		return nil, fmt.Errorf("the authority in %s may not sign for %q: leave that name out, or move the folder away, start again, and install the new certificate on the tablets",
			dir, name)
	}
	if err := a.Renew(names); err != nil {
		return nil, err
	}
	return a, nil
}

// clean brings names into one form: lower case, no doubles, sorted.
func clean(names []string) []string {
	var out []string
	for _, n := range names {
		n = strings.TrimSuffix(strings.ToLower(strings.TrimSpace(n)), ".")
		if n != "" {
			out = append(out, n)
		}
	}
	slices.Sort(out)
	return slices.Compact(out)
}

func (a *Authority) read() error {
	certPEM, err := os.ReadFile(filepath.Join(a.dir, authorityCert))
	if err != nil {
		return fmt.Errorf("read the authority: %w", err)
	}
	keyPEM, err := os.ReadFile(filepath.Join(a.dir, authorityKey))
	if err != nil {
		// A certificate without its key is no reason to make another authority silently.
		return fmt.Errorf("read the key of the authority in %s: %v", a.dir, err)
	}
	pair, err := tls.X509KeyPair(certPEM, keyPEM)
	if err != nil {
		return fmt.Errorf("read the authority in %s: %w", a.dir, err)
	}
	key, ok := pair.PrivateKey.(*ecdsa.PrivateKey)
	if !ok || !pair.Leaf.IsCA {
		return fmt.Errorf("what lies in %s is not an authority of this program", a.dir)
	}
	a.cert, a.key = pair.Leaf, key
	return nil
}

func (a *Authority) make(names []string) error {
	key, err := ecdsa.GenerateKey(elliptic.P256(), rand.Reader)
	if err != nil {
		return fmt.Errorf("make a key: %w", err)
	}
	now := a.now()
	host, addrs := split(names)
	t := &x509.Certificate{
		SerialNumber: serial(),
		// The name stands in the tablets' lists of authorities.
		Subject:               pkix.Name{CommonName: "Holdfast authority " + now.Format(time.DateOnly), Organization: []string{"Holdfast at " + names[0]}},
		NotBefore:             now.Add(-early),
		NotAfter:              now.Add(authorityLife),
		IsCA:                  true,
		BasicConstraintsValid: true,
		MaxPathLenZero:        true,
		KeyUsage:              x509.KeyUsageCertSign | x509.KeyUsageCRLSign,
		ExtKeyUsage:           []x509.ExtKeyUsage{x509.ExtKeyUsageServerAuth},

		PermittedDNSDomainsCritical: true,
		PermittedDNSDomains:         slices.Compact(slices.Sorted(slices.Values(append(host, "localhost")))),
		PermittedIPRanges:           append(privateRanges(), single(addrs)...),
	}
	der, err := x509.CreateCertificate(rand.Reader, t, t, &key.PublicKey, key)
	if err != nil {
		return fmt.Errorf("make the authority: %w", err)
	}
	if a.cert, err = x509.ParseCertificate(der); err != nil {
		return fmt.Errorf("read the new authority: %w", err)
	}
	a.key = key
	// The key first: what is there when power fails between the two is no authority yet.
	if err := writeKey(filepath.Join(a.dir, authorityKey), key); err != nil {
		return err
	}
	return writeFile(filepath.Join(a.dir, authorityCert), encodeCert(der), 0o644)
}

// split tells host names from addresses.
func split(names []string) (hosts []string, addrs []net.IP) {
	for _, n := range names {
		if ip := net.ParseIP(n); ip != nil {
			addrs = append(addrs, ip)
		} else {
			hosts = append(hosts, n)
		}
	}
	return hosts, addrs
}

// privateRanges are the addresses that a plant's own network may have: RFC 1918, 4193,
// link-local and loopback.
func privateRanges() []*net.IPNet {
	var out []*net.IPNet
	for _, s := range []string{"10.0.0.0/8", "172.16.0.0/12", "192.168.0.0/16", "169.254.0.0/16", "127.0.0.0/8", "fc00::/7", "fe80::/10", "::1/128"} {
		_, n, err := net.ParseCIDR(s)
		if err != nil {
			panic(err) // the list is ours
		}
		out = append(out, n)
	}
	return out
}

func single(addrs []net.IP) []*net.IPNet {
	var out []*net.IPNet
	for _, ip := range addrs {
		if v4 := ip.To4(); v4 != nil {
			out = append(out, &net.IPNet{IP: v4, Mask: net.CIDRMask(32, 32)})
		} else {
			out = append(out, &net.IPNet{IP: ip, Mask: net.CIDRMask(128, 128)})
		}
	}
	return out
}

// firstForbidden is the first name that the authority's constraints leave out, or "".
func (a *Authority) firstForbidden(names []string) string {
	for _, n := range names {
		ip := net.ParseIP(n)
		allowed := slices.ContainsFunc(a.cert.PermittedDNSDomains, func(d string) bool {
			return ip == nil && (n == d || strings.HasSuffix(n, "."+strings.TrimPrefix(d, ".")))
		}) || slices.ContainsFunc(a.cert.PermittedIPRanges, func(r *net.IPNet) bool { return ip != nil && r.Contains(ip) })
		if !allowed {
			return n
		}
	}
	return ""
}

// Renew makes a new certificate for the server when the one in the folder is for other
// names, is not of this authority, or has less than a third of its life before it. Names
// that the authority may not sign for are left out: an address that the machine got
// meanwhile must not end the service under all others.
func (a *Authority) Renew(names []string) error {
	names = slices.DeleteFunc(clean(names), func(n string) bool { return a.firstForbidden([]string{n}) != "" })
	a.mu.Lock()
	defer a.mu.Unlock()
	if a.server == nil {
		a.server, a.names = a.stored()
	}
	if a.server != nil && slices.Equal(a.names, names) && a.now().Before(renewAt(a.server.Leaf)) {
		return nil
	}
	c, err := a.sign(names)
	if err != nil {
		return err
	}
	a.server, a.names = c, names
	return nil
}

func renewAt(c *x509.Certificate) time.Time {
	return c.NotAfter.Add(-c.NotAfter.Sub(c.NotBefore) / 3)
}

// stored is the server's certificate in the folder with its names, nil when there is none
// that this authority signed and that holds now.
func (a *Authority) stored() (*tls.Certificate, []string) {
	pair, err := tls.LoadX509KeyPair(filepath.Join(a.dir, serverCert), filepath.Join(a.dir, serverKey))
	if err != nil || pair.Leaf.CheckSignatureFrom(a.cert) != nil || a.now().Before(pair.Leaf.NotBefore) {
		return nil, nil
	}
	names := slices.Clone(pair.Leaf.DNSNames)
	for _, ip := range pair.Leaf.IPAddresses {
		names = append(names, ip.String())
	}
	return &pair, clean(names)
}

func (a *Authority) sign(names []string) (*tls.Certificate, error) {
	key, err := ecdsa.GenerateKey(elliptic.P256(), rand.Reader)
	if err != nil {
		return nil, fmt.Errorf("make a key: %w", err)
	}
	now := a.now()
	t := &x509.Certificate{
		SerialNumber:          serial(),
		Subject:               pkix.Name{CommonName: names[0], Organization: a.cert.Subject.Organization},
		NotBefore:             now.Add(-early),
		NotAfter:              now.Add(serverLife - early),
		BasicConstraintsValid: true,
		KeyUsage:              x509.KeyUsageDigitalSignature,
		ExtKeyUsage:           []x509.ExtKeyUsage{x509.ExtKeyUsageServerAuth},
	}
	if t.NotAfter.After(a.cert.NotAfter) {
		t.NotAfter = a.cert.NotAfter
	}
	t.DNSNames, t.IPAddresses = split(names)
	der, err := x509.CreateCertificate(rand.Reader, t, a.cert, &key.PublicKey, a.key)
	if err != nil {
		return nil, fmt.Errorf("sign the server's certificate: %w", err)
	}
	leaf, err := x509.ParseCertificate(der)
	if err != nil {
		return nil, fmt.Errorf("read the server's certificate: %w", err)
	}
	if err := writeKey(filepath.Join(a.dir, serverKey), key); err != nil {
		return nil, err
	}
	chain := append(encodeCert(der), encodeCert(a.cert.Raw)...)
	if err := writeFile(filepath.Join(a.dir, serverCert), chain, 0o644); err != nil {
		return nil, err
	}
	return &tls.Certificate{Certificate: [][]byte{der, a.cert.Raw}, PrivateKey: key, Leaf: leaf}, nil
}

// Certificate is what the server shows; it fits tls.Config.GetCertificate.
func (a *Authority) Certificate(*tls.ClientHelloInfo) (*tls.Certificate, error) {
	a.mu.Lock()
	defer a.mu.Unlock()
	return a.server, nil
}

// Root is the authority's own certificate.
func (a *Authority) Root() *x509.Certificate { return a.cert }

// Fingerprint is the SHA-256 of a certificate as people compare it: pairs of hexadecimal
// digits with colons between them.
func Fingerprint(c *x509.Certificate) string {
	sum := sha256.Sum256(c.Raw)
	var b strings.Builder
	for i, v := range sum {
		if i > 0 {
			b.WriteByte(':')
		}
		fmt.Fprintf(&b, "%02X", v)
	}
	return b.String()
}

// PEM is a certificate as programs read it from a file.
func PEM(c *x509.Certificate) []byte { return encodeCert(c.Raw) }

// ReadRoot reads the authority's certificate from its folder, for whoever has to trust it
// on this machine.
func ReadRoot(dir string) (*x509.Certificate, error) {
	data, err := os.ReadFile(filepath.Join(dir, authorityCert))
	if err != nil {
		return nil, fmt.Errorf("read the authority: %w", err)
	}
	block, _ := pem.Decode(data)
	if block == nil {
		return nil, fmt.Errorf("%s holds no certificate", filepath.Join(dir, authorityCert))
	}
	c, err := x509.ParseCertificate(block.Bytes)
	if err != nil {
		return nil, fmt.Errorf("read the authority: %w", err)
	}
	return c, nil
}

func serial() *big.Int {
	// 20 octets at most and positive (RFC 5280, 4.1.2.2); 127 random bits never collide.
	n, err := rand.Int(rand.Reader, new(big.Int).Lsh(big.NewInt(1), 127))
	if err != nil {
		panic(err) // the system's randomness never fails
	}
	return n.Add(n, big.NewInt(1))
}

func encodeCert(der []byte) []byte {
	return pem.EncodeToMemory(&pem.Block{Type: "CERTIFICATE", Bytes: der})
}

func writeKey(path string, key *ecdsa.PrivateKey) error {
	der, err := x509.MarshalPKCS8PrivateKey(key)
	if err != nil {
		return fmt.Errorf("encode a key: %w", err)
	}
	return writeFile(path, pem.EncodeToMemory(&pem.Block{Type: "PRIVATE KEY", Bytes: der}), 0o600)
}

// writeFile replaces a file whole or not at all, also when power fails.
func writeFile(path string, data []byte, mode fs.FileMode) error {
	f, err := os.CreateTemp(filepath.Dir(path), ".new-*")
	if err != nil {
		return fmt.Errorf("write %s: %w", filepath.Base(path), err)
	}
	defer os.Remove(f.Name())
	_, err = bytes.NewReader(data).WriteTo(f)
	err = errors.Join(err, f.Chmod(mode), f.Sync(), f.Close())
	if err == nil {
		err = os.Rename(f.Name(), path)
	}
	if err != nil {
		return fmt.Errorf("write %s: %w", filepath.Base(path), err)
	}
	return nil
}
