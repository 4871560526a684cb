package main

import (
	"bufio"
	"net"
	"net/http"
	"sync"
	"time"
)

// sniffer is a listener for TLS beside which plain http is told, on the same port, to come
// over https: people type an address without the scheme, and a browser then tries http.
// Nothing else is answered in clear.
type sniffer struct {
	net.Listener
	secure, plain chan net.Conn
	done          chan struct{}
	close         sync.Once
	redirect      *http.Server
}

// firstByte is how long a client may take to begin to speak.
const firstByte = 10 * time.Second

func newSniffer(l net.Listener) *sniffer {
	return &sniffer{
		Listener: l, secure: make(chan net.Conn), plain: make(chan net.Conn), done: make(chan struct{}),
		redirect: &http.Server{
			ReadHeaderTimeout: firstByte, WriteTimeout: firstByte, MaxHeaderBytes: 8 << 10,
			Handler: http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
				w.Header().Set("Connection", "close")
				http.Redirect(w, r, "https://"+r.Host+r.URL.RequestURI(), http.StatusPermanentRedirect)
			}),
		},
	}
}

// run accepts until the listener is closed.
func (s *sniffer) run() {
	defer s.Close()
	var clients sync.WaitGroup
	defer clients.Wait()
	clients.Go(func() { _ = s.redirect.Serve(plainListener{s}) })
	defer s.redirect.Close()
	for {
		c, err := s.Listener.Accept()
		if err != nil {
			if ne, ok := err.(net.Error); ok && ne.Timeout() {
				continue
			}
			return
		}
		clients.Go(func() { s.sort(c) })
	}
}

// sort hands a connection on by its first byte: a TLS handshake begins with 22 (RFC 8446,
// 5.1), a method of HTTP with a capital letter.
func (s *sniffer) sort(c net.Conn) {
	_ = c.SetReadDeadline(time.Now().Add(firstByte))
	r := bufio.NewReaderSize(c, 512)
	first, err := r.Peek(1)
	if err != nil {
		_ = c.Close()
		return
	}
	_ = c.SetReadDeadline(time.Time{})
	to := s.secure
	if first[0] >= 'A' && first[0] <= 'Z' {
		to = s.plain
	}
	select {
	case to <- peeked{c, r}:
	case <-s.done:
		_ = c.Close()
	}
}

// Accept waits for the next client that speaks TLS.
func (s *sniffer) Accept() (net.Conn, error) { return s.next(s.secure) }

func (s *sniffer) next(from chan net.Conn) (net.Conn, error) {
	select {
	case c := <-from:
		return c, nil
	case <-s.done:
		return nil, net.ErrClosed
	}
}

func (s *sniffer) Close() error {
	s.close.Do(func() { close(s.done) })
	return s.Listener.Close()
}

type plainListener struct{ *sniffer }

func (p plainListener) Accept() (net.Conn, error) { return p.next(p.plain) }

// peeked is a connection of which the first bytes were read already.
type peeked struct {
	net.Conn
	r *bufio.Reader
}

func (p peeked) Read(b []byte) (int, error) { return p.r.Read(b) }
