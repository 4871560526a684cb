package admin

import (
	"errors"
	"net/url"
	"strings"

	"holdfast/internal/plant"
	"holdfast/web/words"
)

// kind is how a field is asked for.
type kind string

const (
	text    kind = "text"
	decimal kind = "decimal" // a number with decimals
	whole   kind = "whole"   // a whole number
	day     kind = "date"
	clock   kind = "time"
	secret  kind = "password"
	fresh   kind = "new-password" // a secret that is chosen here
	area    kind = "area"
	choice  kind = "choice"
	radio   kind = "radio"
	ticks   kind = "ticks"
)

// field is one thing that a form asks, ready to print.
type field struct {
	Kind                        kind
	Name, Label, Hint           string
	Value, Problem              string
	Options                     []option
	Suggest                     []string // offered while typing
	Short                       bool
	Optional                    bool
	Link, LinkText, Placeholder string
	Zone, ZonePreset            bool   // a time zone; to begin with the browser's own
	ZoneNow, ZoneSaid           string // what time it is there; the same to be filled in by the script
}

type option struct {
	Value, Text, Hint string
	Chosen            bool
}

// group is fields that belong together.
type group struct {
	Name, Title, Text string
	Fields            []field
	Closed            bool // opened by who needs it
}

// pair is a value that a form carries along, or a fact in words.
type pair struct{ Name, Text string }

// form is a whole form.
type form struct {
	Action, Button string
	Problem        string // about the whole
	Hidden         []pair
	Groups         []group
	Back, BackText string
	Testid         string
}

// asking makes fields of what was typed and of what is wrong with it.
type asking struct {
	w        *words.Printer
	values   url.Values
	problems map[string]string
}

func newAsking(w *words.Printer, values url.Values) *asking {
	return &asking{w: w, values: values, problems: map[string]string{}}
}

// refuse notes what is wrong with a field; the first is the one to mend.
func (a *asking) refuse(field, problem string) {
	if a.problems[field] == "" {
		a.problems[field] = problem
	}
}

// refused notes an error that somebody can mend, and reports whether it was one.
func (a *asking) refused(err error) bool {
	pe, ok := errors.AsType[*plant.Error](err)
	if !ok || pe.Kind != plant.Invalid && pe.Kind != plant.Conflict && pe.Kind != plant.Forbidden {
		return false
	}
	a.refuse(pe.Field, a.w.Problem(pe))
	return true
}

// ok reports whether nothing is wrong.
func (a *asking) ok() bool { return len(a.problems) == 0 }

// rest is what is wrong and stands at none of these fields.
func (a *asking) rest(groups []group) string {
	var out []string
	for name, problem := range a.problems {
		shown := false
		for _, g := range groups {
			for _, f := range g.Fields {
				shown = shown || f.Name == name
			}
		}
		if !shown {
			out = append(out, problem)
		}
	}
	return strings.Join(out, " ")
}

func (a *asking) get(name string) string { return plant.CleanText(a.values.Get(name)) }

// field makes a field with the words of its name.
func (a *asking) field(k kind, name string) field {
	f := field{Kind: k, Name: name, Label: a.w.T("setup.field." + name), Problem: a.problems[name]}
	if k != secret && k != fresh {
		f.Value = a.values.Get(name)
	}
	if a.w.Has("setup.hint." + name) {
		f.Hint = a.w.T("setup.hint." + name)
	}
	f.Short = k == decimal || k == whole || k == day || k == clock
	return f
}

func (f field) optional() field { f.Optional = true; return f }
func (f field) short() field    { f.Short = true; return f }

func (f field) among(options []option) field {
	f.Options = options
	for i := range f.Options {
		f.Options[i].Chosen = f.Options[i].Value == f.Value
	}
	return f
}

func (f field) suggesting(list []string) field { f.Suggest = list; return f }

// ticked are options of which several may be chosen.
func (a *asking) ticked(name string, options []option) field {
	f := a.field(ticks, name)
	f.Options = options
	for i, o := range options {
		for _, v := range a.values[name] {
			f.Options[i].Chosen = f.Options[i].Chosen || v == o.Value
		}
	}
	return f
}

// decimalOf reads an exact number; nil when nothing was typed.
func (a *asking) decimalOf(name string) *plant.Decimal {
	s := a.get(name)
	if s == "" {
		return nil
	}
	d, err := plant.ParseDecimal(s)
	if err != nil {
		a.refuse(name, a.w.T("setup.problem.number", plant.MaxDecimals))
		return nil
	}
	return &d
}

// wholeOf reads a whole number; 0 when nothing was typed.
func (a *asking) wholeOf(name string, most int) int {
	s := a.get(name)
	n := 0
	for _, c := range s {
		if c < '0' || c > '9' || n > most {
			a.refuse(name, a.w.T("setup.problem.whole", most))
			return 0
		}
		n = 10*n + int(c-'0')
	}
	if n > most {
		a.refuse(name, a.w.T("setup.problem.whole", most))
		return 0
	}
	return n
}

// nameOf reads a name.
func (a *asking) nameOf(name string) string {
	s, err := plant.CleanName(name, a.values.Get(name))
	if err != nil {
		a.refused(err)
	}
	return s
}

// textOf reads a text that may be empty.
func (a *asking) textOf(name string, max int) string {
	s, err := plant.CleanTextWithin(name, a.values.Get(name), max)
	if err != nil {
		a.refused(err)
	}
	return s
}
