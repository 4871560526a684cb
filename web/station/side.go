package station

import (
	"bytes"
	"context"
	"fmt"
	"sort"
	"strings"

	"github.com/google/uuid"

	"holdfast/internal/live"
	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// mostNext is how many coming samples the left column lists.
const mostNext = 3

// sideView is the left column: what is due, what comes next, what is open, and what
// the machines do.
type sideView struct {
	ID        string
	Station   uuid.UUID
	Due       []taskView
	Overdue   []string // what the plan says about the first of them that is overdue
	Next      []taskView
	More      int // coming samples beyond those in Next
	Quiet     string
	Open      []taskView
	Kept      []taskView // product whose matter is closed
	KeptMore  int
	Gauges    string // label of the way to the gauges; "" when none is named
	GaugesDue bool
	NotTaken  notTakenView
	Machines  []machineView
	Owned     ownedView
}

// taskView is one card of the column.
type taskView struct {
	Href   string
	Name   string
	Tone   string // class of the card: "now", "open look", "open hold", ""
	State  string // class of the state
	Symbol string
	Says   string // "Due now", "Late 9 min"
	When   string
	Sub    string // "5 parts"
	Aside  string // what to keep aside
}

// machineView is a machine with what one tap does to it.
type machineView struct {
	ID      string
	Name    string
	Running bool
	Says    string // "Runs axle 12", "Stands still since 10:12"
	Sub     string // order or lot
	Action  string // address of the form
	Token   string // number of the state that the tap makes
	Do      string // "stop" or "start"
	Button  string
	Href    string // changeover
}

// idleView is what stands on the right while nothing is typed.
type idleView struct {
	ID      string
	Station uuid.UUID
	Due     bool
	Title   string
	Lead    string
	Symbol  string // of what Title says is open
	Tone    string
	Button  string // to what is to be done
	Href    string
	Choose  string
	Choices []pulseView // rounds outside the plan
	Owned   ownedView
}

// pulseView is a characteristic at rest: where it stands, and the way to a round outside
// the plan.
type pulseView struct {
	Href, Name, Parts string
	State             string // class of the state
	Symbol, Says      string
	Newest, Spark     string // with its unit, and SVG; empty without a subgroup
}

// The small chart of a characteristic at rest, in pixels of its drawing.
const (
	pulseW = 322
	pulseH = 104
)

func newPulse(f ui.Format, station uuid.UUID, c *plant.CharacteristicState) pulseView {
	condition := c.Condition()
	v := pulseView{Href: measurePath(station, c.ID), Name: c.Title(), Parts: f.Words.T("station.parts", c.Setup.Size),
		State: ui.Tone(condition), Symbol: ui.SymbolOf(condition), Says: ui.ConditionWord(f.Words, condition)}
	v.Newest, v.Spark = f.Spark(c, pulseW, pulseH)
	return v
}

func sideID(station uuid.UUID) string { return "side-" + station.String() }
func idleID(station uuid.UUID) string { return "idle-" + station.String() }

// isDue reports whether a sample is asked for now.
func isDue(c plant.CharacteristicState) bool { return c.Due.State >= plant.DueNow }

// byDue orders by due time, what has none last, and by place among equals.
func byDue(cs []plant.CharacteristicState) []plant.CharacteristicState {
	out := append([]plant.CharacteristicState(nil), cs...)
	sort.SliceStable(out, func(i, j int) bool {
		a, b := out[i].Due.At, out[j].Due.At
		if a.IsZero() || b.IsZero() {
			return !a.IsZero() && b.IsZero()
		}
		return a.Before(b)
	})
	return out
}

func newSide(f ui.Format, st plant.StationState) sideView {
	v := sideView{ID: sideID(st.ID), Station: st.ID, Owned: newOwned(f, st), NotTaken: newNotTaken(f, st)}
	for _, c := range byDue(st.Characteristics) {
		switch {
		case isDue(c):
			v.Due = append(v.Due, dueTask(f, st.ID, c))
			if v.Overdue == nil && c.OverduePlan != nil {
				for _, step := range c.OverduePlan.Steps {
					v.Overdue = append(v.Overdue, step.Says)
				}
			}
		case c.Due.State != plant.Later:
		case len(v.Next) < mostNext:
			v.Next = append(v.Next, taskView{Href: measurePath(st.ID, c.ID), Name: c.Title(), When: f.Clock(c.Due.At), Sub: f.Words.T("station.parts", c.Setup.Size)})
		default:
			v.More++
		}
		if c.Matter != nil {
			v.Open = append(v.Open, openTask(f, st.ID, c))
		}
	}
	for _, g := range st.OverdueGauges(f.Now, f.Zone) {
		v.Due = append(v.Due, gaugeTask(f, st.ID, g))
	}
	v.Kept, v.KeptMore = keptTasks(f, st)
	if n, named := gaugesWaiting(f, st); named {
		v.Gauges, v.GaugesDue = f.Words.T("reach.gauges"), n > 0
		if n > 0 {
			v.Gauges = f.Words.T("reach.gauges-count", n)
		}
	}
	if len(v.Due) == 0 {
		v.Quiet = quietWords(f, st)
	}
	for _, m := range st.Machines {
		v.Machines = append(v.Machines, newMachine(f, m))
	}
	return v
}

func dueTask(f ui.Format, station uuid.UUID, c plant.CharacteristicState) taskView {
	t := taskView{Href: measurePath(station, c.ID), Name: c.Title(), Tone: "now", State: "due", Symbol: "due",
		Says: f.Words.T("station.due-now"), When: f.Clock(c.Due.At), Sub: f.Words.T("station.parts", c.Setup.Size)}
	if c.Due.State >= plant.Late {
		t.Says = f.Words.T("station.late", f.Age(c.Due.LateBy(f.Now)))
	}
	if c.Due.State == plant.TooLate {
		t.Symbol = "unknown"
	}
	if o := c.Due.Occasion; o != plant.ByTime && o != plant.Unplanned {
		t.Sub = f.Words.T("station.parts-occasion", t.Sub, ui.OccasionWord(f.Words, o))
	}
	return t
}

// gaugeTask is the check of a gauge that is overdue, a task like a round.
func gaugeTask(f ui.Format, station uuid.UUID, g plant.GaugeOverdue) taskView {
	return taskView{Href: path(station, "gauge", g.ID.String()), Name: f.Words.T("reach.check-title", g.Name), Tone: "now long", State: "due", Symbol: "due",
		Says: f.Words.T("station.late", f.Since(g.OverdueSince(f.Zone))), Sub: strings.Join(g.Of, ", ")}
}

func openTask(f ui.Format, station uuid.UUID, c plant.CharacteristicState) taskView {
	condition := ui.ConditionOf(c.Matter.Kind())
	t := taskView{Href: path(station, "matter", c.Matter.ID.String()), Name: c.Title(), Tone: "open " + ui.Tone(condition),
		State: ui.Tone(condition), Symbol: ui.SymbolOf(condition), Says: ui.ConditionWord(f.Words, condition),
		When: f.Since(c.Matter.OpenedAt), Sub: f.Words.T("station.nobody-took")}
	if says, ok := ui.SayReachOf(f, c); ok {
		t.Aside = says.Do
		if kept := containedOf(c); kept.Stated() { // the instruction stands, and so does what was done about it
			t.Aside += " " + ui.SayAside(f, kept)
		}
	}
	if c.Matter.TakenByName != "" {
		t.Sub = f.Words.T("station.taken-by", c.Matter.TakenByName)
		if where := ui.StageWords(f.Words, c.Matter.Progress()); where != "" {
			t.Sub = f.Words.T("matter.where-and-who", where, c.Matter.TakenByName)
		}
	}
	return t
}

// quietWords says when the next sample falls due, or why none does.
func quietWords(f ui.Format, st plant.StationState) string {
	paused, planned := false, false
	for _, c := range byDue(st.Characteristics) {
		switch c.Due.State {
		case plant.Later:
			return f.Words.T("station.nothing-due-until", f.Clock(c.Due.At))
		case plant.Paused:
			paused = true
		}
		planned = planned || c.Due.State != plant.NotPlanned
	}
	switch {
	case paused:
		return f.Words.T("station.nothing-due-paused")
	case len(st.Characteristics) == 0:
		return f.Words.T("station.nothing-measured")
	case !planned:
		return f.Words.T("station.nothing-planned")
	}
	return f.Words.T("station.nothing-due")
}

func newMachine(f ui.Format, m plant.MachineNow) machineView {
	v := machineView{ID: m.ID.String(), Name: m.Name, Running: m.Running(), Action: path(m.StationID, "machine", m.ID.String())}
	v.Href = v.Action
	v.Do, v.Button = "stop", f.Words.T("station.machine-stopped")
	switch {
	case !v.Running:
		v.Do, v.Button = "start", f.Words.T("station.machine-started")
		v.Says = f.Words.T("station.stands-still", f.Clock(m.State.At))
	case m.Part.Name != "":
		v.Says = f.Words.T("station.runs-part", m.Part.Name)
	default:
		v.Says = f.Words.T("station.runs")
	}
	if m.State.Lot != "" {
		v.Sub = f.Words.T("station.order", m.State.Lot)
	}
	// The number follows from the state that the tap ends, so a double tap is one.
	v.Token = uuid.NewSHA1(m.ID, []byte(m.State.ID.String()+v.Do)).String()
	return v
}

func newIdle(f ui.Format, st plant.StationState) idleView {
	v := idleView{ID: idleID(st.ID), Station: st.ID, Owned: newOwned(f, st)}
	for _, c := range byDue(st.Characteristics) {
		if isDue(c) && !v.Due {
			v.Due, v.Button, v.Href = true, f.Words.T("station.measure-it", c.Title()), path(st.ID)
			v.Title, v.Lead = f.Words.T("station.due-title"), dueTask(f, st.ID, c).Says
		}
		v.Choices = append(v.Choices, newPulse(f, st.ID, &c))
	}
	if v.Due {
		return v
	}
	if len(v.Choices) > 0 {
		v.Choose = f.Words.T("station.idle-lead")
	}
	if c, ok := gravestOpen(st); ok {
		v.open(f, st.ID, c)
		return v
	}
	if due := st.OverdueGauges(f.Now, f.Zone); len(due) > 0 {
		t := gaugeTask(f, st.ID, due[0])
		v.Title, v.Lead, v.Button, v.Href = f.Words.T("reach.gauge-due"), t.Says, t.Name, t.Href
		return v
	}
	v.Title = quietWords(f, st)
	return v
}

// gravestOpen is what is open at a station and asks most of people, the oldest of those.
func gravestOpen(st plant.StationState) (out plant.CharacteristicState, ok bool) {
	for _, c := range st.Characteristics {
		if c.Matter == nil {
			continue
		}
		more := 0
		if ok {
			more = c.Condition().Gravity() - out.Condition().Gravity()
		}
		if !ok || more > 0 || more == 0 && c.Matter.OpenedAt.Before(out.Matter.OpenedAt) {
			out, ok = c, true
		}
	}
	return out, ok
}

// open says what is open instead of that nothing is due, and what its next step is.
func (v *idleView) open(f ui.Format, station uuid.UUID, c plant.CharacteristicState) {
	t := openTask(f, station, c)
	v.Title = f.Words.T("station.idle-open."+string(c.Matter.Kind()), f.Clock(c.Matter.OpenedAt))
	v.Lead = f.Words.T("station.fired", t.Name, t.Sub)
	v.Symbol, v.Tone, v.Button, v.Href = t.Symbol, t.State, f.Words.T("station.idle-open-button"), t.Href
	if c.Matter.TakenBy == uuid.Nil {
		v.Button = f.Words.T("station.idle-untaken-button")
	}
}

// Fragments renders what is pushed into the page of a station: the same components
// that the page is made of.
func Fragments(f ui.Format, st plant.StationState) ([]live.Fragment, error) {
	var all []live.Fragment
	var b bytes.Buffer
	if err := side(f.Words, newSide(f, st)).Render(context.Background(), &b); err != nil {
		return nil, fmt.Errorf("render the column of a station: %w", err)
	}
	all = append(all, live.Fragment{ID: sideID(st.ID), HTML: bytes.Clone(b.Bytes())})
	b.Reset()
	if err := idle(f.Words, newIdle(f, st)).Render(context.Background(), &b); err != nil {
		return nil, fmt.Errorf("render what is next at a station: %w", err)
	}
	return append(all, live.Fragment{ID: idleID(st.ID), HTML: bytes.Clone(b.Bytes())}), nil
}
