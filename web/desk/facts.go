package desk

import (
	"time"

	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
	"holdfast/web/ui"
)

// fact is one cell of the facts: a caption, a value, a sentence.
type fact struct {
	Cap, Val, Sub string
	State         plant.Condition // shown with its shape when set
}

// newFacts are state, owner, limits in force and sampling of a characteristic.
func newFacts(f ui.Format, h plant.History) []fact {
	c := h.State
	return []fact{stateFact(f, h), ownerFact(f, c), limitsFact(f, c), samplingFact(f, c)}
}

func stateFact(f ui.Format, h plant.History) fact {
	w, c := f.Words, h.State
	v := fact{Cap: w.T("desk.fact.state"), State: c.Condition()}
	since := c.Since()
	switch v.State {
	case plant.IsHold, plant.IsLook:
		v.Val = w.T("desk.fact.for", f.Since(since))
		v.Sub = w.T("desk.fact.since-what", f.Clock(kindSince(*c.Matter)), matterWords(f, *c.Matter, c.Setup))
		if parts := ui.SayOutside(f, c, *c.Matter, h.Points, h.Setups); len(parts) > 0 {
			v.Sub = w.T("desk.fact.newest-part", v.Sub, parts[len(parts)-1])
		}
	case plant.IsDue, plant.IsLate, plant.IsUnknown:
		v.Val = f.Late(c.Due)
		v.Sub = w.T("desk.fact.due-since", f.Clock(since))
	case plant.IsStopped:
		v.Sub = w.T("desk.fact.stopped", c.Machine.Name, f.Clock(since))
	case plant.IsLearning:
		v.Sub = w.T("desk.fact.learning")
	default:
		v.Sub = w.T("desk.fact.calm")
	}
	return v
}

// kindSince is since when the matter is what it is, by when its samples were taken.
func kindSince(m plant.Matter) time.Time {
	if since := m.KindSince(); since.After(m.OpenedAt) {
		return since
	}
	return m.OpenedTaken
}

// matterWords says the gravest standing line of a matter.
func matterWords(f ui.Format, m plant.Matter, s plant.Setup) string {
	var said string
	for _, l := range m.Lines {
		switch {
		case l.Withdrawn:
		case l.Panel.HoldsProduct():
			return f.Words.Firing(l.Firing, s)
		case said == "":
			said = f.Words.Firing(l.Firing, s)
		}
	}
	if said == "" {
		return f.Words.T("desk.fact.withdrawn")
	}
	return said
}

func ownerFact(f ui.Format, c plant.CharacteristicState) fact {
	w := f.Words
	v := fact{Cap: w.T("desk.fact.owner"), Val: upperFirst(ui.OwnerWord(w, c.Owner()))}
	switch {
	case c.Matter != nil && c.Matter.TakenByName != "":
		v.Sub = w.T("desk.fact.taken", c.Matter.TakenByName, f.Clock(c.Matter.TakenAt))
		if where := ui.StageWords(w, c.Matter.Progress()); where != "" {
			v.Sub = w.T("matter.where-and-taken", where, v.Sub)
		}
	case c.Matter != nil:
		v.Sub = w.T("desk.fact.not-taken")
	default:
		v.Sub = w.T("desk.fact.owner-reason", upperFirst(f.OwnerReason(c)), f.OwnerSince(c.Ownership()))
	}
	if asked := f.AskedOfStation(c); asked != "" {
		v.Sub = w.T("desk.fact.asked", v.Sub, upperFirst(asked))
	}
	if found := f.OwnerFinding(c.Ownership()); found != "" {
		v.Sub = w.T("desk.fact.owner-finding", v.Sub, upperFirst(ui.OwnerWord(w, plant.Engineering)), found)
	}
	return v
}

func limitsFact(f ui.Format, c plant.CharacteristicState) fact {
	w := f.Words
	v := fact{Cap: w.T("desk.fact.limits")}
	if r := c.Revision; r != nil {
		v.Val = w.T("desk.revision", r.Number)
		v.Sub = w.T("desk.fact.limits-from", f.Clock(r.InForceFrom), r.Basis.Subgroups)
		if r.Basis.Given {
			v.Sub = w.T("setup.unproved.fact", f.Clock(r.InForceFrom))
		}
		return v
	}
	v.Val = w.T("desk.fact.no-limits")
	v.Sub = w.T("desk.fact.collected", c.Collected, limits.EnoughSubgroups)
	return v
}

func samplingFact(f ui.Format, c plant.CharacteristicState) fact {
	w := f.Words
	v := fact{Cap: w.T("desk.fact.sampling"), Sub: w.T("desk.fact.last", f.Clock(c.LastTaken))}
	if c.LastTaken.IsZero() {
		v.Sub = w.T("desk.fact.never")
	}
	switch c.Due.State {
	case plant.NotPlanned:
		v.Val = w.T("desk.fact.unplanned")
	case plant.Paused:
		v.Val = w.T("desk.fact.paused")
	case plant.Later:
		v.Val = w.T("desk.fact.next", f.Clock(c.Due.At))
	default:
		v.Val = w.T("desk.fact.due", f.Clock(c.Due.At))
	}
	return v
}

// summary is how the characteristic is specified and sampled, in one line.
func summary(f ui.Format, s plant.Setup) []string {
	w := f.Words
	var out []string
	if s.Target != nil {
		out = append(out, w.T("desk.summary.target", f.WithUnit(f.Decimal(*s.Target), s.Unit)))
	}
	if spec := f.Specification(s); spec != "" {
		out = append(out, w.T("desk.summary.specification", spec))
	} else {
		out = append(out, w.T("desk.summary.no-specification"))
	}
	switch {
	case s.Plan.EveryMinutes > 0:
		out = append(out, w.T("desk.summary.minutes", s.Size, s.Plan.EveryMinutes))
	case s.Plan.EveryParts > 0:
		out = append(out, w.T("desk.summary.parts", s.Size, s.Plan.EveryParts))
	default:
		out = append(out, w.T("desk.summary.size", s.Size))
	}
	return out
}
