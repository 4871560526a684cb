package desk

import (
	"context"
	"errors"
	"net/http"
	"net/url"
	"strconv"
	"strings"

	"github.com/google/uuid"

	"holdfast/internal/auth"
	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// productAddress is where product in doubt is seen and decided about.
const productAddress = "/desk/product"

type productOf struct {
	Value, Text string
	Chosen      bool
}

// productForm is a statement as it was typed.
type productForm struct {
	Which                            string // "decide", "keep", "rest" or "other"
	Step, Quantity, Place, Tag, Note string
}

// productView is one containment.
type productView struct {
	productRow
	Reach    ui.ReachSaid
	Entries  []ui.EntrySaid
	State    string
	Matter   string // address of the chart on which it stands
	Chart    string
	ID       string
	Action   string
	Signer   string
	Done     string
	Early    []string // why a statement may come too early, or from the wrong person
	May      bool
	Open     bool   // parts are left to decide about
	Asks     string // where the suspect parts are that were not put aside
	Missing  string // of how many it is asked
	Typed    productForm
	Problems map[string]string // by form and field
}

func productPath(id uuid.UUID) string { return productAddress + "/" + id.String() }

// productIn reads the containment that the address names.
func (d *Desk) productIn(r *http.Request) (plant.Containment, error) {
	id, err := idIn(r)
	if err != nil {
		return plant.Containment{}, err
	}
	return d.store.Containment(r.Context(), id)
}

// showProduct is GET /desk/product/{id}.
func (d *Desk) showProduct(w http.ResponseWriter, r *http.Request) error {
	c, err := d.productIn(r)
	if err != nil {
		return err
	}
	return d.renderProduct(w, r, http.StatusOK, c, productForm{}, nil)
}

func (d *Desk) renderProduct(w http.ResponseWriter, r *http.Request, status int, c plant.Containment, typed productForm, problems map[string]string) error {
	frame := ui.FrameOf(r)
	f := frame.Format()
	found, err := d.reachesOf(r.Context(), []plant.Containment{c})
	if err != nil {
		return err
	}
	k := found[c.Matter]
	v := productView{productRow: newProductRow(f, c, k), ID: newFormID(), Action: productPath(c.ID), Signer: frame.Person.Name, Chart: address(c.Characteristic.ID),
		May: frame.Person.May(plant.DecideProduct), Open: c.Left() > 0, Typed: typed, Problems: problems}
	if c.Matter != uuid.Nil {
		machine, err := d.madeOn(r.Context(), c)
		if err != nil {
			return err
		}
		v.Reach, _ = ui.SayReach(f, k.Reach, k.Suspect, machine)
	}
	if v.May && v.Open && c.Matter != uuid.Nil {
		if v.Early, err = d.early(r, c.Matter); err != nil {
			return err
		}
	}
	for _, e := range c.Entries {
		v.Entries = append(v.Entries, ui.SayEntry(f, e))
	}
	v.State, v.Asks = ui.SayAside(f, c), ui.AskRest(f, c, k.Suspect)
	v.Missing = strconv.Itoa(c.Missing(k.Suspect))
	if r.URL.Query().Get("stated") != "" {
		v.Done = f.Words.T("reach.product-done")
	}
	shell := ui.ShellFor(r, ui.Desk, f.Words.T("reach.product-of", f.Words.T("reach.product-title"), c.Characteristic.Name))
	shell.Bar = bar(f.Words, uuid.Nil, false, "product")
	return ui.Render(w, r, status, productPage(shell, v))
}

// early says what speaks against deciding about the product of a matter now: it is still
// open, so that more may become suspect, or the one who would sign judges what they did
// themselves. Neither forbids it.
func (d *Desk) early(r *http.Request, matter uuid.UUID) (out []string, err error) {
	m, err := d.store.Matter(r.Context(), matter)
	if err != nil {
		return nil, err
	}
	fr := ui.FrameOf(r)
	if m.Open() {
		out = append(out, fr.Words.T("reach.product-early", fr.Words.T("reach.product-stage."+string(m.Progress().Stage))))
	}
	if n := len(m.Fixes); n > 0 && m.Fixes[n-1].Person == fr.Person.ID {
		out = append(out, fr.Words.T("reach.product-own-fix"))
	}
	return out, nil
}

// madeOn reads the machine that made the product, for its name and its streams.
func (d *Desk) madeOn(ctx context.Context, c plant.Containment) (plant.MachineNow, error) {
	states, err := d.store.StationStates(ctx, 1, c.Station.ID)
	if err != nil || len(states) == 0 {
		return plant.MachineNow{}, err
	}
	for _, m := range states[0].Machines {
		if m.ID == c.Characteristic.MachineID {
			return m, nil
		}
	}
	return plant.MachineNow{}, nil
}

// stateProduct is POST /desk/product/{id}.
func (d *Desk) stateProduct(w http.ResponseWriter, r *http.Request) error {
	if err := ui.ParseForm(w, r); err != nil {
		return err
	}
	c, err := d.productIn(r)
	if err != nil {
		return err
	}
	typed, e, problems := readProduct(r)
	e.Containment = c.ID
	if len(problems) == 0 && e.Step.Decides() {
		problem, status, err := d.signedBy(r)
		if err != nil {
			return err
		}
		if problem != "" {
			return d.renderProduct(w, r, status, c, typed, map[string]string{typed.Which + ".secret": problem})
		}
	}
	status := http.StatusUnprocessableEntity
	if len(problems) == 0 {
		err := d.store.StateProduct(r.Context(), e)
		if err == nil {
			ui.Redirect(w, r, withQuery(productPath(c.ID), url.Values{"stated": {"1"}}))
			return nil
		}
		pe, ok := errors.AsType[*plant.Error](err)
		if !ok || pe.Kind == plant.NotFound {
			return err
		}
		problems[typed.Which+"."+pe.Field], status = ui.FrameOf(r).Words.Problem(pe), ui.StatusOf(pe.Kind)
		if c, err = d.productIn(r); err != nil { // as it stands now
			return err
		}
	}
	return d.renderProduct(w, r, status, c, typed, problems)
}

// readProduct reads a statement from one of the forms; problems are by form and
// field.
func readProduct(r *http.Request) (productForm, plant.ContainmentEntry, map[string]string) {
	p, words := r.PostForm, ui.FrameOf(r).Words
	t := productForm{Which: p.Get("form"), Step: p.Get("step"), Quantity: strings.TrimSpace(p.Get("quantity")), Place: plant.CleanText(p.Get("place")),
		Tag: plant.CleanText(p.Get("tag")), Note: plant.CleanText(p.Get("note"))}
	e := plant.ContainmentEntry{Step: plant.ContainmentStep(t.Step), Place: t.Place, Tag: t.Tag, Note: t.Note, Person: ui.FrameOf(r).Person.ID}
	problems := map[string]string{}
	switch t.Which {
	case "keep":
		e.Step = plant.KeptAside
	case "rest":
		if !e.Step.OfRest() {
			problems["rest.step"] = words.T("reach.rest.say")
		}
	case "other":
		if e.Step != plant.NothingToKeep && e.Step != plant.CountedAgain {
			problems["other.step"] = words.T("reach.product-no-step")
		}
	default:
		t.Which = "decide"
		if !e.Step.Disposes() {
			problems["decide.step"] = words.T("reach.product-no-step")
		}
	}
	var err error
	if e.ID, err = uuid.Parse(p.Get("id")); err != nil {
		problems[t.Which+"."] = words.T("ui.problem-text.bad-request")
	}
	if e.Step != plant.NothingToKeep {
		if e.Quantity, err = strconv.Atoi(t.Quantity); err != nil {
			problems[t.Which+".quantity"] = words.T("reach.no-quantity")
		}
	}
	if e.Step.Decides() && p.Get("secret") == "" {
		problems[t.Which+".secret"] = words.T("reach.product-no-secret")
	}
	return t, e, problems
}

// signedBy checks the secret that was entered again; the person who signs is the one who
// is signed in. It returns what is wrong, and the status to say it with.
func (d *Desk) signedBy(r *http.Request) (problem string, status int, err error) {
	fr := ui.FrameOf(r)
	person, err := d.signer.Check(r.Context(), fr.Person.Login, auth.Secret(r.PostForm.Get("secret")), fr.Addr)
	if pe, ok := errors.AsType[*plant.Error](err); ok {
		if pe.Kind == plant.Forbidden { // too many tries: the message says for how long
			return fr.Words.Problem(pe), http.StatusTooManyRequests, nil
		}
		return fr.Words.T("reach.product-wrong-secret"), http.StatusUnprocessableEntity, nil
	}
	if err == nil && person.ID != fr.Person.ID {
		return fr.Words.T("reach.product-wrong-secret"), http.StatusUnprocessableEntity, nil
	}
	return "", http.StatusOK, err
}
