package admin

import (
	"net/http"
	"slices"
	"strings"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

func idOf(s string) uuid.UUID {
	id, _ := uuid.Parse(s)
	return id
}

// distinct sorts texts and leaves out doubles and the empty one.
func distinct(list []string) []string {
	slices.Sort(list)
	list = slices.Compact(list)
	return slices.DeleteFunc(list, func(s string) bool { return s == "" })
}

// dayOf reads a day; zero when none was typed.
func (a *asking) dayOf(name string) time.Time {
	s := a.get(name)
	if s == "" {
		return time.Time{}
	}
	t, err := time.Parse("2006-01-02", s)
	if err != nil {
		a.refuse(name, a.w.T("setup.problem.day"))
	}
	return t
}

// floorView is lines with their stations and machines, in the order of the floor.
type floorView struct {
	Done    string
	Lines   []floorLine
	Retired []item
}

type floorLine struct {
	item
	Stations   []floorStation
	AddStation string
}

type floorStation struct {
	item
	Family     string
	Machines   []floorMachine
	AddMachine string
	Open       string // the station's page on the floor
}

type floorMachine struct {
	item
	Rate, Streams, Measured string
	Measure                 string // where to add a characteristic, for who may
}

// item is one thing in a list.
type item struct {
	ID         string
	Name, Kind string
	Href       string
	Move       string // where to send up or down to, "" when it stands alone
	First      bool
	Last       bool
}

func newItem(kind plant.Thing, id uuid.UUID, name string) item {
	return item{ID: anchor(kind, id), Name: name, Href: thingAddress(kind, id, ""), Move: thingAddress(kind, id, "/move")}
}

// ends marks the first and the last of a list, which cannot go further.
func ends[T any](list []T, at func(*T) *item) {
	for i := range list {
		v := at(&list[i])
		v.First, v.Last = i == 0, i == len(list)-1
	}
}

// doneWords is what is said once after something was done.
func doneWords(r *http.Request) string {
	w := ui.FrameOf(r).Words
	key := r.URL.Query().Get("done")
	if key == "" || strings.ContainsAny(key, ". ") || !w.Has("setup.done."+key) {
		return ""
	}
	return w.T("setup.done." + key)
}

func (a *Admin) showFloor(w http.ResponseWriter, r *http.Request) error {
	o, err := a.store.Outline(r.Context())
	if err != nil {
		return err
	}
	f := ui.FrameOf(r)
	v := newFloor(f, o)
	v.Done = doneWords(r)
	return ui.Render(w, r, http.StatusOK, floorPage(shellFor(r, f.Words.T("setup.floor")), v))
}

func newFloor(f ui.Frame, o plant.Outline) floorView {
	var v floorView
	w, engineer := f.Words, f.Person.May(plant.SetLimits)
	gone := func(kind plant.Thing, id uuid.UUID, name string) {
		it := newItem(kind, id, name)
		it.Kind = w.T("setup.kind." + string(kind))
		v.Retired = append(v.Retired, it)
	}
	for _, l := range o.Lines {
		if l.Retired {
			gone(plant.ALine, l.ID, l.Name)
			continue
		}
		line := floorLine{item: newItem(plant.ALine, l.ID, l.Name), AddStation: thingAddress(plant.AStation, uuid.Nil, "") + "?line=" + l.ID.String()}
		for _, s := range o.Stations {
			if s.LineID != l.ID || s.Retired {
				continue
			}
			st := floorStation{item: newItem(plant.AStation, s.ID, s.Name), Family: s.Family, AddMachine: thingAddress(plant.AMachine, uuid.Nil, "") + "?station=" + s.ID.String()}
			for _, m := range o.Machines {
				if m.StationID == s.ID && !m.Retired {
					st.Machines = append(st.Machines, newFloorMachine(f, o, m, engineer))
				}
			}
			ends(st.Machines, func(m *floorMachine) *item { return &m.item })
			line.Stations = append(line.Stations, st)
		}
		ends(line.Stations, func(s *floorStation) *item { return &s.item })
		v.Lines = append(v.Lines, line)
	}
	ends(v.Lines, func(l *floorLine) *item { return &l.item })
	for _, s := range o.Stations {
		if s.Retired {
			gone(plant.AStation, s.ID, s.Name)
		}
	}
	for _, m := range o.Machines {
		if m.Retired {
			gone(plant.AMachine, m.ID, m.Name)
		}
	}
	return v
}

func newFloorMachine(f ui.Frame, o plant.Outline, m plant.Machine, engineer bool) floorMachine {
	w, n := f.Words, 0
	for _, c := range o.Characteristics {
		if c.MachineID == m.ID && !c.Retired {
			n++
		}
	}
	v := floorMachine{item: newItem(plant.AMachine, m.ID, m.Name), Measured: w.T("setup.measured", n)}
	if m.PartsPerHour > 0 {
		v.Rate = w.T("setup.rate", f.Format().Number(m.PartsPerHour, rateDecimals(m.PartsPerHour)))
	}
	var streams []string
	for _, s := range m.Streams {
		if !s.Retired {
			streams = append(streams, s.Name)
		}
	}
	v.Streams = strings.Join(streams, ", ")
	if engineer {
		v.Measure = measureNew + "?machine=" + m.ID.String()
	}
	return v
}

// rateDecimals is how many decimals a rate of parts is shown with.
func rateDecimals(rate float64) int {
	if rate == float64(int(rate)) {
		return 0
	}
	return 1
}

// rowsView is a list of parts or gauges.
type rowsView struct {
	Done, Title, Text, New, NewText string
	Heads                           []string
	Rows                            []rowView
	Retired                         []item
	Empty                           string
}

type rowView struct {
	item
	Cells []string
}

func (a *Admin) showParts(w http.ResponseWriter, r *http.Request) error {
	o, err := a.store.Outline(r.Context())
	if err != nil {
		return err
	}
	t := ui.FrameOf(r).Words
	v := rowsView{Done: doneWords(r), Title: t.T("setup.parts"), Text: t.T("setup.parts-text"), Empty: t.T("setup.parts-empty"),
		New: thingAddress(plant.APart, uuid.Nil, ""), NewText: t.T("setup.new.part"), Heads: []string{t.T("setup.kind.part"), t.T("setup.field.part_family")}}
	for _, p := range o.Parts {
		it := newItem(plant.APart, p.ID, p.Name)
		if p.Retired {
			it.Kind = t.T("setup.kind.part")
			v.Retired = append(v.Retired, it)
			continue
		}
		v.Rows = append(v.Rows, rowView{it, []string{p.Family}})
	}
	return ui.Render(w, r, http.StatusOK, rowsPage(shellFor(r, v.Title), v))
}

func (a *Admin) showGauges(w http.ResponseWriter, r *http.Request) error {
	o, err := a.store.Outline(r.Context())
	if err != nil {
		return err
	}
	f := ui.FrameOf(r)
	t, format := f.Words, f.Format()
	v := rowsView{Done: doneWords(r), Title: t.T("setup.gauges"), Text: t.T("setup.gauges-text"), Empty: t.T("setup.gauges-empty"),
		New: thingAddress(plant.AGauge, uuid.Nil, ""), NewText: t.T("setup.new.gauge"),
		Heads: []string{t.T("setup.kind.gauge"), t.T("setup.field.resolution"), t.T("setup.field.next_check"), t.T("setup.used-for")}}
	for _, g := range o.Gauges {
		it := newItem(plant.AGauge, g.ID, g.Name)
		if g.Retired {
			it.Kind = t.T("setup.kind.gauge")
			v.Retired = append(v.Retired, it)
			continue
		}
		resolution, check := "", ""
		if g.Resolution != nil {
			resolution = format.Decimal(*g.Resolution)
		}
		if !g.NextCheck.IsZero() {
			check = ui.NewFormat(t, time.UTC, f.Now).Date(g.NextCheck)
			// The day itself is still in time.
			if g.NextCheck.AddDate(0, 0, 1).Before(f.Now) {
				check = t.T("setup.check-overdue", check)
			}
		}
		n := 0
		for _, c := range o.Characteristics {
			if c.Setup.GaugeID == g.ID && !c.Retired {
				n++
			}
		}
		v.Rows = append(v.Rows, rowView{it, []string{resolution, check, t.T("setup.measured", n)}})
	}
	return ui.Render(w, r, http.StatusOK, rowsPage(shellFor(r, v.Title), v))
}
