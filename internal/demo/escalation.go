package demo

import (
	"context"
	"fmt"
	"log/slog"
	"slices"
	"time"

	"holdfast/internal/outbox"
	"holdfast/internal/plant"
)

// Messages is where the works' messages go: nowhere. The shift lead gets them, the ticket
// system has moved and refuses them.
func Messages() *outbox.Config {
	return &outbox.Config{Targets: []outbox.Target{
		outbox.NewTarget("shift lead", outbox.ByMail, "shift.lead@kestrel-row.example", delivered{}),
		outbox.NewTarget("tickets", outbox.ByWebhook, "https://tickets.kestrel-row.example", refused{}),
	}}
}

// delivered takes every message and sends none: the works is invented.
type delivered struct{}

func (delivered) Send(context.Context, plant.Outgoing) error { return nil }

type refused struct{}

func (refused) Send(context.Context, plant.Outgoing) error {
	return &outbox.Refused{Why: "It answered 404 Not Found.", Lasting: true}
}

// quietReason is why the supervisor keeps the bath quiet.
const quietReason = "Heater fuse changed, the bath comes up to temperature until the evening"

// escalate lets happen what follows from what nobody took in the last hours: one matter
// is known and kept quiet, the others are brought to more and more people, at the times
// at which the program would have done it.
func (b *builder) escalate(ctx context.Context) error {
	states, err := b.store.StationStates(ctx, 0)
	if err != nil {
		return err
	}
	var at []time.Time
	for _, st := range states {
		for _, c := range st.Characteristics {
			switch {
			case c.Matter == nil || !c.Matter.Calls():
			case st.Name == "Anodising":
				if err := b.keepQuiet(ctx, *c.Matter); err != nil {
					return err
				}
			default:
				for _, step := range plant.Steps {
					if after, on := st.EscalationPlan.Times(c.Matter.CallKind()).After(step); on {
						at = append(at, c.Matter.OpenedAt.Add(after))
					}
				}
			}
		}
	}
	slices.SortFunc(at, time.Time.Compare)
	for _, t := range at {
		if t.After(b.end) {
			break
		}
		if err := b.fire(ctx, t); err != nil {
			return err
		}
	}
	return nil
}

func (b *builder) keepQuiet(ctx context.Context, m plant.Matter) error {
	at := m.OpenedAt.Add(4 * time.Minute)
	err := b.store.WithClock(func() time.Time { return at }).QuietMatter(ctx, plant.QuietRequest{ID: id(), Matter: m.ID, Version: m.Version,
		Until: at.Add(11 * time.Hour).Truncate(30 * time.Minute), Reason: quietReason, Person: b.people[plant.Supervisor][0]})
	if err != nil {
		return fmt.Errorf("keep a matter quiet: %w", err)
	}
	return nil
}

// fire fires what is due at a time, and sends the messages that leave because of it.
func (b *builder) fire(ctx context.Context, t time.Time) error {
	now := t
	st := b.store.WithClock(func() time.Time { return now })
	states, err := st.StationStates(ctx, 0)
	if err != nil {
		return err
	}
	out := Messages()
	for _, c := range plant.CallsDue(states, t) {
		var messages []plant.Message
		if c.Step == plant.ByMessage {
			for _, target := range out.Targets {
				messages = append(messages, plant.Message{Target: target.Name, Body: "-",
					Title: c.Station.Name + ", " + c.Characteristic.Name + ": nobody has taken it"})
			}
		}
		if _, err := st.FireStep(ctx, c, messages); err != nil {
			return err
		}
	}
	w := outbox.Worker{Store: st, Senders: out.Senders(), Log: slog.New(slog.DiscardHandler), Now: func() time.Time { return now }}
	for range 4 { // the ticket system is tried three times
		for _, target := range out.Targets {
			if err := w.Deliver(ctx, target.Name); err != nil {
				return err
			}
		}
		now = now.Add(20 * time.Second)
	}
	return nil
}

// leaves reports whether the simulator leaves a matter to visitors: supervisors are called
// about it, or it is kept quiet.
func leaves(c plant.CharacteristicState) bool {
	step, _ := c.Escalation.Reached()
	return step >= plant.ToSupervisors || c.Escalation.Quiet.Set()
}

// aloneNow reports whether nobody will come to what opens on the track now.
func (t *track) aloneNow(day float64) bool {
	return slices.ContainsFunc(t.acting(day), func(i int) bool { return t.faults[i].alone })
}
