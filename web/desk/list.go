package desk

import (
	"net/http"
	"net/url"
	"sort"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// listView is every characteristic by line and station.
type listView struct {
	Total   int
	Filters []link
	Lines   []lineGroup
	Nothing string // filtered away
}

type lineGroup struct {
	ID, Name string
	Stations []stationGroup
}

type stationGroup struct {
	Name string
	Rows []row
}

// row is one characteristic of the list.
type row struct {
	Href, Name, Machine string
	State               plant.Condition
	For                 string
	Owner               string
	Strong              bool // engineering owns it
	Why, Since          string
	Limits              string
	Last, LastAt        string
}

// filter is what the list may be narrowed to.
type filter string

const (
	everything filter = ""
	needs      filter = "needs"
	mine       filter = "engineering"
	stations   filter = "station"
	nobodys    filter = "nobody"
	learning   filter = "learning"
)

var filters = []filter{everything, needs, mine, stations, nobodys, learning}

func (fl filter) holds(c plant.CharacteristicState) bool {
	switch fl {
	case needs:
		return c.Condition().NeedsPerson()
	case mine, stations, nobodys:
		return c.Owner() == plant.Owner(fl)
	case learning:
		return c.Revision == nil
	}
	return true
}

func (d *Desk) list(w http.ResponseWriter, r *http.Request) error {
	states, err := d.store.StationStates(r.Context(), 1)
	if err != nil {
		return err
	}
	s := ui.ShellFor(r, ui.Desk, ui.FrameOf(r).Words.T("desk.list.title"))
	s.Bar = bar(s.Words, uuid.Nil, false, "list")
	return ui.Render(w, r, http.StatusOK, listPage(s, newList(s.Format, states, r.URL.Query())))
}

func newList(f ui.Format, states []plant.StationState, q url.Values) listView {
	var v listView
	chosen, line := filter(q.Get("show")), q.Get("line")
	counts := map[filter]int{}
	lines := map[string]*lineGroup{}
	var order []plant.Line
	for _, st := range states {
		id := st.Line.ID.String()
		if lines[id] == nil {
			lines[id] = &lineGroup{ID: id, Name: st.Line.Name}
			order = append(order, st.Line)
		}
		group := stationGroup{Name: st.Name}
		for _, c := range st.Characteristics {
			v.Total++
			for _, fl := range filters {
				if fl.holds(c) {
					counts[fl]++
				}
			}
			if chosen.holds(c) && (line == "" || line == id) {
				group.Rows = append(group.Rows, newRow(f, c))
			}
		}
		if len(group.Rows) > 0 {
			lines[id].Stations = append(lines[id].Stations, group)
		}
	}
	sort.SliceStable(order, func(i, j int) bool { return order[i].Position < order[j].Position })
	for _, l := range order {
		if g := lines[l.ID.String()]; len(g.Stations) > 0 {
			v.Lines = append(v.Lines, *g)
		}
	}
	v.Filters = listFilters(f, chosen, line, counts, order)
	if v.Total > 0 && len(v.Lines) == 0 {
		v.Nothing = f.Words.T("desk.list.nothing")
	}
	return v
}

func listFilters(f ui.Format, chosen filter, line string, counts map[filter]int, lines []plant.Line) []link {
	var out []link
	for _, fl := range filters {
		q := url.Values{}
		text := f.Words.T("desk.list.everything", counts[fl])
		if fl != everything {
			q.Set("show", string(fl))
			text = f.Words.T("desk.list.show."+string(fl), counts[fl])
		}
		if line != "" {
			q.Set("line", line)
		}
		out = append(out, link{Text: text, Href: withQuery("/desk", q), Here: chosen == fl})
	}
	if len(lines) < 2 {
		return out
	}
	add := func(id, text string) {
		q := url.Values{}
		if chosen != everything {
			q.Set("show", string(chosen))
		}
		if id != "" {
			q.Set("line", id)
		}
		out = append(out, link{Text: text, Href: withQuery("/desk", q), Here: line == id})
	}
	add("", f.Words.T("desk.list.all-lines"))
	for _, l := range lines {
		add(l.ID.String(), l.Name)
	}
	return out
}

func newRow(f ui.Format, c plant.CharacteristicState) row {
	w := f.Words
	o := c.Ownership()
	v := row{Href: address(c.ID), Name: c.Name, Machine: c.Machine.Name, State: c.Condition(),
		Owner: upperFirst(ui.OwnerWord(w, o.Owner)), Strong: o.Owner == plant.Engineering, Why: w.T("owner.reason." + string(o.Reason)), Since: f.OwnerSince(o)}
	if o.Reason == plant.MatterOpen {
		v.Why = f.OwnerReason(c)
	}
	if asked := f.AskedOfStation(c); asked != "" {
		v.Why = w.T("desk.list.why-and", v.Why, asked)
	}
	switch v.State {
	case plant.IsHold, plant.IsLook, plant.IsStopped:
		v.For = f.Since(c.Since())
	case plant.IsDue, plant.IsLate, plant.IsUnknown:
		v.For = f.Late(c.Due)
	}
	if r := c.Revision; r != nil {
		v.Limits = w.T("desk.list.limits", r.Number, f.Clock(r.InForceFrom))
	} else {
		v.Limits = w.T("desk.list.no-limits", c.Collected)
	}
	if n := len(c.Points); n > 0 {
		p := c.Points[n-1]
		v.Last, v.LastAt = f.Mean(p.Stats.Mean(), c.Setup), f.Clock(p.TakenAt)
	}
	return v
}
