package desk

import (
	"context"
	"errors"
	"net/http"
	"net/url"
	"slices"
	"strings"

	"github.com/go-chi/chi/v5"
	"github.com/google/uuid"

	"holdfast/internal/auth"
	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// ownerStore is what the pages of the owner need of the record.
type ownerStore interface {
	OwnerCourse(ctx context.Context, characteristic uuid.UUID) (plant.Standing, []plant.Ownership, error)
	Protections(ctx context.Context, characteristic uuid.UUID) ([]plant.Protection, error)
	Acceptances(ctx context.Context, characteristic uuid.UUID) ([]plant.Acceptance, error)
	StateProtection(ctx context.Context, p plant.Protection) error
	Accept(ctx context.Context, a plant.Acceptance) error
	EndStatement(ctx context.Context, characteristic uuid.UUID, e plant.Ending) error
}

// The three forms of the page, by the last part of their address.
const (
	protectForm = "protection"
	acceptForm  = "acceptance"
	endForm     = "end"
)

func (d *Desk) ownerRoutes(r chi.Router) {
	r.Get("/engineering", ui.Handle(d.log, d.engineering))
	r.Get("/characteristic/{id}/owner", ui.Handle(d.log, d.showOwner))
	r.Group(func(r chi.Router) {
		r.Use(ui.Require(plant.SetLimits))
		for _, form := range []struct {
			name string
			send func(r *http.Request, id uuid.UUID, o *ownerForm) error
		}{{protectForm, d.protect}, {acceptForm, d.accept}, {endForm, d.end}} {
			r.Post("/characteristic/{id}/owner/"+form.name, ui.Handle(d.log, func(w http.ResponseWriter, r *http.Request) error {
				return d.ownerPost(w, r, form.name, form.send)
			}))
		}
	})
}

// ownerForm is what was typed into one of the forms, and what is wrong with it.
type ownerForm struct {
	name     string // which; "" none
	typed    url.Values
	problems map[string]string
	whole    string // what is wrong with the whole
}

func (o *ownerForm) value(form, field string) string {
	if o.name != form {
		return ""
	}
	return o.typed.Get(field)
}

func (d *Desk) showOwner(w http.ResponseWriter, r *http.Request) error {
	id, err := idIn(r)
	if err != nil {
		return err
	}
	return d.renderOwner(w, r, http.StatusOK, id, &ownerForm{})
}

func (d *Desk) ownerPost(w http.ResponseWriter, r *http.Request, name string, send func(*http.Request, uuid.UUID, *ownerForm) error) error {
	id, err := idIn(r)
	if err != nil {
		return err
	}
	if err := ui.ParseForm(w, r); err != nil {
		return err
	}
	form := &ownerForm{name: name, typed: r.PostForm, problems: map[string]string{}}
	err = send(r, id, form)
	if err == nil {
		ui.Redirect(w, r, address(id, "owner"))
		return nil
	}
	pe, ok := errors.AsType[*plant.Error](err)
	if !ok || pe.Kind == plant.NotFound {
		return err
	}
	said := ui.FrameOf(r).Words.Problem(pe)
	if pe.Field == "" || pe.Field == "id" {
		form.whole = said
	} else {
		form.problems[pe.Field] = said
	}
	status := ui.StatusOf(pe.Kind)
	if pe.Kind == plant.Forbidden { // too many tries at the secret
		status = http.StatusTooManyRequests
	}
	return d.renderOwner(w, r, status, id, form)
}

// sentID is the id that the page gave its form; the zero id is refused further on.
func sentID(q url.Values, field string) uuid.UUID {
	id, _ := uuid.Parse(q.Get(field))
	return id
}

func (d *Desk) protect(r *http.Request, id uuid.UUID, o *ownerForm) error {
	f := ui.FrameOf(r)
	p := plant.Protection{ID: sentID(o.typed, "id"), Characteristic: id, Method: plant.ProtectionMethod(o.typed.Get("method")),
		Instruction: o.typed.Get("instruction"), DecidedBy: o.typed.Get("decided_by"), Person: f.Person.ID}
	if text := strings.TrimSpace(o.typed.Get("from")); text != "" {
		at, ok := parseTime(text, f.Plant.Location)
		if !ok {
			return plant.Invalidf("from", "This is no date and time. Type it like 2026-03-12 06:00.")
		}
		p.From = at
	}
	return d.store.StateProtection(r.Context(), p)
}

func (d *Desk) accept(r *http.Request, id uuid.UUID, o *ownerForm) error {
	f := ui.FrameOf(r)
	h, err := d.store.History(r.Context(), id, plant.Stretch{Last: 1})
	if err != nil {
		return err
	}
	a := plant.Acceptance{ID: sentID(o.typed, "id"), Characteristic: id, SetupVersion: h.State.Setup.Version, Reason: o.typed.Get("reason"),
		Told: o.typed.Get("told"), Person: f.Person.ID}
	if text := strings.TrimSpace(o.typed.Get("until")); text != "" {
		at, ok := parseTime(text, f.Plant.Location)
		if !ok {
			return plant.Invalidf("until", "This is no date. Type it like 2026-03-12.")
		}
		a.Until = at.AddDate(0, 0, 1) // to the end of the day
	}
	if err := a.Clean(f.Now); err != nil {
		return err // before the secret is tried
	}
	if err := d.signs(r); err != nil {
		return err
	}
	return d.store.Accept(r.Context(), a)
}

// signs checks the secret that was entered again; who signs is who is signed in.
func (d *Desk) signs(r *http.Request) error {
	fr := ui.FrameOf(r)
	secret := r.PostForm.Get("secret")
	if secret == "" {
		return plant.Invalidf("secret", "Enter your password again to sign.")
	}
	person, err := d.signer.Check(r.Context(), fr.Person.Login, auth.Secret(secret), fr.Addr)
	if pe, ok := errors.AsType[*plant.Error](err); ok && pe.Kind == plant.Forbidden {
		at := *pe
		at.Field = "secret" // it says for how long to wait
		return &at
	} else if ok || err == nil && person.ID != fr.Person.ID {
		return plant.Invalidf("secret", "The password is wrong. Type it again.")
	}
	return err
}

func (d *Desk) end(r *http.Request, id uuid.UUID, o *ownerForm) error {
	return d.store.EndStatement(r.Context(), id, plant.Ending{ID: sentID(o.typed, "id"), Of: sentID(o.typed, "of"), Reason: o.typed.Get("reason"),
		Person: ui.FrameOf(r).Person.ID})
}

func (d *Desk) renderOwner(w http.ResponseWriter, r *http.Request, status int, id uuid.UUID, form *ownerForm) error {
	h, err := d.store.History(r.Context(), id, plant.Stretch{Last: 1})
	if err != nil {
		return err
	}
	standing, course, err := d.store.OwnerCourse(r.Context(), id)
	if err != nil {
		return err
	}
	h.State.Standing = standing // the record of this moment, not what was kept of it
	protections, err := d.store.Protections(r.Context(), id)
	if err != nil {
		return err
	}
	acceptances, err := d.store.Acceptances(r.Context(), id)
	if err != nil {
		return err
	}
	s := ui.ShellFor(r, ui.Desk, ui.FrameOf(r).Words.T("owner.page-of", h.State.Name))
	s.Bar = bar(s.Words, id, s.Person.May(plant.SetLimits), "owner")
	s.Styles = []string{"css/owner.css"}
	v := newOwnerView(s.Format, h, course, protections, acceptances)
	v.May, v.Form, v.Signer = s.Person.May(plant.SetLimits), form, s.Person.Name
	v.Crumbs = s.Words.T("desk.crumbs-of", crumbs(s, h), h.State.Name)
	return ui.Render(w, r, status, ownerPage(s, v))
}

// ownerView is who must act on a characteristic, why, and what was stated meanwhile.
type ownerView struct {
	ID           uuid.UUID
	Crumbs       string
	Title        string
	Owner        string
	Strong       bool
	Reason       string
	Since        string
	Finding      string // of engineering, while the station owns it
	Unknown      bool
	Figure       figureView
	Course       []courseRow
	Wants        bool // a protection that nobody has stated
	Protections  []statementView
	Acceptances  []statementView
	MayAccept    bool
	CannotAccept string
	May          bool
	Signer       string
	Form         *ownerForm
}

// figureView is the capability of the moment.
type figureView struct {
	Ppk, Bound string // "" when there is none
	Claim      bool
	Why        string // it is no claim, or there is none
	From       string // what it is computed from
	Asked      string
}

type courseRow struct {
	Since, Owner, Reason string
	Strong               bool
}

// statementView is a protection or an acceptance.
type statementView struct {
	ID, Title, Text, By, Ended string
	Open                       bool
}

func newOwnerView(f ui.Format, h plant.History, course []plant.Ownership, protections []plant.Protection, acceptances []plant.Acceptance) ownerView {
	w, c := f.Words, h.State
	o := c.Ownership()
	v := ownerView{ID: c.ID, Title: w.T("owner.page-of", c.Name), Owner: upperFirst(ui.OwnerWord(w, o.Owner)), Strong: o.Owner == plant.Engineering, Reason: upperFirst(f.OwnerReason(c)),
		Since: f.OwnerSince(o), Finding: f.OwnerFinding(o), Unknown: o.Unknown, Figure: newFigure(f, c), Wants: c.WantsProtection()}
	for _, o := range slices.Backward(course) {
		row := courseRow{Since: f.Clock(o.For), Owner: upperFirst(ui.OwnerWord(w, o.Owner)), Reason: w.T("owner.reason." + string(o.Reason)), Strong: o.Owner == plant.Engineering}
		if o.AtLeast {
			row.Since = w.T("owner.before", row.Since)
		}
		v.Course = append(v.Course, row)
	}
	for _, p := range protections {
		s := statementView{ID: p.ID.String(), Title: w.T("owner.method." + string(p.Method)), Text: p.Instruction, Open: p.End.At.IsZero(),
			By: w.T("owner.stated-by", p.DecidedBy, f.Clock(p.From), p.PersonName)}
		if !s.Open {
			s.Ended = w.T("owner.ended", f.Clock(p.End.At), p.End.PersonName, p.End.Reason)
		}
		v.Protections = append(v.Protections, s)
	}
	for _, a := range acceptances {
		s := statementView{ID: a.ID.String(), Title: w.T("owner.accepted-until", f.LastDay(a.Until)), Text: a.Reason, Open: a.End.At.IsZero() && f.Now.Before(a.Until),
			By: w.T("owner.signed-by", a.PersonName, f.Clock(a.AcceptedAt), a.Told)}
		if !a.End.At.IsZero() {
			s.Ended = w.T("owner.ended", f.Clock(a.End.At), a.End.PersonName, a.End.Reason)
		}
		v.Acceptances = append(v.Acceptances, s)
	}
	if err := c.Standing.Allow(c.Rules); err == nil {
		v.MayAccept = o.Reason != plant.IsAccepted
	} else if pe, ok := errors.AsType[*plant.Error](err); ok {
		v.CannotAccept = w.Problem(pe)
	}
	return v
}

func newFigure(f ui.Format, c plant.CharacteristicState) figureView {
	w, fig, o := f.Words, c.Standing.Figure, c.Ownership()
	v := figureView{Asked: w.T("owner.asked", f.Index(c.Rules.Capable), f.Index(c.Rules.Accepted))}
	switch {
	case c.Revision == nil:
		v.Why = w.T("owner.reason.no-limits")
		return v
	case c.Setup.Lower == nil && c.Setup.Upper == nil:
		v.Why = w.T("owner.not-asked")
		return v
	case !fig.Computed():
		v.Why = w.T("owner.no-figure")
		return v
	}
	v.Ppk, v.Bound = f.Index(fig.Ppk), f.Index(fig.Bound)
	v.From = w.T("owner.figure-from", f.Count(fig.Readings), f.Count(fig.Subgroups), f.Clock(fig.From), f.Clock(c.Standing.AsOf))
	switch o.Reason {
	case plant.MatterOpen, plant.Settling, plant.TooFew:
		v.Why = w.T("owner.no-claim", f.OwnerReason(c))
	default:
		v.Claim = true
	}
	return v
}

// engineeringView lists what engineering owns.
type engineeringView struct {
	Rows    []engineeringRow
	Missing int // without a protection that they need
	Filters []link
}

type engineeringRow struct {
	Href, Chart, Name, Place string
	Reason, Age, Since       string
	Protection               string
	Unprotected              bool

	owned plant.Ownership
}

// engineering is the list of what engineering owns: product that nobody protects first,
// then what is known not to be capable, the oldest first.
func (d *Desk) engineering(w http.ResponseWriter, r *http.Request) error {
	states, err := d.store.StationStates(r.Context(), 1)
	if err != nil {
		return err
	}
	s := ui.ShellFor(r, ui.Desk, ui.FrameOf(r).Words.T("owner.list"))
	s.Bar = bar(s.Words, uuid.Nil, false, "engineering")
	s.Styles = []string{"css/owner.css"}
	return ui.Render(w, r, http.StatusOK, engineeringPage(s, newEngineering(s.Format, states, r.URL.Query().Get("why"))))
}

// whyOffered are the reasons by which the list can be narrowed.
var whyOffered = []plant.OwnerReason{"", plant.NotCapable, plant.AcceptanceEnded, plant.TooFew, plant.NoSpread, plant.NoLimits}

func newEngineering(f ui.Format, states []plant.StationState, why string) engineeringView {
	var v engineeringView
	if !slices.Contains(whyOffered, plant.OwnerReason(why)) {
		why = ""
	}
	counts := map[plant.OwnerReason]int{}
	for _, st := range states {
		for _, c := range st.Characteristics {
			o := c.Ownership()
			reason := upperFirst(f.OwnerReason(c))
			if found := f.OwnerFinding(o); found != "" { // it is engineering's again after the matter
				reason = f.Words.T("owner.finding-and", upperFirst(found), f.OwnerReason(c))
				o.Reason, o.Since, o.AtLeast = o.Finding.Reason, o.Finding.Since, o.Finding.AtLeast
			} else if o.Owner != plant.Engineering {
				continue
			}
			counts[""]++
			counts[o.Reason]++
			row := engineeringRow{Href: address(c.ID, "owner"), Chart: address(c.ID), Name: c.Name, Place: f.Words.T("owner.place", st.Line.Name, st.Name),
				Reason: reason, Age: f.Since(o.Since), Since: f.OwnerSince(o), Unprotected: c.WantsProtection(), owned: o}
			if row.Unprotected {
				v.Missing++
			}
			var said []string
			for _, p := range c.Protections {
				said = append(said, f.ProtectionWords(p))
			}
			row.Protection = strings.Join(said, "; ")
			if why == "" || why == string(o.Reason) {
				v.Rows = append(v.Rows, row)
			}
		}
	}
	slices.SortStableFunc(v.Rows, func(a, b engineeringRow) int {
		if n := a.rank() - b.rank(); n != 0 {
			return n
		}
		return a.owned.Since.Compare(b.owned.Since)
	})
	for _, reason := range whyOffered {
		if counts[reason] == 0 && reason != "" && string(reason) != why {
			continue
		}
		q := url.Values{}
		text := f.Words.T("owner.all", counts[reason])
		if reason != "" {
			q.Set("why", string(reason))
			text = f.Words.T("owner.only", upperFirst(f.Words.T("owner.reason."+string(reason))), counts[reason])
		}
		v.Filters = append(v.Filters, link{Text: text, Href: withQuery("/desk/engineering", q), Here: string(reason) == why})
	}
	return v
}

func (e engineeringRow) rank() int {
	switch {
	case e.Unprotected:
		return 0
	case e.owned.Reason.WantsProtection():
		return 1
	}
	return 2
}

// acceptProblem is what is wrong with a field of the acceptance: other forms have fields
// of the same names.
func acceptProblem(v ownerView, field string) string {
	if v.Form.name != acceptForm {
		return ""
	}
	return v.Form.problems[field]
}
