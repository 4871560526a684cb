package desk

import (
	"context"
	"errors"
	"net/http"
	"net/url"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

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
	Where, Rest         string
	Age                 string
	Matter              string
	Settled             string // when; "" while open
	Waits               bool   // nobody has stated anything yet
}

// newProductForm opens a containment without a matter.
type newProductForm struct {
	Of         []productOf
	ID, Entry  string
	Typed      productForm
	Problems   map[string]string
	OpenedForm bool
}

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
	left, unstated := 0, 0
	for _, c := range open {
		if chosen != "" && c.Line.ID.String() != chosen {
			continue
		}
		left += c.Left()
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
		v.Sum = f.Words.T("reach.product-sum", f.Count(left), len(v.Open)) // as the handover counts them
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
	if !c.SettledAt.IsZero() {
		v.Settled, v.Age = f.Clock(c.SettledAt), f.Age(c.SettledAt.Sub(c.OpenedAt)) // for as long as it was open
	}
	place, tag := c.Where()
	v.Where, v.Rest = ui.SayWhere(f, place, tag), ui.SayRest(f, c)
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
