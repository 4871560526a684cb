package desk

import (
	"bytes"
	"context"
	"fmt"
	"net/http"
	"net/url"
	"strconv"
	"strings"

	"github.com/a-h/templ"
	"github.com/google/uuid"

	"holdfast/internal/live"
	"holdfast/internal/plant"
	"holdfast/web/chart"
	"holdfast/web/ui"
)

func itoa(n int) string { return strconv.Itoa(n) }

// mostRows is how many rows a table shows; a longer stretch says so.
const mostRows = 1000

// chartView is the page of one characteristic.
type chartView struct {
	ID      uuid.UUID
	Crumbs  string
	Name    string
	Summary string
	Facts   factsView
	Picture pictureView
	Line    lineView
	Table   *chart.Table
	Cut     string // what the table does not show
	Spans   []link
	Asked   asked
	Open    bool // the form for another stretch
	Older   string
	Newer   string
	AsTable string // address of the other view
	Study   string // "" for who may not study
	Records string
}

type link struct {
	Text, Href string
	Here       bool
}

type factsView struct {
	ID    string
	Facts []fact
}

// pictureView is the chart with its rail.
type pictureView struct {
	ID     string
	SVG    string
	Rail   string
	Notes  []string
	Empty  bool
	Why    string // empty: what to do
	Next   string
	NextTo string
	Marks  legend
}

// legend is which marks the chart holds and the legend explains.
type legend struct{ Prompted, Unprompted, Post, Restart, Break, Outside bool }

// lineView is the newest point in words, filled by points.js with others.
type lineView struct {
	ID, Of                                                       string
	When, One, Location, Two, Dispersion, Readings, Person, Note string
}

func factsID(id uuid.UUID) string   { return "facts-" + id.String() }
func pictureID(id uuid.UUID) string { return "picture-" + id.String() }
func lineID(id uuid.UUID) string    { return "line-" + id.String() }

func (d *Desk) chart(w http.ResponseWriter, r *http.Request) error {
	id, err := idIn(r)
	if err != nil {
		return err
	}
	f := ui.FrameOf(r)
	a := readStretch(r.URL.Query(), f.Format(), f.Plant)
	status := http.StatusOK
	read := a
	if a.problem() { // the page stays, with what is wrong beside the field
		status, read = http.StatusUnprocessableEntity, asked{Last: LiveStretch}
	}
	h, err := d.read(r.Context(), id, read)
	if err != nil {
		return err
	}
	table := r.URL.Query().Get("as") == "table"
	s := ui.ShellFor(r, ui.Desk, h.State.Name)
	s.Bar = bar(s.Words, id, f.Person.May(plant.SetLimits), "chart")
	s.Scripts = []string{"js/points.js"}
	if read.live() && !table {
		s.Topics = []string{ui.TopicChart(id)}
	}
	v := newChartView(s, h, a, read, table)
	return ui.Render(w, r, status, chartPage(s, v))
}

func newChartView(s ui.Shell, h plant.History, a, read asked, table bool) chartView {
	f, id := s.Format, h.State.ID
	dr := newDrawing(f, h)
	v := chartView{ID: id, Crumbs: crumbs(s, h), Name: h.State.Name, Summary: upperFirst(strings.Join(summary(f, h.State.Setup), ", ")),
		Facts: newFactsView(f, h), Picture: newPicture(dr, read.live()), Line: newLine(dr), Asked: a, Open: a.problem() || a.Span == between || a.LastText != "",
		Records: address(id, "revisions")}
	if s.Person.May(plant.SetLimits) {
		v.Study = withQuery(address(id, "study"), studyStretch(h, read, f))
	}
	v.Spans = spanLinks(f, id, read, table)
	tableQuery := func(q url.Values) url.Values {
		if table && q != nil {
			q.Set("as", "table")
		}
		return q
	}
	if q := read.older(h, s.Plant); q != nil {
		v.Older = withQuery(address(id), tableQuery(q))
	}
	if q := read.newer(h, f.Now, f.Zone); q != nil {
		v.Newer = withQuery(address(id), tableQuery(q))
	}
	q := read.values()
	if table {
		t := dr.c.Table()
		if n := len(t.Rows); n > mostRows {
			t.Rows = t.Rows[:mostRows]
			v.Cut = f.Words.T("desk.table.cut", mostRows, n)
		}
		v.Table = &t
	} else {
		q.Set("as", "table")
	}
	v.AsTable = withQuery(address(id), q)
	return v
}

func crumbs(s ui.Shell, h plant.History) string {
	return s.Words.T("desk.crumbs", s.Plant.Name, h.Line.Name, h.Station.Name)
}

// studyStretch is the stretch that a study begun from here looks at.
func studyStretch(h plant.History, read asked, f ui.Format) url.Values {
	if read.live() || len(h.Points) == 0 {
		return nil
	}
	return betweenValues(h.Points[0].TakenAt, h.Points[len(h.Points)-1].TakenAt, f.Zone)
}

func spanLinks(f ui.Format, id uuid.UUID, a asked, table bool) []link {
	var out []link
	for _, s := range spans {
		q := url.Values{}
		text := f.Words.T("desk.span-newest", LiveStretch)
		if s != newest {
			q.Set("span", string(s))
			text = f.Words.T("desk.span." + string(s))
		}
		if table {
			q.Set("as", "table")
		}
		out = append(out, link{Text: text, Href: withQuery(address(id), q), Here: a.Span == s && (s != newest || a.live())})
	}
	return out
}

func newFactsView(f ui.Format, h plant.History) factsView {
	return factsView{ID: factsID(h.State.ID), Facts: newFacts(f, h)}
}

func newPicture(d *drawing, newestStretch bool) pictureView {
	w := d.f.Words
	v := pictureView{ID: pictureID(d.h.State.ID)}
	if len(d.points) == 0 {
		v.Empty = true
		v.Why, v.Next, v.NextTo = w.T("desk.empty.stretch"), w.T("desk.empty.to-newest"), address(d.h.State.ID)
		if d.h.State.LastTaken.IsZero() || newestStretch {
			v.Why, v.Next, v.NextTo = w.T("desk.empty.never"), w.T("desk.empty.to-list"), "/desk"
		}
		return v
	}
	v.SVG, v.Rail = d.c.SVG(), newRail(d).SVG()
	if d.reach != nil {
		v.Notes = append(v.Notes, d.reach.notes(d.f, d.setup)...)
	}
	if d.h.Clipped {
		v.Notes = append(v.Notes, w.T("desk.clipped", len(d.h.Points), d.f.Clock(d.points[0].TakenAt)))
	}
	if d.other > 0 {
		v.Notes = append(v.Notes, w.T("desk.other-unit", d.other, d.setup.Unit))
	}
	if d.h.State.Revision == nil {
		v.Notes = append(v.Notes, w.T("desk.learning-note"))
	}
	for _, c := range d.c.Changes {
		switch {
		case c.Kind == chart.Post:
			v.Marks.Post = true
		case c.Kind == chart.Restart:
			v.Marks.Restart = true
		case c.Prompted:
			v.Marks.Prompted = true
		default:
			v.Marks.Unprompted = true
		}
	}
	for i, p := range d.c.Points {
		v.Marks.Break = v.Marks.Break || p.Restart && i > 0
		v.Marks.Outside = v.Marks.Outside || p.Outside
	}
	return v
}

func newLine(d *drawing) lineView {
	v := lineView{ID: lineID(d.h.State.ID), Of: d.c.ID, One: d.c.Location.One, Two: d.c.Dispersion.One}
	if n := len(d.c.Points); n > 0 {
		p := d.c.Points[n-1]
		v.When, v.Location, v.Dispersion, v.Readings, v.Person, v.Note = p.When, p.LocationText, p.DispersionText, p.Readings, p.Person, p.Note
	}
	return v
}

// Fragments renders what is pushed into the page of a characteristic that shows the
// newest LiveStretch subgroups: the same components that the page is made of. h is the
// history of that stretch.
func Fragments(f ui.Format, h plant.History) ([]live.Fragment, error) {
	d := newDrawing(f, h)
	facts, picture, line := newFactsView(f, h), newPicture(d, true), newLine(d)
	parts := []struct {
		id string
		c  templ.Component
	}{
		{facts.ID, factsPart(f.Words, facts)}, {picture.ID, picturePart(f.Words, picture)}, {line.ID, linePart(line)},
	}
	out := make([]live.Fragment, 0, len(parts))
	for _, p := range parts {
		var b bytes.Buffer
		if err := p.c.Render(context.Background(), &b); err != nil {
			return nil, fmt.Errorf("render a part of the chart page: %w", err)
		}
		out = append(out, live.Fragment{ID: p.id, HTML: b.Bytes()})
	}
	return out, nil
}
