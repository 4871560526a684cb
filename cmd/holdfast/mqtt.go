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
//	lot_topic = "axles/turning-1/lot"    # says, as plain text, the order or lot that runs from then on
//	streams = ["spindle 1", "spindle 2", "spindle 1", "spindle 2", "spindle 1"]
//	                                     # one for each reading in their order, or one for all that this topic says
//
// Several topics of one characteristic fill the same subgroup, such as one for each spindle.
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
		WithinMinutes  int    `toml:"within_minutes"`
		LotTopic       string `toml:"lot_topic"`
		Streams        []string
	}
}

func (c *mqttCmd) Run(ctx context.Context, log *slog.Logger) error {
	client, err := c.client()
	if err != nil {
		return err
	}
	return c.with(ctx, log, func(ctx context.Context, s *relay.Spool) error {
		s.Strict = true // the broker sends again what is not acknowledged
		b, err := readBroker(c.Config, s, log, func(station, characteristic string) func(string) error {
			return c.measuring(ctx, client, station, characteristic)
		})
		if err != nil {
			return err
		}
		return b.Run(ctx)
	})
}

// readBroker reads the file. measuring gives what tells whether a number can be a reading
// of a characteristic.
func readBroker(path string, s *relay.Spool, log *slog.Logger, measuring func(station, characteristic string) func(number string) error) (*relay.Broker, error) {
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
	b := &relay.Broker{URL: f.Broker, Client: f.Client, User: f.User, Rounds: f.Rounds, Readings: map[string]*relay.Gather{}, Lots: map[string]bool{}, Spool: s, Now: time.Now, Log: log}
	if f.PasswordFile != "" {
		if b.Password, err = readSecret(f.PasswordFile); err != nil {
			return nil, err
		}
	}
	if f.User != "" && !strings.HasPrefix(f.Broker, "ssl://") && !strings.HasPrefix(f.Broker, "wss://") && !strings.HasPrefix(f.Broker, "tls://") {
		log.Warn("user and password travel to the broker in the clear; use ssl:// where the broker has it", "broker", f.Broker)
	}
	if b.TLS, err = trusting(f.CA); err != nil {
		return nil, err
	}
	for _, r := range f.Readings {
		if strings.ContainsAny(r.Topic+r.LotTopic, "+#") {
			return nil, fmt.Errorf("%s: a topic of readings or of a lot has no wildcard, since each means one thing", path)
		}
		within := 30 * time.Minute
		if r.WithinMinutes > 0 {
			within = time.Duration(r.WithinMinutes) * time.Minute
		}
		g := &relay.Gather{Spool: s, Now: time.Now, Source: relay.Source{Characteristic: r.Characteristic, Station: r.Station, Size: r.Size, Streams: r.Streams,
			Within: within, Pattern: relay.Pattern{Prefix: r.Prefix, Suffix: r.Suffix, Unit: r.Unit, Sequence: r.Sequence}}}
		if err := g.Check(); err != nil {
			return nil, fmt.Errorf("%s: %s: %w", path, r.Topic, err)
		}
		if r.Topic == "" || b.Readings[r.Topic] != nil || b.Lots[r.Topic] || r.Topic == f.Rounds {
			return nil, fmt.Errorf("%s: readings need a topic of their own, %q", path, r.Topic)
		}
		if r.LotTopic != "" {
			if b.Readings[r.LotTopic] != nil || r.LotTopic == r.Topic || r.LotTopic == f.Rounds {
				return nil, fmt.Errorf("%s: %s says readings or rounds, and no lot", path, r.LotTopic)
			}
			b.Lots[r.LotTopic] = true
			g.Lot = func() string { return s.Lot(r.LotTopic) }
		}
		g.Fits = measuring(r.Station, r.Characteristic)
		for topic, o := range b.Readings {
			if o.Characteristic == g.Characteristic && o.Station == g.Station && (o.Size != g.Size || o.Unit != g.Unit || len(o.Streams) != 1 || len(g.Streams) != 1) {
				return nil, fmt.Errorf("%s: %s and %s fill the same subgroup: they need the same size and unit, and one stream each", path, topic, r.Topic)
			}
		}
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
