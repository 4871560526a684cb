package desk

import (
	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/chart"
	"holdfast/web/ui"
)

// events draws what was done to the process at one characteristic.
type events struct {
	f     ui.Format
	h     plant.History
	setup plant.Setup
}

// putChanges puts what was done to the process on the time axis, and what it was at the
// next point.
func (d *drawing) putChanges() {
	at, e := 0, events{d.f, d.h, d.setup}
	for _, ch := range d.h.Changes {
		c, what := e.change(ch)
		d.c.Changes = append(d.c.Changes, c)
		for at < len(d.points) && d.points[at].TakenAt.Before(ch.HappenedAt) {
			at++
		}
		if at < len(d.points) {
			d.c.Points[at].Note = note(d.f, d.c.Points[at].Note, d.f.Words.T("desk.note.before", what))
		}
	}
	if len(d.points) > 0 {
		d.c.Changes = append(d.c.Changes, e.restarts()...)
	}
}

// change is one change as the chart draws it, and in words.
func (e events) change(ch plant.Change) (chart.Change, string) {
	w := e.f.Words
	c := chart.Change{At: ch.HappenedAt, Prompted: ch.Prompted}
	size, moves := ch.EffectOn(e.h.State.ID)
	var what string
	switch {
	case moves:
		c.Kind = chart.Up
		if size.Units < 0 {
			c.Kind = chart.Down
		}
		c.Text = e.f.SignedDecimal(size.Trimmed(e.setup.Decimals))
		what = adjustedWords(e.f, ch, c.Text, e.setup)
	case ch.Kind == plant.Adjustment:
		what = w.T("desk.adjusted-other")
	default:
		what, c.Text = w.T("desk.change."+string(ch.Kind)), w.T("desk.change-short."+string(ch.Kind))
	}
	if ch.Note != "" {
		what = w.T("desk.change-note", what, ch.Note)
	}
	c.Title = w.T("desk.change-at", e.f.Clock(ch.HappenedAt), what)
	return c, what
}

// adjustedWords says an adjustment: its size, what was turned, and whether anything was
// open.
func adjustedWords(f ui.Format, ch plant.Change, size string, s plant.Setup) string {
	w := f.Words
	what := w.T("desk.adjusted", f.WithUnit(size, s.Unit))
	if ch.Knob != uuid.Nil {
		what = w.T("desk.adjusted-by", what, ch.KnobName, f.WithUnit(f.SignedDecimal(*ch.Turned), ch.KnobUnit))
	}
	if ch.Prompted {
		return w.T("desk.adjusted-prompted", what)
	}
	return w.T("desk.adjusted-unprompted", what)
}

// all is everything that was done, in no order.
func (e events) all() []chart.Change {
	var out []chart.Change
	for _, ch := range e.h.Changes {
		c, _ := e.change(ch)
		out = append(out, c)
	}
	return append(out, e.restarts()...)
}

// restarts are where judging starts afresh without a revision: a fix, another part.
func (e events) restarts() (out []chart.Change) {
	w := e.f.Words
	for _, b := range e.h.Course.Boundaries {
		var what string
		switch b.Kind {
		case plant.ByRestart:
			what = w.T("desk.restart.fix")
			for _, m := range e.h.Matters {
				if m.RestartAt.Equal(b.At) && m.Action != "" {
					what = w.T("desk.restart.action", m.Action)
				}
			}
		case plant.ByChangeover:
			what = w.T("desk.restart.changeover")
		default:
			continue
		}
		out = append(out, chart.Change{At: b.At, Kind: chart.Restart, Title: w.T("desk.change-at", e.f.Clock(b.At), what)})
	}
	return out
}
