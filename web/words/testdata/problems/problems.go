// Package problems shows the test of the sentences each way of making an error.
package problems

import "holdfast/internal/plant"

func passing(message string) error { return &plant.Error{Kind: plant.NotFound, Message: message} }

func _(name string, w interface{ T(string) string }) []error {
	return []error{
		plant.Invalidf("field", "With %d "+"and a second line.", 2),
		&plant.Error{Kind: plant.Conflict, Message: "A plain one."},
		passing("Passed on."),
		&plant.Error{Kind: plant.Conflict, Message: w.T("x.said")},
		&plant.Error{Kind: plant.Conflict, Message: "Hello " + name}, // loose
		passing(name), // loose
	}
}
