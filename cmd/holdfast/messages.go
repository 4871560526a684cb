package main

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"strings"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/escalation"
	"holdfast/internal/outbox"
	"holdfast/internal/plant"
	"holdfast/web/admin"
	"holdfast/web/calls"
	"holdfast/web/ui"
	"holdfast/web/words"
)

// messaging says where messages may go.
type messaging struct {
	Messages   string `help:"File that says where messages go when nobody takes something (deploy/messages.toml is an example); without it none leave the box." env:"HOLDFAST_MESSAGES" placeholder:"FILE"`
	SecretsDir string `name:"secrets-dir" help:"Folder of the secrets that the file names, a file each; they may also be credentials of the service or HOLDFAST_SECRET_NAME in the environment." env:"HOLDFAST_SECRETS_DIR" placeholder:"FOLDER"`
}

// load reads the configuration; without one nothing leaves the box.
func (m messaging) load() (*outbox.Config, error) {
	if m.Messages == "" {
		return &outbox.Config{}, nil
	}
	c, err := outbox.Load(m.Messages, outbox.Options{Secrets: outbox.SystemSecrets(m.SecretsDir)})
	if err != nil {
		return nil, fmt.Errorf("where messages go: %w", err)
	}
	return c, nil
}

// sayMessages tells the log what is configured and what is not.
func sayMessages(log *slog.Logger, c *outbox.Config) {
	if len(c.Targets) == 0 {
		log.Warn("no messages leave the box when nobody takes something: no targets are configured; see --messages")
		return
	}
	for _, t := range c.Targets {
		log.Info("messages go to", "target", t.Name, "by", string(t.Way), "at", t.Where, "lines", lines(t))
	}
	if c.Mail == "" {
		log.Info("no mail server is configured")
	}
	if c.Address == "" {
		log.Warn("messages hold no link: the address of this server is not configured")
	}
}

func lines(t outbox.Target) string {
	if len(t.Lines) == 0 {
		return "all"
	}
	return strings.Join(t.Lines, ", ")
}

// compose writes the messages that a call sends to the targets of its line.
func (p *program) compose(c plant.Call) []plant.Message {
	pl := *p.plant.Load()
	text, err := calls.TextOf(ui.NewFormat(words.For("en"), pl.Location, p.Clock()), pl, c, p.Messages.Address)
	if err != nil {
		p.Log.Error("a message could not be written", "error", err)
		return nil
	}
	var out []plant.Message
	for _, t := range p.Messages.Targets {
		if !t.Takes(c.Line.Name) {
			continue
		}
		m := plant.Message{Target: t.Name, Title: text.Title, Body: text.Mail}
		if t.Way == outbox.ByWebhook {
			m.Body = text.JSON
		}
		out = append(out, m)
	}
	return out
}

// lookAfter runs what finds somebody for what nobody takes, until ctx ends.
func (p *program) lookAfter(ctx context.Context) {
	watch := escalation.Watch{Store: p.store, Compose: p.compose, Log: p.Log, Now: p.Clock}
	p.running.Go(func() { watch.Run(ctx) })
	worker := outbox.Worker{Store: p.store, Senders: p.Messages.Senders(), Log: p.Log, Now: p.Clock}
	p.running.Go(func() { worker.Run(ctx) })
}

// messagesPage is what the administrators' page about messages works with.
func (p *program) messagesPage() admin.Messages {
	m := admin.Messages{Store: p.store, Try: func(ctx context.Context, target string) error {
		return tryTarget(ctx, p.Messages, target, p.Clock())
	}}
	for _, t := range p.Messages.Targets {
		m.Targets = append(m.Targets, admin.MessageTarget{Name: t.Name, Way: string(t.Way), Where: t.Where, Lines: strings.Join(t.Lines, ", ")})
	}
	return m
}

type messagesCmd struct {
	Show messagesShowCmd `cmd:"" help:"Read the configuration and say where messages go; nothing is sent."`
	Try  messagesTryCmd  `cmd:"" help:"Send a test message now and say what came of it."`
}

type messagesShowCmd struct{ messaging }

func (c *messagesShowCmd) Run() error {
	cfg, err := c.load()
	if err != nil {
		return err
	}
	if len(cfg.Targets) == 0 {
		fmt.Println("No targets are configured: no messages leave the box.")
		return nil
	}
	for _, t := range cfg.Targets {
		fmt.Printf("%-20s %-8s %s, lines: %s\n", t.Name, t.Way, t.Where, lines(t))
	}
	return nil
}

type messagesTryCmd struct {
	messaging
	Target []string `arg:"" optional:"" help:"Names of the targets; all when there is none."`
}

func (c *messagesTryCmd) Run(ctx context.Context) error {
	cfg, err := c.load()
	if err != nil {
		return err
	}
	if len(cfg.Targets) == 0 {
		return errors.New("no targets are configured; see --messages")
	}
	names := c.Target
	if len(names) == 0 {
		for _, t := range cfg.Targets {
			names = append(names, t.Name)
		}
	}
	var failed []error
	for _, name := range names {
		if err := tryTarget(ctx, cfg, name, time.Now()); err != nil {
			failed = append(failed, fmt.Errorf("%s: %w", name, err))
			continue
		}
		fmt.Printf("%s has taken the test message.\n", name)
	}
	return errors.Join(failed...)
}

// tryTarget sends a test message to one target, past the outbox.
func tryTarget(ctx context.Context, cfg *outbox.Config, name string, now time.Time) error {
	for _, t := range cfg.Targets {
		if t.Name != name {
			continue
		}
		text := calls.Test(words.For("en"), now)
		m := plant.Outgoing{ID: uuid.Must(uuid.NewV7()), CreatedAt: now, Attempts: 1, Message: plant.Message{Target: name, Title: text.Title, Body: text.Mail}}
		if t.Way == outbox.ByWebhook {
			m.Body = text.JSON
		}
		return outbox.Try(ctx, cfg.Sender(name), m)
	}
	return errors.New("there is no target of this name")
}
