package board

import (
	"time"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// headView is what the top bar says of the day.
type headView struct {
	Day, Time, Machine string
}

func newHead(f ui.Format, p plant.Plant) headView {
	v := headView{Day: f.Day(f.Now), Time: f.Time(f.Now), Machine: f.Machine(f.Now.Truncate(time.Minute))}
	if len(p.Shifts) > 0 {
		shift, _ := p.ShiftAt(f.Now)
		v.Day = f.Words.T("board.day-and-shift", v.Day, shift.Name)
	}
	return v
}

// shiftView is the foot: what is known of now and of this shift. Nothing in it is
// counted that the states do not hold.
type shiftView struct {
	Facts []factView
	Next  string
	Load  string // alarms of the last hour
}

type factView struct {
	Label, Count string
}

// counts is the shift in numbers.
type counts struct {
	due, late          int // stations with a round due, or late
	hold, look, opened int // open matters
	unknown, learning  int // characteristics
	stopped            int // machines
	kept               int // parts that are kept aside
	next               time.Time
	nextAt             string
}

func countAll(p plant.Plant, states []plant.StationState, now time.Time) counts {
	var n counts
	_, began := p.ShiftAt(now)
	for i := range states {
		st := &states[i]
		var due, late bool
		for j := range st.Characteristics {
			c := &st.Characteristics[j]
			late = late || c.Overdue()
			due = due || asked(c) && !c.Overdue()
			switch {
			case c.Matter != nil && c.Matter.Kind() == plant.Hold:
				n.hold++
			case c.Matter != nil:
				n.look++
			}
			if c.Matter != nil && !c.Matter.OpenedAt.Before(began) {
				n.opened++
			}
			for _, k := range c.Contained {
				n.kept += k.Left()
			}
			if c.Condition() == plant.IsUnknown {
				n.unknown++
			}
			if c.Revision == nil {
				n.learning++
			}
			if c.Due.State == plant.Later && (n.next.IsZero() || c.Due.At.Before(n.next)) {
				n.next, n.nextAt = c.Due.At, st.Name
			}
		}
		switch {
		case late:
			n.late++
		case due:
			n.due++
		}
		for _, m := range st.Machines {
			if !m.Running() {
				n.stopped++
			}
		}
	}
	return n
}

func newShift(f ui.Format, p plant.Plant, states []plant.StationState) shiftView {
	if len(states) == 0 {
		return shiftView{}
	}
	n, w := countAll(p, states, f.Now), f.Words
	var v shiftView
	add := func(label string, count int, always bool) {
		if count > 0 || always {
			v.Facts = append(v.Facts, factView{label, f.Count(count)})
		}
	}
	add(w.T("board.fact.due"), n.due, true)
	add(w.T("board.fact.late"), n.late, true)
	add(w.T("board.fact.unknown"), n.unknown, false)
	add(w.T("board.fact.hold"), n.hold, true)
	add(w.T("board.fact.look"), n.look, true)
	add(w.T("board.fact.opened"), n.opened, n.hold+n.look > 0)
	add(w.T("reach.board-contained"), n.kept, false)
	add(w.T("board.fact.stopped"), n.stopped, false)
	add(w.T("board.fact.learning"), n.learning, false)
	v.Load = w.T("board.load.last-hour", alarmsLately(states, f.Now))
	if !n.next.IsZero() {
		v.Next = w.T("board.next-round", f.Clock(n.next), n.nextAt)
	}
	return v
}
