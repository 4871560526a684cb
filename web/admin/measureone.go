package admin

import (
	"net/http"
	"net/url"
	"strconv"
	"strings"

	"github.com/go-chi/chi/v5"
	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
	"holdfast/web/ui"
)

// oneView is the page of one characteristic.
type oneView struct {
	Title, Crumbs  string
	Done           string
	Facts          []pair
	Form           form
	Versions       []versionRow
	Known, Chart   string // where limits are stated, and where the chart stands
	KnownText      string
	Retire         *retireView
	NoWhere, IsNew bool
}

type versionRow struct{ Number, Made, What string }

// oneIn reads the characteristic that the address names; the zero value when a new one
// is to be made.
func (a *Admin) oneIn(r *http.Request) (plant.Described, plant.Outline, error) {
	o, err := a.store.Outline(r.Context())
	if err != nil || chi.URLParam(r, "id") == "" {
		return plant.Described{}, o, err
	}
	id, err := idIn(r)
	if err != nil {
		return plant.Described{}, o, err
	}
	d := o.Characteristic(id)
	if d.ID == uuid.Nil {
		return d, o, ui.NotFound(r)
	}
	return d, o, nil
}

func (a *Admin) showCharacteristic(w http.ResponseWriter, r *http.Request) error {
	d, o, err := a.oneIn(r)
	if err != nil {
		return err
	}
	values := setupValues(d)
	if d.ID == uuid.Nil {
		q := r.URL.Query()
		values = url.Values{"machine": {q.Get("machine")}, "size": {q.Get("size")}, "chart": {q.Get("chart")}}
	}
	return a.renderOne(w, r, http.StatusOK, d, o, newAsking(ui.FrameOf(r).Words, values))
}

func (a *Admin) renderOne(w http.ResponseWriter, r *http.Request, status int, d plant.Described, o plant.Outline, q *asking) error {
	isNew := d.ID == uuid.Nil
	groups := setupGroups(q, o, isNew)
	v := oneView{Title: q.w.T("setup.new.characteristic"), Done: doneWords(r), IsNew: isNew, NoWhere: len(machineOptions(o)) == 0,
		Form: form{Action: measureNew, Button: q.w.T("setup.add"), Groups: groups, Problem: q.rest(groups), Back: measureAddress, BackText: q.w.T("setup.back"), Testid: "characteristic"}}
	if isNew {
		return ui.Render(w, r, status, onePage(shellFor(r, v.Title), v))
	}
	setups, err := a.store.CharacteristicSetups(r.Context(), d.ID)
	if err != nil {
		return err
	}
	f := ui.FrameOf(r).Format()
	m, st := o.Machine(d.MachineID), o.Station(d.StationID)
	v.Title, v.Crumbs = d.Name, strings.Join([]string{o.Line(st.LineID).Name, st.Name, m.Name}, ", ")
	v.Form.Action, v.Form.Button, v.Form.Hidden = measureAt(d.ID, ""), q.w.T("setup.look-at-change"), []pair{{"version", strconv.Itoa(versionIn(q, d))}, {"machine", d.MachineID.String()}}
	for i, s := range setups {
		row := versionRow{Number: q.w.T("setup.version", s.Version), Made: f.Clock(s.MadeAt), What: q.w.T("setup.version-first")}
		if i+1 < len(setups) {
			row.What = changedWords(q, s.Effect(setups[i+1]).Changed)
		}
		v.Versions = append(v.Versions, row)
	}
	v.Chart = "/desk/characteristic/" + d.ID.String()
	switch {
	case d.Revision == 0:
		v.Facts = append(v.Facts, pair{q.w.T("setup.fact-limits"), q.w.T("setup.limits-learning")})
		v.Known, v.KnownText = measureAt(d.ID, "/known-limits"), q.w.T("setup.known.offer")
	case d.Given:
		v.Facts = append(v.Facts, pair{q.w.T("setup.fact-limits"), q.w.T("setup.limits-given", d.Revision)})
	default:
		v.Facts = append(v.Facts, pair{q.w.T("setup.fact-limits"), q.w.T("setup.limits-revision", d.Revision)})
	}
	v.Facts = append(v.Facts, pair{q.w.T("setup.fact-version"), q.w.T("setup.version", d.Setup.Version)})
	v.Retire = retirePart(q, thing{kind: plant.ACharacteristic, id: d.ID, retired: d.Retired})
	return ui.Render(w, r, status, onePage(shellFor(r, v.Title), v))
}

// versionIn is the version that the form was filled in from, or that of now.
func versionIn(q *asking, d plant.Described) int {
	if n, err := strconv.Atoi(q.values.Get("version")); err == nil {
		return n
	}
	return d.Setup.Version
}

func changedWords(q *asking, names []string) string {
	var out []string
	for _, n := range names {
		out = append(out, q.w.T("setup.field."+n))
	}
	return strings.Join(out, ", ")
}

func (a *Admin) addCharacteristic(w http.ResponseWriter, r *http.Request) error {
	d, o, err := a.oneIn(r)
	if err != nil {
		return err
	}
	f := ui.FrameOf(r)
	q := newAsking(f.Words, r.PostForm)
	d.Characteristic = identityOf(q, o, d.Characteristic)
	m := o.Machine(idOf(q.values.Get("machine")))
	if m.ID == uuid.Nil || m.Retired {
		q.refuse("machine", q.w.T("setup.problem.choose"))
	}
	d.MachineID, d.StationID, d.Position = m.ID, m.StationID, nextPosition(o, m.StationID)
	d.Setup = setupOf(q, o)
	if q.ok() {
		added := d.Characteristic
		added.ID = newID()
		if err := a.store.AddCharacteristic(r.Context(), added, d.Setup, f.Person.ID); err == nil {
			ui.Redirect(w, r, measureAt(added.ID, "?done=added"))
			return nil
		} else if !q.refused(err) {
			return err
		}
	}
	return a.renderOne(w, r, http.StatusUnprocessableEntity, plant.Described{}, o, q)
}

func nextPosition(o plant.Outline, station uuid.UUID) int {
	n := 0
	for _, c := range o.Characteristics {
		if c.StationID == station && c.Position >= n {
			n = c.Position + 1
		}
	}
	return n
}

// effectView says what saving would do, before it is done.
type effectView struct {
	Title, Crumbs string
	Changes       []changeRow
	Learning      bool
	Says          []string
	Action        string
	Hidden        []pair
	Back          string
}

type changeRow struct{ Name, From, To string }

// changeCharacteristic shows first what a change does, and makes it when that was seen.
func (a *Admin) changeCharacteristic(w http.ResponseWriter, r *http.Request) error {
	d, o, err := a.oneIn(r)
	if err != nil {
		return err
	}
	f := ui.FrameOf(r)
	q := newAsking(f.Words, r.PostForm)
	c := identityOf(q, o, d.Characteristic)
	s := setupOf(q, o)
	if r.PostForm.Get("again") != "" { // back to the form with what was typed
		q.problems = map[string]string{}
		return a.renderOne(w, r, http.StatusOK, d, o, q)
	}
	if q.ok() && versionIn(q, d) != d.Setup.Version {
		q.refuse("", q.w.T("setup.effect.moved"))
		q.values.Set("version", strconv.Itoa(d.Setup.Version))
	}
	effect := s.Effect(d.Setup)
	renamed := c.Name != d.Name || c.PartID != d.PartID || c.Family != d.Family
	if q.ok() && len(effect.Changed) == 0 && !renamed {
		q.refuse("", q.w.T("setup.effect.nothing"))
	}
	if !q.ok() {
		return a.renderOne(w, r, http.StatusUnprocessableEntity, d, o, q)
	}
	if r.PostForm.Get("seen") != "yes" {
		return a.renderEffect(w, r, d, o, q, c, s)
	}
	if renamed {
		err = a.store.ChangeCharacteristic(r.Context(), c, f.Person.ID)
	}
	if err == nil && len(effect.Changed) > 0 {
		err = a.store.ChangeSetup(r.Context(), d.ID, s, d.Setup.Version, f.Person.ID)
	}
	if q.refused(err) {
		return a.renderOne(w, r, ui.StatusOf(kindOf(err)), d, o, q)
	}
	if err != nil {
		return err
	}
	ui.Redirect(w, r, measureAt(d.ID, "?done=saved"))
	return nil
}

func kindOf(err error) plant.Kind {
	if plant.IsKind(err, plant.Conflict) {
		return plant.Conflict
	}
	return plant.Invalid
}

func (a *Admin) renderEffect(w http.ResponseWriter, r *http.Request, d plant.Described, o plant.Outline, q *asking, c plant.Characteristic, s plant.Setup) error {
	n, err := a.store.SubgroupCount(r.Context(), d.ID)
	if err != nil {
		return err
	}
	v := effectView{Title: d.Name, Crumbs: o.Line(o.Station(d.StationID).LineID).Name + ", " + o.Station(d.StationID).Name, Action: measureAt(d.ID, "")}
	for name, values := range r.PostForm {
		for _, value := range values {
			if name != "seen" && name != "again" {
				v.Hidden = append(v.Hidden, pair{name, value})
			}
		}
	}
	sortPairs(v.Hidden)
	f := ui.FrameOf(r).Format()
	if c.Name != d.Name {
		v.Changes = append(v.Changes, changeRow{q.w.T("setup.field.name"), d.Name, c.Name})
	}
	if c.PartID != d.PartID || c.Family != d.Family {
		v.Changes = append(v.Changes, changeRow{q.w.T("setup.field.of"), ofWords(q.w, o, d.Characteristic), ofWords(q.w, o, c)})
	}
	effect := s.Effect(d.Setup)
	for _, name := range effect.Changed {
		v.Changes = append(v.Changes, changeRow{q.w.T("setup.field." + name), valueWords(f, o, d.Setup, name), valueWords(f, o, s, name)})
	}
	v.Learning = len(effect.Learning) > 0
	v.Says = effectWords(q, d, effect, n)
	return ui.Render(w, r, http.StatusOK, effectPage(shellFor(r, d.Name), v))
}

// effectWords says what a change does to limits, verdicts and due times.
func effectWords(q *asking, d plant.Described, e plant.SetupEffect, subgroups int) []string {
	var out []string
	has := func(names ...string) bool {
		for _, n := range names {
			for _, c := range e.Changed {
				if c == n {
					return true
				}
			}
		}
		return false
	}
	switch {
	case len(e.Learning) > 0:
		out = append(out, q.w.T("setup.effect.learning", strings.ToLower(changedWords(q, e.Learning)), subgroups))
		if d.Revision > 0 {
			out = append(out, q.w.T("setup.effect.limits-end", d.Revision))
		}
	case d.Revision > 0:
		out = append(out, q.w.T("setup.effect.limits-stay", d.Revision))
	default:
		out = append(out, q.w.T("setup.effect.learning-goes-on"))
	}
	if has("lower", "upper") {
		out = append(out, q.w.T("setup.effect.specification"))
	}
	if has("minutes", "parts", "events", "grace") {
		out = append(out, q.w.T("setup.effect.sampling"))
	}
	if len(e.Changed) > 0 {
		out = append(out, q.w.T("setup.effect.queued"))
	}
	return out
}

// valueWords is one entry of a set-up as it is shown.
func valueWords(f ui.Format, o plant.Outline, s plant.Setup, name string) string {
	w := f.Words
	exact := func(d *plant.Decimal) string {
		if d == nil {
			return ""
		}
		return f.WithUnit(f.Decimal(*d), s.Unit)
	}
	count := func(n int) string {
		if n == 0 {
			return ""
		}
		return f.Count(n)
	}
	out := ""
	switch name {
	case "unit":
		out = s.Unit
	case "decimals":
		out = f.Count(s.Decimals)
	case "target":
		out = exact(s.Target)
	case "lower":
		out = exact(s.Lower)
	case "upper":
		out = exact(s.Upper)
	case "worse":
		for _, v := range worseOptions(w) {
			if v.Value == string(s.Worse) {
				out = v.Text
			}
		}
	case "size":
		out = f.Count(s.Size)
	case "chart":
		out = chartWord(w, limits.Chart(s.Chart))
	case "gauge":
		out = o.Gauge(s.GaugeID).Name
	case "minutes":
		out = count(s.Plan.EveryMinutes)
	case "parts":
		out = count(s.Plan.EveryParts)
	case "grace":
		out = count(s.Plan.GraceMinutes)
	case "events":
		var events []string
		for _, e := range s.Plan.Events {
			events = append(events, ui.OccasionWord(w, e))
		}
		out = strings.Join(events, ", ")
	default:
		c := s.ControlPlan
		out = map[string]string{"operation": c.Operation, "drawing": c.Drawing, "drawing_revision": c.DrawingRevision, "plan": c.Plan,
			"risk_analysis": c.RiskAnalysis, "special_mark": c.SpecialMark, "method": c.Method}[name]
	}
	if out == "" {
		return w.T("setup.none")
	}
	return out
}
