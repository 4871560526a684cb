package board

import (
	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// callView is how far the program has gone to find somebody for one thing.
type callView struct {
	Marked bool   // a step has fired: it stands at the top
	Quiet  bool   // kept quiet until a stated time: a Look stands behind what is late
	Text   string // what was done, or what comes and when; empty: neither
	Reason string // of the quiet, and who keeps it
}

func matterCall(f ui.Format, st *plant.StationState, c *plant.CharacteristicState) callView {
	from, on := c.Matter.EscalatesFrom(c.Escalation, f.Now)
	if !on {
		if q := c.Escalation.Quiet; c.Matter.Calls() && q.Set() {
			return callView{Quiet: true, Text: f.Words.T("board.call.quiet", f.Clock(from)),
				Reason: f.Words.T("board.call.quiet-why", q.PersonName, q.Reason)}
		}
		return callView{}
	}
	reached, at := c.Escalation.Reached()
	next, due, more := c.Escalation.Next(st.EscalationPlan.Times(c.Matter.CallKind()), from)
	return newCall(f, plant.FiredStep{Step: reached, At: at}, plant.FiredStep{Step: next, At: due}, more)
}

func roundCall(f ui.Format, st *plant.StationState, c *plant.CharacteristicState) callView {
	o, ok := st.OverdueNow(f.Now)
	if !ok || o.Characteristic != c.ID {
		return callView{}
	}
	reached, at := o.Escalation.Reached()
	next, due, more := o.Escalation.Next(st.EscalationPlan.Round, o.DueAt)
	return newCall(f, plant.FiredStep{Step: reached, At: at}, plant.FiredStep{Step: next, At: due}, more)
}

// newCall says the furthest step that was fired and what comes next. That the board marks
// something needs no words: it is marked.
func newCall(f ui.Format, fired, next plant.FiredStep, more bool) callView {
	v := callView{Marked: fired.Step > 0}
	w := f.Words
	switch {
	case fired.Step == plant.ByMessage:
		v.Text = w.T("board.call.messages-sent", f.Clock(fired.At))
	case fired.Step == plant.ToSupervisors:
		v.Text = w.T("board.call.supervisors-called", f.Clock(fired.At))
	case more && next.Step == plant.ToSupervisors:
		v.Text = w.T("board.call.supervisors-at", f.Clock(next.At))
	case more && next.Step == plant.ByMessage:
		v.Text = w.T("board.call.messages-at", f.Clock(next.At))
	}
	return v
}
