package relay_test

import (
	"context"
	"crypto/ecdsa"
	"crypto/elliptic"
	"crypto/rand"
	"crypto/tls"
	"crypto/x509"
	"crypto/x509/pkix"
	"io"
	"log/slog"
	"math/big"
	"net"
	"path/filepath"
	"sync"
	"testing"
	"time"

	mqtt "github.com/eclipse/paho.mqtt.golang"
	"github.com/google/uuid"
	broker "github.com/mochi-mqtt/server/v2"
	"github.com/mochi-mqtt/server/v2/hooks/auth"
	"github.com/mochi-mqtt/server/v2/listeners"

	"holdfast/internal/relay"
)

// listen listens on a free port.
func listen(t *testing.T) net.Listener {
	t.Helper()
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	return l
}

// authority signs certificates for 127.0.0.1.
type authority struct {
	cert *x509.Certificate
	key  *ecdsa.PrivateKey
}

func newAuthority(t *testing.T, name string) authority {
	t.Helper()
	key, err := ecdsa.GenerateKey(elliptic.P256(), rand.Reader)
	if err != nil {
		t.Fatal(err)
	}
	c := &x509.Certificate{SerialNumber: big.NewInt(1), Subject: pkix.Name{CommonName: name}, NotBefore: time.Now().Add(-24 * time.Hour), NotAfter: time.Now().Add(time.Hour),
		IsCA: true, BasicConstraintsValid: true, KeyUsage: x509.KeyUsageCertSign}
	der, err := x509.CreateCertificate(rand.Reader, c, c, key.Public(), key)
	if err != nil {
		t.Fatal(err)
	}
	if c, err = x509.ParseCertificate(der); err != nil {
		t.Fatal(err)
	}
	return authority{c, key}
}

func (a authority) certificate(t *testing.T, until time.Time) tls.Certificate {
	t.Helper()
	key, err := ecdsa.GenerateKey(elliptic.P256(), rand.Reader)
	if err != nil {
		t.Fatal(err)
	}
	c := &x509.Certificate{SerialNumber: big.NewInt(2), NotBefore: time.Now().Add(-24 * time.Hour), NotAfter: until, IPAddresses: []net.IP{net.IPv4(127, 0, 0, 1)},
		ExtKeyUsage: []x509.ExtKeyUsage{x509.ExtKeyUsageServerAuth}}
	der, err := x509.CreateCertificate(rand.Reader, c, a.cert, key.Public(), a.key)
	if err != nil {
		t.Fatal(err)
	}
	return tls.Certificate{Certificate: [][]byte{der}, PrivateKey: key}
}

func (a authority) trusted() *tls.Config {
	pool := x509.NewCertPool()
	pool.AddCert(a.cert)
	return &tls.Config{MinVersion: tls.VersionTLS12, RootCAs: pool}
}

// guardedBroker lets in only who has the password, over TLS.
func guardedBroker(t *testing.T, cert tls.Certificate) (hub *broker.Server, at string) {
	t.Helper()
	plain := listen(t)
	at = plain.Addr().String()
	hub = broker.New(&broker.Options{InlineClient: true, Logger: quiet})
	rules := &auth.Ledger{Auth: auth.AuthRules{{Username: "holdfast", Password: "open sesame", Allow: true}}}
	if err := hub.AddHook(new(auth.Hook), &auth.Options{Ledger: rules}); err != nil {
		t.Fatal(err)
	}
	l := listeners.NewNet("t", tls.NewListener(plain, &tls.Config{MinVersion: tls.VersionTLS12, Certificates: []tls.Certificate{cert}}))
	if err := hub.AddListener(l); err != nil {
		t.Fatal(err)
	}
	if err := hub.Serve(); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { _ = hub.Close() })
	return hub, at
}

// run reads from the broker until the test stops it.
func run(t *testing.T, b *relay.Broker) (stop func()) {
	t.Helper()
	ctx, cancel := context.WithCancel(context.Background())
	var wait sync.WaitGroup
	wait.Go(func() { _ = b.Run(ctx) })
	stop = sync.OnceFunc(func() { cancel(); wait.Wait() })
	t.Cleanup(stop)
	return stop
}

func reader(t *testing.T, url string, log *slog.Logger) (*relay.Broker, *relay.Spool) {
	t.Helper()
	s := open(t, filepath.Join(t.TempDir(), "spool"))
	t.Cleanup(func() { _ = s.Close() })
	s.Strict = true
	g := gather(s)
	g.Lot = func() string { return s.Lot("lot") }
	return &relay.Broker{URL: url, Client: "holdfast", Readings: map[string]*relay.Gather{"diameter": g}, Lots: map[string]bool{"lot": true}, Rounds: "rounds",
		Spool: s, Now: time.Now, Log: log}, s
}

func subscribed(hub *broker.Server, n int) func() bool {
	return func() bool {
		c, ok := hub.Clients.Get("holdfast")
		return ok && !c.Closed() && len(c.State.Subscriptions.GetAll()) == n
	}
}

func TestABrokerBehindTLSAndAPassword(t *testing.T) {
	t.Parallel()
	plant, other := newAuthority(t, "plant"), newAuthority(t, "other")
	hub, at := guardedBroker(t, plant.certificate(t, time.Now().Add(time.Hour)))
	_, over := guardedBroker(t, plant.certificate(t, time.Now().Add(-time.Hour)))
	for _, c := range []struct {
		name, at, password string
		trust              *tls.Config
		says               string
	}{
		{"another authority", at, "open sesame", other.trusted(), "unknown authority"},
		{"the authorities of the machine", at, "open sesame", &tls.Config{MinVersion: tls.VersionTLS12}, "unknown authority"},
		{"a certificate that is over", over, "open sesame", plant.trusted(), "expired"},
		{"a wrong password", at, "close sesame", plant.trusted(), "not Authorized"},
		{"no password", at, "", plant.trusted(), "not Authorized"},
	} {
		t.Run(c.name, func(t *testing.T) {
			var l logged
			b, _ := reader(t, "ssl://"+c.at, l.log())
			b.User, b.Password, b.TLS, b.Client = "holdfast", c.password, c.trust, "refused"
			stop := run(t, b)
			until(t, "the log says why: "+c.says, func() bool { return l.has("cannot be connected to") })
			if !l.has(c.says) {
				t.Errorf("the log says %s", l.text())
			}
			stop()
			if cl, ok := hub.Clients.Get("refused"); ok && len(cl.State.Subscriptions.GetAll()) > 0 {
				t.Error("it was let in")
			}
		})
	}
	b, s := reader(t, "ssl://"+at, quiet)
	b.User, b.Password, b.TLS = "holdfast", "open sesame", plant.trusted()
	run(t, b)
	until(t, "it subscribed", subscribed(hub, 3))
	for _, m := range [][2]string{{"lot", "K-2231"}, {"diameter", "1.1"}, {"diameter", "1.2"}} {
		if err := hub.Publish(m[0], []byte(m[1]), false, 1); err != nil {
			t.Fatal(err)
		}
	}
	until(t, "two readings wait", func() bool { return len(s.Waiting("Diameter")) == 2 })
	if w := s.Waiting("Diameter"); w[0].Lot != "K-2231" || w[0].Number != "1.1" {
		t.Errorf("%+v wait", w)
	}
}

// lossy is a connection to the broker that can lose what goes there, and break.
type lossy struct {
	net.Listener
	to   string
	mu   sync.Mutex
	mute bool
	all  []net.Conn
}

func newLossy(t *testing.T, to string) *lossy {
	t.Helper()
	l := listen(t)
	y := &lossy{Listener: l, to: to}
	t.Cleanup(func() { _ = l.Close(); y.cut(false) })
	go func() {
		for {
			c, err := l.Accept()
			if err != nil {
				return
			}
			far, err := net.Dial("tcp", to)
			if err != nil {
				_ = c.Close()
				continue
			}
			y.mu.Lock()
			y.all = append(y.all, c, far)
			y.mu.Unlock()
			go func() { _, _ = io.Copy(c, far); _ = c.Close() }()
			go func() {
				_, _ = io.Copy(writer(func(b []byte) (int, error) {
					y.mu.Lock()
					defer y.mu.Unlock()
					if y.mute {
						return len(b), nil
					}
					return far.Write(b)
				}), c)
				_ = far.Close()
			}()
		}
	}()
	return y
}

type writer func(b []byte) (int, error)

func (w writer) Write(b []byte) (int, error) { return w(b) }

// lose loses what goes to the broker from now on, acknowledgements too.
func (y *lossy) lose() {
	y.mu.Lock()
	defer y.mu.Unlock()
	y.mute = true
}

// cut breaks all connections; new ones lose what they carry, or not.
func (y *lossy) cut(mute bool) {
	y.mu.Lock()
	defer y.mu.Unlock()
	for _, c := range y.all {
		_ = c.Close()
	}
	y.all, y.mute = nil, mute
}

// The broker does not hear that a message was taken and delivers it once more, as quality
// of service 1 has it: it is one reading, one round and one line.
func TestARedeliveryIsTakenOnce(t *testing.T) {
	t.Parallel()
	l := listen(t)
	at := l.Addr().String()
	hub := startBroker(t, l)
	defer hub.Close()
	way := newLossy(t, at)
	b, s := reader(t, "tcp://"+way.Addr().String(), quiet)
	again := &duplicates{}
	relay.OnTaken(b, again.note)
	run(t, b)
	until(t, "it subscribed", subscribed(hub, 3))
	way.lose()
	pub := mqtt.NewClient(mqtt.NewClientOptions().AddBroker("tcp://" + at).SetClientID("machine"))
	if tok := pub.Connect(); tok.Wait() && tok.Error() != nil {
		t.Fatal(tok.Error())
	}
	defer pub.Disconnect(0)
	for _, m := range [][2]string{{"lot", "K-2231"}, {"diameter", "1.1"}, {"rounds", `{"id":"` + uuid.Must(uuid.NewV7()).String() + `","entries":[]}`}, {"diameter", "0.5 in"}} {
		if tok := pub.Publish(m[0], 1, false, m[1]); tok.Wait() && tok.Error() != nil {
			t.Fatal(tok.Error())
		}
	}
	until(t, "all was taken", func() bool { return len(s.Waiting("Diameter")) == 1 && s.Len() == 2 && s.Lot("lot") == "K-2231" })
	way.cut(false)
	until(t, "the broker delivered all of it again", func() bool { return again.count() >= 4 })
	if len(s.Waiting("Diameter")) != 1 || s.Len() != 2 {
		t.Errorf("%d readings and %d messages wait, want 1 and 2", len(s.Waiting("Diameter")), s.Len())
	}
	// A second reading of the same size is no repetition.
	if tok := pub.Publish("diameter", 1, false, "1.1"); tok.Wait() && tok.Error() != nil {
		t.Fatal(tok.Error())
	}
	until(t, "the second reading waits", func() bool { return len(s.Waiting("Diameter")) == 2 })
}

// duplicates counts the messages that came again.
type duplicates struct {
	mu sync.Mutex
	n  int
}

func (d *duplicates) note(again bool) {
	if again {
		d.mu.Lock()
		defer d.mu.Unlock()
		d.n++
	}
}

func (d *duplicates) count() int {
	d.mu.Lock()
	defer d.mu.Unlock()
	return d.n
}
