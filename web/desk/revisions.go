package desk

import (
	"context"
	"net/http"
	"net/url"
	"strconv"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// revisionsView is what was in force when, and why.
type revisionsView struct {
	ID        uuid.UUID
	Crumbs    string
	Frozen    string // said once after freezing
	At        string
	AtProblem string
	Answer    string
	Cards     []revisionCard
	Study     string
	Compare   *comparison
	Old, New  []option
	Problem   string
}

// revisionCard is one revision in words.
type revisionCard struct {
	Number           int
	Title, State     string
	InForce          bool
	Asked            bool // it was in force at the instant that was asked for
	Facts            []pair
	LeftOut          []outRow
	Reason, FrozenBy string
}

type pair struct{ Name, Text string }

func (d *Desk) revisions(w http.ResponseWriter, r *http.Request) error {
	id, err := idIn(r)
	if err != nil {
		return err
	}
	fr := ui.FrameOf(r)
	f, q := fr.Format(), r.URL.Query()
	h, err := d.store.History(r.Context(), id, plant.Stretch{Last: 1})
	if err != nil {
		return err
	}
	list, err := d.store.Revisions(r.Context(), id)
	if err != nil {
		return err
	}
	setups, err := d.setupsOf(r.Context(), h, list)
	if err != nil {
		return err
	}
	s := ui.ShellFor(r, ui.Desk, f.Words.T("desk.revisions.title-of", h.State.Name))
	s.Bar = bar(f.Words, id, fr.Person.May(plant.SetLimits), "revisions")
	v := revisionsView{ID: id, Crumbs: f.Words.T("desk.crumbs-of", crumbs(s, h), h.State.Name), At: q.Get("at")}
	if fr.Person.May(plant.SetLimits) {
		v.Study = address(id, "study")
	}
	asked, err := d.askedFor(r.Context(), f, h, q, &v)
	if err != nil {
		return err
	}
	for _, rev := range list {
		c := newCard(f, rev, setups[rev.SetupVersion], h.State.Revision)
		c.Asked = asked != nil && asked.ID == rev.ID
		v.Cards = append(v.Cards, c)
		if n, err := strconv.Atoi(q.Get("frozen")); err == nil && n == rev.Number {
			v.Frozen = f.Words.T("desk.revisions.frozen", rev.Number, f.Clock(rev.InForceFrom))
		}
	}
	v.sideBySide(f, list, setups, q)
	status := http.StatusOK
	if v.AtProblem != "" || v.Problem != "" {
		status = http.StatusUnprocessableEntity
	}
	return ui.Render(w, r, status, revisionsPage(s, v))
}

// setupsOf finds the set-up that each revision was studied under: the newest subgroup
// of its basis was taken under it.
func (d *Desk) setupsOf(ctx context.Context, h plant.History, list []plant.Revision) (map[int]plant.Setup, error) {
	setups := map[int]plant.Setup{h.State.Setup.Version: h.State.Setup}
	for _, r := range list {
		if _, ok := setups[r.SetupVersion]; ok {
			continue
		}
		old, err := d.store.History(ctx, h.State.ID, plant.Stretch{Last: 1, To: r.Basis.To})
		if err != nil {
			return nil, err
		}
		setups[r.SetupVersion] = h.State.Setup
		for _, s := range old.Setups {
			setups[r.SetupVersion] = s
		}
	}
	return setups, nil
}

// askedFor answers what was in force at the instant that the address asks for.
func (d *Desk) askedFor(ctx context.Context, f ui.Format, h plant.History, q url.Values, v *revisionsView) (*plant.Revision, error) {
	w := f.Words
	if v.At == "" {
		return nil, nil
	}
	at, ok := parseTime(v.At, f.Zone)
	switch {
	case !ok:
		v.AtProblem = w.T("desk.stretch.bad-time")
		return nil, nil
	case at.After(f.Now):
		v.AtProblem = w.T("desk.revisions.future")
		return nil, nil
	}
	rev, err := d.store.RevisionAt(ctx, h.State.ID, at)
	if plant.IsKind(err, plant.NotFound) {
		v.Answer = w.T("desk.revisions.at-none", f.Time(at), f.Date(at))
		return nil, nil
	}
	if err != nil {
		return nil, err
	}
	v.Answer = w.T("desk.revisions.at", f.Time(at), f.Date(at), rev.Number)
	return &rev, nil
}

func newCard(f ui.Format, r plant.Revision, s plant.Setup, inForce *plant.Revision) revisionCard {
	w := f.Words
	c := revisionCard{Number: r.Number, Title: w.T("desk.revision", r.Number), InForce: inForce != nil && inForce.ID == r.ID,
		Reason: r.Reason, FrozenBy: w.T("desk.card.by", r.AuthorName, f.Clock(r.FrozenAt))}
	switch {
	case c.InForce:
		c.State = w.T("desk.card.now", f.Clock(r.InForceFrom))
	case r.InForceFrom.After(f.Now):
		c.State = w.T("desk.card.later", f.Clock(r.InForceFrom))
	default:
		c.State = w.T("desk.card.past", f.Clock(r.InForceFrom))
	}
	add := func(name, text string) { c.Facts = append(c.Facts, pair{name, text}) }
	location, dispersion := panels(w, s)
	if l, d, err := r.Standard().Bands(s.Size); err == nil {
		lim := limitsOf(f, l, s.LimitDecimals())
		add(location.Name, w.T("desk.card.limits", lim.LowerText, f.WithUnit(lim.UpperText, s.Unit), lim.CentreText))
		spread := limitsOf(f, d, s.LimitDecimals())
		if spread.LowerText == "" {
			add(dispersion.Name, w.T("desk.card.upper-only", f.WithUnit(spread.UpperText, s.Unit), spread.CentreText))
		} else {
			add(dispersion.Name, w.T("desk.card.limits", spread.LowerText, f.WithUnit(spread.UpperText, s.Unit), spread.CentreText))
		}
	}
	add(w.T("desk.compare.sigma"), w.T("desk.card.sigma", f.WithUnit(f.Number(r.Sigma, s.LimitDecimals()+1), s.Unit), ways(f, r.Estimator, r.Multiple)))
	add(w.T("desk.compare.rules"), rulesInWords(f, r.Rules.Location))
	add(w.T("desk.compare.spread-rules"), rulesInWords(f, r.Rules.Dispersion))
	basis := w.T("desk.freeze.basis", r.Basis.Subgroups, f.Clock(r.Basis.From), f.Clock(r.Basis.To))
	if r.Basis.Given {
		basis = w.T("setup.unproved.basis")
	}
	add(w.T("desk.card.basis"), basis)
	for i, l := range r.Basis.LeftOut {
		c.LeftOut = append(c.LeftOut, outRow{Mark: letter(i), Taken: f.Clock(l.TakenAt), Cause: l.Cause})
	}
	return c
}

// sideBySide sets two revisions beside one another: those that are asked for, else the
// newest two.
func (v *revisionsView) sideBySide(f ui.Format, list []plant.Revision, setups map[int]plant.Setup, q url.Values) {
	if len(list) < 2 {
		return
	}
	newer, older := &list[0], &list[1]
	pick := func(name string, into **plant.Revision) {
		if q.Get(name) == "" {
			return
		}
		for i := range list {
			if itoa(list[i].Number) == q.Get(name) {
				*into = &list[i]
				return
			}
		}
		v.Problem = f.Words.T("desk.revisions.no-such")
	}
	pick("old", &older)
	pick("new", &newer)
	for _, r := range list {
		text := f.Words.T("desk.revision", r.Number)
		v.Old = append(v.Old, option{itoa(r.Number), text, r.ID == older.ID})
		v.New = append(v.New, option{itoa(r.Number), text, r.ID == newer.ID})
	}
	second := revisionColumn(f, *newer)
	second.Strong = true
	c := compare(f, setups[newer.SetupVersion], []column{revisionColumn(f, *older), second})
	c.Caption = f.Words.T("desk.revisions.caption", older.Number, newer.Number)
	v.Compare = &c
}
