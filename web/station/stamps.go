package station

import (
	"net/url"
	"strconv"
	"sync"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
)

// stampKept is how long the first stamp of a number holds: much longer than any
// double tap.
const stampKept = 10 * time.Minute

// stamps keeps for a while what time something had when it was first sent: for what comes
// without a time of its own, and for what comes with one, whose correction is measured
// anew at every send and is never the same to the millisecond. A double tap then repeats
// the first send instead of contradicting it.
type stamps struct {
	mu    sync.Mutex
	first map[uuid.UUID]stamp
}

type stamp struct{ sent, at time.Time }

func newStamps() *stamps { return &stamps{first: make(map[uuid.UUID]stamp)} }

// of returns when id was first sent, which is now if it never was.
func (s *stamps) of(id uuid.UUID, now time.Time) time.Time { return s.as(id, now, now) }

// as returns what time id had when it was first sent, which is at if it never was.
func (s *stamps) as(id uuid.UUID, now, at time.Time) time.Time {
	s.mu.Lock()
	defer s.mu.Unlock()
	if first, ok := s.first[id]; ok && now.Sub(first.sent) < stampKept {
		return first.at
	}
	for k, first := range s.first {
		if now.Sub(first.sent) >= stampKept {
			delete(s.first, k)
		}
	}
	s.first[id] = stamp{now, at}
	return at
}

// forget drops a stamp: what was sent was refused, and the next try is a new one.
func (s *stamps) forget(id uuid.UUID) {
	s.mu.Lock()
	defer s.mu.Unlock()
	delete(s.first, id)
}

// sentTime reads when a form was saved by the tablet's clock, and by how much that
// clock must be corrected, from the milliseconds that the script puts into "taken"
// and "sent". ok is false when the form has no time of its own.
func sentTime(form url.Values, now time.Time) (taken time.Time, skew time.Duration, ok bool, err error) {
	if form.Get("taken") == "" {
		return time.Time{}, 0, false, nil
	}
	taken, err = milliseconds(form.Get("taken"))
	if err != nil {
		return time.Time{}, 0, false, err
	}
	if form.Get("sent") == "" {
		return taken, 0, true, nil
	}
	sent, err := milliseconds(form.Get("sent"))
	if err != nil {
		return time.Time{}, 0, false, err
	}
	return taken, now.Sub(sent).Truncate(time.Millisecond), true, nil
}

// milliseconds reads an instant within the years that are ever meant.
func milliseconds(text string) (time.Time, error) {
	ms, err := strconv.ParseInt(text, 10, 64)
	if err != nil || ms < 0 || ms > 253402300799999 { // the year 9999
		return time.Time{}, plant.Invalidf("taken_at", "The time that came with this cannot be read.")
	}
	return time.UnixMilli(ms).UTC(), nil
}
