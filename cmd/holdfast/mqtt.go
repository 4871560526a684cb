package main

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"strings"
	"time"

	"github.com/BurntSushi/toml"

	"holdfast/internal/relay"
)

// mqttCmd sends what is published at the plant's broker.
type mqttCmd struct {
	sending
	Config string `arg:"" help:"File that names the broker and what its topics mean, TOML." type:"existingfile"`
}

// brokerFile is that file:
//
//	broker = "ssl://broker.plant:8883"   # or tcp://broker.plant:1883
//	client = "holdfast-axles"            # the broker keeps messages under this name
//	user = "holdfast"
//	password_file = "/etc/holdfast/broker-password"
//	ca = "/etc/holdfast/broker-ca.pem"
//	rounds = "axles/rounds"              # whole rounds, as POST /api/v1/rounds takes them
//
//	[[readings]]                         # one number, with or without its unit, a message
//	topic = "axles/turning-1/diameter"
//	characteristic = "Axle seat diameter"
//	unit = "mm"
//	size = 5
type brokerFile struct {
	Broker       string
	Client       string
	User         string
	PasswordFile string `toml:"password_file"`
	CA           string
	Rounds       string
	Readings     []struct {
		Topic          string
		Characteristic string
		Station        string
		Unit           string
		Size           int
		Prefix, Suffix string
		Sequence       bool
		WithinMinutes  int `toml:"within_minutes"`
	}
}

func (c *mqttCmd) Run(ctx context.Context, log *slog.Logger) error {
	return c.with(ctx, log, func(ctx context.Context, s *relay.Spool) error {
		s.Strict = true // the broker sends again what is not acknowledged
		b, err := readBroker(c.Config, s, log)
		if err != nil {
			return err
		}
		return b.Run(ctx)
	})
}

func readBroker(path string, s *relay.Spool, log *slog.Logger) (*relay.Broker, error) {
	var f brokerFile
	meta, err := toml.DecodeFile(path, &f)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	if unknown := meta.Undecoded(); len(unknown) > 0 {
		return nil, fmt.Errorf("%s: %s is not known", path, unknown[0])
	}
	if f.Broker == "" || f.Client == "" {
		return nil, fmt.Errorf("%s: name the broker and a client", path)
	}
	b := &relay.Broker{URL: f.Broker, Client: f.Client, User: f.User, Rounds: f.Rounds, Readings: map[string]*relay.Gather{}, Spool: s, Now: time.Now, Log: log}
	if f.PasswordFile != "" {
		if b.Password, err = readSecret(f.PasswordFile); err != nil {
			return nil, err
		}
	}
	if b.TLS, err = trusting(f.CA); err != nil {
		return nil, err
	}
	for _, r := range f.Readings {
		if strings.ContainsAny(r.Topic, "+#") {
			return nil, fmt.Errorf("%s: a topic of readings has no wildcard, since each means one characteristic", path)
		}
		if r.Topic == "" || r.Characteristic == "" || r.Unit == "" || r.Size < 1 || r.Size > 25 {
			return nil, fmt.Errorf("%s: readings need topic, characteristic, unit and a size of 1 to 25", path)
		}
		within := 30 * time.Minute
		if r.WithinMinutes > 0 {
			within = time.Duration(r.WithinMinutes) * time.Minute
		}
		g := &relay.Gather{Spool: s, Now: time.Now, Source: relay.Source{Characteristic: r.Characteristic, Station: r.Station, Size: r.Size, Within: within,
			Pattern: relay.Pattern{Prefix: r.Prefix, Suffix: r.Suffix, Unit: r.Unit, Sequence: r.Sequence}}}
		if err := g.Flush(); err != nil {
			log.Error("what waited could not be kept", "error", err)
		}
		b.Readings[r.Topic] = g
	}
	if b.Rounds == "" && len(b.Readings) == 0 {
		return nil, errors.New(path + ": name a topic of rounds, or of readings")
	}
	return b, nil
}
