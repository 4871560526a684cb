package auth

import (
	"context"
	"fmt"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
)

// Ended gives those of the sessions (by ID) that are over: signed out or
// expired here or on another server, unused for too long, of somebody who is no
// longer active, or on a device that was revoked. Sockets of devices without a
// person go by DeviceSession; those of revoked devices are over too.
func (s *Sessions) Ended(ctx context.Context, ids []string) ([]string, error) {
	stored, err := s.findMany(ctx, ids)
	if err != nil {
		return nil, fmt.Errorf("look up sessions: %w", err)
	}
	asked := make(map[string]claim, len(ids))
	var devices, people []uuid.UUID
	for _, id := range ids {
		c, err := s.claimOf(id, stored[id])
		if err != nil {
			return nil, err
		}
		asked[id] = c
		if c.device != uuid.Nil {
			devices = append(devices, c.device)
		}
		if c.person != uuid.Nil {
			people = append(people, c.person)
		}
	}
	if err := s.people.fill(ctx, people); err != nil {
		return nil, err
	}
	letIn, err := s.opt.Devices.present(ctx, devices)
	if err != nil {
		return nil, err
	}
	var ended []string
	for _, id := range ids {
		over, err := s.over(ctx, asked[id], letIn)
		if err != nil {
			return nil, err
		}
		if over {
			// Its page asks at once, and must not be let in by what is remembered.
			s.stored.known.forget(id)
			ended = append(ended, id)
		}
	}
	return ended, nil
}

// claim is what a session, or a device's socket without one, rests on.
type claim struct {
	alone    bool // a device without a person
	none     bool // there is no such session
	person   uuid.UUID
	device   uuid.UUID // Nil when it is bound to none
	deadline time.Time
	seen     time.Time
	begun    time.Time
}

func (s *Sessions) claimOf(id string, data []byte) (claim, error) {
	if device, ok := deviceOfSession(id); ok {
		return claim{alone: true, device: device}, nil
	}
	if data == nil {
		return claim{none: true}, nil
	}
	deadline, values, err := s.scs.Codec.Decode(data)
	if err != nil {
		return claim{}, fmt.Errorf("read a session: %w", err)
	}
	c := claim{deadline: deadline}
	who, _ := values[keyPerson].(string)
	seen, _ := values[keySeen].(int64)
	begun, _ := values[keyBegun].(int64)
	c.seen, c.begun = time.Unix(seen, 0), time.UnixMicro(begun)
	if c.person, err = uuid.Parse(who); err != nil {
		c.none = true
	}
	if on, _ := values[keyDevice].(string); on != "" {
		if c.device, err = uuid.Parse(on); err != nil {
			c.none = true
		}
	}
	return c, nil
}

func (s *Sessions) findMany(ctx context.Context, ids []string) (map[string][]byte, error) {
	if s.opt.FindMany != nil {
		return s.opt.FindMany(ctx, ids)
	}
	out := make(map[string][]byte, len(ids))
	for _, id := range ids {
		data, ok, err := s.opt.Store.Find(id)
		if err != nil {
			return nil, err
		}
		if ok {
			out[id] = data
		}
	}
	return out, nil
}

func (s *Sessions) over(ctx context.Context, c claim, letIn map[uuid.UUID]bool) (bool, error) {
	if c.none || c.device != uuid.Nil && !letIn[c.device] {
		return true, nil
	}
	if c.alone {
		return false, nil
	}
	now := s.opt.Now()
	// How soon a tablet locks is not known here; its next request asks.
	if !now.Before(c.deadline) || now.Sub(c.seen) >= s.opt.Idle {
		return true, nil
	}
	p, err := s.people.find(ctx, c.person)
	if plant.IsKind(err, plant.NotFound) {
		return true, nil
	}
	return err == nil && (!p.Active || c.begun.Before(p.SessionsSince)), err
}
