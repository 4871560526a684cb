package plant

import (
	"time"

	"github.com/google/uuid"

	"holdfast/internal/spc/watch"
)

// BoundaryKind is why the fold starts afresh.
type BoundaryKind string

const (
	ByRevision   BoundaryKind = "revision"   // a revision comes into force
	BySetup      BoundaryKind = "setup"      // a set-up under which the limits mean nothing: learning from here
	ByRestart    BoundaryKind = "restart"    // a matter was closed with a fix
	ByChangeover BoundaryKind = "changeover" // another part
)

// Boundary is an instant at which the whole fold state starts afresh. It applies to
// subgroups taken at or after it.
type Boundary struct {
	ID       uuid.UUID
	At       time.Time
	Kind     BoundaryKind
	Revision uuid.UUID // in force from here, for ByRevision
}

// Segment is the stretch between two boundaries: what a subgroup taken in it is
// judged by. The zero value is the time before any boundary.
type Segment struct {
	From     time.Time
	Revision uuid.UUID // Nil: learning
}

// Course is the boundaries of one characteristic in the order of their instants,
// with what is in force before the first of them.
type Course struct {
	Before     Segment
	Boundaries []Boundary
}

// At returns the segment of a subgroup taken at t.
func (c Course) At(t time.Time) Segment {
	seg := c.Before
	for _, b := range c.Boundaries {
		if b.At.After(t) {
			break
		}
		seg = seg.Then(b)
	}
	return seg
}

// Then is the segment that begins at b.
func (s Segment) Then(b Boundary) Segment {
	s.From = b.At
	switch b.Kind {
	case ByRevision:
		s.Revision = b.Revision
	case BySetup:
		s.Revision = uuid.Nil
	}
	return s
}

// With is the course with one more boundary; of boundaries at one instant the one
// that came last rules.
func (c Course) With(b Boundary) Course {
	out := Course{Before: c.Before, Boundaries: make([]Boundary, 0, len(c.Boundaries)+1)}
	placed := false
	for _, have := range c.Boundaries {
		if !placed && have.At.After(b.At) {
			out.Boundaries, placed = append(out.Boundaries, b), true
		}
		out.Boundaries = append(out.Boundaries, have)
	}
	if !placed {
		out.Boundaries = append(out.Boundaries, b)
	}
	return out
}

// FoldState is all that is remembered of a characteristic's past. Two equal states
// judge every future alike.
type FoldState struct {
	Segment Segment
	Memory  watch.Memory
}

// Step judges one subgroup that lies in seg and comes after everything that f has
// seen. judge belongs to seg's revision; nil while learning, and then nothing is
// judged and nothing remembered. A subgroup that cannot be judged (a reading absurdly
// far from the limits) is passed over: it leaves the memory as it was.
func (f *FoldState) Step(seg Segment, judge *watch.Judge, s Statistics) (watch.Judged, bool) {
	if !seg.Same(f.Segment) {
		*f = FoldState{Segment: seg}
	}
	if judge == nil {
		return watch.Judged{}, false
	}
	j := judge.Step(&f.Memory, s.Watch())
	return j, j.Err == nil
}

// Same reports whether two segments are one.
func (s Segment) Same(o Segment) bool { return s.From.Equal(o.From) && s.Revision == o.Revision }

// Same reports whether two states judge every future alike.
func (f FoldState) Same(o FoldState) bool {
	return f.Segment.Same(o.Segment) && f.Memory.SameFuture(o.Memory)
}
