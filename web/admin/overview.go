package admin

import (
	"net/http"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// overviewView leads to everything.
type overviewView struct {
	Start *startCard // while the first run is not finished
	Cards []card
}

// startCard says where the first run stands.
type startCard struct{ Title, Next, Button string }

type card struct {
	Title, Text, Count, Href string
}

func (a *Admin) overview(w http.ResponseWriter, r *http.Request) error {
	o, err := a.store.Outline(r.Context())
	if err != nil {
		return err
	}
	f := ui.FrameOf(r)
	return ui.Render(w, r, http.StatusOK, overviewPage(shellFor(r, f.Words.T("admin.title")), newOverview(f, o)))
}

func newOverview(f ui.Frame, o plant.Outline) overviewView {
	w := f.Words
	var v overviewView
	steps := stepsOf(f, o)
	if at := current(steps); at < len(steps) {
		v.Start = &startCard{Title: w.T("setup.start.title"), Next: w.T("setup.start.stands", at+1, len(steps), steps[at].Title), Button: w.T("setup.start.go-on")}
		if at == 0 {
			v.Start.Button = w.T("setup.start.begin")
		}
	}
	lines, stations, machines, parts, gauges, characteristics := inUse(o)
	v.Cards = []card{
		{w.T("setup.plant"), w.T("setup.card.plant"), w.T("setup.card.plant-now", o.Plant.Name, o.Plant.Location.String()), plantAddress},
		{w.T("setup.floor"), w.T("setup.card.floor"), w.T("setup.card.floor-now", w.T("setup.count.lines", lines), w.T("setup.count.stations", stations), w.T("setup.count.machines", machines)), floorAddress},
		{w.T("setup.parts"), w.T("setup.card.parts"), w.T("setup.count.parts", parts), partsAddress},
	}
	if f.Person.May(plant.SetLimits) {
		v.Cards = append(v.Cards,
			card{w.T("setup.gauges"), w.T("setup.card.gauges"), w.T("setup.count.gauges", gauges), gaugesAddress},
			card{w.T("setup.characteristics"), w.T("setup.card.characteristics"), w.T("setup.count.characteristics", characteristics), measureAddress},
			card{w.T("setup.describe.title"), w.T("setup.card.describe"), "", describeAddress})
	}
	if f.Person.May(plant.Manage) {
		v.Cards = append(v.Cards, card{w.T("staff.people"), w.T("setup.card.people"), "", peopleAddress}, card{w.T("staff.devices"), w.T("setup.card.devices"), "", devicesAddress},
			card{w.T("messages.page"), w.T("setup.card.messages"), "", messagesAddress},
			card{w.T("about.title"), w.T("setup.card.about"), "", aboutAddress}, card{w.T("admin.qualification"), w.T("admin.qualification-text"), "", qualificationAddress})
	}
	return v
}

// inUse counts what is not retired.
func inUse(o plant.Outline) (lines, stations, machines, parts, gauges, characteristics int) {
	for _, v := range o.Lines {
		lines += one(v.Retired)
	}
	for _, v := range o.Stations {
		stations += one(v.Retired)
	}
	for _, v := range o.Machines {
		machines += one(v.Retired)
	}
	for _, v := range o.Parts {
		parts += one(v.Retired)
	}
	for _, v := range o.Gauges {
		gauges += one(v.Retired)
	}
	for _, v := range o.Characteristics {
		characteristics += one(v.Retired)
	}
	return lines, stations, machines, parts, gauges, characteristics
}

func one(retired bool) int {
	if retired {
		return 0
	}
	return 1
}
