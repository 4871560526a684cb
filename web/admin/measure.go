package admin

import (
	"net/http"
	"net/url"
	"slices"
	"strconv"

	"github.com/google/uuid"

	"holdfast/internal/describe"
	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
	"holdfast/web/ui"
	"holdfast/web/words"
)

const measureNew = home + "/characteristic/new"

func measureAt(id uuid.UUID, more string) string {
	return home + "/characteristic/" + id.String() + more
}

// Bounds of a sampling plan, far above what anybody samples by.
const (
	maxMinutes = 100_000
	maxParts   = 10_000_000
)

// charts that work from the station to the desk; others are not offered.
var charts = []limits.Chart{limits.XBarR, limits.XBarS, limits.Individuals}

func chartOptions(w *words.Printer) []option {
	var out []option
	for _, c := range charts {
		out = append(out, option{Value: string(c), Text: chartWord(w, c)})
	}
	return out
}

func chartWord(w *words.Printer, c limits.Chart) string { return w.T("setup.chart." + string(c)) }

// setupValues writes a set-up as its form holds it.
func setupValues(d plant.Described) url.Values {
	s := d.Setup
	v := url.Values{"name": {d.Name}, "machine": {d.MachineID.String()}, "of": {ofValue(d.Characteristic)},
		"unit": {s.Unit}, "decimals": {strconv.Itoa(s.Decimals)}, "worse": {string(s.Worse)}, "size": {strconv.Itoa(s.Size)}, "chart": {string(s.Chart)},
		"gauge": {""}, "operation": {s.ControlPlan.Operation}, "drawing": {s.ControlPlan.Drawing}, "drawing_revision": {s.ControlPlan.DrawingRevision},
		"plan": {s.ControlPlan.Plan}, "risk_analysis": {s.ControlPlan.RiskAnalysis}, "special_mark": {s.ControlPlan.SpecialMark}, "method": {s.ControlPlan.Method}}
	if s.GaugeID != uuid.Nil {
		v.Set("gauge", s.GaugeID.String())
	}
	for name, d := range map[string]*plant.Decimal{"target": s.Target, "lower": s.Lower, "upper": s.Upper} {
		if d != nil {
			v.Set(name, d.String())
		}
	}
	for name, n := range map[string]int{"minutes": s.Plan.EveryMinutes, "parts": s.Plan.EveryParts, "grace": s.Plan.GraceMinutes} {
		if n > 0 {
			v.Set(name, strconv.Itoa(n))
		}
	}
	for _, e := range s.Plan.Events {
		v.Add("events", string(e))
	}
	return v
}

// A characteristic is of one part, of a family or of whatever is made.
const (
	ofAny    = ""
	ofPart   = "part:"
	ofFamily = "family:"
)

func ofValue(c plant.Characteristic) string {
	switch {
	case c.PartID != uuid.Nil:
		return ofPart + c.PartID.String()
	case c.Family != "":
		return ofFamily + c.Family
	}
	return ofAny
}

func ofOptions(w *words.Printer, o plant.Outline) []option {
	out := []option{{Value: ofAny, Text: w.T("setup.of-any")}}
	for _, family := range partFamilies(o) {
		out = append(out, option{Value: ofFamily + family, Text: w.T("setup.of-family", family)})
	}
	for _, p := range o.Parts {
		if !p.Retired {
			out = append(out, option{Value: ofPart + p.ID.String(), Text: w.T("setup.of-part", p.Name)})
		}
	}
	return out
}

func machineOptions(o plant.Outline) []option {
	var out []option
	for _, m := range o.Machines {
		if !m.Retired {
			out = append(out, option{Value: m.ID.String(), Text: o.Station(m.StationID).Name + ", " + m.Name})
		}
	}
	return out
}

func gaugeOptions(w *words.Printer, o plant.Outline, with string) []option {
	out := []option{{Value: "", Text: w.T("setup.no-gauge")}}
	for _, g := range o.Gauges {
		if !g.Retired || g.ID.String() == with {
			out = append(out, option{Value: g.ID.String(), Text: g.Name})
		}
	}
	return out
}

func worseOptions(w *words.Printer) []option {
	return []option{{Value: "", Text: w.T("setup.worse-neither")}, {Value: string(plant.High), Text: w.T("setup.worse-high")}, {Value: string(plant.Low), Text: w.T("setup.worse-low")}}
}

func eventOptions(w *words.Printer) []option {
	var out []option
	for _, e := range describe.Events() {
		out = append(out, option{Value: string(e), Text: ui.OccasionWord(w, e)})
	}
	return out
}

// setupGroups are what the form of a characteristic asks. Where it is measured is asked
// only of a new one.
func setupGroups(q *asking, o plant.Outline, isNew bool) []group {
	w := q.w
	what := []field{q.field(text, "name"), q.field(choice, "of").among(ofOptions(w, o))}
	if isNew {
		what = append([]field{q.field(choice, "machine").among(machineOptions(o))}, what...)
	}
	chart := q.field(choice, "chart").among(chartOptions(w))
	chart.Link, chart.LinkText = home+"/chart-choice", w.T("setup.choice.open")
	control := group{Title: w.T("setup.group.control-plan"), Text: w.T("setup.group.control-plan-text")}
	for _, name := range []string{"operation", "drawing", "drawing_revision", "plan", "risk_analysis", "special_mark", "method"} {
		control.Fields = append(control.Fields, q.field(text, name).optional())
		control.Closed = control.Closed || q.problems[name] != ""
	}
	control.Closed = isNew && !control.Closed
	return []group{
		{Title: w.T("setup.group.what"), Fields: what},
		{Title: w.T("setup.group.measure"), Fields: []field{q.field(text, "unit").short(), q.field(whole, "decimals"),
			q.field(choice, "gauge").among(gaugeOptions(w, o, q.values.Get("gauge"))).optional()}},
		{Title: w.T("setup.group.specification"), Text: w.T("setup.group.specification-text"), Fields: []field{q.field(decimal, "lower").optional(), q.field(decimal, "target").optional(), q.field(decimal, "upper").optional(),
			q.field(choice, "worse").among(worseOptions(w))}},
		{Title: w.T("setup.group.chart"), Fields: []field{q.field(whole, "size"), chart}},
		{Title: w.T("setup.group.sampling"), Text: w.T("setup.group.sampling-text"), Fields: []field{q.field(whole, "minutes").optional(), q.field(whole, "parts").optional(),
			q.field(whole, "grace").optional(), q.ticked("events", eventOptions(w)).optional()}},
		control,
	}
}

// setupOf reads how the characteristic is measured.
func setupOf(q *asking, o plant.Outline) plant.Setup {
	s := plant.Setup{Unit: q.get("unit"), Worse: plant.Side(q.get("worse")), Chart: limits.Chart(q.get("chart")), ControlPlan: plant.ControlPlan{
		Operation: q.get("operation"), Drawing: q.get("drawing"), DrawingRevision: q.get("drawing_revision"), Plan: q.get("plan"),
		RiskAnalysis: q.get("risk_analysis"), SpecialMark: q.get("special_mark"), Method: q.get("method"),
	}}
	s.Decimals, s.Size = q.wholeOf("decimals", plant.MaxDecimals), q.wholeOf("size", 25)
	s.Target, s.Lower, s.Upper = q.decimalOf("target"), q.decimalOf("lower"), q.decimalOf("upper")
	s.Plan = plant.SamplingPlan{EveryMinutes: q.wholeOf("minutes", maxMinutes), EveryParts: q.wholeOf("parts", maxParts), GraceMinutes: q.wholeOf("grace", maxMinutes)}
	for _, e := range describe.Events() {
		if slices.Contains(q.values["events"], string(e)) {
			s.Plan.Events = append(s.Plan.Events, e)
		}
	}
	for _, name := range []string{"decimals", "size"} {
		if q.get(name) == "" {
			q.refuse(name, q.w.T("setup.problem.needed"))
		}
	}
	if g := q.get("gauge"); g != "" {
		if s.GaugeID = idOf(g); o.Gauge(s.GaugeID).ID == uuid.Nil {
			q.refuse("gauge", q.w.T("setup.problem.choose"))
		}
	}
	for name, d := range map[string]*plant.Decimal{"target": s.Target, "lower": s.Lower, "upper": s.Upper} {
		if d != nil && q.problems["decimals"] == "" {
			if _, err := d.In(s.Decimals); err != nil {
				q.refuse(name, q.w.T("setup.problem.decimals", s.Decimals))
			}
		}
	}
	if s.Plan.EveryParts > 0 {
		q.ratedMachine(o)
	}
	if q.ok() {
		err := s.Clean()
		if err == nil {
			err = s.Validate()
		}
		q.refused(err)
	}
	return s
}

// ratedMachine asks for the machine's rate where samples are to fall due by parts made:
// without it nobody could say when.
func (a *asking) ratedMachine(o plant.Outline) {
	if m := o.Machine(idOf(a.values.Get("machine"))); m.ID != uuid.Nil && m.PartsPerHour == 0 {
		a.refuse("parts", a.w.T("setup.problem.no-rate", m.Name))
	}
}

// identityOf reads what the characteristic is called and of which part it is.
func identityOf(q *asking, o plant.Outline, c plant.Characteristic) plant.Characteristic {
	c.Name, c.PartID, c.Family = q.nameOf("name"), uuid.Nil, ""
	of := q.values.Get("of")
	if !slices.ContainsFunc(ofOptions(q.w, o), func(p option) bool { return p.Value == of }) && of != ofValue(o.Characteristic(c.ID).Characteristic) {
		q.refuse("of", q.w.T("setup.problem.choose"))
		return c
	}
	switch {
	case len(of) > len(ofPart) && of[:len(ofPart)] == ofPart:
		c.PartID = idOf(of[len(ofPart):])
	case len(of) > len(ofFamily) && of[:len(ofFamily)] == ofFamily:
		c.Family = of[len(ofFamily):]
	}
	return c
}

// measureView is every characteristic in the order of the floor.
type measureView struct {
	Done     string
	NoWhere  bool // there is no machine to measure on
	Stations []measureStation
	Retired  []item
}

type measureStation struct {
	ID, Line, Name string
	Rows           []measureRow
}

type measureRow struct {
	item
	Machine, Of, Specification, Sampling, Chart, Limits string
	Target                                              string // in the preview of a file
	Learning, Given                                     bool
}

func (a *Admin) showCharacteristics(w http.ResponseWriter, r *http.Request) error {
	o, err := a.store.Outline(r.Context())
	if err != nil {
		return err
	}
	f := ui.FrameOf(r)
	t, format := f.Words, f.Format()
	v := measureView{Done: doneWords(r), NoWhere: len(machineOptions(o)) == 0}
	for _, c := range o.Characteristics {
		it := newItem(plant.ACharacteristic, c.ID, c.Name)
		it.Href = measureAt(c.ID, "")
		m, st := o.Machine(c.MachineID), o.Station(c.StationID)
		if c.Retired {
			it.Kind = m.Name
			v.Retired = append(v.Retired, it)
			continue
		}
		if n := len(v.Stations); n == 0 || v.Stations[n-1].ID != st.ID.String() {
			v.Stations = append(v.Stations, measureStation{ID: st.ID.String(), Line: o.Line(st.LineID).Name, Name: st.Name})
		}
		row := measureRow{item: it, Machine: m.Name, Of: ofWords(t, o, c.Characteristic), Specification: format.Specification(c.Setup),
			Sampling: samplingWords(t, c.Setup.Plan), Chart: chartWord(t, c.Setup.Chart), Learning: c.Revision == 0, Given: c.Given,
			Limits: t.T("setup.limits-learning")}
		if row.Specification == "" {
			row.Specification = t.T("setup.no-specification")
		}
		if c.Revision > 0 {
			row.Limits = t.T("setup.limits-revision", c.Revision)
		}
		if c.Given {
			row.Limits = t.T("setup.limits-given", c.Revision)
		}
		last := &v.Stations[len(v.Stations)-1]
		last.Rows = append(last.Rows, row)
	}
	for i := range v.Stations {
		ends(v.Stations[i].Rows, func(r *measureRow) *item { return &r.item })
	}
	return ui.Render(w, r, http.StatusOK, measurePage(shellFor(r, t.T("setup.characteristics")), v))
}

func ofWords(w *words.Printer, o plant.Outline, c plant.Characteristic) string {
	switch {
	case c.PartID != uuid.Nil:
		return o.Part(c.PartID).Name
	case c.Family != "":
		return w.T("setup.of-family", c.Family)
	}
	return w.T("setup.of-any")
}

// samplingWords is a sampling plan in one line.
func samplingWords(w *words.Printer, p plant.SamplingPlan) string {
	var parts []string
	if p.EveryMinutes > 0 {
		parts = append(parts, w.T("setup.every-minutes", p.EveryMinutes))
	}
	if p.EveryParts > 0 {
		parts = append(parts, w.T("setup.every-parts", p.EveryParts))
	}
	for _, e := range p.Events {
		parts = append(parts, ui.OccasionWord(w, e))
	}
	if len(parts) == 0 {
		return w.T("setup.not-sampled")
	}
	out := parts[0]
	for _, s := range parts[1:] {
		out += ", " + s
	}
	return out
}
