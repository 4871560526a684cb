package watch

import (
	"fmt"
	"math"

	"holdfast/internal/spc/limits"
)

// Counts is a chart of counts: p, np, c, u, Laney's p' or u'. Count and Size come with
// each subgroup; sizes may vary but on np, whose standard must say its Size. The limits
// of the first 1024 sizes are kept, those of further ones computed at each point.
type Counts struct{ limits.CountStandard }

// countScales are the limits of a chart of counts by size of sample.
type countScales struct {
	limits.CountStandard
	known kept[float64, scale]
}

func (c Counts) prepare(j *Judge) (none limits.Standard, err error) {
	size := 1.0
	if c.Chart == limits.NP {
		if size = c.Size; size == 0 {
			return none, fmt.Errorf("size: an np chart must know the size of its samples")
		}
	}
	// Neighbours are compared in sigmas of one size of sample, so that the same step
	// counts the same whatever the sizes.
	b, err := c.Band(size)
	if err != nil {
		return none, err
	}
	j.family, j.perX, j.counts.CountStandard = ofCounts, 1/b.Above, c.CountStandard
	return none, nil
}

// of gives the scale for a size of sample: the one that is kept, or own, written
// anew.
func (c *countScales) of(size float64, own *scale) (*scale, error) {
	if c.Chart == limits.C {
		size = 1
	}
	if s := c.known.get(size); s != nil {
		return s, nil
	}
	band, err := c.Band(size)
	if err != nil {
		return nil, err
	}
	*own = newScale(band)
	if !c.known.full() {
		keep := *own
		c.known.put(size, &keep)
	}
	return own, nil
}

func (j *Judge) stepCount(m *Memory, s *Subgroup, out *Judged) {
	value, err := j.counts.Point(s.Count, s.Size)
	if err != nil {
		out.Err = cannot(err)
		return
	}
	var own scale
	b, err := j.counts.of(s.Size, &own)
	if err != nil {
		out.Err = cannot(err)
		return
	}
	j.stepValue(m, b, value, out)
}

// stepValue judges a value by its scale on a chart that has no other beside it.
func (j *Judge) stepValue(m *Memory, b *scale, value float64, out *Judged) {
	z, x := b.z(value), float64((value-b.band.Center)*j.perX)
	if !(math.Abs(z) <= furthest && math.Abs(x) <= furthest) {
		out.Err = fmt.Errorf("%w: %v is too far from the centre to be judged", ErrSubgroup, value)
		return
	}
	b.plot(&out.Location, value)
	m.Points++
	out.Location.Fired = j.location.Step(&m.Location, Point{Z: z, X: x})
}

// Rare is a chart of rare events: g, the good units between events, or t, the time
// between them, judged on the scale of times raised to 1/3.6. With Instants the values
// of a t chart are the instants of the events, in any unit from any origin but in their
// order, and the fold takes the differences: the first event since a boundary has no
// point.
type Rare struct {
	limits.RareStandard
	Instants bool
}

func (r Rare) prepare(j *Judge) (none limits.Standard, err error) {
	b, err := r.Band()
	if err != nil {
		return none, err
	}
	if r.Instants && r.Chart != limits.T {
		return none, fmt.Errorf("instants: only a chart of times between events takes them, not %q", r.Chart)
	}
	j.family, j.rare, j.single, j.perX = ofRare, r, newScale(b), 1/b.Above
	if r.Chart == limits.G {
		j.perX = 1 / math.Sqrt(r.Center*(r.Center+1))
	}
	return none, nil
}

func (j *Judge) stepRare(m *Memory, s *Subgroup, out *Judged) {
	value := s.Mean
	if j.rare.Instants {
		switch {
		case !(math.Abs(value) <= furthest):
			out.Err = fmt.Errorf("%w: the instant of an event must be a finite number, got %v", ErrSubgroup, value)
			return
		case !m.individual:
			m.Points++
			m.previous, m.individual = value+0, true // a negative zero becomes a zero
			return
		case value < m.previous:
			out.Err = fmt.Errorf("%w: its event lies before the one judged last", ErrSubgroup)
			return
		}
		value -= m.previous
	}
	z, err := j.rare.Z(value)
	if err != nil {
		out.Err = cannot(err)
		return
	}
	if j.rare.Chart == limits.G {
		j.stepValue(m, &j.single, value, out)
		return
	}
	if math.Abs(z) > furthest {
		out.Err = fmt.Errorf("%w: %v is too far from the centre to be judged", ErrSubgroup, value)
		return
	}
	if j.rare.Instants {
		m.previous = s.Mean + 0
	}
	j.single.plot(&out.Location, value)
	m.Points++
	out.Location.Z = z
	out.Location.Fired = j.location.Step(&m.Location, Point{Z: z, X: z})
}

// TSquared is a Hotelling T-squared chart of up to limits.MaxCharacteristics
// characteristics of the same parts, judged by the limit for later observations. Its
// own limit is the rule beyond 3, whatever false-alarm rate it was set to: see
// limits.TSquaredStandard.Band. How a signal divides among the characteristics is asked
// of its Shares.
type TSquared struct{ limits.TSquaredStandard }

func (t TSquared) prepare(j *Judge) (none limits.Standard, err error) {
	s, err := t.Prepare()
	if err != nil {
		return none, err
	}
	b, err := s.Band()
	if err != nil {
		return none, err
	}
	j.family, j.tSquared, j.single, j.perX = ofTSquared, s, newScale(b), 1/b.Above
	return none, nil
}

func (j *Judge) stepTSquared(m *Memory, s *Subgroup, out *Judged) {
	value, err := j.tSquared.Statistic(s.Values)
	if err != nil {
		out.Err = cannot(err)
		return
	}
	j.stepValue(m, &j.single, value, out)
}
