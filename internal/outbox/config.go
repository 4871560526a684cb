package outbox

import (
	"errors"
	"fmt"
	"net"
	"net/mail"
	"net/netip"
	"net/url"
	"os"
	"slices"
	"strings"
	"time"

	"github.com/BurntSushi/toml"
)

// file is the configuration as it is written (TOML).
type file struct {
	Address string `toml:"address"` // how people reach Holdfast: links in messages begin with it
	Allow   struct {
		Hosts    []string `toml:"hosts"`
		Networks []string `toml:"networks"`
	} `toml:"allow"`
	Mail struct {
		Host       string `toml:"host"`
		Port       int    `toml:"port"`
		Encryption string `toml:"encryption"`
		From       string `toml:"from"`
		User       string `toml:"user"`
		Secret     string `toml:"secret"` // its name
	} `toml:"mail"`
	Targets []fileTarget `toml:"target"`
}

type fileTarget struct {
	Name    string   `toml:"name"`
	Webhook string   `toml:"webhook"`
	Secret  string   `toml:"secret"` // its name
	Mail    []string `toml:"mail"`
	Lines   []string `toml:"lines"` // only these; none: all
}

// Way is how a target is reached.
type Way string

const (
	ByWebhook Way = "webhook"
	ByMail    Way = "mail"
)

// Target is somewhere that messages may go.
type Target struct {
	Name  string
	Way   Way
	Where string   // for people: an address without anything secret
	Lines []string // names of the lines whose messages it gets; none: all
	send  Sender
}

// Takes reports whether the target gets the messages of a line.
func (t Target) Takes(line string) bool { return len(t.Lines) == 0 || slices.Contains(t.Lines, line) }

// Config is where messages may go. The zero value is a plant that sends none.
type Config struct {
	Address string // how people reach the server, without a slash at the end; "" when it is not set
	Mail    string // host and port of the mail server, "" for none
	Targets []Target
}

// Sender takes messages to the target of this name; nil when there is none.
func (c *Config) Sender(name string) Sender {
	for _, t := range c.Targets {
		if t.Name == name {
			return t.send
		}
	}
	return nil
}

// Senders are all of them by the target's name.
func (c *Config) Senders() map[string]Sender {
	out := make(map[string]Sender, len(c.Targets))
	for _, t := range c.Targets {
		out[t.Name] = t.send
	}
	return out
}

// Options are what a configuration is read with.
type Options struct {
	Secrets Secrets
	Now     func() time.Time
	Reach   Reach // Resolver and Connect for tests; Hosts and Networks come from the file
}

// Load reads a configuration file. What it does not know is refused, so that a slip of
// the pen is not a target that gets nothing.
func Load(path string, o Options) (*Config, error) {
	b, err := os.ReadFile(path)
	if err != nil {
		return nil, err
	}
	c, err := Parse(string(b), o)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	return c, nil
}

// Parse reads the text of a configuration.
func Parse(text string, o Options) (*Config, error) {
	var f file
	meta, err := toml.Decode(text, &f)
	if pe, ok := errors.AsType[toml.ParseError](err); ok {
		return nil, fmt.Errorf("line %d: %s", pe.Position.Line, pe.Message) // without the line itself
	}
	if err != nil {
		return nil, err
	}
	if unknown := meta.Undecoded(); len(unknown) > 0 {
		return nil, fmt.Errorf("nothing is called %q here", unknown[0])
	}
	if o.Now == nil {
		o.Now = time.Now
	}
	c := &Config{}
	if c.Address, err = publicAddress(f.Address); err != nil {
		return nil, err
	}
	reach := o.Reach
	if err := allow(&reach, f); err != nil {
		return nil, err
	}
	r, err := newRelay(f, &reach, o.Secrets)
	if err != nil {
		return nil, err
	}
	if r != nil {
		c.Mail = r.String()
	}
	for i, ft := range f.Targets {
		t, err := newTarget(ft, r, &reach, o)
		if err != nil {
			return nil, fmt.Errorf("target %d (%s): %w", i+1, ft.Name, err)
		}
		if c.Sender(t.Name) != nil {
			return nil, fmt.Errorf("two targets are called %s", t.Name)
		}
		c.Targets = append(c.Targets, t)
	}
	return c, nil
}

func publicAddress(s string) (string, error) {
	if s == "" {
		return "", nil
	}
	u, err := url.Parse(s)
	if err != nil || u.Scheme != "https" && u.Scheme != "http" || u.Host == "" || u.User != nil || u.RawQuery != "" || u.Fragment != "" {
		return "", errors.New("address must be how people reach this server, such as https://holdfast.example.org")
	}
	return strings.TrimRight(s, "/"), nil
}

func allow(r *Reach, f file) error {
	for _, h := range f.Allow.Hosts {
		if strings.ContainsAny(h, "/@*? ") || h == "" {
			return fmt.Errorf("allow.hosts lists whole names, with or without a port, not %q", h)
		}
		r.Hosts = append(r.Hosts, cleanHost(h))
	}
	for _, n := range f.Allow.Networks {
		p, err := netip.ParsePrefix(n)
		if a, aerr := netip.ParseAddr(n); aerr == nil {
			p, err = netip.PrefixFrom(a, a.BitLen()), nil
		}
		if err != nil || p.Addr().Is4In6() {
			return fmt.Errorf("allow.networks lists networks such as 10.20.0.0/16, not %q", n)
		}
		r.Networks = append(r.Networks, p.Masked())
	}
	return nil
}

func newRelay(f file, reach *Reach, secrets Secrets) (*relay, error) {
	m := f.Mail
	if m.Host == "" {
		return nil, nil
	}
	r := &relay{host: cleanHost(m.Host), port: m.Port, way: m.Encryption, from: m.From, user: m.User, reach: reach}
	if r.way == "" {
		r.way = StartTLS
	}
	if r.port == 0 {
		r.port = map[string]int{StartTLS: 587, ImplicitTLS: 465, NoTLS: 25}[r.way]
	}
	from, err := mail.ParseAddress(m.From)
	_, port, _ := net.SplitHostPort(r.String())
	switch {
	case r.way != StartTLS && r.way != ImplicitTLS && r.way != NoTLS:
		return nil, fmt.Errorf("mail.encryption is %q, %q or %q", StartTLS, ImplicitTLS, NoTLS)
	case err != nil:
		return nil, errors.New("mail.from must be one address, such as holdfast@example.org")
	case !reach.AllowsHost(r.host, port):
		return nil, fmt.Errorf("the mail server %s is not among allow.hosts", r.host)
	case (r.user == "") != (m.Secret == ""):
		return nil, errors.New("mail.user and mail.secret belong together")
	case r.user != "" && r.way == NoTLS:
		return nil, errors.New("a password is not sent to a mail server without encryption")
	}
	r.from = from.String()
	if m.Secret != "" {
		if r.password, err = secrets.Get(m.Secret); err != nil {
			return nil, err
		}
	}
	return r, nil
}

func newTarget(ft fileTarget, r *relay, reach *Reach, o Options) (Target, error) {
	t := Target{Name: ft.Name, Lines: ft.Lines}
	switch {
	case t.Name == "" || len(t.Name) > 60 || oneLine(t.Name) != t.Name:
		return t, errors.New("a target needs a short name")
	case (ft.Webhook == "") == (len(ft.Mail) == 0):
		return t, errors.New("a target is either a webhook or a list of mail addresses")
	case ft.Webhook != "":
		err := t.asWebhook(ft, reach, o)
		return t, err
	case ft.Secret != "":
		return t, errors.New("the password of the mail server belongs into [mail]")
	case r == nil:
		return t, errors.New("there is no mail server: [mail] with its host is missing")
	}
	b := &mailbox{relay: r}
	for _, s := range ft.Mail {
		a, err := mail.ParseAddress(s)
		if err != nil {
			return t, fmt.Errorf("%q is no mail address", s)
		}
		b.to = append(b.to, a.Address)
	}
	t.Way, t.Where, t.send = ByMail, strings.Join(b.to, ", "), b
	return t, nil
}

func (t *Target) asWebhook(ft fileTarget, reach *Reach, o Options) error {
	u, err := url.Parse(ft.Webhook)
	if err != nil || u.Host == "" || u.Opaque != "" || u.Scheme != "https" && u.Scheme != "http" {
		return errors.New("webhook must be an address such as https://tickets.example.org/holdfast") // err would quote it
	}
	port := u.Port()
	if port == "" {
		port = map[string]string{"https": "443", "http": "80"}[u.Scheme]
	}
	switch {
	case u.User != nil:
		return errors.New("a webhook's address holds no name and no password")
	case u.Fragment != "":
		return errors.New("a webhook's address has no part after #")
	case !reach.AllowsHost(u.Hostname(), port):
		return fmt.Errorf("%s is not among allow.hosts", u.Hostname())
	case ft.Secret == "":
		return errors.New("a webhook needs a secret to sign with: name it")
	}
	secret, err := o.Secrets.Get(ft.Secret)
	if err != nil {
		return err
	}
	keys, err := SigningKeys(secret)
	if err != nil {
		return err
	}
	t.Way, t.Where, t.send = ByWebhook, u.Scheme+"://"+u.Host, newWebhook(u, keys, reach, o.Now)
	return nil
}

// NewTarget makes a target that no configuration file describes: for the demonstration
// and for tests.
func NewTarget(name string, way Way, where string, send Sender) Target {
	return Target{Name: name, Way: way, Where: where, send: send}
}
