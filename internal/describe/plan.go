package describe

import (
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"slices"
	"strings"

	"github.com/google/uuid"

	"holdfast/internal/plant"
)

// Problem is something in the file that cannot be, with where it stands.
type Problem struct {
	Row    int    // as the file numbers it; 0: the file as a whole
	Column string // its header, "" for the row as a whole
	*plant.Error
}

// Found is something that the plant has already.
type Found struct {
	Kind    plant.Thing
	Name    string
	Row     int      // where the file names it first
	Differs []string // headers of the columns in which the file says something else
}

// Plan is what a file means for a plant as it is now.
type Plan struct {
	Rows     int // that hold something, without the first
	Add      plant.Addition
	Found    []Found
	Problems []Problem
}

// maxProblems is how many problems are listed; the rest follows from fewer causes.
const maxProblems = 200

// Ready reports whether there is something to add and nothing against it.
func (p Plan) Ready() bool { return len(p.Problems) == 0 && !p.Add.Empty() }

// Digest names what would be added, whatever ids it has: two plans with the same digest
// add the same.
func (p Plan) Digest() string {
	add := p.Add
	names := map[uuid.UUID]string{}
	for _, v := range add.Lines {
		names[v.ID] = v.Name
	}
	for _, v := range add.Stations {
		names[v.ID] = v.Name
	}
	for _, v := range add.Machines {
		names[v.ID] = v.Name
	}
	for _, v := range add.Parts {
		names[v.ID] = v.Name
	}
	for _, v := range add.Gauges {
		names[v.ID] = v.Name
	}
	name := func(id uuid.UUID) string {
		if n, fresh := names[id]; fresh {
			return n
		}
		return id.String()
	}
	var all []any
	for _, v := range add.Lines {
		all = append(all, []any{"line", v.Name, v.Position})
	}
	for _, v := range add.Stations {
		all = append(all, []any{"station", v.Name, name(v.LineID), v.Family, v.Position})
	}
	for _, v := range add.Machines {
		streams := []string{}
		for _, s := range v.Streams {
			streams = append(streams, s.Name)
		}
		all = append(all, []any{"machine", v.Name, name(v.StationID), v.PartsPerHour, streams, v.Position})
	}
	for _, v := range add.Parts {
		all = append(all, []any{"part", v.Name, v.Family})
	}
	for _, v := range add.Gauges {
		all = append(all, []any{"gauge", v.Name, v.Resolution, v.NextCheck, v.CheckDays})
	}
	for _, v := range add.Shifts {
		all = append(all, []any{"shift", v.Name, v.Starts})
	}
	for _, v := range add.Characteristics {
		s := v.Setup
		gauge := name(s.GaugeID)
		s.GaugeID = uuid.Nil
		all = append(all, []any{"characteristic", v.Name, name(v.MachineID), name(v.PartID), v.Family, v.Position, gauge, s})
	}
	b, err := json.Marshal(all)
	if err != nil {
		panic("a plan is always JSON: " + err.Error())
	}
	sum := sha256.Sum256(b)
	return hex.EncodeToString(sum[:])
}

// Read works out what a table means for a plant as it is now.
func Read(t Table, o plant.Outline) Plan {
	r := &reader{o: o, xlsx: t.xlsx, seen: map[key]*thing{}}
	if len(t.rows) == 0 {
		r.problem(plant.Invalidf("file", "Nothing stands in the file."))
		return r.plan
	}
	if !r.head(t.rows[0]) {
		return r.plan
	}
	misread := len(r.plan.Problems)
	for _, row := range t.rows[1:] {
		r.plan.Rows++
		r.row = row
		r.read()
		if len(r.plan.Problems) >= maxProblems {
			r.row = row
			r.problemIn("", plant.Invalidf("file", "There are too many problems to go on. Mend these first."))
			break
		}
	}
	r.calendar()
	if misread > 0 { // that something is missing may follow from a column that was not found
		r.plan.Problems = slices.DeleteFunc(r.plan.Problems, func(p Problem) bool {
			return p.Row != t.rows[0].number && p.Column != "" && !slices.Contains(r.at, columnOf(p.Column))
		})
	}
	if r.plan.Rows == 0 {
		r.row.number = 0
		r.problem(plant.Invalidf("file", "Below the names of the columns nothing stands in the file."))
	}
	return r.plan
}

// reader walks the rows. What is in use or was named in a row above is known by its name.
type reader struct {
	o    plant.Outline
	xlsx bool
	at   []int // column of the file to column of ours, noColumn or unread
	row  row
	cell map[string]string // of the row, by key
	plan Plan
	seen map[key]*thing
}

type key struct {
	kind plant.Thing
	name string
}

// thing is one line, station, machine, part or gauge that the file has named: what was
// said about it, by column, and in which row.
type thing struct {
	id    uuid.UUID
	name  string
	fresh bool // it is to be added
	place int  // in the addition's list
	said  map[string]statement
	found int // in the plan's list of what is there
}

type statement struct {
	text string
	row  int
}

func (r *reader) problem(e *plant.Error) { r.problemIn("", e) }

func (r *reader) problemIn(column string, e *plant.Error) {
	header := ""
	for _, c := range columns {
		if c.Key == column {
			header = c.Header
		}
	}
	r.plan.Problems = append(r.plan.Problems, Problem{r.row.number, header, e})
}

// about takes over an error about a field of ours, which is a column by the same key.
func (r *reader) about(err error) {
	if err == nil {
		return
	}
	pe := problemOf(err)
	r.problemIn(pe.Field, pe)
}

func problemOf(err error) *plant.Error {
	if pe, ok := errors.AsType[*plant.Error](err); ok {
		return pe
	}
	return plant.Invalidf("", "This cannot be read.").Because(err)
}

// Columns of the file that are none of ours.
const (
	noColumn = -1 // the first row names none
	unread   = -2 // what it names is told as a problem, once and not in every row
)

// head reads the names of the columns, and reports whether rows can be read by them.
func (r *reader) head(first row) bool {
	r.row = first
	taken := map[int]bool{}
	known := 0
	for _, text := range first.cells {
		i := columnOf(text)
		r.at = append(r.at, i)
		switch {
		case text == "":
		case i < 0:
			r.at[len(r.at)-1] = unread
			r.plan.Problems = append(r.plan.Problems, Problem{first.number, text, plant.Invalidf("file", "There is no column of this name. Take the name from the template, or remove the column.")})
		case taken[i]:
			r.at[len(r.at)-1] = unread
			r.plan.Problems = append(r.plan.Problems, Problem{first.number, text, plant.Invalidf("file", "This column is there twice.")})
		default:
			taken[i] = true
			known++
		}
	}
	if known == 0 {
		r.plan.Problems = nil
		r.problem(plant.Invalidf("file", "The first row must hold the names of the columns, as the template has them. None of them is found."))
	}
	return known > 0
}

// cells sorts the row's cells by the keys of the columns.
func (r *reader) cells() bool {
	r.cell = make(map[string]string, len(columns))
	for i, text := range r.row.cells {
		switch {
		case text == "":
		case i < len(r.at) && r.at[i] == unread:
		case i >= len(r.at) || r.at[i] == noColumn:
			r.problem(plant.Invalidf("file", "Something stands in this row where the first row names no column."))
			return false
		default:
			c := columns[r.at[i]]
			if c.number && r.xlsx {
				text = plainNumber(text)
			}
			r.cell[c.Key] = text
		}
	}
	return true
}

// list splits a cell that holds several things, with | or ; between them. Where neither
// stands, a comma does as well; beside one of them it belongs to a name.
func list(text string) []string {
	marks := "|;"
	if !strings.ContainsAny(text, marks) {
		marks = ","
	}
	var out []string
	for _, s := range strings.FieldsFunc(text, func(c rune) bool { return strings.ContainsRune(marks, c) }) {
		if s = strings.TrimSpace(s); s != "" {
			out = append(out, s)
		}
	}
	return out
}

// joined is the cell of several names, as list takes it apart. One name with a comma in it
// must not be taken for two.
func joined(names []string) string {
	if len(names) == 1 && strings.Contains(names[0], ",") {
		return names[0] + " |"
	}
	return strings.Join(names, " | ")
}
