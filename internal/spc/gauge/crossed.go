package gauge

import (
	"math"

	"holdfast/internal/spc/dist"
)

// Options of a crossed study; the zero value has the defaults.
type Options struct {
	// Tolerance is upper minus lower specification limit, nil when shares of it are
	// not asked for.
	Tolerance *float64
	// PoolAbove is the p value of the interaction above which it is pooled with
	// repeatability; nil means 0.25. At 1 it is never pooled.
	PoolAbove *float64
}

// Source names a row of the table of variance.
type Source string

const (
	Part          Source = "part"
	Appraiser     Source = "appraiser"
	Interaction   Source = "interaction"
	Repeatability Source = "repeatability"
	Pooled        Source = "pooled" // interaction and repeatability together
	Total         Source = "total"
)

// Row is one line of a table of variance; nil where the figure does not exist.
type Row struct {
	Source   Source
	DF       int
	SS       float64
	MS, F, P *float64
}

// Components are figures of each source of spread: variances, or shares.
type Components struct {
	Repeatability   float64 // same part, same appraiser
	Appraiser       float64
	Interaction     float64 // appraisers differ on some parts more than on others
	Reproducibility float64 // appraiser and interaction
	Gauge           float64 // repeatability and reproducibility
	Part            float64
	Total           float64 // gauge and part
}

// each applies f to every component.
func (c Components) each(f func(float64) float64) Components {
	return Components{
		f(c.Repeatability), f(c.Appraiser), f(c.Interaction), f(c.Reproducibility),
		f(c.Gauge), f(c.Part), f(c.Total),
	}
}

func (c *Components) pointers() []*float64 {
	return []*float64{&c.Repeatability, &c.Appraiser, &c.Interaction, &c.Reproducibility, &c.Gauge, &c.Part, &c.Total}
}

// Crossed is the result of a crossed study.
type Crossed struct {
	Parts, Appraisers, Trials int
	Table                     []Row
	Pooled                    bool
	Variance                  Components  // in the square of the readings' unit
	OfTotal                   Components  // 100 × s.d. / total s.d.
	OfTolerance               *Components // 100 × 6 s.d. / tolerance; nil without one
	// Categories is the number of groups of parts that the gauge can tell apart,
	// 1.41 × part s.d. / gauge s.d. cut to a whole number, at least 1.
	Categories int
}

// Cross analyses measurements[part][appraiser][trial] of a balanced study with at
// least two parts and two trials; one appraiser is enough, reproducibility is then 0.
// Parts and appraisers are random factors: both are tested against the interaction,
// the interaction against repeatability. When the interaction's p is above PoolAbove
// it is pooled with repeatability and both are tested against that. A negative
// component is zero.
//
// It fails when the study is not balanced, and when repeated readings never differ:
// such a gauge is too coarse to be judged this way.
//
// Source: Montgomery and Runger, Quality Engineering 6 (1993), 115-135 and 289-305;
// the 1.41 and the pooling: common practice.
func Cross(measurements [][][]float64, opt Options) (Crossed, error) {
	if err := toleranceOK(opt.Tolerance); err != nil {
		return Crossed{}, err
	}
	poolAbove := 0.25
	if opt.PoolAbove != nil {
		poolAbove = *opt.PoolAbove
	}
	if !(poolAbove >= 0 && poolAbove <= 1) {
		return Crossed{}, invalid("the p value above which interaction is pooled must be from 0 to 1, got %g", poolAbove)
	}
	c, err := shape(measurements)
	if err != nil {
		return Crossed{}, err
	}
	s := sumsOfSquares(measurements, c)
	if s.total() == 0 {
		return Crossed{}, invalid("all readings are equal")
	}
	if err := allFinite(&s.part, &s.appraiser, &s.interaction, &s.within); err != nil {
		return Crossed{}, err
	}
	c.analyse(s, poolAbove)
	if c.Variance.Gauge == 0 {
		return Crossed{}, invalid("repeated readings never differ: the gauge reads too coarsely to be judged by this study")
	}
	total := c.Variance.Total
	c.OfTotal = c.Variance.each(func(v float64) float64 { return 100 * math.Sqrt(v/total) })
	if opt.Tolerance != nil {
		shares := c.Variance.each(func(v float64) float64 { return 100 * 6 * math.Sqrt(v) / *opt.Tolerance })
		c.OfTolerance = &shares
		if err := allFinite(shares.pointers()...); err != nil {
			return Crossed{}, err
		}
	}
	if c.Categories, err = categories(math.Sqrt(c.Variance.Part / c.Variance.Gauge)); err != nil {
		return Crossed{}, err
	}
	check := append(c.Variance.pointers(), c.OfTotal.pointers()...)
	for _, r := range c.Table {
		check = append(check, &r.SS, r.MS, r.F, r.P)
	}
	return c, allFinite(check...)
}

// categories cuts 1.41 × the ratio of part to gauge s.d. to a whole number.
func categories(ratio float64) (int, error) {
	n := 1.41 * ratio
	if !(n < 1e9) {
		return 0, invalid("the gauge shows next to no spread beside the parts: it reads too coarsely to be judged by this study")
	}
	return max(1, int(n)), nil
}

// shape checks that the study is balanced.
func shape(m [][][]float64) (Crossed, error) {
	if len(m) < 2 {
		return Crossed{}, invalid("at least two parts are needed, got %d", len(m))
	}
	c := Crossed{Parts: len(m), Appraisers: len(m[0])}
	if c.Appraisers < 1 {
		return Crossed{}, invalid("part 1 was measured by nobody")
	}
	c.Trials = len(m[0][0])
	if c.Trials < 2 {
		return Crossed{}, invalid("each appraiser must measure each part at least twice, appraiser 1 measured part 1 %d times", c.Trials)
	}
	if float64(c.Parts)*float64(c.Appraisers)*float64(c.Trials) > MaxReadings {
		return Crossed{}, invalid("a study has at most %d readings", MaxReadings)
	}
	for i, part := range m {
		if len(part) != c.Appraisers {
			return Crossed{}, invalid("every part must be measured by the same appraisers: part 1 has %d of them, part %d has %d", c.Appraisers, i+1, len(part))
		}
		for j, trials := range part {
			if len(trials) != c.Trials {
				return Crossed{}, invalid("every appraiser must measure every part equally often: %d times for appraiser 1 and part 1, %d times for appraiser %d and part %d", c.Trials, len(trials), j+1, i+1)
			}
			for k, x := range trials {
				if err := readingOK(x, "reading %d of appraiser %d on part %d", k+1, j+1, i+1); err != nil {
					return Crossed{}, err
				}
			}
		}
	}
	return c, nil
}

// squares are the sums of squares of a crossed study.
type squares struct{ part, appraiser, interaction, within float64 }

func (s squares) total() float64 { return s.part + s.appraiser + s.interaction + s.within }

// sumsOfSquares works on differences from the first reading and from means, so that
// a large common part of the readings costs no digits.
func sumsOfSquares(m [][][]float64, c Crossed) squares {
	p, a, n := c.Parts, c.Appraisers, float64(c.Trials)
	origin := m[0][0][0]
	partMean, appraiserMean := make([]float64, p), make([]float64, a)
	cell := make([]float64, p*a)
	grand := 0.0
	var s squares
	for i, part := range m {
		for j, trials := range part {
			mean := 0.0
			for _, x := range trials {
				mean += (x - origin) / n
			}
			left := 0.0
			for _, x := range trials {
				d := (x - origin) - mean
				left += d
				s.within += d * d
			}
			s.within -= left * left / n
			cell[i*a+j] = mean
			partMean[i] += mean / float64(a)
			appraiserMean[j] += mean / float64(p)
			grand += mean / float64(a*p)
		}
	}
	s.within = math.Max(0, s.within)
	for i := range p {
		d := partMean[i] - grand
		s.part += float64(a) * n * d * d
		for j := range a {
			d := cell[i*a+j] - partMean[i] - appraiserMean[j] + grand
			s.interaction += n * d * d
		}
	}
	for j := range a {
		d := appraiserMean[j] - grand
		s.appraiser += float64(p) * n * d * d
	}
	// What rounding leaves behind is no spread.
	for _, v := range []*float64{&s.part, &s.appraiser, &s.interaction, &s.within} {
		if *v < 1e-28*s.total() {
			*v = 0
		}
	}
	return s
}

// analyse fills in the table and the components of variance.
func (c *Crossed) analyse(s squares, poolAbove float64) {
	p, a, n := c.Parts, c.Appraisers, c.Trials
	part, appraiser := Row{Source: Part, DF: p - 1, SS: s.part}, Row{Source: Appraiser, DF: a - 1, SS: s.appraiser}
	inter := Row{Source: Interaction, DF: (p - 1) * (a - 1), SS: s.interaction}
	within := Row{Source: Repeatability, DF: p * a * (n - 1), SS: s.within}
	for _, r := range []*Row{&part, &appraiser, &inter, &within} {
		r.mean()
	}
	inter.test(within)
	against := within
	var pooled Row
	switch {
	case inter.DF == 0:
		part.test(within)
	case poolAbove < 1 && (inter.P != nil && *inter.P > poolAbove || s.interaction == 0):
		c.Pooled = true
		pooled = Row{Source: Pooled, DF: inter.DF + within.DF, SS: inter.SS + within.SS}
		pooled.mean()
		against = pooled
		part.test(pooled)
		appraiser.test(pooled)
	default:
		against = inter
		part.test(inter)
		appraiser.test(inter)
	}
	c.Table = []Row{part, appraiser, inter, within}
	if c.Pooled {
		c.Table = append(c.Table, pooled)
	}
	c.Table = append(c.Table, Row{Source: Total, DF: p*a*n - 1, SS: s.total()})

	v := &c.Variance
	v.Repeatability = *within.MS
	if c.Pooled {
		v.Repeatability = *pooled.MS
	} else if inter.MS != nil {
		v.Interaction = math.Max(0, (*inter.MS-*within.MS)/float64(n))
	}
	if appraiser.MS != nil {
		v.Appraiser = math.Max(0, (*appraiser.MS-*against.MS)/float64(p*n))
	}
	v.Part = math.Max(0, (*part.MS-*against.MS)/float64(a*n))
	v.Reproducibility = v.Appraiser + v.Interaction
	v.Gauge = v.Repeatability + v.Reproducibility
	v.Total = v.Gauge + v.Part
}

// mean fills in the mean square of a row with degrees of freedom.
func (r *Row) mean() {
	if r.DF > 0 {
		r.MS = some(r.SS / float64(r.DF))
	}
}

// test fills in F and p of a row against another; without spread in the other there
// is no F.
func (r *Row) test(against Row) {
	if r.MS == nil || against.MS == nil || *against.MS == 0 {
		return
	}
	f := *r.MS / *against.MS
	p, err := dist.FSurvival(f, float64(r.DF), float64(against.DF))
	if err != nil {
		return
	}
	r.F, r.P = &f, &p
}
