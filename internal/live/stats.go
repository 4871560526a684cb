package live

import "sync/atomic"

// Stats is a reading of the hub's counters. Sockets and Topics are as they are
// now; the others count since the start.
type Stats struct {
	Sockets      int64 // connected now
	Topics       int64 // watched by somebody now
	Renders      int64 // calls of the renderer, repeats included
	RenderErrors int64 // calls that failed
	Changed      int64 // fragments that got a new version
	Unchanged    int64 // fragments rendered again with the same bytes
	Messages     int64 // state and stale messages written to sockets
	Coalesced    int64 // states merged into one that a client had not yet taken
	Slow         int64 // clients cut off because they took nothing for the write timeout
	Ended        int64 // sockets ended by Drop or by Recheck
	Refused      int64 // sockets refused: too many, or Refuse
}

type counters struct {
	sockets, topics, renders, renderErrors, changed, unchanged atomic.Int64
	messages, coalesced, slow, ended, refused                  atomic.Int64
}

// Stats reads the counters. They are read one after another, so they need not
// belong to one instant.
func (h *Hub) Stats() Stats {
	c := &h.count
	return Stats{
		Sockets: c.sockets.Load(), Topics: c.topics.Load(),
		Renders: c.renders.Load(), RenderErrors: c.renderErrors.Load(),
		Changed: c.changed.Load(), Unchanged: c.unchanged.Load(),
		Messages: c.messages.Load(), Coalesced: c.coalesced.Load(),
		Slow: c.slow.Load(), Ended: c.ended.Load(), Refused: c.refused.Load(),
	}
}
