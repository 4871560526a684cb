package outbox

import (
	"bufio"
	"context"
	"crypto/ecdsa"
	"crypto/elliptic"
	"crypto/rand"
	"crypto/tls"
	"crypto/x509"
	"encoding/base64"
	"fmt"
	"math/big"
	"net"
	"net/mail"
	"strings"
	"sync"
	"testing"
	"time"
)

const mailHost = "mail.kestrel-row.example"

// certificate makes one for the mail server's name, and the pool that trusts it.
func certificate(t testing.TB) (tls.Certificate, *x509.CertPool) {
	t.Helper()
	key, err := ecdsa.GenerateKey(elliptic.P256(), rand.Reader)
	if err != nil {
		t.Fatal(err)
	}
	tmpl := &x509.Certificate{SerialNumber: big.NewInt(1), DNSNames: []string{mailHost}, NotBefore: time.Now().Add(-time.Hour), NotAfter: time.Now().Add(time.Hour),
		IsCA: true, BasicConstraintsValid: true, KeyUsage: x509.KeyUsageCertSign | x509.KeyUsageDigitalSignature}
	der, err := x509.CreateCertificate(rand.Reader, tmpl, tmpl, &key.PublicKey, key)
	if err != nil {
		t.Fatal(err)
	}
	leaf, err := x509.ParseCertificate(der)
	if err != nil {
		t.Fatal(err)
	}
	pool := x509.NewCertPool()
	pool.AddCert(leaf)
	return tls.Certificate{Certificate: [][]byte{der}, PrivateKey: key}, pool
}

// post is a mail server as small as can be. It speaks to one client at a time.
type post struct {
	t        testing.TB
	listener net.Listener
	conf     *tls.Config
	implicit bool
	starttls bool
	auth     string // user and password that it takes; "" for none
	reply    func(command string) string

	mu    sync.Mutex
	mails []string
	said  []string // what clients said in clear
	rcpts []string
}

func newPost(t testing.TB, p *post) *post {
	t.Helper()
	var err error
	p.t = t
	if p.listener, err = net.Listen("tcp", "127.0.0.1:0"); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { _ = p.listener.Close() })
	go func() {
		for {
			c, err := p.listener.Accept()
			if err != nil {
				return
			}
			_ = c.SetDeadline(time.Now().Add(20 * time.Second))
			go p.serve(c)
		}
	}()
	return p
}

func (p *post) serve(c net.Conn) {
	defer func() { _ = c.Close() }()
	secure := p.implicit
	if p.implicit {
		c = tls.Server(c, p.conf)
	}
	in := bufio.NewReader(c)
	say := func(s string) { fmt.Fprintf(c, "%s\r\n", s) }
	say("220 " + mailHost)
	for {
		line, err := in.ReadString('\n')
		if err != nil {
			return
		}
		line = strings.TrimRight(line, "\r\n")
		p.mu.Lock()
		if !secure {
			p.said = append(p.said, line)
		}
		p.mu.Unlock()
		verb, rest, _ := strings.Cut(line, " ")
		verb = strings.ToUpper(verb)
		if p.reply != nil {
			if answer := p.reply(verb); answer != "" {
				if answer == "drop" {
					return
				}
				say(answer)
				continue
			}
		}
		switch verb {
		case "EHLO", "HELO":
			say("250-" + mailHost)
			if p.starttls && !secure {
				say("250-STARTTLS")
			}
			if p.auth != "" {
				say("250-AUTH PLAIN LOGIN")
			}
			say("250 8BITMIME")
		case "STARTTLS":
			say("220 go on")
			c = tls.Server(c, p.conf)
			in, secure = bufio.NewReader(c), true
		case "AUTH":
			_, coded, _ := strings.Cut(rest, " ")
			got, _ := base64.StdEncoding.DecodeString(coded)
			if strings.TrimLeft(strings.ReplaceAll(string(got), "\x00", ":"), ":") != p.auth {
				say("535 5.7.8 no")
				continue
			}
			say("235 ok")
		case "DATA":
			say("354 go on")
			var b strings.Builder
			for {
				l, err := in.ReadString('\n')
				if err != nil {
					return
				}
				if l == ".\r\n" {
					break
				}
				b.WriteString(l)
			}
			p.mu.Lock()
			p.mails = append(p.mails, b.String())
			p.mu.Unlock()
			say("250 taken")
		case "RCPT":
			p.mu.Lock()
			p.rcpts = append(p.rcpts, rest)
			p.mu.Unlock()
			say("250 ok")
		case "QUIT":
			say("221 bye")
			return
		default:
			say("250 ok")
		}
	}
}

// mailThrough reads a configuration with this server as the relay.
func (p *post) mailThrough(pool *x509.CertPool, encryption, user string) Sender {
	p.t.Helper()
	_, port := hostPort(p.t, p.listener)
	secret := ""
	if user != "" {
		secret = fmt.Sprintf("user = %q\nsecret = \"mail-password\"", user)
	}
	c, err := Parse(fmt.Sprintf(`[allow]
hosts = [%q]
networks = ["127.0.0.0/8"]
[mail]
host = %q
port = %s
encryption = %q
from = "holdfast@kestrel-row.example"
%s
[[target]]
name = "shift lead"
mail = ["shift.lead@kestrel-row.example", "standby@kestrel-row.example"]
`, mailHost, mailHost, port, encryption, secret), Options{Secrets: secretsOf(goodSecrets), Reach: Reach{Resolver: names{mailHost: {"127.0.0.1"}}}})
	if err != nil {
		p.t.Fatal(err)
	}
	s := c.Sender("shift lead")
	if pool != nil {
		s.(*mailbox).tls = &tls.Config{RootCAs: pool}
	}
	return s
}

func TestMailIsSentEncryptedAndSignedIn(t *testing.T) {
	t.Parallel()
	cert, pool := certificate(t)
	conf := &tls.Config{Certificates: []tls.Certificate{cert}}
	login := "holdfast:" + goodSecrets["mail-password"]
	for _, tc := range []struct {
		name, encryption, user string
		server                 *post
	}{
		{"starttls", StartTLS, "holdfast", &post{conf: conf, starttls: true, auth: login}},
		{"implicit", ImplicitTLS, "holdfast", &post{conf: conf, implicit: true, auth: login}},
		{"inside the plant", NoTLS, "", &post{}},
	} {
		p := newPost(t, tc.server)
		m := message("shift lead")
		m.Title, m.Body = "Hold at Preß\r\nBcc: everybody@evil.example", "Hold at Preß.\n.\nA dot alone.\n"
		s := p.mailThrough(pool, tc.encryption, tc.user)
		for range 2 { // a repetition looks the same
			if err := s.Send(context.Background(), m); err != nil {
				t.Fatalf("%s: %v (%s)", tc.name, err, explain(err))
			}
		}
		p.mu.Lock()
		if len(p.mails) != 2 || p.mails[0] != p.mails[1] {
			t.Errorf("%s: %d mails, or they differ:\n%q", tc.name, len(p.mails), p.mails)
		}
		said := strings.Join(p.said, "\n")
		if tc.encryption != NoTLS && (strings.Contains(said, "MAIL") || strings.Contains(said, "AUTH")) {
			t.Errorf("%s: said in clear: %q", tc.name, said)
		}
		if got := strings.Join(p.rcpts[:2], " "); !strings.Contains(got, "shift.lead@") || !strings.Contains(got, "standby@") || len(p.rcpts) != 4 {
			t.Errorf("%s: receivers %q", tc.name, p.rcpts)
		}
		parsed, err := mail.ReadMessage(strings.NewReader(p.mails[0]))
		p.mu.Unlock()
		if err != nil {
			t.Fatal(err)
		}
		h := parsed.Header
		if h.Get("Message-Id") != "<"+m.ID.String()+"@kestrel-row.example>" || h.Get("Auto-Submitted") != "auto-generated" || h.Get("Bcc") != "" ||
			!strings.HasPrefix(h.Get("Content-Type"), "text/plain") {
			t.Errorf("%s: header %v", tc.name, h)
		}
		if at, err := h.Date(); err != nil || !at.Equal(m.CreatedAt) {
			t.Errorf("%s: dated %s, %v", tc.name, at, err)
		}
	}
}

func TestMailIsNotSentInTheClearNorToAStranger(t *testing.T) {
	t.Parallel()
	cert, pool := certificate(t)
	conf := &tls.Config{Certificates: []tls.Certificate{cert}}
	login := "holdfast:" + goodSecrets["mail-password"]
	plain := newPost(t, &post{auth: login}) // offers no encryption
	if err := plain.mailThrough(pool, StartTLS, "holdfast").Send(context.Background(), message("shift lead")); err == nil {
		t.Error("sent without encryption")
	}
	stranger := newPost(t, &post{conf: conf, starttls: true, auth: login})
	err := stranger.mailThrough(x509.NewCertPool(), StartTLS, "holdfast").Send(context.Background(), message("shift lead"))
	if err == nil || explain(err) != "Its certificate could not be verified." {
		t.Errorf("to a stranger: %v", err)
	}
	for _, p := range []*post{plain, stranger} {
		p.mu.Lock()
		for _, said := range p.said {
			if strings.HasPrefix(said, "AUTH") || strings.HasPrefix(said, "MAIL") {
				t.Errorf("said in clear: %s", said)
			}
		}
		p.mu.Unlock()
	}
}

func TestWhatAMailServerAnswersIsUnderstood(t *testing.T) {
	t.Parallel()
	at := func(verb, answer string) func(string) string {
		return func(v string) string {
			if v == verb {
				return answer
			}
			return ""
		}
	}
	for _, tc := range []struct {
		name    string
		reply   func(string) string
		why     string
		lasting bool
	}{
		{"unknown receiver", at("RCPT", "550 5.1.1 no such user, and our secret is 42"), "The mail server refused it (550).", true},
		{"busy", at("MAIL", "451 4.3.0 later"), "The mail server refused it (451).", false},
		{"full", at("DATA", "452 4.2.2 full"), "The mail server refused it (452).", false},
		{"breaks off", at("MAIL", "drop"), "It broke off the connection.", false},
		{"garbage", at("MAIL", "\x00\x01 what"), "The connection failed, or what came back made no sense.", false},
	} {
		p := newPost(t, &post{reply: tc.reply})
		err := p.mailThrough(nil, NoTLS, "").Send(context.Background(), message("shift lead"))
		if err == nil || explain(err) != tc.why {
			t.Errorf("%s: %v, want %q", tc.name, err, tc.why)
		}
		if r, ok := err.(*Refused); ok && r.Lasting != tc.lasting {
			t.Errorf("%s: lasting = %v", tc.name, r.Lasting)
		}
	}
}

func TestAMailServerThatHangsIsLeft(t *testing.T) {
	t.Parallel()
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { _ = l.Close() })
	p := &post{t: t, listener: l}
	ctx, cancel := context.WithTimeout(context.Background(), 200*time.Millisecond)
	defer cancel()
	began := time.Now()
	err = p.mailThrough(nil, NoTLS, "").Send(ctx, message("shift lead"))
	if err == nil || time.Since(began) > 5*time.Second {
		t.Errorf("%v after %s", err, time.Since(began))
	}
}

func tlsOf(cert tls.Certificate) *tls.Config {
	return &tls.Config{Certificates: []tls.Certificate{cert}}
}
