package relay

import (
	"syscall"

	mqtt "github.com/eclipse/paho.mqtt.golang"
)

// fullDisk takes part of a line and no more, as a disk does that is full.
type fullDisk struct{ file }

func (d fullDisk) Write(b []byte) (int, error) {
	n, _ := d.file.Write(b[:len(b)/2])
	return n, syscall.ENOSPC
}

// FillDisk makes the disk of a spool full, or gives it room again.
func FillDisk(s *Spool, full bool) {
	s.mu.Lock()
	defer s.mu.Unlock()
	if d, was := s.file.(fullDisk); was && !full {
		s.file = d.file
	} else if !was && full {
		s.file = fullDisk{s.file}
	}
}

// payload is a message of the broker that is no repetition.
type payload struct {
	mqtt.Message
	topic string
	body  []byte
}

func (p payload) Topic() string     { return p.topic }
func (p payload) Payload() []byte   { return p.body }
func (p payload) MessageID() uint16 { return 1 }
func (p payload) Duplicate() bool   { return false }

// TakePayload gives the broker's reader one message; true when it may be acknowledged.
func TakePayload(b *Broker, topic string, body []byte) bool {
	return b.take(payload{topic: topic, body: body})
}

// OnTaken has f called with each message that was taken and acknowledged.
func OnTaken(b *Broker, f func(again bool)) { b.onTaken = f }
