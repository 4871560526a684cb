package plant

import (
	"slices"
	"time"

	"github.com/google/uuid"
)

// Standing is what routing needs to know of the newest subgroups of a characteristic. It
// is derived by OwnerRecord.Fold, kept for speed, and computed anew when the record has
// moved on; it says as of which subgroup it is.
type Standing struct {
	AsOf        time.Time `json:"as_of"`    // taken at of the newest subgroup it knows, zero without one
	Revision    uuid.UUID `json:"revision"` // in force then; Nil while learning
	AfterMatter bool      `json:"after_matter,omitempty"`
	Quiet       int       `json:"quiet"` // subgroups since the last matter that counts, or since the limits came into force
	Figure      Figure    `json:"figure"`
	Last        Ownership `json:"last"` // who owned it then
}

// OwnerSubgroup is what routing looks at of a subgroup.
type OwnerSubgroup struct {
	TakenAt time.Time
	Stats   Statistics
}

// OwnerRecord is the facts, and what was derived from them, that routing follows from:
// all of the record, or its newest part.
type OwnerRecord struct {
	Cut         bool      // the record goes further back
	Until       time.Time // as of
	Course      Course
	Setups      []Setup         // every version, oldest first
	Settings    []Settings      // every version, oldest first; before the first the defaults held
	Subgroups   []OwnerSubgroup // in their order, voided ones left out
	Matters     []Matter        // that touch the record, with their lines
	Acceptances []Acceptance
}

// OwnerReach is how many subgroups back the course of the owner is followed, besides
// those that its first figure is computed from.
const OwnerReach = 500

// instants lists when something happened that routing may follow, in order.
func (r OwnerRecord) instants() []time.Time {
	var at []time.Time
	add := func(t time.Time) {
		if !t.IsZero() && !t.After(r.Until) {
			at = append(at, t)
		}
	}
	for _, b := range r.Course.Boundaries {
		add(b.At)
	}
	for _, s := range r.Setups {
		add(s.MadeAt)
	}
	for _, s := range r.Settings {
		add(s.MadeAt)
	}
	for _, s := range r.Subgroups {
		add(s.TakenAt)
	}
	for _, m := range r.Matters {
		add(m.OpenedAt)
		add(m.ClosedAt)
	}
	for _, a := range r.Acceptances {
		add(a.AcceptedAt)
		add(a.Ends())
	}
	slices.SortFunc(at, time.Time.Compare)
	return slices.CompactFunc(at, time.Time.Equal)
}

// begin is from when on the course can be told: where the record begins or, when it was
// cut, after the subgroups that the first figure needs.
func (r OwnerRecord) begin() time.Time {
	if !r.Cut || len(r.Subgroups) == 0 {
		return time.Time{}
	}
	return r.Subgroups[min(max(0, len(r.Subgroups)-OwnerReach), len(r.Subgroups)-1)].TakenAt
}

// Fold follows the owner through the record and returns how it stands at its end and
// every change on the way, oldest first. It is a pure function of the finished record:
// in which order things came in makes no difference.
func (r OwnerRecord) Fold() (Standing, []Ownership) {
	var course []Ownership
	var s Standing
	var grader grader
	var before Standing
	var setup Setup
	begin := r.begin()
	instants := r.instants()
	if r.Cut {
		first, _ := slices.BinarySearchFunc(instants, begin, time.Time.Compare)
		instants = instants[first:]
	}
	for i, at := range instants {
		var now situation
		var rules OwnerSettings
		s, now, rules = r.at(at, &grader)
		was := setup
		setup = r.setupAt(at)
		same := s.Revision != uuid.Nil && s.Revision == before.Revision && sameDecimal(was.Lower, setup.Lower) && sameDecimal(was.Upper, setup.Upper)
		before = s
		owner, reason := route(now, rules)
		next := Ownership{Owner: owner, Reason: reason, Since: at, For: at, AtLeast: r.Cut && i == 0}
		if n := len(course); n > 0 {
			last := course[n-1]
			if last.Owner == owner {
				next.Since, next.AtLeast, next.Between = last.Since, last.AtLeast, last.Between
			}
			if last.Owner == owner && last.Reason == reason {
				if !same {
					course[n-1].Finding = Finding{}
				}
				continue
			}
			next = next.after(last, same)
		}
		course = append(course, next)
	}
	if n := len(course); n > 0 {
		s.Last = course[n-1]
		s.Figure.bound()
	}
	return s, course
}

// at is how it stood at an instant.
func (r OwnerRecord) at(at time.Time, g *grader) (Standing, situation, OwnerSettings) {
	setup, settings := r.setupAt(at), r.settingsAt(at)
	segment, force := r.Course.inForce(at)
	s := Standing{Revision: segment.Revision}
	now := situation{limits: segment.Revision != uuid.Nil, asked: setup.Lower != nil || setup.Upper != nil, mark: r.markAt(at, setup)}
	var closed time.Time // of the last matter that counts
	var out []Matter     // whose subgroups are no part of the figure
	for _, m := range r.Matters {
		if m.OpenedAt.After(at) {
			continue
		}
		open := m.Open() || m.ClosedAt.After(at)
		now.matter = now.matter || open
		if !m.counts(settings) {
			continue
		}
		out = append(out, m)
		if open {
			s.AfterMatter, closed = true, at.Add(1)
		} else if m.ClosedAt.After(force) && m.ClosedAt.After(closed) {
			s.AfterMatter, closed = true, m.ClosedAt
		}
	}
	end, _ := slices.BinarySearchFunc(r.Subgroups, at, func(g OwnerSubgroup, t time.Time) int {
		if g.TakenAt.After(t) {
			return 1
		}
		return -1
	})
	var window []Statistics
	for i := end - 1; i >= 0; i-- {
		g := r.Subgroups[i]
		if s.AsOf.IsZero() {
			s.AsOf = g.TakenAt
		}
		if segment.Revision == uuid.Nil || g.TakenAt.Before(force) || len(window) >= settings.Window && s.Quiet >= settings.StableSubgroups {
			break
		}
		if g.TakenAt.After(closed) || closed.IsZero() {
			s.Quiet++
		}
		if len(window) < settings.Window && !within(out, g.TakenAt, at) {
			window = append(window, g.Stats)
			s.Figure.From = g.TakenAt
		}
	}
	s.Quiet = min(s.Quiet, settings.StableSubgroups)
	if now.limits && now.asked {
		s.Figure.compute(window, setup, settings, g)
	}
	now.afterMatter, now.quiet = s.AfterMatter, s.Quiet
	now.readings, now.subgroups, now.grade = s.Figure.Readings, s.Figure.Subgroups, s.Figure.Grade
	return s, now, settings
}

// within reports whether a subgroup lies in one of the matters as known at an instant:
// from the signal to the fix, or to the closing.
func within(ms []Matter, taken, at time.Time) bool {
	for _, m := range ms {
		if taken.Before(m.OpenedTaken) {
			continue
		}
		if m.Open() || m.ClosedAt.After(at) {
			return true
		}
		end := m.ClosedAt
		if !m.RestartAt.IsZero() {
			end = m.RestartAt
		}
		if taken.Before(end) {
			return true
		}
	}
	return false
}

// counts reports whether the matter speaks against stability: a signal on the chart
// stands or, where the plant wants it so, a reading was outside specification. A process
// that is steady and too wide has such readings all the time, and they are no reason to
// look for a special cause.
func (m Matter) counts(o OwnerSettings) bool {
	return !m.AllWithdrawn() && (o.HoldsCount || !m.OnlyHold())
}

func (r OwnerRecord) setupAt(at time.Time) Setup {
	var s Setup
	for i, v := range r.Setups {
		if i == 0 || !v.MadeAt.After(at) {
			s = v
		}
	}
	return s
}

func (r OwnerRecord) settingsAt(at time.Time) OwnerSettings {
	s := DefaultSettings()
	for _, v := range r.Settings {
		if !v.MadeAt.After(at) {
			s = v
		}
	}
	return s.Owner
}

// markAt is how the newest acceptance of an instant stands.
func (r OwnerRecord) markAt(at time.Time, s Setup) Mark {
	var newest Acceptance
	for _, a := range r.Acceptances {
		if !a.AcceptedAt.After(at) && !a.AcceptedAt.Before(newest.AcceptedAt) {
			newest = a
		}
	}
	return newest.markAt(at, s)
}

// inForce is the segment at an instant and from when on its limits, or its learning, are
// in force.
func (c Course) inForce(at time.Time) (Segment, time.Time) {
	seg := c.Before
	var from time.Time
	for _, b := range c.Boundaries {
		if b.At.After(at) {
			break
		}
		if next := seg.Then(b); b.Kind == ByRevision || b.Kind == BySetup {
			from, seg = b.At, next
		} else {
			seg = next
		}
	}
	return seg, from
}
