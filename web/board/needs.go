package board

import (
	"cmp"
	"slices"
	"strings"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
	"holdfast/web/ui"
)

// needsView is the list of what needs a person, and of what engineering has to do.
type needsView struct {
	Order       string // how many, and that the oldest is first
	Density     string // few, several or many: how much each may say
	List        []needView
	Engineering []studyView
	More        []studyView // what follows, folded
	MoreText    string
	None        string // said when the list is empty
}

// studiesShown is how much of engineering's list is not folded: who is needed now
// comes first.
const studiesShown = 3

// needView is one thing that needs a person.
type needView struct {
	Station string
	Tone    string
	Symbol  string
	Age     string
	Why     string
	Opened  string // since when the matter is open, where it became a Hold only later
	Taken   string // who took it; empty: nobody yet
	Reach   string // what is suspect
	Link    string
	Line    string
	Owners  string
	Matter  string // id, when it is one
	Say     string // what a screen reader is told when it is new

	Call callView // how far the program has gone to find somebody

	since   time.Time
	gravity int
	names   []string // of a round that was not taken
	gauge   bool     // a check is overdue: after all that is about product and process
}

// place orders the list before gravity and age do: what was called about, product in doubt
// that nobody has taken, the rest that nobody has, samples and checks that are late, and what
// somebody is at already. A Hold that is kept quiet is still product in doubt.
func (v needView) place() int {
	switch {
	case v.Call.Marked:
		return 0
	case v.gauge:
		return 4
	case v.Matter == "":
		return 3
	case v.Taken != "":
		return 6
	case v.gravity == plant.IsHold.Gravity():
		return 1
	case v.Call.Quiet:
		return 5
	}
	return 2
}

func compareNeeds(a, b needView) int {
	return cmp.Or(a.place()-b.place(), b.gravity-a.gravity, quietLast(a)-quietLast(b), a.since.Compare(b.since))
}

func quietLast(v needView) int {
	if v.Call.Quiet {
		return 1
	}
	return 0
}

// studyView is one characteristic that engineering owns.
type studyView struct {
	Station, Name, Progress, Link, Line string
	Protected                           string // how its product is protected meanwhile
	Unprotected                         bool   // it has to be, and nobody has said how
}

func (v studyView) rank() int {
	switch {
	case v.Unprotected:
		return 0
	case v.Protected != "":
		return 1
	}
	return 2
}

func newNeeds(f ui.Format, states []plant.StationState) needsView {
	var v needsView
	checks := map[[2]uuid.UUID]bool{}
	for i := range states {
		st := &states[i]
		for _, g := range st.OverdueGauges(f.Now, f.Zone) {
			if key := [2]uuid.UUID{g.ID, st.LineID}; !checks[key] { // a line that shares it between stations has one check to do
				checks[key] = true
				v.List = append(v.List, newGaugeCheck(f, st, g))
			}
		}
		late := map[lateKey]int{} // place in v.List
		for j := range st.Characteristics {
			c := &st.Characteristics[j]
			if c.Matter != nil {
				v.List = append(v.List, newMatter(f, st, c))
			}
			if c.Overdue() {
				v.List = addLate(f, v.List, late, st, c)
			}
			if o := c.Ownership(); o.Owner == plant.Engineering || o.Finding.Reason != "" {
				v.Engineering = append(v.Engineering, newStudy(f, st, c))
			}
		}
	}
	// Product that nobody protects comes first, then what is known not to be capable.
	slices.SortStableFunc(v.Engineering, func(a, b studyView) int { return a.rank() - b.rank() })
	shown := studiesShown
	if len(v.List) > 4 { // who is needed now needs the room
		shown = 1
	}
	if more := len(v.Engineering) - shown; more > 1 {
		v.Engineering, v.More = v.Engineering[:shown], v.Engineering[shown:]
		v.MoreText = f.Words.T("board.more", more)
	}
	slices.SortStableFunc(v.List, compareNeeds)
	switch n := len(v.List); {
	case n == 0:
		v.None = f.Words.T("board.nobody-needed")
	case n <= 4:
		v.Density = "few"
	case n <= 8:
		v.Density = "several"
	default:
		v.Density = "many"
	}
	switch n := len(v.List); {
	case n > 0 && v.List[0].Call.Marked:
		v.Order = f.Words.T("board.needs-order-called", n)
	case n > 0:
		v.Order = f.Words.T("board.needs-order", n)
	}
	return v
}

func newMatter(f ui.Format, st *plant.StationState, c *plant.CharacteristicState) needView {
	m, condition := c.Matter, c.Condition()
	v := need(st, condition)
	v.Link = matterAddress(st.ID, c.ID, m.ID)
	v.Matter = m.ID.String()
	v.since = m.KindSince()
	v.Age, v.Opened = f.Since(v.since), ui.OpenedBefore(f, *m)
	v.Why = f.Words.T("board.why", ui.ConditionWord(f.Words, condition), c.Title(), why(f, c))
	v.Say = f.Words.T("board.say", st.Name, v.Why)
	if says, ok := ui.SayReachOf(f, *c); ok {
		v.Reach = says.Is
	}
	if !m.TakenAt.IsZero() {
		v.Taken = f.Words.T("board.taken", m.TakenByName, f.Clock(m.TakenAt))
		if where := ui.StageWords(f.Words, m.Progress()); where != "" {
			v.Taken = f.Words.T("matter.where-and-taken", where, v.Taken)
		}
	}
	v.Call = matterCall(f, st, c)
	return v
}

func need(st *plant.StationState, condition plant.Condition) needView {
	return needView{Station: st.Name, Tone: tone(condition), Symbol: ui.SymbolOf(condition), Line: st.LineID.String(),
		Owners: string(plant.AtStation), gravity: condition.Gravity()}
}

// linesSaid is how many lines of a matter are said in full.
const linesSaid = 2

// why says the standing lines of a matter in words, the gravest first.
func why(f ui.Format, c *plant.CharacteristicState) string {
	var said []string
	for _, reading := range [...]bool{true, false} {
		for _, l := range c.Matter.Lines {
			if l.Withdrawn || l.Panel.HoldsProduct() != reading {
				continue
			}
			words := f.Words.Firing(l.Firing, c.Setup)
			if at, limit, ok := worst(f, c, l.Side); ok && l.Panel == plant.Reading {
				words = f.Words.T("board.at-reading", words, at, limit)
			}
			said = append(said, words)
		}
	}
	if len(said) == 0 {
		return f.Words.T("board.withdrawn")
	}
	text := said[0]
	for i := 1; i < len(said) && i < linesSaid; i++ {
		text = f.Words.T("board.and", text, said[i])
	}
	if more := len(said) - linesSaid; more > 0 {
		text = f.Words.T("board.and-more", text, more)
	}
	return text
}

// worst finds the reading farthest outside specification on a side, in the newest
// subgroup of the open matter that has one, with the limit that it crosses. It is
// false when that subgroup is not among the newest, or both sides are crossed.
func worst(f ui.Format, c *plant.CharacteristicState, side plant.Side) (reading, limit string, ok bool) {
	spec := c.Setup.Upper
	if side == plant.Low {
		spec = c.Setup.Lower
	}
	if spec == nil || side != plant.High && side != plant.Low {
		return "", "", false
	}
	for _, p := range slices.Backward(c.Points) {
		if !slices.ContainsFunc(p.Signals, func(s plant.Signal) bool {
			return s.Panel == plant.Reading && s.Side == side && !s.Withdrawn && s.Matter == c.Matter.ID
		}) || len(p.Readings) == 0 {
			continue
		}
		v := slices.Max(p.Readings)
		if side == plant.Low {
			v = slices.Min(p.Readings)
		}
		if c.Setup.Outside(v, p.Stats.Decimals) != side {
			return "", "", false // it was taken under another specification
		}
		return f.Reading(v, p.Stats.Decimals, c.Setup), f.Decimal(*spec), true
	}
	return "", "", false
}

// lateKey tells rounds that were not taken apart: what was due together is one round.
type lateKey struct {
	due     time.Time
	unknown bool
}

func addLate(f ui.Format, list []needView, seen map[lateKey]int, st *plant.StationState, c *plant.CharacteristicState) []needView {
	condition := plant.IsLate
	if c.Due.State == plant.TooLate {
		condition = plant.IsUnknown
	}
	due := f.Clock(c.Due.At)
	w := f.Words
	reason := w.T("board.not-taken", due)
	if condition == plant.IsUnknown {
		reason = w.T("board.never-sampled", due)
		if !c.LastTaken.IsZero() {
			reason = w.T("board.no-sample-since", f.Clock(c.LastTaken), due)
		}
	}
	key := lateKey{c.Due.At, condition == plant.IsUnknown}
	if i, ok := seen[key]; ok {
		list[i].names = append(list[i].names, c.Title())
		if call := roundCall(f, st, c); call.Marked || list[i].Call.Text == "" {
			list[i].Call = call // the round on record is named by one of them
		}
		list[i].Why = w.T("board.why", ui.ConditionWord(w, condition), strings.Join(list[i].names, ", "), reason)
		return list
	}
	v := need(st, condition)
	v.Link = stationAddress(st.ID, c.ID)
	v.Age, v.since = f.Age(c.Due.LateBy(f.Now)), c.Due.At
	v.names = []string{c.Title()}
	v.Why = w.T("board.why", ui.ConditionWord(w, condition), c.Title(), reason)
	v.Call = roundCall(f, st, c)
	seen[key] = len(list)
	return append(list, v)
}

// newGaugeCheck is the check of a gauge that is overdue.
func newGaugeCheck(f ui.Format, st *plant.StationState, g plant.GaugeOverdue) needView {
	v := need(st, plant.IsLate)
	v.gauge, v.since = true, g.OverdueSince(f.Zone)
	v.Link, v.Age = stationAddress(st.ID, g.First), f.Since(v.since)
	v.Why = f.Words.T("board.gauge", g.Name, ui.SayDay(f, g.NextCheck))
	v.Taken = f.Words.T("board.gauge-of", strings.Join(g.Of, ", "))
	return v
}

func newStudy(f ui.Format, st *plant.StationState, c *plant.CharacteristicState) studyView {
	v := studyView{Station: st.Name, Name: c.Title(), Link: chartAddress(st.ID, c.ID), Line: st.LineID.String()}
	o := c.Ownership()
	finding := f.OwnerFinding(o)
	switch {
	case finding != "":
		v.Progress = finding
	case o.Reason != plant.NoLimits:
		v.Progress = f.Words.T("board.reason-since", f.OwnerReason(*c), f.OwnerSince(o))
	case c.Collected < limits.EnoughSubgroups:
		v.Progress = f.Words.T("board.collected", c.Collected, limits.EnoughSubgroups)
	default:
		v.Progress = f.Words.T("board.can-freeze", c.Collected)
	}
	if v.Unprotected = c.WantsProtection(); !v.Unprotected && (o.Reason.WantsProtection() || finding != "") {
		var said []string
		for _, p := range c.Protections {
			said = append(said, f.Words.T("owner.method."+string(p.Method)))
		}
		v.Protected = f.Words.T("owner.protected-by", strings.Join(said, ", "))
	}
	return v
}

// hides reports whether the viewer's choice leaves something out of this list.
func (v needsView) hides(c choice) bool {
	return slices.ContainsFunc(v.List, func(n needView) bool { return !c.shows(n.Line, n.Owners) })
}

func idText(id uuid.UUID) string {
	if id == uuid.Nil {
		return ""
	}
	return id.String()
}
