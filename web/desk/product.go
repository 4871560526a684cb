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

// settledShown is how many settled containments the list goes on to show.
const settledShown = 20

// productListView is the product that is still contained, and what was settled lately.
type productListView struct {
	Sum      string
	Unstated string
	Lines    []link
	Open     []productRow
	Settled  []productRow
	New      newProductForm
	May      bool // open one without a matter
}

// productRow is one containment in a list.
type productRow struct {
	Href, Name, Station string
	Why                 string
	Computed            string
	Stated, Left        string
	Where               string
	Age                 string
	Matter              string
	Waits               bool // nobody has stated anything yet
}

// newProductForm opens a containment without a matter.
type newProductForm struct {
	Of         []productOf
	ID, Entry  string
	Typed      productForm
	Problems   map[string]string
	OpenedForm bool
}

type productOf struct {
	Value, Text string
	Chosen      bool
}

// productForm is a statement as it was typed.
type productForm struct {
	Which                            string // "decide", "keep" or "other"
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
	May      bool
	Open     bool // parts are left to decide about
	Typed    productForm
	Problems map[string]string // by form and field
}

func productPath(id uuid.UUID) string { return productAddress + "/" + id.String() }

// listProduct is GET /desk/product.
func (d *Desk) listProduct(w http.ResponseWriter, r *http.Request) error {
	return d.renderProducts(w, r, http.StatusOK, newProductForm{})
}

func (d *Desk) renderProducts(w http.ResponseWriter, r *http.Request, status int, form newProductForm) error {
	ctx, f := r.Context(), ui.FrameOf(r).Format()
	open, err := d.store.Contained(ctx, f.Now)
	if err != nil {
		return err
	}
	settled, err := d.store.SettledContainments(ctx, settledShown)
	if err != nil {
		return err
	}
	found, err := d.reachesOf(ctx, append(append([]plant.Containment(nil), open...), settled...))
	if err != nil {
		return err
	}
	v := productListView{New: form, May: ui.FrameOf(r).Person.May(plant.DecideProduct)}
	chosen := r.URL.Query().Get("line")
	v.Lines = productLines(f, open, chosen)
	left, places, unstated := 0, 0, 0
	for _, c := range open {
		if chosen != "" && c.Line.ID.String() != chosen {
			continue
		}
		if n := c.Left(); n > 0 {
			left, places = left+n, places+1
		}
		if !c.Stated() {
			unstated++
		}
		v.Open = append(v.Open, newProductRow(f, c, found[c.Matter]))
	}
	for _, c := range settled {
		if chosen == "" || c.Line.ID.String() == chosen {
			v.Settled = append(v.Settled, newProductRow(f, c, found[c.Matter]))
		}
	}
	if len(v.Open) > 0 {
		v.Sum = f.Words.T("reach.product-sum", f.Count(left), places)
	}
	if unstated > 0 {
		v.Unstated = f.Words.T("reach.product-unstated", unstated)
	}
	if v.May {
		if err := d.fillNew(r, &v.New); err != nil {
			return err
		}
	}
	shell := ui.ShellFor(r, ui.Desk, f.Words.T("reach.product-title"))
	shell.Bar = bar(f.Words, uuid.Nil, false, "product")
	return ui.Render(w, r, status, productListPage(shell, v))
}

// fillNew lists what product may be put aside of, and gives the form its numbers.
func (d *Desk) fillNew(r *http.Request, form *newProductForm) error {
	states, err := d.store.StationStates(r.Context(), 1)
	if err != nil {
		return err
	}
	for _, st := range states {
		for _, c := range st.Characteristics {
			form.Of = append(form.Of, productOf{Value: c.ID.String(), Text: ui.FrameOf(r).Words.T("reach.product-of", st.Name, c.Name), Chosen: c.ID.String() == r.PostForm.Get("of")})
		}
	}
	if form.ID == "" {
		form.ID, form.Entry = newFormID(), newFormID()
	}
	return nil
}

func newFormID() string { return uuid.Must(uuid.NewV7()).String() }

func productLines(f ui.Format, open []plant.Containment, chosen string) []link {
	out := []link{{Text: f.Words.T("reach.product-all"), Href: productAddress, Here: chosen == ""}}
	seen := map[uuid.UUID]bool{}
	for _, c := range open {
		if !seen[c.Line.ID] {
			seen[c.Line.ID] = true
			id := c.Line.ID.String()
			out = append(out, link{Text: c.Line.Name, Href: withQuery(productAddress, url.Values{"line": {id}}), Here: chosen == id})
		}
	}
	if len(out) < 3 && chosen == "" {
		return nil // one line is no choice
	}
	return out
}

func (d *Desk) reachesOf(ctx context.Context, list []plant.Containment) (map[uuid.UUID]plant.Contained, error) {
	var ids []uuid.UUID
	for _, c := range list {
		if c.Matter != uuid.Nil {
			ids = append(ids, c.Matter)
		}
	}
	return d.store.Reaches(ctx, ids...)
}

func newProductRow(f ui.Format, c plant.Containment, found plant.Contained) productRow {
	w := f.Words
	v := productRow{Href: productPath(c.ID), Name: c.Characteristic.Name, Station: c.Station.Name, Age: f.Since(c.OpenedAt), Waits: !c.Stated()}
	place, tag := c.Where()
	v.Where = ui.SayWhere(f, place, tag)
	v.Left, v.Stated = f.Count(c.Left()), f.Count(c.Kept())
	switch {
	case c.Matter == uuid.Nil:
		v.Why = w.T("reach.product-person")
	case !c.MatterClosed.IsZero():
		v.Matter = w.T("reach.product-matter-closed", f.Clock(c.MatterClosed))
	default:
		v.Matter = w.T("reach.product-matter-open")
	}
	if c.Matter == uuid.Nil {
		return v
	}
	v.Why = upperFirst(matterWords(f, plant.Matter{Lines: found.Lines}, found.Setup))
	switch s := found.Suspect; {
	case found.Reach == nil || len(found.Reach.Reasons) == 0:
		v.Computed = w.T("reach.product-nothing")
	case !s.Known:
		v.Computed = w.T("reach.product-unknown")
	case s.About:
		v.Computed = w.T("reach.product-parts-about", f.Count(s.Parts))
	default:
		v.Computed = f.Count(s.Parts)
	}
	return v
}

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
	for _, e := range c.Entries {
		v.Entries = append(v.Entries, ui.SayEntry(f, e))
	}
	switch {
	case c.Left() > 0:
		v.State = f.Words.T("reach.aside-left", c.Left())
	case c.Stated():
		v.State = f.Words.T("reach.aside-settled")
	default:
		v.State = f.Words.T("reach.aside-none")
	}
	if r.URL.Query().Get("stated") != "" {
		v.Done = f.Words.T("reach.product-done")
	}
	shell := ui.ShellFor(r, ui.Desk, f.Words.T("reach.product-of", f.Words.T("reach.product-title"), c.Characteristic.Name))
	shell.Bar = bar(f.Words, uuid.Nil, false, "product")
	return ui.Render(w, r, status, productPage(shell, v))
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

// readProduct reads a statement from one of the three forms; problems are by form and
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

// openProduct is POST /desk/product: a person puts product aside without a matter.
func (d *Desk) openProduct(w http.ResponseWriter, r *http.Request) error {
	if err := ui.ParseForm(w, r); err != nil {
		return err
	}
	r.PostForm.Set("form", "keep")
	typed, e, problems := readProduct(r)
	words := ui.FrameOf(r).Words
	form := newProductForm{Typed: typed, Problems: problems, OpenedForm: true, ID: r.PostForm.Get("containment"), Entry: r.PostForm.Get("id")}
	var err error
	if e.Opens, err = uuid.Parse(r.PostForm.Get("of")); err != nil || e.Opens == uuid.Nil {
		problems["keep.of"] = words.T("reach.product-new-choose")
	}
	if e.Containment, err = uuid.Parse(form.ID); err != nil {
		form.ID = ""
		problems["keep."] = words.T("ui.problem-text.bad-request")
	}
	if len(problems) > 0 {
		return d.renderProducts(w, r, http.StatusUnprocessableEntity, form)
	}
	err = d.store.StateProduct(r.Context(), e)
	if pe, ok := errors.AsType[*plant.Error](err); ok {
		problems["keep."+pe.Field] = words.Problem(pe)
		return d.renderProducts(w, r, ui.StatusOf(pe.Kind), form)
	}
	if err != nil {
		return err
	}
	ui.Redirect(w, r, withQuery(productPath(e.Containment), url.Values{"stated": {"1"}}))
	return nil
}
