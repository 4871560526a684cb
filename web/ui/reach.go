package ui

import (
	"slices"
	"strings"
	"time"

	"holdfast/internal/plant"
)

// ReachSaid is the reach of a matter in words.
type ReachSaid struct {
	Do  string   // "Keep aside what was made since 10:42, about 340 parts."
	Is  string   // "Suspect since 10:42, about 340 parts"
	Why []string // since when and why, to what it is confined, whether it grows
}

// SayReach says a reach as of now; false where no product is suspect or the reach was
// not found yet. m is the machine that made the parts.
func SayReach(f Format, r *plant.Reach, s plant.Suspect, m plant.MachineNow) (ReachSaid, bool) {
	if r == nil || len(r.Reasons) == 0 {
		return ReachSaid{}, false
	}
	v := ReachSaid{Do: reachDo(f, r, s), Is: reachIs(f, r, s)}
	seen := map[string]bool{}
	several := slices.ContainsFunc(r.Reasons, func(s plant.Suspicion) bool { return s.Panel != r.Reasons[0].Panel })
	if several {
		v.Why = append(v.Why, f.Words.T("reach.why.several"))
	}
	for _, reason := range r.Reasons {
		why := reachWhy(f, reason)
		if several {
			why = f.Words.T("reach.why.of", f.Words.T("reach.of."+string(reason.Panel)), why)
		}
		if !seen[why] {
			seen[why] = true
			v.Why = append(v.Why, why)
		}
	}
	if names := streamNames(m, r); names != "" {
		v.Do = f.Words.T("reach.do.only", v.Do, names)
		v.Is = f.Words.T("reach.is.only", v.Is, names)
		v.Why = append(v.Why, f.Words.T("reach.why.streams", names))
	}
	v.Why = append(v.Why, reachEnd(f, r, m))
	return v, true
}

// SayReachOf says the reach of a characteristic's open matter.
func SayReachOf(f Format, c plant.CharacteristicState) (ReachSaid, bool) {
	if c.Reach == nil {
		return ReachSaid{}, false
	}
	return SayReach(f, c.Reach, c.Reach.Suspects(c.Machine.Machine, c.PartID, f.Now), c.Machine)
}

func reachDo(f Format, r *plant.Reach, s plant.Suspect) string {
	w, at := f.Words, f.Clock(r.From)
	switch {
	case r.From.IsZero():
		return w.T("reach.do.all")
	case r.Cut && s.Known && s.About:
		return w.T("reach.do.before-about", at, s.Parts)
	case r.Cut && s.Known:
		return w.T("reach.do.before-parts", at, s.Parts)
	case r.Cut:
		return w.T("reach.do.before", at)
	case s.Known && s.About:
		return w.T("reach.do.since-about", at, s.Parts)
	case s.Known:
		return w.T("reach.do.since-parts", at, s.Parts)
	}
	return w.T("reach.do.since", at)
}

func reachIs(f Format, r *plant.Reach, s plant.Suspect) string {
	w, at := f.Words, f.Clock(r.From)
	switch {
	case r.From.IsZero():
		return w.T("reach.is.all")
	case r.Cut && s.Known && s.About:
		return w.T("reach.is.before-about", at, s.Parts)
	case r.Cut && s.Known:
		return w.T("reach.is.before-parts", at, s.Parts)
	case r.Cut:
		return w.T("reach.is.before", at)
	case s.Known && s.About:
		return w.T("reach.is.since-about", at, s.Parts)
	case s.Known:
		return w.T("reach.is.since-parts", at, s.Parts)
	}
	return w.T("reach.is.since", at)
}

func reachWhy(f Format, s plant.Suspicion) string {
	w := f.Words
	switch s.Since {
	case plant.SinceGoodRound:
		switch {
		case s.From.IsZero():
			return w.T("reach.why.first")
		case s.Cut:
			return w.T("reach.why.no-good")
		}
		return w.T("reach.why.good-round", f.Clock(s.From))
	case plant.SinceGoodCheck:
		if s.Cut {
			return w.T("reach.why.no-check")
		}
		return w.T("reach.why.check", f.Clock(s.From))
	}
	switch {
	case s.Change == nil:
		return w.T("reach.why.unknown")
	case s.Cut:
		return w.T("reach.why.window", plant.ReachWindow)
	case s.Start:
		return w.T("reach.why.start", f.Clock(s.From), f.Clock(s.Change.Began))
	}
	return w.T("reach.why.change", f.Clock(s.From), f.Clock(s.Change.Began))
}

func reachEnd(f Format, r *plant.Reach, m plant.MachineNow) string {
	w, at := f.Words, f.Clock(r.Until)
	switch {
	case r.Ended == plant.ByCorrection:
		return w.T("reach.ends.corrected", at)
	case r.Ended == plant.ByFix:
		return w.T("reach.ends.fixed", at)
	case r.Ended == plant.ByNewStart:
		return w.T("reach.ends.restarted", at)
	case r.Ended == plant.ByGoodCheck:
		return w.T("reach.ends.checked", at)
	case r.Ended == plant.ByClosing:
		return w.T("reach.ends.closed", at)
	case !m.Running():
		return w.T("reach.stands-still", m.Name)
	}
	return w.T("reach.grows")
}

// streamNames lists the streams to which a reach is confined.
func streamNames(m plant.MachineNow, r *plant.Reach) string {
	var names []string
	for _, id := range r.Streams {
		for _, st := range m.Streams {
			if st.ID == id {
				names = append(names, st.Name)
			}
		}
	}
	return strings.Join(names, ", ")
}

// EntrySaid is one statement about product in words: what, where, and by whom when.
type EntrySaid struct {
	What, Where, Note, By string
}

// SayEntry says a statement about product.
func SayEntry(f Format, e plant.ContainmentEntry) EntrySaid {
	w := f.Words
	v := EntrySaid{Note: e.Note, By: w.T("reach.entry-by", e.PersonName, f.Clock(e.RecordedAt))}
	switch e.Step {
	case plant.NothingToKeep:
		v.What = w.T("reach.entry-none")
	default:
		v.What = w.T("reach.entry."+string(e.Step), e.Quantity)
	}
	v.Where = SayWhere(f, e.Place, e.Tag)
	return v
}

// SayRest says where suspect product is that was not put aside; "" where nobody was asked.
func SayRest(f Format, c plant.Containment) string {
	e, ok := c.Rest()
	if !ok {
		return ""
	}
	said := SayEntry(f, e)
	if said.Note == "" {
		return said.What
	}
	return f.Words.T("reach.rest.with-note", said.What, said.Note)
}

// AskRest asks where product is that is suspect and was not put aside; "" where nothing is
// to be asked.
func AskRest(f Format, c plant.Containment, s plant.Suspect) string {
	switch w := f.Words; {
	case c.Missing(s) == 0:
		return ""
	case c.Kept() == 0 && s.About:
		return w.T("reach.rest.ask-all-about", s.Parts)
	case c.Kept() == 0:
		return w.T("reach.rest.ask-all", s.Parts)
	case s.About:
		return w.T("reach.rest.ask-about", s.Parts, c.Kept())
	default:
		return w.T("reach.rest.ask", s.Parts, c.Kept())
	}
}

// SayAside says what was stated of the product so far.
func SayAside(f Format, c plant.Containment) string {
	_, rest := c.Rest()
	switch {
	case c.Left() > 0:
		return f.Words.T("reach.aside-left", c.Left())
	case c.Stated():
		return f.Words.T("reach.aside-settled")
	case rest:
		return f.Words.T("reach.rest.nothing-aside")
	}
	return f.Words.T("reach.aside-none")
}

// SayWhere says where product lies and what is written on it.
func SayWhere(f Format, place, tag string) string {
	var parts []string
	if place != "" {
		parts = append(parts, place)
	}
	if tag != "" {
		parts = append(parts, f.Words.T("reach.entry-tag", tag))
	}
	return strings.Join(parts, ", ")
}

// SayGauge says how far a gauge can be trusted, and with what symbol and tone.
func SayGauge(f Format, g plant.GaugeNow) (says string, tone string, symbol string) {
	w := f.Words
	switch {
	case g.Failed():
		return w.T("reach.gauge-bad", f.Clock(g.FailedSince)), "hold", "hold"
	case g.Overdue(f.Now, f.Zone):
		return w.T("reach.gauge-overdue", SayDay(f, g.NextCheck)), "due", "due"
	case g.LastCheck.IsZero() && g.NextCheck.IsZero():
		return w.T("reach.gauge-none"), "calm", "learning"
	case !g.NextCheck.IsZero():
		return w.T("reach.gauge-next", SayDay(f, g.NextCheck)), "calm", "leave"
	}
	return w.T("reach.gauge-good", f.Clock(g.LastGood)), "calm", "leave"
}

// SayDay says a day that was stored without a time of day.
func SayDay(f Format, day time.Time) string {
	if day.IsZero() {
		return ""
	}
	y, m, d := day.Date()
	return f.Date(time.Date(y, m, d, 12, 0, 0, 0, f.Zone))
}
