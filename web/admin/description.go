package admin

import (
	"io"
	"net/http"
	"strconv"
	"strings"

	"github.com/go-chi/chi/v5"

	"holdfast/internal/describe"
	"holdfast/internal/plant"
	"holdfast/web/ui"
	"holdfast/web/words"
)

const describeAddress = home + "/description"

// describeView is where a whole plant is sent in as one file.
type describeView struct {
	Done, Problem string
	Action        string
	Columns       []describe.Column
	MaxKilobytes  int
}

func (a *Admin) showDescription(w http.ResponseWriter, r *http.Request) error {
	return a.renderDescription(w, r, http.StatusOK, "")
}

func (a *Admin) renderDescription(w http.ResponseWriter, r *http.Request, status int, problem string) error {
	v := describeView{Done: doneWords(r), Problem: problem, Action: describeAddress, Columns: describe.Columns(), MaxKilobytes: describe.MaxFile >> 10}
	return ui.Render(w, r, status, describePage(shellFor(r, ui.FrameOf(r).Words.T("setup.describe.title")), v))
}

// sendDescription keeps the file and leads to what it would do. Nothing of it is set up
// before that was confirmed.
func (a *Admin) sendDescription(w http.ResponseWriter, r *http.Request) error {
	f := ui.FrameOf(r)
	refuse := func(problem string) error {
		return a.renderDescription(w, r, http.StatusUnprocessableEntity, problem)
	}
	if r.MultipartForm == nil {
		return refuse(f.Words.T("setup.describe.no-file"))
	}
	defer func() { _ = r.MultipartForm.RemoveAll() }()
	file, head, err := r.FormFile("file")
	if err != nil {
		return refuse(f.Words.T("setup.describe.no-file"))
	}
	defer file.Close()
	content, err := io.ReadAll(io.LimitReader(file, describe.MaxFile+1))
	if err != nil {
		return refuse(f.Words.T("setup.describe.no-file"))
	}
	if _, err := describe.ReadTable(content); err != nil {
		q := newAsking(f.Words, nil)
		if q.refused(err) {
			return refuse(q.problems["file"])
		}
		return err
	}
	name := []rune(plant.CleanText(head.Filename))
	d := plant.Description{ID: newID(), Person: f.Person.ID, Name: string(name[:min(len(name), plant.MaxName)]), Content: content}
	if err := a.store.KeepDescription(r.Context(), d); err != nil {
		return err
	}
	ui.Redirect(w, r, describeAddress+"/"+d.ID.String())
	return nil
}

// previewView is what a file would do.
type previewView struct {
	File     string
	Rows     string
	Problem  string // that kept it from being done a moment ago
	Problems []problemRow
	Adds     []addRow
	Machines []machineRow
	Measures []measureRow
	Found    []foundRow
	Same     int // things that are there and as the file has them
	Ready    bool
	Action   string
	Digest   string
	Count    int
}

type problemRow struct{ Row, Column, Message string }

// machineRow is a machine that would be added.
type machineRow struct{ Name, Station, Rate, Streams string }

type addRow struct{ Kind, Names string }

type foundRow struct{ Kind, Name, Row, Differs string }

// planned reads a file that waits and what it means for the plant as it is now.
func (a *Admin) planned(r *http.Request) (plant.Description, describe.Table, error) {
	id, err := idIn(r)
	if err != nil {
		return plant.Description{}, describe.Table{}, err
	}
	d, err := a.store.Description(r.Context(), id, ui.FrameOf(r).Person.ID)
	if err != nil {
		return d, describe.Table{}, err
	}
	t, err := describe.ReadTable(d.Content)
	return d, t, err
}

func (a *Admin) previewDescription(w http.ResponseWriter, r *http.Request) error {
	return a.renderPreview(w, r, http.StatusOK, "")
}

func (a *Admin) renderPreview(w http.ResponseWriter, r *http.Request, status int, problem string) error {
	d, table, err := a.planned(r)
	if err != nil {
		return err
	}
	o, err := a.store.Outline(r.Context())
	if err != nil {
		return err
	}
	v := newPreview(ui.FrameOf(r).Format(), o, describe.Read(table, o))
	v.File, v.Problem, v.Action = d.Name, problem, describeAddress+"/"+d.ID.String()
	return ui.Render(w, r, status, previewPage(shellFor(r, ui.FrameOf(r).Words.T("setup.describe.preview")), v))
}

func newPreview(f ui.Format, o plant.Outline, p describe.Plan) previewView {
	w := f.Words
	v := previewView{Rows: w.T("setup.describe.rows", p.Rows), Ready: p.Ready(), Digest: p.Digest(), Count: p.Add.Count()}
	for _, e := range p.Problems {
		row := problemRow{Column: e.Column, Message: w.Problem(e.Error)}
		if e.Row > 0 {
			row.Row = f.Count(e.Row)
		}
		v.Problems = append(v.Problems, row)
	}
	add := func(kind plant.Thing, names []string) {
		if len(names) > 0 {
			v.Adds = append(v.Adds, addRow{w.T("setup.describe.add."+string(kind), len(names)), strings.Join(names, ", ")})
		}
	}
	add(plant.ALine, namesOf(p.Add.Lines, func(v plant.Line) string { return v.Name }))
	add(plant.AStation, namesOf(p.Add.Stations, func(v plant.Station) string { return v.Name }))
	add(plant.APart, namesOf(p.Add.Parts, func(v plant.Part) string { return v.Name }))
	add(plant.AGauge, namesOf(p.Add.Gauges, func(v plant.Gauge) string { return v.Name }))
	add(plant.AShift, namesOf(p.Add.Shifts, func(v plant.Shift) string { return v.Name + " " + clockText(v) }))
	both := together(o, p.Add)
	for _, m := range p.Add.Machines {
		row := machineRow{Name: m.Name, Station: both.Station(m.StationID).Name,
			Streams: strings.Join(namesOf(m.Streams, func(s plant.Stream) string { return s.Name }), ", ")}
		if m.PartsPerHour > 0 {
			row.Rate = w.Number(strconv.FormatFloat(m.PartsPerHour, 'f', -1, 64))
		}
		v.Machines = append(v.Machines, row)
	}
	for _, c := range p.Add.Characteristics {
		row := measureRow{item: item{Name: c.Name}, Machine: both.Machine(c.MachineID).Name, Of: ofWords(w, both, c.Characteristic),
			Specification: f.Specification(c.Setup), Sampling: samplingWords(w, c.Setup.Plan), Chart: chartWord(w, c.Setup.Chart)}
		if c.Setup.Target != nil {
			row.Target = f.WithUnit(f.Decimal(*c.Setup.Target), c.Setup.Unit)
		}
		if row.Specification == "" {
			row.Specification = w.T("setup.no-specification")
		}
		v.Measures = append(v.Measures, row)
	}
	for _, e := range p.Found {
		if len(e.Differs) == 0 {
			v.Same++
			continue
		}
		v.Found = append(v.Found, foundRow{w.T("setup.kind." + string(e.Kind)), e.Name, f.Count(e.Row), strings.Join(e.Differs, ", ")})
	}
	return v
}

func namesOf[T any](list []T, name func(T) string) []string {
	out := make([]string, len(list))
	for i, v := range list {
		out[i] = name(v)
	}
	return out
}

// together is the plant as it would be, for finding names.
func together(o plant.Outline, add plant.Addition) plant.Outline {
	return plant.Outline{Stations: append(append([]plant.Station{}, o.Stations...), add.Stations...),
		Machines: append(append([]plant.Machine{}, o.Machines...), add.Machines...), Parts: append(append([]plant.Part{}, o.Parts...), add.Parts...)}
}

// confirmDescription sets up what was seen: all of it or nothing. Where the plant has
// changed since in a way that makes it another thing, it is shown again first.
func (a *Admin) confirmDescription(w http.ResponseWriter, r *http.Request) error {
	_, table, err := a.planned(r)
	if err != nil {
		return err
	}
	t, seen := ui.FrameOf(r).Words, r.PostForm.Get("digest")
	err = a.store.Add(r.Context(), ui.FrameOf(r).Person.ID, func(o plant.Outline) (plant.Addition, error) {
		p := describe.Read(table, o)
		if !p.Ready() || p.Digest() != seen {
			return plant.Addition{}, &plant.Error{Kind: plant.Conflict, Field: "digest", Message: t.T("setup.describe.moved")}
		}
		return p.Add, nil
	})
	if q := newAsking(t, nil); q.refused(err) {
		return a.renderPreview(w, r, http.StatusConflict, q.rest(nil))
	}
	if err != nil {
		return err
	}
	ui.Redirect(w, r, measureAddress+"?done=described")
	return nil
}

// describeFile gives out the template and the present set-up, as CSV or XLSX.
func (a *Admin) describeFile(w http.ResponseWriter, r *http.Request) error {
	t := ui.FrameOf(r).Words
	var sheet describe.Sheet
	name, form, _ := strings.Cut(chi.URLParam(r, "file"), ".")
	switch name {
	case "template":
		sheet = describe.Example()
	case "set-up":
		o, err := a.store.Outline(r.Context())
		if err != nil {
			return err
		}
		sheet = describe.Present(o)
	default:
		return ui.NotFound(r)
	}
	body, kind, err := written(t, sheet, form)
	if err != nil {
		return err
	}
	if kind == "" {
		return ui.NotFound(r)
	}
	h := w.Header()
	h.Set("Content-Type", kind)
	h.Set("Content-Disposition", `attachment; filename="holdfast-`+name+`.`+form+`"`)
	h.Set("Cache-Control", "no-store")
	_, _ = w.Write(body) // fails only when nobody listens any more
	return nil
}

func written(w *words.Printer, s describe.Sheet, form string) (body []byte, kind string, err error) {
	switch form {
	case "csv":
		body, err = s.CSV()
		return body, "text/csv; charset=utf-8", err
	case "xlsx":
		body, err = s.XLSX(w.T("setup.describe.sheet"), w.T("setup.describe.sheet-columns"))
		return body, "application/vnd.openxmlformats-officedocument.spreadsheetml.sheet", err
	}
	return nil, "", nil
}
