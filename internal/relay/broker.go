package relay

import (
	"context"
	"crypto/tls"
	"encoding/json"
	"errors"
	"fmt"
	"log/slog"
	"strings"
	"sync"
	"time"
	"unicode"
	"unicode/utf8"

	mqtt "github.com/eclipse/paho.mqtt.golang"
	"github.com/eclipse/paho.mqtt.golang/packets"
	"github.com/google/uuid"
)

// Broker is the plant's MQTT broker and what is read from it. The client's name, a
// session that the broker keeps, and quality of service 1 together mean that what was
// published while the connection was down comes afterwards.
type Broker struct {
	URL      string // tcp://host:1883 or ssl://host:8883
	Client   string
	User     string
	Password string
	TLS      *tls.Config
	Rounds   string             // topic of whole rounds, as POST /api/v1/rounds takes them; "" for none
	Readings map[string]*Gather // by topic
	Lots     map[string]bool    // topics that say which order or lot runs from now on
	Spool    *Spool
	Now      func() time.Time
	Log      *slog.Logger

	onTaken func(again bool) // tests hear of each message that was taken
}

const connectPause = 10 * time.Second

// Run reads from the broker until ctx ends. A message is acknowledged when it is on the
// disk, so that the broker keeps what is not.
func (b *Broker) Run(ctx context.Context) error {
	lost := make(chan struct{}, 1)
	opt := mqtt.NewClientOptions().AddBroker(b.URL).SetClientID(b.Client).SetUsername(b.User).SetPassword(b.Password).SetTLSConfig(b.TLS).
		SetProtocolVersion(4).SetCleanSession(false).SetAutoAckDisabled(true).SetOrderMatters(true).
		SetAutoReconnect(true).SetMaxReconnectInterval(connectPause).SetConnectRetry(true).SetConnectRetryInterval(time.Second).
		SetConnectionNotificationHandler(b.tell()).
		SetDefaultPublishHandler(func(_ mqtt.Client, m mqtt.Message) {
			if b.take(m) {
				m.Ack()
				if b.onTaken != nil {
					b.onTaken(m.Duplicate())
				}
				return
			}
			select {
			case lost <- struct{}{}:
			default:
			}
		}).
		SetConnectionLostHandler(func(_ mqtt.Client, err error) {
			b.Log.Warn("the broker is out of reach; it keeps what is published meanwhile", "broker", b.URL, "error", err)
		}).
		SetOnConnectHandler(func(c mqtt.Client) {
			b.Log.Info("connected to the broker", "broker", b.URL)
			if t := c.SubscribeMultiple(b.topics(), nil); t.Wait() && t.Error() != nil {
				b.Log.Error("the topics could not be subscribed to", "error", t.Error())
			}
		})
	client := mqtt.NewClient(opt)
	client.Connect() // goes on trying; the handlers tell
	defer client.Disconnect(250)
	for {
		select {
		case <-ctx.Done():
			return nil
		case <-lost:
			// The broker sends again what was not acknowledged when the session is taken up again.
			client.Disconnect(250)
			select {
			case <-ctx.Done():
				return nil
			case <-time.After(connectPause):
			}
			client.Connect()
		}
	}
}

// tell logs why the broker does not let us in: a certificate of another authority, one that
// is over, a wrong password. It is tried every second, so the same is said once a minute.
func (b *Broker) tell() mqtt.ConnectionNotificationHandler {
	var mu sync.Mutex
	var last string
	var at time.Time
	return func(_ mqtt.Client, n mqtt.ConnectionNotification) {
		var reason error
		switch n := n.(type) {
		case mqtt.ConnectionNotificationBrokerFailed: // there was no connection
			reason = n.Reason
		case mqtt.ConnectionNotificationFailed: // the broker said no
			if !errors.Is(n.Reason, packets.ErrorNetworkError) {
				reason = n.Reason
			}
		}
		if reason == nil {
			return
		}
		mu.Lock()
		defer mu.Unlock()
		if why := reason.Error(); why != last || time.Since(at) > time.Minute {
			last, at = why, time.Now()
			b.Log.Error("the broker cannot be connected to; it is tried again", "broker", b.URL, "error", why)
		}
	}
}

func (b *Broker) topics() map[string]byte {
	all := make(map[string]byte, len(b.Readings)+1)
	for topic := range b.Readings {
		all[topic] = 1
	}
	for topic := range b.Lots {
		all[topic] = 1
	}
	if b.Rounds != "" {
		all[b.Rounds] = 1
	}
	return all
}

// take keeps one message; true when it is on the disk.
func (b *Broker) take(m mqtt.Message) bool {
	mark := fmt.Sprintf("%s %d %s", m.Topic(), m.MessageID(), m.Payload())
	source := b.Rounds
	g := b.Readings[m.Topic()]
	if g != nil {
		source = g.key()
	}
	if b.Lots[m.Topic()] {
		return b.lot(m.Topic(), string(m.Payload()))
	}
	if g == nil && b.Rounds == "" {
		b.Log.Warn("a message came that no topic of ours asks for", "topic", m.Topic())
		return true
	}
	if m.Duplicate() && b.Spool.Seen(source, mark, false) {
		return true // it was taken, and the broker did not hear of it
	}
	var durable bool
	var err error
	if g != nil {
		durable, err = g.Take(string(m.Payload()), mark)
	} else {
		durable, err = b.round(m.Payload(), mark)
	}
	if err != nil {
		b.Log.Error("a message could not be kept; the broker keeps it", "topic", m.Topic(), "error", err)
	}
	return durable && err == nil
}

// maxLot is the most characters of an order or lot that the server takes.
const maxLot = 80

// lot keeps which lot runs from now on. Of one that cannot be, none is known.
func (b *Broker) lot(topic, payload string) bool {
	lot := strings.TrimSpace(payload)
	bad := !utf8.ValidString(lot) || utf8.RuneCountInString(lot) > maxLot || strings.ContainsFunc(lot, unicode.IsControl)
	if bad {
		lot = ""
	}
	err := b.Spool.SetLot(topic, lot)
	if err == nil && bad {
		g := Gather{Source: Source{Characteristic: topic}, Spool: b.Spool, Now: b.Now}
		_, err = g.bad(strings.ToValidUTF8(payload, "\uFFFD"), errRefused, "", b.Now())
	}
	if err != nil {
		b.Log.Error("a lot could not be kept; the broker keeps it", "topic", topic, "error", err)
	}
	return err == nil
}

// round keeps a whole round under its own number. What is no round is a bad line.
func (b *Broker) round(payload []byte, mark string) (bool, error) {
	var sent struct {
		ID uuid.UUID `json:"id"`
	}
	if err := json.Unmarshal(payload, &sent); err == nil && sent.ID != uuid.Nil {
		return b.Spool.Put(b.Rounds, mark, false, Message{ID: sent.ID.String(), Path: "rounds", Body: payload})
	}
	g := Gather{Source: Source{Characteristic: b.Rounds}, Spool: b.Spool, Now: b.Now}
	return g.bad(string(payload), ErrNumber, mark, b.Now())
}
