package outbox

import (
	"context"
	"crypto/tls"
	"crypto/x509"
	"errors"
	"io"
	"net"
	"os"
	"syscall"
	"time"

	"holdfast/internal/plant"
)

// Refused is an answer that is no success.
type Refused struct {
	Why     string
	Lasting bool          // trying again will hardly help
	After   time.Duration // how long the receiver asks to be left alone
	Err     error
}

func (e *Refused) Error() string { return e.Why }

func (e *Refused) Unwrap() error { return e.Err }

// explain says in plain words what went wrong. It quotes nothing that the other side
// sent: answers may hold anything, secrets included.
func explain(err error) string {
	if r, ok := errors.AsType[*Refused](err); ok {
		return r.Why
	}
	if n, ok := errors.AsType[*NotAllowed](err); ok {
		return n.Why
	}
	if d, ok := errors.AsType[*net.DNSError](err); ok {
		if d.IsNotFound {
			return "The name " + d.Name + " could not be found."
		}
		return "The name " + d.Name + " could not be looked up just now."
	}
	_, authority := errors.AsType[x509.UnknownAuthorityError](err)
	_, name := errors.AsType[x509.HostnameError](err)
	_, invalid := errors.AsType[x509.CertificateInvalidError](err)
	_, verification := errors.AsType[*tls.CertificateVerificationError](err)
	if authority || name || invalid || verification {
		return "Its certificate could not be verified."
	}
	timeout, _ := errors.AsType[net.Error](err)
	switch {
	case errors.Is(err, syscall.ECONNREFUSED):
		return "It refused the connection."
	case errors.Is(err, syscall.EHOSTUNREACH), errors.Is(err, syscall.ENETUNREACH):
		return "There is no way to it in the network."
	case errors.Is(err, context.DeadlineExceeded), errors.Is(err, os.ErrDeadlineExceeded), timeout != nil && timeout.Timeout():
		return "It did not answer in time."
	case errors.Is(err, syscall.ECONNRESET), errors.Is(err, syscall.EPIPE), errors.Is(err, net.ErrClosed),
		errors.Is(err, io.EOF), errors.Is(err, io.ErrUnexpectedEOF):
		return "It broke off the connection."
	}
	return "The connection failed, or what came back made no sense."
}

// Try makes one attempt and returns in plain words why it failed.
func Try(ctx context.Context, s Sender, m plant.Outgoing) error {
	if err := s.Send(ctx, m); err != nil {
		return errors.New(explain(err))
	}
	return nil
}
