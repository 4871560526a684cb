package desk

import (
	"math"
	"net/http"
	"net/url"
	"slices"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/chart"
	"holdfast/web/ui"
)

const (
	auditHeight   = 300
	mostSpells    = 5   // spells that links lead to
	mostAudited   = 300 // adjustments that the list shows
	auditAtLeast  = 24 * time.Hour
	auditMargin   = 4 // the stretch around a spell is so many times shorter than it
	auditTable    = "table"
	auditAsWhat   = "as"
	biggestFactor = 99.9
)

// auditView is what adjusting did to one characteristic over a stretch.
type auditView struct {
	ID         uuid.UUID
	Crumbs     string
	Summary    string
	Spells     []link
	Spans      []link
	Asked      asked
	Open       bool
	Verdict    string // the conclusion in one sentence
	Tone       string
	Then       []string // what follows from it
	Facts      []fact
	SVG        string
	Table      *chart.Table
	Cut        string
	AsTable    string
	Note       string // about the stretch
	Rows       []auditRow
	RowsCut    string
	Assumes    []string
	Empty      string
	Knobs      string
	Squared    string // the unit of a gain
	Unprompted bool
	Prompted   bool
	Rug        bool // there are so many that each is a line on the axis
}

// audit is GET .../adjustments.
func (d *Desk) audit(w http.ResponseWriter, r *http.Request) error {
	id, err := idIn(r)
	if err != nil {
		return err
	}
	fr := ui.FrameOf(r)
	f, q := fr.Format(), r.URL.Query()
	days, err := d.store.AdjustmentDays(r.Context(), id)
	if err != nil {
		return err
	}
	spells := plant.Spells(days)
	a, read, status := auditStretch(q, f, fr.Plant, spells)
	h, err := d.read(r.Context(), id, read)
	if err != nil {
		return err
	}
	audit, err := h.AuditAdjustments()
	if err != nil {
		return err
	}
	s := ui.ShellFor(r, ui.Desk, f.Words.T("audit.title-of", h.State.Name))
	s.Styles, s.Scripts = []string{"css/desk-audit.css"}, []string{"js/points.js"}
	s.Bar = bar(f.Words, id, fr.Person.May(plant.SetLimits), "audit")
	v := newAuditView(s, h, audit, a, read, spells)
	if q.Get(auditAsWhat) == auditTable && v.SVG != "" {
		v.asTable(f, h, audit)
	}
	return ui.Render(w, r, status, auditPage(s, v))
}

// auditStretch reads the stretch that is asked for. Without one it is the newest spell
// that has adjustments made with nothing open, with a margin on both sides.
func auditStretch(q url.Values, f ui.Format, p plant.Plant, spells []plant.Spell) (a, read asked, status int) {
	a = readStretch(q, f, p)
	status, read = http.StatusOK, a
	switch {
	case a.problem():
		status, read = http.StatusUnprocessableEntity, asked{Span: month, From: f.Now.AddDate(0, -1, 0), To: f.Now}
	case a.Span == newest && a.LastText == "" && a.Before.IsZero() && a.After.IsZero():
		a.Span, a.From, a.To = month, f.Now.AddDate(0, -1, 0), f.Now
		if i := slices.IndexFunc(spells, func(s plant.Spell) bool { return s.Unprompted > 0 }); i >= 0 {
			a = askedOfSpell(spells[i], f)
		}
		read = a
	}
	return a, read, status
}

// around is a spell with its margins, in whole minutes as an address has them.
func around(s plant.Spell, now time.Time) (from, to time.Time) {
	margin := max(s.To.Sub(s.From)/auditMargin, auditAtLeast)
	from, to = s.From.Add(-margin).Truncate(time.Minute), s.To.Add(margin).Truncate(time.Minute)
	if to.After(now) {
		to = now
	}
	return from, to
}

func askedOfSpell(s plant.Spell, f ui.Format) asked {
	from, to := around(s, f.Now)
	return asked{Span: between, Last: LiveStretch, From: from, To: to, FromText: from.In(f.Zone).Format(fieldTime), ToText: to.In(f.Zone).Format(fieldTime)}
}

func newAuditView(s ui.Shell, h plant.History, audit plant.AdjustmentAudit, a, read asked, spells []plant.Spell) auditView {
	f, w, id := s.Format, s.Words, h.State.ID
	v := auditView{ID: id, Crumbs: w.T("desk.crumbs-of", crumbs(s, h), h.State.Name), Asked: a, Open: a.problem(), Knobs: address(id, "adjusting-points")}
	for i, sp := range spells {
		if i == mostSpells {
			break
		}
		from, to := around(sp, f.Now)
		values := betweenValues(from, to, f.Zone)
		v.Spells = append(v.Spells, link{Text: spellWords(f, sp),
			Href: withQuery(address(id, "adjustments"), values), Here: a.FromText == values.Get("from") && a.ToText == values.Get("to")})
	}
	for _, span := range []span{week, month, all} {
		v.Spans = append(v.Spans, link{Text: w.T("desk.span." + string(span)), Href: withQuery(address(id, "adjustments"), url.Values{"span": {string(span)}}), Here: a.Span == span})
	}
	if len(audit.Points) == 0 {
		v.Empty = w.T("audit.empty")
		return v
	}
	first, last := audit.Points[0].TakenAt, audit.Points[len(audit.Points)-1].TakenAt
	v.Summary = w.T("audit.stretch", len(audit.Points), f.Clock(first), f.Clock(last))
	if h.Clipped {
		v.Note = w.T("desk.clipped", len(h.Points), f.Clock(first))
	}
	v.conclude(f, audit)
	v.Facts = auditFacts(f, h, audit)
	drawn := auditChart(f, h, audit)
	v.SVG, v.Rug = drawn.SVG(), drawn.IsRug()
	q := a.values()
	q.Set(auditAsWhat, auditTable)
	v.AsTable = withQuery(address(id, "adjustments"), q)
	v.rows(f, h, audit)
	v.Assumes = assumptions(f, audit)
	return v
}

func spellWords(f ui.Format, s plant.Spell) string {
	w := f.Words
	count := w.T("audit.spell-count", s.Prompted+s.Unprompted, s.Unprompted)
	if from, to := f.ShortDay(s.From), f.ShortDay(s.To); from != to {
		return w.T("audit.spell", from, to, count)
	}
	return w.T("audit.spell-day", f.ShortDay(s.From), count)
}

// times is a ratio for people. Few adjustments leave its interval open upwards, and
// twenty figures would say no more than that.
func times(f ui.Format, ratio float64) string {
	if ratio > biggestFactor {
		return f.Words.T("audit.more-than", f.Number(biggestFactor, 1))
	}
	return f.Number(ratio, 2)
}

// conclude says in words what the adjustments came to.
func (v *auditView) conclude(f ui.Format, a plant.AdjustmentAudit) {
	w := f.Words
	ratio, low, high := times(f, a.Ratio), times(f, a.Low), times(f, a.High)
	v.Tone = "calm"
	switch a.Conclusion {
	case plant.NothingAdjusted:
		v.Verdict = w.T("audit.says.none")
	case plant.AllPrompted:
		v.Verdict = w.T("audit.says.prompted")
	case plant.TooLittle:
		v.Verdict = w.T("audit.says.too-little")
	case plant.DidHarm:
		v.Verdict, v.Tone = w.T("audit.says.harm", ratio, low, high), "look"
		v.Then = append(v.Then, w.T("audit.then.harm"))
	case plant.DidHelp:
		v.Verdict = w.T("audit.says.help", ratio, low, high)
		v.Then = append(v.Then, w.T("audit.then.help"))
	default:
		v.Verdict = w.T("audit.says.undecided", ratio, low, high)
		v.Then = append(v.Then, w.T("audit.then.undecided"))
	}
	if further, of := a.Further(); of > 0 {
		v.Then = append(v.Then, w.T("audit.then.further", of, further))
	}
	switch a.Prompted.Claims() {
	case 1:
		v.Then = append(v.Then, w.T("audit.then.prompted-gain"))
	case -1:
		v.Then = append(v.Then, w.T("audit.then.prompted-loss"))
	}
	if a.Unprompted.Count > 0 && a.Computed {
		if a.Swings {
			v.Then = append(v.Then, w.T("audit.then.swings", f.Signed(a.Lag1, 2)))
		} else {
			v.Then = append(v.Then, w.T("audit.then.no-swings", f.Signed(a.Lag1, 2)))
		}
	}
}

func auditFacts(f ui.Format, h plant.History, a plant.AdjustmentAudit) []fact {
	w, unit := f.Words, f.Words.T("audit.squared", h.State.Setup.Unit)
	sum := func(caption string, s plant.AdjustmentSum) fact {
		v := fact{Cap: caption, Val: f.Count(s.Count)}
		switch {
		case s.Count == 0:
			v.Sub = w.T("audit.fact.none")
		case s.Within.Known:
			v.Sub = w.T("audit.fact.sum", f.WithUnit(signedFigure(f, s.Total, s.Total), unit), signedFigure(f, s.Within.Low, s.Total), signedFigure(f, s.Within.High, s.Total))
		default:
			v.Sub = w.T("audit.fact.sum-alone", f.WithUnit(signedFigure(f, s.Total, s.Total), unit))
		}
		return v
	}
	out := []fact{sum(w.T("audit.fact.unprompted"), a.Unprompted), sum(w.T("audit.fact.prompted"), a.Prompted)}
	if a.Unprompted.Count > 0 && a.Computed && !math.IsInf(a.High, 1) {
		out = append(out, fact{Cap: w.T("audit.fact.ratio"), Val: w.T("audit.fact.times", times(f, a.Ratio)),
			Sub: w.T("audit.fact.between", times(f, a.Low), times(f, a.High))})
	}
	if a.HasPpk {
		out = append(out, fact{Cap: w.T("audit.fact.ppk"), Val: f.Number(a.Ppk, 2), Sub: w.T("audit.fact.ppk-stayed", f.Number(a.PpkStayed, 2))})
	}
	return out
}

// signedFigure writes v with its sign to three figures of as.
func signedFigure(f ui.Format, v, as float64) string {
	return f.Signed(v, figureDecimals(as))
}

// figureDecimals is how many decimals show three figures of v.
func figureDecimals(v float64) int {
	m := math.Abs(v)
	if m == 0 || math.IsInf(m, 0) || math.IsNaN(m) {
		return 2
	}
	return min(max(2-int(math.Floor(math.Log10(m))), 0), 9)
}

// auditChart is the series as it was and as it would have been, on one chart.
func auditChart(f ui.Format, h plant.History, a plant.AdjustmentAudit) *chart.Control {
	h.Points = a.Points
	d := newDrawing(f, h)
	c := d.c
	c.ID, c.H1 = "audit-of-"+h.State.ID.String(), auditHeight
	c.Dispersion = chart.Panel{}
	c.Reaches, c.Signals = nil, nil
	for i := range c.Points {
		c.Points[i].Person = ""
	}
	if a.Unprompted.Count > 0 && a.Computed {
		c.Other, c.OtherName = make([]float64, len(a.Points)), f.Words.T("audit.stayed")
		for i, p := range a.Points {
			c.Other[i] = p.Stats.Mean() - a.Carried[i]
		}
	}
	c.Label = f.Words.T("audit.label", h.State.Name, len(a.Points), a.Unprompted.Count, a.Prompted.Count)
	return c
}

func (v *auditView) asTable(f ui.Format, h plant.History, a plant.AdjustmentAudit) {
	t := auditChart(f, h, a).Table()
	if n := len(t.Rows); n > mostRows {
		t.Rows = t.Rows[:mostRows]
		v.Cut = f.Words.T("desk.table.cut", mostRows, n)
	}
	v.Table = &t
	v.AsTable = withQuery(address(v.ID, "adjustments"), v.Asked.values())
}

// assumptions are what the figures rest on.
func assumptions(f ui.Format, a plant.AdjustmentAudit) []string {
	w := f.Words
	out := []string{w.T("audit.assume.additive"), w.T("audit.assume.carried"), w.T("audit.assume.sizes"), w.T("audit.assume.interval")}
	if !a.OnAim {
		out = append(out, w.T("audit.assume.no-target"))
	}
	if a.HasPpk {
		out = append(out, w.T("audit.assume.ppk"))
	}
	return append(out, w.T("audit.assume.nobody"))
}
