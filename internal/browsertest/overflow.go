package browsertest

import (
	_ "embed"
	"encoding/json"
)

//go:embed overflow.js
var overflow string

// NothingOverflows demands that on the page as it stands all text lies in its box, in the
// window and in its drawing, that no field hides part of its value, that no buttons lie
// on one another, and that the page does not scroll sideways.
func (p *Page) NothingOverflows(what string) {
	p.t.Helper()
	for _, f := range p.Overflows() {
		p.t.Errorf("%s: %s", what, f)
	}
}

// Overflows says what NothingOverflows would complain of.
func (p *Page) Overflows() []string {
	p.t.Helper()
	p.Value(`document.fonts.ready`)
	var found []string
	report := p.Value(overflow)
	if err := json.Unmarshal([]byte(report), &found); err != nil {
		p.t.Fatalf("%v: %s", err, report)
	}
	return found
}
