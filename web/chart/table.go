package chart

import (
	"sort"
	"strconv"
	"strings"
)

// Table is a chart as rows, for "Show as a table". The page renders it.
type Table struct {
	Caption string
	Head    []string
	Rows    [][]string
}

// Table returns every subgroup, newest first, with the limits in force and what
// signals, changes and exclusions say.
func (c *Control) Table() Table {
	w := c.Words.filled()
	two := c.Dispersion.Name != ""
	t := Table{Caption: c.Label, Head: []string{w.Time, c.Location.Name, w.Band}}
	if c.Other != nil {
		t.Head = append(t.Head, c.OtherName)
	}
	if two {
		t.Head = append(t.Head, c.Dispersion.Name, c.Dispersion.Name+": "+strings.ToLower(w.Band))
	}
	t.Head = append(t.Head, w.Readings, w.Person, w.Notes)
	notes := make([][]string, len(c.Points))
	for _, s := range c.Signals {
		if s.Point >= 0 && s.Point < len(notes) {
			notes[s.Point] = append(notes[s.Point], join(", ", s.Text, s.Sub))
		}
	}
	for _, r := range c.Reaches {
		if i := min(r.To, len(notes)-1); i >= 0 {
			notes[i] = append(notes[i], r.Text)
		}
	}
	segs, k := c.orderedSegments(), -1
	for i := range c.Points {
		p := &c.Points[i]
		var loc, dis Limits
		if k+1 < len(segs) && segs[k+1].From == i {
			k++
			notes[i] = append(notes[i], segs[k].Note)
		}
		if k >= 0 {
			loc, dis = segs[k].Location, segs[k].Dispersion
		}
		if p.Outside {
			notes[i] = append(notes[i], w.Outside)
		}
		if p.Excluded != "" {
			notes[i] = append(notes[i], w.Excluded+" ("+p.Excluded+")")
		}
		when := p.When
		if when == "" {
			when = strconv.Itoa(i + 1)
		}
		row := []string{when, or(p.LocationText, decimal(p.Location, c.Location.Decimals)), loc.words(w)}
		if c.Other != nil {
			other := ""
			if i < len(c.Other) {
				other = decimal(c.Other[i], c.Location.Decimals)
			}
			row = append(row, other)
		}
		if two {
			row = append(row, or(p.DispersionText, decimal(p.Dispersion, c.Dispersion.Decimals)), dis.words(w))
		}
		row = append(row, p.Readings, p.Person, join("; ", append(notes[i], p.Note)...))
		t.Rows = append(t.Rows, row)
	}
	for i, j := 0, len(t.Rows)-1; i < j; i, j = i+1, j-1 {
		t.Rows[i], t.Rows[j] = t.Rows[j], t.Rows[i]
	}
	return t
}

// words says limits in one cell.
func (l Limits) words(w Words) string {
	if l.LowerText != "" && l.UpperText != "" {
		return l.LowerText + " " + w.To + " " + l.UpperText
	}
	if l.UpperText != "" {
		return w.To + " " + l.UpperText
	}
	return l.LowerText
}

func join(sep string, parts ...string) string {
	kept := parts[:0:0]
	for _, p := range parts {
		if p != "" {
			kept = append(kept, p)
		}
	}
	return strings.Join(kept, sep)
}

// Table returns the bars from high to low with their counts.
func (r *Rail) Table() Table {
	w := r.Words.filled()
	t := Table{Caption: r.Label, Head: []string{w.Reading, or(r.StableText, w.Stable), r.SuspectText}}
	counts := make(map[string]*bin)
	var order []string
	all := func(values []float64, suspect bool) {
		for _, v := range values {
			key := decimal(v, r.Decimals)
			if key == "" {
				continue
			}
			b := counts[key]
			if b == nil {
				b = &bin{}
				counts[key] = b
				order = append(order, key)
			}
			if suspect {
				b.suspect++
			} else {
				b.stable++
			}
		}
	}
	all(r.Readings, false)
	all(r.Suspect, true)
	sortNumbers(order)
	if len(r.Suspect) == 0 {
		t.Head = []string{w.Reading, w.Count}
	}
	for _, key := range order {
		row := []string{key, strconv.Itoa(counts[key].stable)}
		if len(r.Suspect) > 0 {
			row = append(row, strconv.Itoa(counts[key].suspect))
		}
		t.Rows = append(t.Rows, row)
	}
	return t
}

// Table returns the earlier rounds, newest first.
func (f *Falls) Table() Table { return stationTable(f.Label, f.Points, FallsLength, f.Limits, f.Words) }

// Table returns the rounds of the picture, newest first.
func (v *Verdict) Table() Table {
	t := stationTable(v.Label, v.Points, VerdictLength, v.Limits, v.Words)
	if v.Signal != "" && len(t.Rows) > 0 {
		t.Head = append(t.Head, v.Words.filled().Notes)
		for i := range t.Rows {
			t.Rows[i] = append(t.Rows[i], "")
		}
		t.Rows[0][len(t.Head)-1] = v.Signal
	}
	return t
}

func stationTable(label string, points []StationPoint, n int, l Limits, words Words) Table {
	w := words.filled()
	t := Table{Caption: label, Head: []string{w.Time, w.Points, w.Band}}
	pts := tail(points, n)
	for i := len(pts) - 1; i >= 0; i-- {
		t.Rows = append(t.Rows, []string{pts[i].Time, or(pts[i].Text, decimal(pts[i].Value, 4)), l.words(w)})
	}
	return t
}

// sortNumbers orders printed numbers from high to low.
func sortNumbers(s []string) {
	value := func(t string) float64 {
		v, err := strconv.ParseFloat(strings.Replace(t, "−", "-", 1), 64)
		if err != nil {
			return 0 // decimal prints nothing that does not parse
		}
		return v
	}
	sort.SliceStable(s, func(i, j int) bool { return value(s[i]) > value(s[j]) })
}
