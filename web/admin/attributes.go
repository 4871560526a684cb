package admin

import (
	"strconv"

	"github.com/a-h/templ"
	"github.com/google/uuid"

	"holdfast/internal/plant"
)

// described are the attributes that a field has by its kind, its hint and its problem.
// Without a name they are those of a group.
func described(f field, name string) templ.Attributes {
	a := templ.Attributes{}
	by := ""
	if f.Hint != "" || f.Optional {
		by = "h-" + f.Name
	}
	if f.Problem != "" {
		by = "p-" + f.Name
		if name != "" {
			a["aria-invalid"] = "true"
		}
	}
	if by != "" {
		a["aria-describedby"] = by
	}
	if name == "" {
		return a
	}
	a["id"], a["name"] = "f-"+name, name
	switch f.Kind {
	case choice, area:
		return a
	case decimal:
		a["inputmode"] = "decimal"
	case whole:
		a["inputmode"] = "numeric"
	}
	switch f.Kind {
	case day, clock:
		a["type"] = string(f.Kind)
	case secret:
		a["type"], a["autocomplete"] = "password", "current-password"
	case fresh:
		a["type"], a["autocomplete"] = "password", "new-password"
	default:
		a["type"], a["autocomplete"] = "text", "off"
	}
	if len(f.Suggest) > 0 {
		a["list"] = "l-" + name
	}
	return a
}

// numbered is the name of the n-th of several fields.
func numbered(name string, n int) string {
	if name == "" {
		return strconv.Itoa(n)
	}
	return name + "-" + strconv.Itoa(n)
}

// thingNew is where a thing of a kind is added.
func thingNew(kind plant.Thing) string { return thingAddress(kind, uuid.Nil, "") }
