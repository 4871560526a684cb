package certs

import (
	"crypto/tls"
	"crypto/x509"
	"fmt"
	"os"
	"sync"
	"time"
)

// Files is a certificate in files that somebody else renews. It is safe for use by
// several goroutines.
type Files struct {
	cert, key string

	mu    sync.Mutex
	pair  *tls.Certificate
	stamp [2]time.Time
}

// OpenFiles reads a certificate with its chain, and its key, in PEM.
func OpenFiles(cert, key string) (*Files, error) {
	f := &Files{cert: cert, key: key}
	if err := f.Reload(); err != nil {
		return nil, err
	}
	return f, nil
}

// Reload reads the files again when they have changed. When they cannot be read together,
// as between the writing of the one and the other, what was read before stays in use.
func (f *Files) Reload() error {
	stamp, err := f.stamps()
	if err != nil {
		return err
	}
	f.mu.Lock()
	defer f.mu.Unlock()
	if f.pair != nil && stamp == f.stamp {
		return nil
	}
	pair, err := tls.LoadX509KeyPair(f.cert, f.key)
	if err != nil {
		return fmt.Errorf("read the certificate %s with the key %s: %w", f.cert, f.key, err)
	}
	f.pair, f.stamp = &pair, stamp
	return nil
}

func (f *Files) stamps() (out [2]time.Time, err error) {
	for i, path := range []string{f.cert, f.key} {
		info, err := os.Stat(path)
		if err != nil {
			return out, fmt.Errorf("read the certificate: %w", err)
		}
		out[i] = info.ModTime()
	}
	return out, nil
}

// Certificate is what the server shows; it fits tls.Config.GetCertificate.
func (f *Files) Certificate(*tls.ClientHelloInfo) (*tls.Certificate, error) {
	f.mu.Lock()
	defer f.mu.Unlock()
	return f.pair, nil
}

// Leaf is the certificate in use.
func (f *Files) Leaf() *x509.Certificate {
	f.mu.Lock()
	defer f.mu.Unlock()
	return f.pair.Leaf
}
