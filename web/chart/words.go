package chart

import (
	"strconv"
	"unicode/utf8"
)

// Words are the few words a chart says on its own. The zero value of a field is
// English; the station passes those of its catalogue.
type Words struct {
	Upper, Centre, Lower           string // names of the limits
	UpperSpec, Target, LowerSpec   string // on single readings
	Now                            string // under the provisional dot
	Subgroup, Subgroups            string // axis caption, and the count of a thinned stretch
	To                             string // "06:00 to 14:00"
	Time, Readings, Person, Notes  string // table heads
	Band                           string // table head: limits in force
	Excluded, Outside, Newest      string // notes in the table
	Stable, Reading, Count, Points string // rail and small charts
}

func or(s, fallback string) string {
	if s == "" {
		return fallback
	}
	return s
}

func (w Words) filled() Words {
	w.Upper, w.Centre, w.Lower = or(w.Upper, "upper"), or(w.Centre, "centre"), or(w.Lower, "lower")
	w.UpperSpec, w.LowerSpec = or(w.UpperSpec, "upper specification"), or(w.LowerSpec, "lower specification")
	w.Target, w.Now, w.To = or(w.Target, "target"), or(w.Now, "now"), or(w.To, "to")
	w.Subgroup, w.Subgroups = or(w.Subgroup, "subgroup"), or(w.Subgroups, "subgroups")
	w.Time, w.Readings, w.Person = or(w.Time, "Time"), or(w.Readings, "Readings"), or(w.Person, "Person")
	w.Notes, w.Band = or(w.Notes, "Notes"), or(w.Band, "Band")
	w.Excluded, w.Outside = or(w.Excluded, "left out"), or(w.Outside, "a reading outside specification")
	w.Newest, w.Stable = or(w.Newest, "newest"), or(w.Stable, "stable stretch")
	w.Reading, w.Count, w.Points = or(w.Reading, "Reading"), or(w.Count, "Count"), or(w.Points, "Value")
	return w
}

// textWidth estimates the width of s in px at a font size, a little on the wide
// side: layout must never count on room that is not there. The classes follow
// the advance widths of the interface face.
func textWidth(s string, size float64) float64 {
	em := 0.0
	for _, r := range s {
		switch {
		case r == ' ' || r == '.' || r == ',' || r == ':' || r == ';' || r == '\'' || r == '|' || r == '!':
			em += 0.30
		case r == 'i' || r == 'l' || r == 'j' || r == 'I' || r == 'f' || r == 't' || r == 'r' || r == '(' || r == ')' || r == '/':
			em += 0.40
		case r == 'm' || r == 'w' || r == 'M' || r == 'W' || r == '%' || r == '@':
			em += 0.92
		case r >= '0' && r <= '9' || r == '+' || r == '-' || r == '−':
			em += 0.64
		case r >= 'A' && r <= 'Z':
			em += 0.70
		case r < 0x250:
			em += 0.58
		default:
			em += 1
		}
	}
	return em * size
}

// shorten cuts s to a width and ends it with an ellipsis. The whole sentence
// stays in the title and in the table.
func shorten(s string, size, width float64) string {
	if textWidth(s, size) <= width {
		return s
	}
	for len(s) > 0 {
		_, n := utf8.DecodeLastRuneInString(s)
		s = s[:len(s)-n]
		if textWidth(s+"…", size) <= width {
			break
		}
	}
	return s + "…"
}

// decimal prints v with a fixed number of decimals and a true minus sign.
func decimal(v float64, decimals int) string {
	if !finite(v) {
		return ""
	}
	s := strconv.FormatFloat(v, 'f', min(max(decimals, 0), 12), 64)
	if len(s) > 24 {
		s = strconv.FormatFloat(v, 'g', 6, 64)
	}
	if s[0] != '-' {
		return s
	}
	for i := 1; i < len(s); i++ {
		if s[i] >= '1' && s[i] <= '9' {
			return "−" + s[1:]
		}
	}
	return s[1:] // minus zero
}
