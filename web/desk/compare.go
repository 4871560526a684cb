package desk

import (
	"math"
	"strconv"

	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
	"holdfast/web/chart"
	"holdfast/web/ui"
)

// column is one set of limits that is compared with others.
type column struct {
	Title    string
	Standard limits.Standard // Sigma 0: there are no limits
	Strong   bool
	Rules    *plant.Rules // nil where they are not compared
	Ways     string       // estimator and multiple, "" where not compared
}

// comparison is limits side by side, with a picture of the location bands.
type comparison struct {
	Unit    string
	Heads   []head
	Rows    []compareRow
	Words   []comparedWords
	Bands   []bandPicture
	Caption string
}

type head struct {
	Text   string
	Strong bool
}

type compareRow struct {
	Name  string
	Cells []cell
}

type cell struct {
	Text   string
	Strong bool
}

// comparedWords is what is said rather than counted: once where all say the same.
type comparedWords struct {
	Name string
	Said []pair
}

// bandPicture is one band of the picture, in px.
type bandPicture struct {
	X                                 float64
	Upper, Centre, Lower              float64 // y of the lines
	Two, One                          float64 // heights within two and one sigma
	UpperText, CentreText, LowerText  string
	UpperAt, CentreAt, LowerAt, Named float64 // y of the words
	Name                              string
}

// compare sets columns side by side, for subgroups of the nominal size.
func compare(f ui.Format, s plant.Setup, columns []column) comparison {
	w := f.Words
	c := comparison{Unit: s.Unit}
	location, dispersion := panels(w, s)
	var loc, dis []limits.Band
	for _, col := range columns {
		c.Heads = append(c.Heads, head{col.Title, col.Strong})
		l, d, err := col.Standard.Bands(s.Size)
		if err != nil {
			l, d = limits.Band{}, limits.Band{} // no limits, or of another chart
		}
		loc, dis = append(loc, l), append(dis, d)
	}
	number := func(v float64, decimals int) string {
		if math.IsInf(v, 0) {
			return w.T("desk.compare.absent")
		}
		return f.Number(v, decimals)
	}
	row := func(name string, of func(i int) string) {
		r := compareRow{Name: name}
		for i, col := range columns {
			r.Cells = append(r.Cells, cell{Text: of(i), Strong: col.Strong})
		}
		c.Rows = append(c.Rows, r)
	}
	limitRows := func(name string, bands []limits.Band, lower bool) {
		value := func(of func(limits.Band) float64) func(int) string {
			return func(i int) string {
				if !bands[i].Exists() {
					return ""
				}
				return number(of(bands[i]), s.LimitDecimals())
			}
		}
		row(w.T("desk.compare.upper", name), value(func(b limits.Band) float64 { return b.Upper }))
		row(w.T("desk.compare.centre", name), value(func(b limits.Band) float64 { return b.Center }))
		if lower {
			row(w.T("desk.compare.lower", name), value(func(b limits.Band) float64 { return b.Lower }))
		}
	}
	limitRows(w.T("desk.compare.location", shortName(f, s, location)), loc, true)
	someLower := false
	for _, b := range dis {
		someLower = someLower || b.HasLower()
	}
	limitRows(dispersion.Name, dis, someLower)
	row(w.T("desk.compare.sigma"), func(i int) string {
		if columns[i].Standard.Sigma <= 0 {
			return ""
		}
		return f.Number(columns[i].Standard.Sigma, s.LimitDecimals()+1)
	})
	c.wordRows(f, columns)
	c.picture(f, s, columns, loc)
	return c
}

// shortName names the location panel without its size.
func shortName(f ui.Format, s plant.Setup, location chart.Panel) string {
	if s.Chart == limits.Individuals {
		return location.Name
	}
	return f.Words.T("desk.panel.averages-short")
}

// wordRows add how the limits were made and the rules, where they are compared.
func (c *comparison) wordRows(f ui.Format, columns []column) {
	w := f.Words
	add := func(name string, of func(column) string) {
		d := comparedWords{Name: name}
		same := true
		for _, col := range columns {
			text := of(col)
			if text == "" {
				continue
			}
			same = same && (len(d.Said) == 0 || d.Said[0].Text == text)
			d.Said = append(d.Said, pair{col.Title, text})
		}
		if n := len(d.Said); n > 1 && same {
			d.Name, d.Said = w.T("desk.compare.same", name), []pair{{"", d.Said[0].Text}}
		} else if n == 1 {
			d.Said[0].Name = ""
		}
		if len(d.Said) > 0 {
			c.Words = append(c.Words, d)
		}
	}
	add(w.T("desk.compare.ways"), func(col column) string { return col.Ways })
	add(w.T("desk.compare.rules"), func(col column) string {
		if col.Rules == nil {
			return ""
		}
		return rulesInWords(f, col.Rules.Location)
	})
	add(w.T("desk.compare.spread-rules"), func(col column) string {
		if col.Rules == nil {
			return ""
		}
		return rulesInWords(f, col.Rules.Dispersion)
	})
}

// Sizes of the picture of bands.
const (
	pictureHeight = 92.0
	pictureTop    = 10.0
	pictureStep   = 170.0
	pictureWords  = 15.0 // the least distance of two lines of words
)

// picture draws the first and the last column on one scale.
func (c *comparison) picture(f ui.Format, s plant.Setup, columns []column, bands []limits.Band) {
	if len(columns) < 2 {
		return
	}
	shown := []int{0, len(columns) - 1}
	lo, hi := math.Inf(1), math.Inf(-1)
	for _, i := range shown {
		if !bands[i].Exists() || !bands[i].HasLower() || !bands[i].HasUpper() {
			return
		}
		lo, hi = math.Min(lo, bands[i].Lower), math.Max(hi, bands[i].Upper)
	}
	if !(hi > lo) {
		return
	}
	y := func(v float64) float64 { return pictureTop + (hi-v)/(hi-lo)*(pictureHeight-2*pictureTop) }
	for k, i := range shown {
		b := bands[i]
		p := bandPicture{X: float64(k) * pictureStep, Upper: y(b.Upper), Centre: y(b.Center), Lower: y(b.Lower), Name: columns[i].Title, Named: pictureHeight + 14}
		reach := p.Lower - p.Upper
		multiple := columns[i].Standard.Multiple
		if multiple == 0 {
			multiple = limits.DefaultMultiple
		}
		p.Two, p.One = reach*math.Min(1, 2/multiple), reach*math.Min(1, 1/multiple)
		p.UpperText, p.CentreText, p.LowerText = f.Number(b.Upper, s.LimitDecimals()), f.Number(b.Center, s.LimitDecimals()), f.Number(b.Lower, s.LimitDecimals())
		p.CentreAt = p.Centre + 4.5
		p.UpperAt = math.Min(p.Upper+4.5, p.CentreAt-pictureWords)
		p.LowerAt = math.Max(p.Lower+4.5, p.CentreAt+pictureWords)
		c.Bands = append(c.Bands, p)
	}
}

// ways says how limits were made.
func ways(f ui.Format, e limits.Estimator, multiple float64) string {
	return f.Words.T("desk.compare.ways-text", estimatorWords(f, e), formatMultiple(multiple))
}

func estimatorWords(f ui.Format, e limits.Estimator) string {
	return f.Words.T("desk.estimator." + string(e))
}

// revisionColumn is a revision as a column.
func revisionColumn(f ui.Format, r plant.Revision) column {
	return column{Title: f.Words.T("desk.revision", r.Number), Standard: r.Standard().Standard, Rules: &r.Rules, Ways: ways(f, r.Estimator, r.Multiple)}
}

// px is a coordinate in markup.
func px(v float64) string { return strconv.FormatFloat(math.Round(v*10)/10, 'f', -1, 64) }
