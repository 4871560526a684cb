package desk

import (
	"errors"
	"net/http"
	"net/url"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// causesView is the catalogue of causes by family of stations.
type causesView struct {
	Groups  []causeGroup
	May     bool
	Problem string
	Family  string // whose new cause the problem is about
	About   string // id of the cause that it is about
	Typed   string
	Saved   bool
}

type causeGroup struct {
	Family string
	Name   string
	Rows   []causeRow
}

type causeRow struct {
	ID, Name, Retired string
}

func (d *Desk) showCauses(w http.ResponseWriter, r *http.Request) error {
	return d.renderCauses(w, r, http.StatusOK, causesView{Saved: r.URL.Query().Get("saved") != ""})
}

func (d *Desk) renderCauses(w http.ResponseWriter, r *http.Request, status int, v causesView) error {
	all, err := d.store.AllCauses(r.Context())
	if err != nil {
		return err
	}
	s, err := d.scopes(r)
	if err != nil {
		return err
	}
	frame := ui.FrameOf(r)
	f := frame.Format()
	v.May = frame.Person.May(plant.SetLimits)
	families := append(append([]string{}, s.families...), "")
	for _, c := range all { // a family whose stations are gone keeps its catalogue
		known := false
		for _, name := range families {
			known = known || name == c.Family
		}
		if !known {
			families = append([]string{c.Family}, families...)
		}
	}
	for _, family := range families {
		g := causeGroup{Family: family, Name: f.Words.T("plan.scope-family", family)}
		if family == "" {
			g.Name = f.Words.T("plan.all-families")
		}
		for _, c := range all {
			if c.Family != family {
				continue
			}
			row := causeRow{ID: c.ID.String(), Name: c.Name}
			if !c.RetiredAt.IsZero() {
				row.Retired = f.Words.T("plan.retired-since", f.Clock(c.RetiredAt))
			}
			if v.About == row.ID {
				row.Name = v.Typed
			}
			g.Rows = append(g.Rows, row)
		}
		v.Groups = append(v.Groups, g)
	}
	shell := ui.ShellFor(r, ui.Desk, f.Words.T("plan.causes"))
	shell.Bar = bar(f.Words, uuid.Nil, false, "causes")
	shell.Styles = append(shell.Styles, "css/reaction.css")
	return ui.Render(w, r, status, causesPage(shell, v))
}

// editCauses is POST /desk/causes: a cause is added, renamed, retired or put back.
func (d *Desk) editCauses(w http.ResponseWriter, r *http.Request) error {
	if err := ui.ParseForm(w, r); err != nil {
		return err
	}
	q, person := r.PostForm, ui.FrameOf(r).Person.ID
	v := causesView{Typed: plant.CleanText(q.Get("name")), Family: q.Get("family"), About: q.Get("id")}
	id, err := uuid.Parse(q.Get("id"))
	if err != nil {
		id = uuid.Nil
	}
	switch do := q.Get("do"); {
	case do == "add":
		v.About = ""
		err = d.store.NewCause(r.Context(), plant.Cause{ID: uuid.Must(uuid.NewV7()), Name: v.Typed, Family: v.Family}, person)
	case do == "rename":
		err = d.store.RenameCause(r.Context(), id, v.Typed, person)
	case do == "retire" || do == "restore":
		err = d.store.RetireCause(r.Context(), id, do == "retire", person)
	default:
		err = plant.Invalidf("do", "Say what is to be done with the cause.")
	}
	if err == nil {
		ui.Redirect(w, r, withQuery(causesAddress, url.Values{"saved": {"1"}}))
		return nil
	}
	pe, ok := errors.AsType[*plant.Error](err)
	if !ok || pe.Kind != plant.Invalid && pe.Kind != plant.Conflict {
		return err
	}
	v.Problem = ui.FrameOf(r).Words.Problem(pe)
	return d.renderCauses(w, r, ui.StatusOf(pe.Kind), v)
}

// newCauseName keeps what was typed for a new cause when it could not be added.
func newCauseName(v causesView, g causeGroup) string {
	if v.Problem != "" && v.About == "" && v.Family == g.Family {
		return v.Typed
	}
	return ""
}
