package admin

import (
	"errors"
	"net/http"
	"net/url"
	"slices"
	"strconv"
	"strings"

	"github.com/google/uuid"

	"holdfast/internal/auth"
	"holdfast/internal/plant"
	"holdfast/web/ui"
)

func sortPairs(list []pair) {
	slices.SortStableFunc(list, func(a, b pair) int { return strings.Compare(a.Name, b.Name) })
}

// knownFields are what stating limits asks.
func knownFields(q *asking) []field {
	return []field{q.field(decimal, "center"), q.field(decimal, "sigma"), q.field(area, "reason"), q.field(secret, "secret")}
}

// knownOf reads centre, sigma and where they come from, and checks the secret that was
// entered again; it does so last, so that a slip in a number costs no try.
func (a *Admin) knownOf(r *http.Request, q *asking, d plant.Described) (plant.KnownLimits, int, error) {
	f := ui.FrameOf(r)
	k := plant.KnownLimits{Characteristic: d.ID, SetupVersion: d.Setup.Version, Reason: q.get("reason"), Person: f.Person.ID}
	for name, into := range map[string]*float64{"center": &k.Center, "sigma": &k.Sigma} {
		v := q.decimalOf(name)
		switch {
		case v != nil:
			*into = v.Float()
		case q.get(name) == "":
			q.refuse(name, q.w.T("setup.problem.needed"))
		}
	}
	if n, err := strconv.Atoi(q.values.Get("version")); err != nil || n != d.Setup.Version {
		q.refuse("", q.w.T("setup.effect.moved"))
	}
	list, err := a.store.Revisions(r.Context(), d.ID)
	if err != nil {
		return k, 0, err
	}
	if len(list) > 0 {
		k.After = list[0].Number
	}
	if q.ok() {
		q.refused(k.Check(d.Setup))
	}
	if q.values.Get("secret") == "" {
		q.refuse("secret", q.w.T("setup.problem.secret"))
	}
	if !q.ok() {
		return k, http.StatusUnprocessableEntity, nil
	}
	person, err := a.signer.Check(r.Context(), f.Person.Login, auth.Secret(q.values.Get("secret")), f.Addr)
	if pe, ok := errors.AsType[*plant.Error](err); ok {
		if pe.Kind == plant.Forbidden { // too many tries: the message says for how long
			q.refuse("secret", q.w.Problem(pe))
			return k, http.StatusTooManyRequests, nil
		}
		q.refuse("secret", q.w.T("setup.problem.wrong-secret"))
		return k, http.StatusUnprocessableEntity, nil
	}
	if err != nil {
		return k, 0, err
	}
	if person.ID != f.Person.ID {
		q.refuse("secret", q.w.T("setup.problem.wrong-secret"))
		return k, http.StatusUnprocessableEntity, nil
	}
	return k, http.StatusOK, nil
}

// stateKnown reads and freezes; what is wrong stands in the asking then.
func (a *Admin) stateKnown(r *http.Request, q *asking, d plant.Described) (int, error) {
	k, status, err := a.knownOf(r, q, d)
	if err != nil || status != http.StatusOK {
		return status, err
	}
	_, err = a.store.FreezeKnown(r.Context(), k)
	if q.refused(err) {
		return ui.StatusOf(kindOf(err)), nil
	}
	return http.StatusOK, err
}

func knownForm(q *asking, d plant.Described, action, back string) form {
	groups := []group{{Fields: knownFields(q)}}
	return form{Action: action, Button: q.w.T("setup.known.freeze"), Groups: groups, Problem: q.rest(groups),
		Hidden: []pair{{"version", strconv.Itoa(d.Setup.Version)}}, Back: back, BackText: q.w.T("setup.back"), Testid: "known"}
}

// knownView is the page that states limits from earlier knowledge.
type knownView struct {
	Title, Unit string
	Form        form
	Inforce     bool
	Back        string
}

func (a *Admin) showKnown(w http.ResponseWriter, r *http.Request) error {
	d, _, err := a.oneIn(r)
	if err != nil {
		return err
	}
	return a.renderKnown(w, r, http.StatusOK, d, newAsking(ui.FrameOf(r).Words, url.Values{}))
}

func (a *Admin) renderKnown(w http.ResponseWriter, r *http.Request, status int, d plant.Described, q *asking) error {
	v := knownView{Title: d.Name, Unit: d.Setup.Unit, Inforce: d.Revision > 0, Back: measureAt(d.ID, ""),
		Form: knownForm(q, d, measureAt(d.ID, "/known-limits"), measureAt(d.ID, ""))}
	return ui.Render(w, r, status, knownPage(shellFor(r, q.w.T("setup.known.title")), v))
}

func (a *Admin) freezeKnown(w http.ResponseWriter, r *http.Request) error {
	d, _, err := a.oneIn(r)
	if err != nil {
		return err
	}
	if d.ID == uuid.Nil {
		return ui.NotFound(r)
	}
	q := newAsking(ui.FrameOf(r).Words, r.PostForm)
	status, err := a.stateKnown(r, q, d)
	if err != nil {
		return err
	}
	if !q.ok() {
		return a.renderKnown(w, r, status, d, q)
	}
	ui.Redirect(w, r, measureAt(d.ID, "?done=frozen"))
	return nil
}
