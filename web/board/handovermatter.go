package board

import (
	"strings"
	"time"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// newHandoverMatter says a matter as it stood when the summary ends.
func newHandoverMatter(f ui.Format, m plant.MatterOfShift, until time.Time) handoverMatter {
	w := f.Words
	v := handoverMatter{
		Address: matterAddress(m.Station, m.Characteristic, m.ID), Station: m.StationName, Name: m.Name, Kind: ui.ConditionOf(m.Kind()),
		Age: f.Age(max(0, until.Sub(m.KindSince()))), Opened: f.Clock(m.KindSince()), Before: ui.OpenedBefore(f, m.Matter),
	}
	var said []string
	for _, l := range m.Lines {
		if !l.Withdrawn {
			said = append(said, w.Firing(l.Firing, m.Setup))
		}
	}
	v.Why = strings.Join(said, "; ")
	if len(said) == 0 {
		v.Why = w.T("board.withdrawn")
	}
	if !m.TakenAt.IsZero() && m.TakenAt.Before(until) {
		v.Taken = w.T("board.taken", m.TakenByName, f.Clock(m.TakenAt))
		if where := ui.StageWords(w, m.At(until).Progress()); where != "" {
			v.Taken = w.T("matter.where-and-taken", where, v.Taken)
		}
	} else {
		v.Taken = w.T("handover.not-taken")
	}
	if quiet := m.QuietUntil(until); !quiet.IsZero() {
		v.Quiet = w.T("handover.quiet", f.Clock(quiet), m.Quiet.PersonName, m.Quiet.Reason)
	}
	if !m.OpenAt(until) {
		v.Age, v.Opened, v.Before = f.Age(m.Age(until)), f.Clock(m.OpenedAt), ""
		v.Ended = w.T("handover.ended", f.Clock(m.ClosedAt), causeOf(f, m.Matter))
	}
	return v
}

func causeOf(f ui.Format, m plant.Matter) string {
	switch {
	case m.Closing == plant.WithdrawnBy:
		return f.Words.T("handover.withdrawn")
	case m.Action == "":
		return m.Cause
	}
	return f.Words.T("handover.cause-action", m.Cause, m.Action)
}
