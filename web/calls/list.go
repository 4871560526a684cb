package calls

import (
	"slices"
	"strings"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// listView is the page of calls.
type listView struct {
	Open        openListView
	Sent        []sentView
	Undelivered string // how many messages could not be delivered; empty: none
}

// openID is the element that lists what nobody has taken. It is pushed.
const openID = "calls-open"

// openListView is what nobody has taken, and how much of it waits for somebody now.
type openListView struct {
	Heading string
	List    []openView
	Quiet   string // heading of what is kept quiet
	Kept    []openView
}

// openView is something that nobody has taken.
type openView struct {
	Tone, Symbol, Word string
	Station, Name      string
	Age, Why, Status   string
	Reason             string // of a quiet
	Link               string
	Quiet              string // address of the form; empty: a round
	QuietText          string
	Calling            bool
}

// sentView is a call that went to people.
type sentView struct {
	At, What, Link, How, After string
}

func newList(f ui.Format, open []plant.OpenCall, sent []plant.SentCall, out plant.OutboxState) listView {
	v := listView{Open: newOpenList(f, open)}
	for _, s := range sent {
		v.Sent = append(v.Sent, newSent(f, s))
	}
	if out.GivenUp > 0 {
		v.Undelivered = f.Words.T("calls.undelivered", out.GivenUp)
	}
	return v
}

func newOpenList(f ui.Format, open []plant.OpenCall) openListView {
	v := openListView{Heading: f.Words.T("calls.open-now")}
	if n := plant.Waiting(open); n > 0 {
		v.Heading = f.Words.T("calls.open-count", n)
	}
	open = slices.Clone(open)
	slices.SortStableFunc(open, func(a, b plant.OpenCall) int { return place(a) - place(b) })
	for _, o := range open {
		if o.Waits() {
			v.List = append(v.List, newOpen(f, o))
		} else {
			v.Kept = append(v.Kept, newOpen(f, o))
		}
	}
	v.Quiet = f.Words.T("calls.quiet-count", len(v.Kept))
	return v
}

// place orders what is open before age does: what calls, then what does not.
func place(o plant.OpenCall) int {
	if o.Step > 0 {
		return 0
	}
	return 1
}

func newOpen(f ui.Format, o plant.OpenCall) openView {
	w, condition := f.Words, conditionOf(o.Kind)
	v := openView{Tone: ui.Tone(condition), Symbol: ui.SymbolOf(condition), Word: ui.ConditionWord(w, condition), Station: o.Station.Name,
		Name: o.Characteristic.Title(), Age: f.Since(o.Stands()), Link: linkOf(o.Call), Calling: o.Calling(), Status: status(f, o)}
	if o.Matter == nil {
		v.Why = w.T("calls.since-round", f.Clock(o.Since), f.Since(o.Since))
		return v
	}
	v.Why = capital(whyOf(f, o.Call)) + "."
	if opened := ui.OpenedBefore(f, *o.Matter); opened != "" {
		v.Why += " " + opened
	}
	v.Quiet, v.QuietText = quietAddress(o.Matter.ID), w.T("calls.quiet-link")
	if !o.QuietUntil.IsZero() {
		v.QuietText = w.T("calls.quiet-change")
		v.Reason = w.T("calls.quiet-by", o.Escalation.Quiet.PersonName, o.Escalation.Quiet.Reason)
	}
	return v
}

// status says what was done to find somebody and what comes next.
func status(f ui.Format, o plant.OpenCall) string {
	w := f.Words
	if !o.QuietUntil.IsZero() {
		return w.T("calls.status-quiet", f.Clock(o.QuietUntil))
	}
	var said []string
	switch o.Step {
	case plant.OnBoard:
		said = append(said, w.T("calls.step-board", f.Clock(o.FiredAt)))
	case plant.ToSupervisors:
		said = append(said, w.T("calls.step-supervisors", f.Clock(o.FiredAt)))
	case plant.ByMessage:
		said = append(said, w.T("calls.step-messages", f.Clock(o.FiredAt)))
	}
	switch o.Next {
	case plant.OnBoard:
		said = append(said, w.T("calls.next-board", f.Clock(o.NextAt)))
	case plant.ToSupervisors:
		said = append(said, w.T("calls.next-supervisors", f.Clock(o.NextAt)))
	case plant.ByMessage:
		said = append(said, w.T("calls.next-messages", f.Clock(o.NextAt)))
	}
	return strings.Join(said, " ")
}

func newSent(f ui.Format, s plant.SentCall) sentView {
	w := f.Words
	v := sentView{At: f.Clock(s.At), What: w.T("calls.what", ui.ConditionWord(w, conditionOf(s.Kind)), s.Station, s.Characteristic),
		Link: "/board/at/" + s.StationID.String() + "/" + s.CharacteristicID.String()}
	if s.Matter != uuid.Nil {
		v.Link += "/" + s.Matter.String()
	}
	v.How = how(f, s)
	switch {
	case !s.TakenAt.IsZero():
		v.After = w.T("calls.taken", s.TakenBy, f.Clock(s.TakenAt))
	case s.Matter == uuid.Nil && !s.EndedAt.IsZero():
		v.After = w.T("calls.round-ended", f.Clock(s.EndedAt))
	case !s.EndedAt.IsZero():
		v.After = w.T("calls.closed", f.Clock(s.EndedAt))
	default:
		v.After = w.T("calls.nobody-yet")
	}
	return v
}

// how says by what way the call went out, and what became of its messages.
func how(f ui.Format, s plant.SentCall) string {
	w := f.Words
	if s.Step == plant.ToSupervisors {
		return w.T("calls.to-supervisors")
	}
	if len(s.Messages) == 0 {
		return w.T("calls.no-targets")
	}
	said := make([]string, len(s.Messages))
	for i, m := range s.Messages {
		switch {
		case m.Delivered:
			said[i] = w.T("calls.message-delivered", m.Target)
		case m.GivenUp:
			said[i] = w.T("calls.message-given-up", m.Target)
		default:
			said[i] = w.T("calls.message-waiting", m.Target)
		}
	}
	return strings.Join(said, "; ")
}
