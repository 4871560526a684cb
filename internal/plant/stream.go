package plant

import "github.com/google/uuid"

// InUse lists the streams of a machine that are not retired, in their order.
func (m Machine) InUse() []Stream {
	var out []Stream
	for _, s := range m.Streams {
		if !s.Retired {
			out = append(out, s)
		}
	}
	return out
}

// StreamName is what the machine calls one of its streams, "" when it has no such one.
func (m Machine) StreamName(id uuid.UUID) string {
	for _, s := range m.Streams {
		if s.ID == id {
			return s.Name
		}
	}
	return ""
}

// NextStreams says from which stream each part of the next subgroup is to be taken: all
// streams in turn. Where a subgroup is no whole number of turns, it goes on behind the
// last stream of the subgroup before, so that in the long run none is measured more often
// than another. It is empty for a machine without streams.
func NextStreams(streams []Stream, size int, before []uuid.UUID) []uuid.UUID {
	n := len(streams)
	if n == 0 || size <= 0 {
		return nil
	}
	first := 0
	if size%n != 0 && len(before) > 0 {
		for i, s := range streams {
			if s.ID == before[len(before)-1] {
				first = i + 1
			}
		}
	}
	out := make([]uuid.UUID, size)
	for i := range out {
		out[i] = streams[(first+i)%n].ID
	}
	return out
}
