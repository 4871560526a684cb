package desk

import (
	"context"
	"errors"
	"net/http"
	"net/url"
	"strconv"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// adjustingStore is what the pages about adjusting need of the plant's record.
type adjustingStore interface {
	Knobs(ctx context.Context, machine uuid.UUID) ([]plant.Knob, error)
	KnobVersions(ctx context.Context, id uuid.UUID) ([]plant.Knob, error)
	SaveKnob(ctx context.Context, k plant.Knob) (plant.Knob, error)
	AdjustmentDays(ctx context.Context, characteristic uuid.UUID) ([]plant.AdjustmentDay, error)
}

// knobsView is what can be turned on the machine of a characteristic.
type knobsView struct {
	ID     uuid.UUID // of the characteristic
	Crumbs string
	Said   string // what was just kept
	Cards  []knobCard
	Form   *knobForm // of a new one, for who may
}

// knobCard is one adjusting point with its earlier versions.
type knobCard struct {
	ID       string
	Name     string
	Says     string
	Retired  bool
	Reason   string
	By       string
	Moves    []moveRow
	Versions []string
	Form     *knobForm
}

type moveRow struct{ Name, PerUnit, PerStep string }

// knobForm is a version of an adjusting point as it is typed.
type knobForm struct {
	Action, Knob, Version         string
	Key                           string // sets apart the fields of the forms of one page
	Name, Unit, Step, Reason      string
	NameBad, UnitBad, StepBad     string
	ReasonBad, MovesBad, Conflict string
	Gains                         []gainField
	Open                          bool
	Retired                       bool
}

type gainField struct{ ID, Name, Unit, Value, Problem string }

func (d *Desk) showKnobs(w http.ResponseWriter, r *http.Request) error {
	return d.renderKnobs(w, r, http.StatusOK, nil)
}

// machineOf reads a characteristic with all that is measured on its machine.
func (d *Desk) machineOf(ctx context.Context, id uuid.UUID) (plant.History, []plant.CharacteristicState, error) {
	h, err := d.store.History(ctx, id, plant.Stretch{Last: 1})
	if err != nil {
		return h, nil, err
	}
	states, err := d.store.StationStates(ctx, 1, h.Station.ID)
	if err != nil {
		return h, nil, err
	}
	var out []plant.CharacteristicState
	for _, st := range states {
		for _, c := range st.Characteristics {
			if c.MachineID == h.State.MachineID {
				out = append(out, c)
			}
		}
	}
	return h, out, nil
}

// renderKnobs shows the page; typed is a form that was refused.
func (d *Desk) renderKnobs(w http.ResponseWriter, r *http.Request, status int, typed *knobForm) error {
	id, err := idIn(r)
	if err != nil {
		return err
	}
	h, measured, err := d.machineOf(r.Context(), id)
	if err != nil {
		return err
	}
	list, err := d.store.Knobs(r.Context(), h.State.MachineID)
	if err != nil {
		return err
	}
	fr := ui.FrameOf(r)
	f, may := fr.Format(), fr.Person.May(plant.SetLimits)
	s := ui.ShellFor(r, ui.Desk, f.Words.T("audit.knobs.title-of", h.State.Machine.Name))
	s.Styles = []string{"css/desk-audit.css"}
	s.Bar = bar(f.Words, id, may, "audit")
	v := knobsView{ID: id, Crumbs: f.Words.T("audit.knobs.crumbs", s.Plant.Name, h.Line.Name, h.Station.Name, h.State.Machine.Name)}
	for _, k := range list {
		c := newKnobCard(f, k, measured)
		if k.Version > 1 {
			versions, err := d.store.KnobVersions(r.Context(), k.ID)
			if err != nil {
				return err
			}
			for _, old := range versions[1:] {
				c.Versions = append(c.Versions, f.Words.T("audit.knobs.version", old.Version, f.Clock(old.MadeAt), old.MadeName, movesInWords(f, old, measured), old.Reason))
			}
		}
		if may {
			if c.Form = newKnobForm(f, id, k, measured); typed != nil && typed.Knob == k.ID.String() {
				c.Form = typed
			}
		}
		if r.URL.Query().Get("kept") == k.ID.String() {
			v.Said = f.Words.T("audit.knobs.kept", k.Name)
		}
		v.Cards = append(v.Cards, c)
	}
	if may {
		fresh := plant.Knob{ID: uuid.Must(uuid.NewV7()), Machine: h.State.MachineID}
		if v.Form = newKnobForm(f, id, fresh, measured); typed != nil && typed.Version == "0" {
			v.Form = typed
		}
		v.Form.Open = v.Form.Open || len(list) == 0
	}
	return ui.Render(w, r, status, knobsPage(s, v))
}

func newKnobCard(f ui.Format, k plant.Knob, measured []plant.CharacteristicState) knobCard {
	w := f.Words
	c := knobCard{ID: k.ID.String(), Name: k.Name, Retired: k.Retired, Reason: k.Reason, By: w.T("audit.knobs.by", k.Version, k.MadeName, f.Clock(k.MadeAt)),
		Says: w.T("audit.knobs.step", f.WithUnit(f.Decimal(k.Step), k.Unit))}
	for _, m := range measured {
		g, ok := k.GainOn(m.ID)
		if !ok {
			continue
		}
		row := moveRow{Name: m.Name, PerUnit: f.WithUnit(f.SignedDecimal(g), m.Setup.Unit)}
		if step, ok := g.Times(k.Step); ok {
			row.PerStep = f.WithUnit(f.SignedDecimal(step.Trimmed(m.Setup.Decimals)), m.Setup.Unit)
		}
		c.Moves = append(c.Moves, row)
	}
	return c
}

func movesInWords(f ui.Format, k plant.Knob, measured []plant.CharacteristicState) string {
	said := f.Words.T("audit.knobs.step", f.WithUnit(f.Decimal(k.Step), k.Unit))
	for _, m := range measured {
		if g, ok := k.GainOn(m.ID); ok {
			said = f.Words.T("audit.knobs.and", said, f.Words.T("audit.knobs.gain", m.Name, f.WithUnit(f.SignedDecimal(g), m.Setup.Unit), k.Unit))
		}
	}
	return said
}

func newKnobForm(f ui.Format, of uuid.UUID, k plant.Knob, measured []plant.CharacteristicState) *knobForm {
	v := &knobForm{Action: address(of, "adjusting-points"), Knob: k.ID.String(), Version: itoa(k.Version), Key: k.ID.String(), Name: k.Name, Unit: k.Unit, Retired: k.Retired}
	if k.Version > 0 {
		v.Step = f.Decimal(k.Step)
	}
	for _, m := range measured {
		g := gainField{ID: m.ID.String(), Name: m.Name, Unit: m.Setup.Unit}
		if gain, ok := k.GainOn(m.ID); ok {
			g.Value = f.SignedDecimal(gain)
		}
		v.Gains = append(v.Gains, g)
	}
	return v
}

// saveKnob is POST .../adjusting-points: a new point, a new version of one, or its
// retirement.
func (d *Desk) saveKnob(w http.ResponseWriter, r *http.Request) error {
	if err := ui.ParseForm(w, r); err != nil {
		return err
	}
	id, err := idIn(r)
	if err != nil {
		return err
	}
	h, measured, err := d.machineOf(r.Context(), id)
	if err != nil {
		return err
	}
	fr := ui.FrameOf(r)
	k, form := readKnob(r.PostForm, fr.Format(), id, measured)
	k.Machine, k.MadeBy = h.State.MachineID, fr.Person.ID
	status := http.StatusUnprocessableEntity
	if form.bad() {
		return d.renderKnobs(w, r, status, form)
	}
	kept, err := d.store.SaveKnob(r.Context(), k)
	if err == nil {
		ui.Redirect(w, r, withQuery(address(id, "adjusting-points"), url.Values{"kept": {kept.ID.String()}}))
		return nil
	}
	pe, ok := errors.AsType[*plant.Error](err)
	if !ok || pe.Kind == plant.Forbidden {
		return err
	}
	form.place(fr.Words.Problem(pe), pe.Field)
	return d.renderKnobs(w, r, ui.StatusOf(pe.Kind), form)
}

func (v *knobForm) bad() bool {
	for _, g := range v.Gains {
		if g.Problem != "" {
			return true
		}
	}
	return v.StepBad != "" || v.Conflict != ""
}

// place puts what the record said at the field that it is about.
func (v *knobForm) place(said, field string) {
	switch field {
	case "name":
		v.NameBad = said
	case "unit":
		v.UnitBad = said
	case "step":
		v.StepBad = said
	case "reason":
		v.ReasonBad = said
	case "moves":
		v.MovesBad = said
	default:
		v.Conflict = said
	}
}

func readKnob(p url.Values, f ui.Format, of uuid.UUID, measured []plant.CharacteristicState) (plant.Knob, *knobForm) {
	k := plant.Knob{Name: p.Get("name"), Unit: p.Get("unit"), Reason: p.Get("reason"), Retired: p.Get("do") == "retire"}
	v := newKnobForm(f, of, k, measured)
	v.Open, v.Step, v.Reason, v.Knob, v.Version = true, p.Get("step"), k.Reason, p.Get("knob"), p.Get("version")
	v.Key = v.Knob
	var err error
	if k.ID, err = uuid.Parse(v.Knob); err != nil || k.ID == uuid.Nil {
		v.Conflict = f.Words.T("audit.knobs.no-number")
	}
	if k.Version, err = strconv.Atoi(v.Version); err != nil || k.Version < 0 {
		v.Conflict = f.Words.T("audit.knobs.no-number")
	}
	if k.Step, err = plant.ParseDecimal(v.Step); err != nil {
		v.StepBad = f.Words.T("audit.knobs.bad-number")
	}
	for i, m := range measured {
		text := plant.CleanText(p.Get("gain-" + m.ID.String()))
		v.Gains[i].Value = text
		if text == "" {
			continue
		}
		g, err := plant.ParseDecimal(text)
		if err != nil {
			v.Gains[i].Problem = f.Words.T("audit.knobs.bad-number")
			continue
		}
		k.Moves = append(k.Moves, plant.Gain{Characteristic: m.ID, PerUnit: g})
	}
	return k, v
}
