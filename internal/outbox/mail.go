package outbox

import (
	"context"
	"crypto/tls"
	"errors"
	"fmt"
	"net"
	"strconv"
	"strings"

	"github.com/wneessen/go-mail"

	"holdfast/internal/plant"
)

// Ways to reach a mail server.
const (
	StartTLS    = "starttls" // plain at first, encrypted before anything is said; the default
	ImplicitTLS = "implicit" // encrypted from the first byte
	NoTLS       = "none"     // never; then without a password, too
)

// relay is the mail server of the plant.
type relay struct {
	host     string
	port     int
	way      string
	from     string
	user     string
	password Secret
	reach    *Reach
	tls      *tls.Config // the system's certificates when nil
}

// mailbox sends messages to some addresses through the relay.
type mailbox struct {
	*relay
	to []string
}

// Send hands a message to the mail server for all of the target's addresses, or for none.
func (b *mailbox) Send(ctx context.Context, m plant.Outgoing) error {
	ctx, cancel := context.WithTimeout(ctx, 2*sendLimit)
	defer cancel()
	msg, err := b.compose(m)
	if err != nil {
		return err
	}
	c, err := b.client(ctx)
	if err != nil {
		return err
	}
	err = c.DialAndSendWithContext(ctx, msg)
	if err == nil || msg.IsDelivered() {
		return nil // what goes wrong after the server has taken it is no failure
	}
	if se, ok := errors.AsType[*mail.SendError](err); ok && se.ErrorCode() != 0 {
		return &Refused{Why: fmt.Sprintf("The mail server refused it (%d).", se.ErrorCode()), Lasting: !se.IsTemp(), Err: err}
	}
	return err
}

// compose writes the mail. Titles come from names that people gave, so that they are cut
// to one line here; the library encodes what is not plain text.
func (b *mailbox) compose(m plant.Outgoing) (*mail.Msg, error) {
	msg := mail.NewMsg(mail.WithNoDefaultUserAgent())
	if err := msg.From(b.from); err != nil {
		return nil, fmt.Errorf("sender of mail: %w", err)
	}
	if err := msg.To(b.to...); err != nil {
		return nil, fmt.Errorf("receiver of mail: %w", err)
	}
	msg.Subject(oneLine(m.Title))
	msg.SetDateWithValue(m.CreatedAt)
	msg.SetMessageIDWithValue(m.ID.String() + "@" + domainOf(b.from))
	// Nobody's absence is to be answered to a program (RFC 3834).
	msg.SetGenHeader(mail.Header("Auto-Submitted"), "auto-generated")
	msg.SetBodyString(mail.TypeTextPlain, m.Body)
	return msg, nil
}

func (b *mailbox) client(ctx context.Context) (*mail.Client, error) {
	conf := &tls.Config{MinVersion: tls.VersionTLS12}
	if b.tls != nil {
		conf = b.tls.Clone()
	}
	conf.ServerName = b.host
	opts := []mail.Option{
		mail.WithPort(b.port), mail.WithTimeout(sendLimit), mail.WithTLSConfig(conf), mail.WithHELO(domainOf(b.from)), mail.WithoutNoop(),
		mail.WithDialContextFunc(func(dialing context.Context, _, address string) (net.Conn, error) {
			return b.dial(ctx, dialing, address, conf)
		}),
	}
	switch b.way {
	case ImplicitTLS, NoTLS: // the connection is as it shall be when the library gets it
		opts = append(opts, mail.WithTLSPolicy(mail.NoTLS))
	default:
		opts = append(opts, mail.WithTLSPolicy(mail.TLSMandatory))
	}
	if b.user != "" {
		// The last two are refused by the library on a connection that is not encrypted.
		opts = append(opts, mail.WithUsername(b.user), mail.WithPassword(string(b.password)),
			mail.WithOpportunisticSMTPAuth(mail.SMTPAuthSCRAMSHA256, mail.SMTPAuthPlain, mail.SMTPAuthLogin))
	}
	c, err := mail.NewClient(b.host, opts...)
	if err != nil {
		return nil, fmt.Errorf("mail server: %w", err)
	}
	return c, nil
}

// dial connects, and cuts the connection when the attempt has had its time: the library
// renews its own limit with every step.
func (b *mailbox) dial(attempt, dialing context.Context, address string, conf *tls.Config) (net.Conn, error) {
	conn, err := b.reach.Dial(dialing, address)
	if err != nil {
		return nil, err
	}
	context.AfterFunc(attempt, func() { _ = conn.Close() })
	if b.way != ImplicitTLS {
		return conn, nil
	}
	secure := tls.Client(conn, conf)
	if err := secure.HandshakeContext(dialing); err != nil {
		_ = conn.Close()
		return nil, err
	}
	return secure, nil
}

// address of the mail server, for people.
func (r *relay) String() string { return net.JoinHostPort(r.host, strconv.Itoa(r.port)) }

// oneLine replaces everything that could begin another line.
func oneLine(s string) string { return strings.Join(strings.Fields(plant.CleanText(s)), " ") }

func domainOf(address string) string {
	_, domain, _ := strings.Cut(strings.TrimRight(address, ">"), "@")
	return domain
}
