package qualify

import (
	"bytes"
	"embed"
	"encoding/csv"
	"encoding/json"
	"fmt"
	"strconv"
)

//go:embed cases
var files embed.FS

// node is a place in a file of cases. Reading what is not there notes an error in the
// file and goes on with nothing; every group looks at the note once, at its end.
type node struct {
	v    any
	file *dataFile
	at   string
}

type dataFile struct {
	name string
	err  error
}

func (f *dataFile) fail(format string, args ...any) {
	if f.err == nil {
		f.err = fmt.Errorf("cases/%s: "+format, append([]any{f.name}, args...)...)
	}
}

// open reads a JSON file of cases; numbers keep the digits they are written with.
func open(name string) node {
	f := &dataFile{name: name}
	n := node{file: f}
	text, err := files.ReadFile("cases/" + name)
	if err != nil {
		f.fail("%w", err)
		return n
	}
	dec := json.NewDecoder(bytes.NewReader(text))
	dec.UseNumber()
	if err := dec.Decode(&n.v); err != nil {
		f.fail("%w", err)
	}
	return n
}

// openTable reads a CSV file of cases as a list of objects.
func openTable(name string) node {
	f := &dataFile{name: name}
	n := node{file: f}
	text, err := files.ReadFile("cases/" + name)
	if err != nil {
		f.fail("%w", err)
		return n
	}
	rows, err := csv.NewReader(bytes.NewReader(text)).ReadAll()
	if err != nil || len(rows) < 2 {
		f.fail("not a table: %v", err)
		return n
	}
	var out []any
	for _, row := range rows[1:] {
		o := map[string]any{}
		for i, cell := range row {
			o[rows[0][i]] = json.Number(cell)
		}
		out = append(out, o)
	}
	n.v = out
	return n
}

func (n node) err() error { return n.file.err }

// key goes into objects by the names given.
func (n node) key(names ...string) node {
	for _, name := range names {
		o, _ := n.v.(map[string]any)
		v, has := o[name]
		if !has {
			n.file.fail("there is no %s.%s", n.at, name)
		}
		n = node{v: v, file: n.file, at: n.at + "." + name}
	}
	return n
}

// has tells whether an object has a field that is not null.
func (n node) has(name string) bool {
	o, _ := n.v.(map[string]any)
	return o[name] != nil
}

func (n node) null() bool { return n.v == nil }

func (n node) list() []node {
	l, is := n.v.([]any)
	if !is {
		n.file.fail("%s is no list", n.at)
	}
	out := make([]node, len(l))
	for i, v := range l {
		out[i] = node{v: v, file: n.file, at: fmt.Sprintf("%s[%d]", n.at, i)}
	}
	return out
}

// keys lists the names of an object's fields.
func (n node) keys() []string {
	o, _ := n.v.(map[string]any)
	var out []string
	for k := range o {
		out = append(out, k)
	}
	return out
}

// text is a text, or a number as it is written.
func (n node) text() string {
	switch v := n.v.(type) {
	case json.Number:
		return v.String()
	case string:
		return v
	}
	n.file.fail("%s is neither a text nor a number", n.at)
	return ""
}

func (n node) float() float64 {
	x, err := strconv.ParseFloat(n.text(), 64)
	if err != nil {
		n.file.fail("%s is no number", n.at)
	}
	return x
}

func (n node) int() int { return int(n.float()) }

func (n node) floats() []float64 {
	l := n.list()
	out := make([]float64, len(l))
	for i, v := range l {
		out[i] = v.float()
	}
	return out
}

// raw is the value for use in an input, numbers as they are written.
func (n node) raw() any { return n.v }

// column reads the single column of a data set.
func column(name string) []float64 {
	var out []float64
	for _, row := range openTable(name).list() {
		for _, k := range row.keys() {
			out = append(out, row.key(k).float())
		}
	}
	return out
}
