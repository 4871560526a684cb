package admin

import (
	"context"
	"net/http"
	"net/url"
	"strconv"
	"strings"

	"github.com/go-chi/chi/v5"
	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

const (
	floorAddress   = home + "/floor"
	partsAddress   = home + "/parts"
	gaugesAddress  = home + "/gauges"
	measureAddress = home + "/characteristics"
)

// thing is one of what the plant has, as a form shows it.
type thing struct {
	kind    plant.Thing
	id      uuid.UUID // Nil: it is to be added
	name    string
	retired bool
	values  url.Values // as the record has it
	ordered bool       // it has an order among its like
}

func thingAddress(kind plant.Thing, id uuid.UUID, more string) string {
	if id == uuid.Nil {
		return home + "/thing/" + string(kind) + "/new"
	}
	return home + "/thing/" + string(kind) + "/" + id.String() + more
}

// listOf is the page that lists things of a kind.
func listOf(kind plant.Thing) string {
	switch kind {
	case plant.APart:
		return partsAddress
	case plant.AGauge:
		return gaugesAddress
	case plant.ACharacteristic:
		return measureAddress
	}
	return floorAddress
}

// kindIn reads the kind that the address names and asks whether this person may set it up.
func kindIn(r *http.Request) (plant.Thing, error) {
	kind := plant.Thing(chi.URLParam(r, "kind"))
	action := plant.ArrangePlant
	switch kind {
	case plant.ALine, plant.AStation, plant.AMachine, plant.APart:
	case plant.AGauge, plant.ACharacteristic:
		action = plant.SetLimits // the engineer answers for measuring
	default:
		return "", ui.NotFound(r)
	}
	if f := ui.FrameOf(r); !f.Person.May(action) {
		return "", &plant.Error{Kind: plant.Forbidden, Message: f.Words.T("setup.engineers-only")}
	}
	return kind, nil
}

// thingIn reads the thing that the address names, or an empty one that is to be added.
func (a *Admin) thingIn(r *http.Request) (thing, plant.Outline, error) {
	kind, err := kindIn(r)
	if err != nil {
		return thing{}, plant.Outline{}, err
	}
	o, err := a.store.Outline(r.Context())
	if err != nil {
		return thing{}, o, err
	}
	t := thing{kind: kind, values: url.Values{}}
	if chi.URLParam(r, "id") == "" {
		if kind == plant.ACharacteristic {
			return t, o, ui.NotFound(r) // it has a page of its own
		}
		for _, k := range []string{"line", "station"} {
			t.values.Set(k, r.URL.Query().Get(k))
		}
		return t, o, nil
	}
	if t.id, err = idIn(r); err != nil {
		return t, o, err
	}
	t.load(o)
	if t.name == "" {
		return t, o, ui.NotFound(r)
	}
	t.values.Set("name", t.name)
	return t, o, nil
}

// load fills in what the record says of the thing.
func (t *thing) load(o plant.Outline) {
	switch t.kind {
	case plant.ALine:
		v := o.Line(t.id)
		t.name, t.retired, t.ordered = v.Name, v.Retired, true
	case plant.AStation:
		v := o.Station(t.id)
		t.name, t.retired, t.ordered = v.Name, v.Retired, true
		t.values.Set("line", v.LineID.String())
		t.values.Set("family", v.Family)
	case plant.AMachine:
		v := o.Machine(t.id)
		t.name, t.retired, t.ordered = v.Name, v.Retired, true
		t.values.Set("station", v.StationID.String())
		if v.PartsPerHour > 0 {
			t.values.Set("rate", strconv.FormatFloat(v.PartsPerHour, 'f', -1, 64))
		}
		var names []string
		for _, s := range v.Streams {
			if !s.Retired {
				names = append(names, s.Name)
			}
		}
		t.values.Set("streams", strings.Join(names, ", "))
	case plant.APart:
		v := o.Part(t.id)
		t.name, t.retired = v.Name, v.Retired
		t.values.Set("part_family", v.Family)
	case plant.AGauge:
		v := o.Gauge(t.id)
		t.name, t.retired = v.Name, v.Retired
		if v.Resolution != nil {
			t.values.Set("resolution", v.Resolution.String())
		}
		if !v.NextCheck.IsZero() {
			t.values.Set("next_check", v.NextCheck.Format("2006-01-02"))
		}
		if v.CheckDays > 0 {
			t.values.Set("check_days", strconv.Itoa(v.CheckDays))
		}
	case plant.ACharacteristic:
		v := o.Characteristic(t.id)
		t.name, t.retired, t.ordered = v.Name, v.Retired, true
	}
}

// fields are what the form of the thing asks.
func (t thing) fields(a *asking, o plant.Outline) []field {
	name := a.field(text, "name")
	switch t.kind {
	case plant.AStation:
		return []field{a.field(choice, "line").among(lineOptions(o, a.values.Get("line"))), name,
			a.field(text, "family").optional().suggesting(stationFamilies(o))}
	case plant.AMachine:
		return []field{a.field(choice, "station").among(stationOptions(o, a.values.Get("station"))), name,
			a.field(decimal, "rate").optional(), a.field(text, "streams").optional()}
	case plant.APart:
		return []field{name, a.field(text, "part_family").optional().suggesting(partFamilies(o))}
	case plant.AGauge:
		return []field{name, a.field(decimal, "resolution").optional(), a.field(day, "next_check").optional(), a.field(whole, "check_days").optional()}
	}
	return []field{name}
}

func lineOptions(o plant.Outline, with string) []option {
	var out []option
	for _, l := range o.Lines {
		if !l.Retired || l.ID.String() == with {
			out = append(out, option{Value: l.ID.String(), Text: l.Name})
		}
	}
	return out
}

func stationOptions(o plant.Outline, with string) []option {
	var out []option
	for _, s := range o.Stations {
		if !s.Retired || s.ID.String() == with {
			out = append(out, option{Value: s.ID.String(), Text: o.Line(s.LineID).Name + ", " + s.Name})
		}
	}
	return out
}

func stationFamilies(o plant.Outline) []string {
	var all []string
	for _, s := range o.Stations {
		all = append(all, s.Family)
	}
	return distinct(all)
}

func partFamilies(o plant.Outline) []string {
	var all []string
	for _, p := range o.Parts {
		all = append(all, p.Family)
	}
	for _, c := range o.Characteristics {
		all = append(all, c.Family)
	}
	return distinct(all)
}

// save writes what was typed. What is wrong stands in the asking then.
func (a *Admin) save(ctx context.Context, t thing, o plant.Outline, q *asking, by uuid.UUID) error {
	name := q.nameOf("name")
	var write func() error
	switch t.kind {
	case plant.ALine:
		v := plant.Line{ID: t.id, Name: name, Position: len(o.Lines)}
		write = either(t, func() error { v.ID = newID(); return a.store.AddLine(ctx, v, by) }, func() error { return a.store.ChangeLine(ctx, v, by) })
	case plant.AStation:
		v := plant.Station{ID: t.id, Name: name, Family: q.textOf("family", plant.MaxName), Position: len(o.Stations)}
		if v.LineID = idOf(q.values.Get("line")); o.Line(v.LineID).ID == uuid.Nil {
			q.refuse("line", q.w.T("setup.problem.choose"))
		}
		write = either(t, func() error { v.ID = newID(); return a.store.AddStation(ctx, v, by) }, func() error { return a.store.ChangeStation(ctx, v, by) })
	case plant.AMachine:
		v := machineOf(t, o, q, name)
		write = either(t, func() error { v.ID = newID(); return a.store.AddMachine(ctx, v, by) }, func() error { return a.store.ChangeMachine(ctx, v, by) })
	case plant.APart:
		v := plant.Part{ID: t.id, Name: name, Family: q.textOf("part_family", plant.MaxName)}
		write = either(t, func() error { v.ID = newID(); return a.store.AddPart(ctx, v, by) }, func() error { return a.store.ChangePart(ctx, v, by) })
	case plant.AGauge:
		v := plant.Gauge{ID: t.id, Name: name, Resolution: q.decimalOf("resolution"), NextCheck: q.dayOf("next_check"), CheckDays: q.wholeOf("check_days", 10_000)}
		if v.Resolution != nil && v.Resolution.Units <= 0 {
			q.refuse("resolution", q.w.T("setup.problem.above-zero"))
		}
		write = either(t, func() error { v.ID = newID(); return a.store.AddGauge(ctx, v, by) }, func() error { return a.store.ChangeGauge(ctx, v, by) })
	default:
		return &plant.Error{Kind: plant.NotFound, Message: q.w.T("ui.problem-text.not-found")}
	}
	if !q.ok() {
		return nil
	}
	if err := write(); !q.refused(err) {
		return err
	}
	return nil
}

func either(t thing, add, change func() error) func() error {
	if t.id == uuid.Nil {
		return add
	}
	return change
}

func machineOf(t thing, o plant.Outline, q *asking, name string) plant.Machine {
	v := plant.Machine{ID: t.id, Name: name, Position: len(o.Machines)}
	v.StationID = idOf(q.values.Get("station"))
	if st := o.Station(v.StationID); st.ID == uuid.Nil || st.Retired && o.Machine(t.id).StationID != st.ID {
		q.refuse("station", q.w.T("setup.problem.choose"))
	}
	if d := q.decimalOf("rate"); d != nil {
		v.PartsPerHour = d.Float()
	}
	for _, s := range strings.FieldsFunc(q.get("streams"), func(c rune) bool { return strings.ContainsRune(",;|", c) }) {
		if s = strings.TrimSpace(s); s != "" {
			v.Streams = append(v.Streams, plant.Stream{ID: newID(), Name: s})
		}
	}
	if err := v.Check(); err != nil {
		q.refused(err)
	}
	return v
}

// thingForm is the form of a thing.
func thingForm(t thing, o plant.Outline, q *asking) form {
	groups := []group{{Fields: t.fields(q, o)}}
	button := q.w.T("setup.save")
	if t.id == uuid.Nil {
		button = q.w.T("setup.add")
	}
	return form{Action: thingAddress(t.kind, t.id, ""), Button: button, Groups: groups, Problem: q.rest(groups),
		Back: listOf(t.kind), BackText: q.w.T("setup.back"), Testid: "thing"}
}

func (a *Admin) showThing(w http.ResponseWriter, r *http.Request) error {
	t, o, err := a.thingIn(r)
	if err != nil {
		return err
	}
	if t.kind == plant.ACharacteristic {
		return ui.NotFound(r)
	}
	return a.renderThing(w, r, http.StatusOK, t, o, newAsking(ui.FrameOf(r).Words, t.values))
}

func (a *Admin) renderThing(w http.ResponseWriter, r *http.Request, status int, t thing, o plant.Outline, q *asking) error {
	title := q.w.T("setup.new." + string(t.kind))
	if t.id != uuid.Nil {
		title = t.name
	}
	v := thingView{Kind: q.w.T("setup.kind." + string(t.kind)), Title: title, Form: thingForm(t, o, q)}
	if t.id != uuid.Nil {
		v.Retire = retirePart(q, t)
		v.Note = q.w.T("setup.note." + string(t.kind))
	}
	return ui.Render(w, r, status, thingPage(shellFor(r, title), v))
}

func (a *Admin) saveThing(w http.ResponseWriter, r *http.Request) error {
	t, o, err := a.thingIn(r)
	if err != nil {
		return err
	}
	q := newAsking(ui.FrameOf(r).Words, r.PostForm)
	if err := a.save(r.Context(), t, o, q, ui.FrameOf(r).Person.ID); err != nil {
		return err
	}
	if !q.ok() {
		return a.renderThing(w, r, http.StatusUnprocessableEntity, t, o, q)
	}
	done := "saved"
	if t.id == uuid.Nil {
		done = "added"
	}
	ui.Redirect(w, r, listOf(t.kind)+"?done="+done)
	return nil
}

func (a *Admin) retireThing(w http.ResponseWriter, r *http.Request) error {
	t, _, err := a.thingIn(r)
	if err != nil {
		return err
	}
	retired := r.PostForm.Get("retired") == "yes"
	if !retired && r.PostForm.Get("retired") != "no" {
		return &plant.Error{Kind: plant.Invalid, Field: "retired", Message: ui.FrameOf(r).Words.T("setup.problem.choose")}
	}
	if err := a.store.Retire(r.Context(), t.kind, t.id, retired, ui.FrameOf(r).Person.ID); err != nil {
		return err
	}
	done := "back"
	if retired {
		done = "retired"
	}
	ui.Redirect(w, r, listOf(t.kind)+"?done="+done)
	return nil
}

func (a *Admin) moveThing(w http.ResponseWriter, r *http.Request) error {
	t, _, err := a.thingIn(r)
	if err != nil {
		return err
	}
	to := r.PostForm.Get("to")
	if to != "up" && to != "down" {
		return &plant.Error{Kind: plant.Invalid, Field: "to", Message: ui.FrameOf(r).Words.T("setup.problem.choose")}
	}
	if err := a.store.Move(r.Context(), t.kind, t.id, to == "up", ui.FrameOf(r).Person.ID); err != nil {
		return err
	}
	ui.Redirect(w, r, listOf(t.kind)+"?done=moved#"+anchor(t.kind, t.id))
	return nil
}

// anchor names a thing on the page that lists it.
func anchor(kind plant.Thing, id uuid.UUID) string { return string(kind) + "-" + id.String() }

// retireView is the way out of use, and back.
type retireView struct {
	Action, Value, Button, Text string
}

func retirePart(q *asking, t thing) *retireView {
	v := &retireView{Action: thingAddress(t.kind, t.id, "/retire"), Value: "yes", Button: q.w.T("setup.retire"), Text: q.w.T("setup.retire-text")}
	if t.retired {
		v.Value, v.Button, v.Text = "no", q.w.T("setup.bring-back"), q.w.T("setup.retired-text")
	}
	return v
}

// thingView is the page of one thing.
type thingView struct {
	Kind, Title, Note string
	Form              form
	Retire            *retireView
}
