package store

import (
	"sync/atomic"
	"time"

	"holdfast/internal/plant"
)

// counts grow from when the store was opened.
type counts struct {
	saves, refused, failed atomic.Uint64
	judged                 atomic.Uint64
	refolds, refolded      atomic.Uint64
}

// Counts is what a store did since it was opened, and how its connections are used now.
type Counts struct {
	Saves   uint64 // rounds taken, repeated sends included
	Refused uint64 // rounds that could not be taken as they came: wrong, or set aside for a person
	Failed  uint64 // rounds that a fault of ours or of the database stopped

	Judged   uint64 // subgroups judged as they came, late ones included
	Refolds  uint64 // times that history was judged again
	Refolded uint64 // subgroups walked over then

	Connections, Idle, Busy, Limit int32
	Waits                          int64         // times that somebody had to wait for a connection
	Waited                         time.Duration // in all
}

// Counts reads the counters.
func (s *Store) Counts() Counts {
	p := s.pool.Stat()
	return Counts{
		Saves: s.counts.saves.Load(), Refused: s.counts.refused.Load(), Failed: s.counts.failed.Load(),
		Judged: s.counts.judged.Load(), Refolds: s.counts.refolds.Load(), Refolded: s.counts.refolded.Load(),
		Connections: p.TotalConns(), Idle: p.IdleConns(), Busy: p.AcquiredConns(), Limit: p.MaxConns(),
		Waits: p.EmptyAcquireCount(), Waited: p.EmptyAcquireWaitTime(),
	}
}

// CountRefused counts a round that was refused before it came to Record.
func (s *Store) CountRefused() { s.counts.refused.Add(1) }

// saved counts how a save ended.
func (c *counts) saved(err error) {
	switch {
	case err == nil:
		c.saves.Add(1)
	case plant.IsKind(err, plant.Invalid), plant.IsKind(err, plant.Conflict), plant.IsKind(err, plant.NotFound), plant.IsKind(err, plant.Forbidden):
		c.refused.Add(1)
	default:
		c.failed.Add(1)
	}
}
