package watch_test

import (
	"errors"
	"math"
	"testing"

	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/gonum/stat/distuv"

	"holdfast/internal/spc/limits"
	"holdfast/internal/spc/watch"
)

var errRefused = errors.New("refused")

// holds judges the last point by every rule, looking back over all of them.
func holds(rules []watch.Rule, pts []watch.Point) (f watch.Fired) {
	for i, r := range rules {
		if holds, side := naive(r, pts, len(pts)-1); holds {
			f.Rules |= 1 << i
			f.High |= uint16(side&watch.High) << i
			f.Low |= uint16(side&watch.Low) >> 1 << i
		}
	}
	return f
}

func slowShortRun(t *testing.T, s watch.Standard, hist []watch.Subgroup) []watch.Judged {
	m := s.Model.(watch.ShortRun)
	s.Standard, s.Model = m.Standard, nil
	plain := make([]watch.Subgroup, len(hist))
	for i, g := range hist {
		plain[i] = watch.Subgroup{N: g.N, Mean: g.Mean - g.Target, Range: g.Range, SD: g.SD}
		if m.Standardised {
			plain[i] = watch.Subgroup{N: g.N, Mean: (g.Mean - g.Target) / g.Sigma, Range: g.Range / g.Sigma, SD: g.SD / g.Sigma}
		}
	}
	return slow(t, s, plain)
}

// slowTrend judges the deviations from the line tool by tool.
func slowTrend(t *testing.T, s watch.Standard, hist []watch.Subgroup) []watch.Judged {
	m := s.Model.(watch.Trend)
	s.Model, s.Standard = nil, limits.Standard{Chart: m.Chart, Sigma: m.Sigma}
	var out []watch.Judged
	for from := 0; from < len(hist); {
		to := from + 1
		for to < len(hist) && hist[to].Wear >= hist[to-1].Wear {
			to++
		}
		var tool []watch.Subgroup
		for _, g := range hist[from:to] {
			tool = append(tool, watch.Subgroup{N: g.N, Mean: g.Mean - (m.Intercept + m.Slope*g.Wear), Range: g.Range, SD: g.SD})
		}
		for i, d := range slow(t, s, tool) {
			line := m.Intercept + m.Slope*hist[from+i].Wear
			d.Location.Value = hist[from+i].Mean
			for _, v := range []*float64{&d.Location.Band.Center, &d.Location.Band.Lower, &d.Location.Band.Upper, &d.EWMA.Value, &d.EWMA.Lower, &d.EWMA.Upper} {
				*v += line
			}
			out = append(out, d)
		}
		from = to
	}
	return out
}

// slowBatches judges the means as individuals, and the spread within beside them.
func slowBatches(t *testing.T, s watch.Standard, hist []watch.Subgroup) []watch.Judged {
	m := s.Model.(watch.ThreeWay)
	rules := s.ThirdRules
	s.Model, s.Standard, s.ThirdRules = nil, m.Means, nil
	means := make([]watch.Subgroup, len(hist))
	for i, g := range hist {
		means[i] = watch.Subgroup{N: 1, Mean: g.Mean}
	}
	out := slow(t, s, means)
	var pts []watch.Point
	for i, g := range hist {
		if g.N < 2 {
			continue
		}
		value := g.Range
		if m.Within.Chart == limits.XBarS {
			value = g.SD
		}
		_, band, err := m.Within.Bands(g.N)
		if err != nil {
			t.Fatal(err)
		}
		pts = append(pts, watch.Point{Z: band.Z(value), X: value / m.Within.Sigma})
		out[i].HasThird = true
		out[i].Third = watch.Plotted{Value: value, Band: band, Z: band.Z(value), Fired: holds(rules, pts)}
	}
	return out
}

func slowStreams(t *testing.T, s watch.Standard, hist []watch.Subgroup) []watch.Judged {
	m := s.Model.(watch.Group)
	var out []watch.Judged
	var high, low, wide []watch.Point
	var tops, bottoms []int // -1 where the extreme is shared
	only := func(streams []limits.Subgroup, at float64) int {
		found := -1
		for i, g := range streams {
			if math.Abs(g.Location-at) <= 1e-9*m.Sigma {
				if found >= 0 {
					return -1
				}
				found = i
			}
		}
		return found
	}
	inARow := func(list []int) bool {
		if len(list) < m.Run {
			return false
		}
		last := list[len(list)-1]
		for _, v := range list[len(list)-m.Run:] {
			if v < 0 || v != last {
				return false
			}
		}
		return true
	}
	for _, round := range hist {
		highest, lowest, widest := math.Inf(-1), math.Inf(1), math.Inf(-1)
		var d watch.Judged
		for i, g := range round.Streams {
			if g.Location > highest {
				highest, d.Streams.Highest = g.Location, uint8(i)
			}
			if g.Location < lowest {
				lowest, d.Streams.Lowest = g.Location, uint8(i)
			}
			if g.Range > widest && g.N > 1 && m.Chart != limits.Individuals {
				widest, d.Streams.Widest = g.Range, uint8(i)
			}
		}
		loc, disp, err := m.Bands(round.Streams[0].N)
		if err != nil {
			t.Fatal(err)
		}
		high = append(high, watch.Point{Z: loc.Z(highest), X: highest / m.Sigma})
		low = append(low, watch.Point{Z: loc.Z(lowest), X: lowest / m.Sigma})
		d.Location = watch.Plotted{Value: highest, Band: loc, Z: loc.Z(highest), Fired: holds(s.LocationRules, high)}
		d.Third = watch.Plotted{Value: lowest, Band: loc, Z: loc.Z(lowest), Fired: holds(s.LocationRules, low)}
		d.HasThird = true
		if d.HasDispersion = widest >= 0; d.HasDispersion {
			wide = append(wide, watch.Point{Z: disp.Z(widest), X: widest / m.Sigma})
			d.Dispersion = watch.Plotted{Value: widest, Band: disp, Z: disp.Z(widest), Fired: holds(s.DispersionRules, wide)}
		}
		tops, bottoms = append(tops, only(round.Streams, highest)), append(bottoms, only(round.Streams, lowest))
		if inARow(tops) {
			d.Streams.Run |= watch.High
		}
		if inARow(bottoms) {
			d.Streams.Run |= watch.Low
		}
		out = append(out, d)
	}
	return out
}

// band puts limits around a centre; an infinite one is absent and its side measured
// in standard deviations.
func band(center, lower, upper, sd, multiple float64) limits.Band {
	b := limits.Band{Center: center, Lower: lower, Upper: upper, Below: sd, Above: sd}
	if !math.IsInf(lower, -1) {
		b.Below = (center - lower) / multiple
	}
	if !math.IsInf(upper, 1) {
		b.Above = (upper - center) / multiple
	}
	return b
}

// single judges points on a chart that has no other beside it.
type single struct {
	rules []watch.Rule
	pts   []watch.Point
	out   []watch.Judged
}

func (s *single) add(value float64, b limits.Band, z, x float64) {
	s.pts = append(s.pts, watch.Point{Z: z, X: x})
	s.out = append(s.out, watch.Judged{Location: watch.Plotted{Value: value, Band: b, Z: z, Fired: holds(s.rules, s.pts)}})
}

// slowCounts sets the limits by the textbook formulas and, where exact, by going
// through all counts with the tails of a general-purpose library.
func slowCounts(_ *testing.T, s watch.Standard, hist []watch.Subgroup) []watch.Judged {
	m := s.Model.(watch.Counts)
	multiple := 3.0
	if m.Multiple != 0 {
		multiple = m.Multiple
	}
	within := func(p, n float64) float64 { return math.Sqrt(p * (1 - p) / n) }
	out := single{rules: s.LocationRules}
	for _, g := range hist {
		k, n := float64(g.Count), g.Size
		var value, sd, one, most, unit float64 // one: s.d. in a sample of one
		var below func(float64) float64
		most, unit = math.Inf(1), 1
		poisson := func(mean float64) { below = distuv.Poisson{Lambda: mean}.CDF }
		binomial := func(p float64) { below = distuv.Binomial{N: n, P: p}.CDF }
		switch m.Chart {
		case limits.P, limits.LaneyP:
			value, sd, one, most, unit = k/n, within(m.Center, n), within(m.Center, 1), 1, 1/n
			binomial(m.Center)
		case limits.NP:
			if n != m.Size {
				out.out = append(out.out, watch.Judged{Err: errRefused})
				continue
			}
			p := m.Center / n
			value, sd, most = k, math.Sqrt(n*p*(1-p)), n
			one = sd
			binomial(p)
		case limits.C:
			value, sd, one = k, math.Sqrt(m.Center), math.Sqrt(m.Center)
			poisson(m.Center)
		case limits.U, limits.LaneyU:
			value, sd, one, unit = k/n, math.Sqrt(m.Center/n), math.Sqrt(m.Center), 1/n
			poisson(m.Center * n)
		}
		if m.Between != 0 {
			sd, one = sd*m.Between, one*m.Between
		}
		lower, upper := m.Center-multiple*sd, m.Center+multiple*sd
		if m.Probability {
			const tail = 0.00135
			c := 0.0
			for 1-below(c) > tail {
				c++
			}
			upper = c * unit
			for c > 0 && below(c-1) > tail {
				c--
			}
			lower = c * unit
		}
		if lower <= 0 {
			lower = math.Inf(-1)
		}
		if upper >= most {
			upper = math.Inf(1)
		}
		b := band(m.Center, lower, upper, sd, multiple)
		out.add(value, b, b.Z(value), value/one)
	}
	return out.out
}

func slowRare(_ *testing.T, s watch.Standard, hist []watch.Subgroup) []watch.Judged {
	m := s.Model.(watch.Rare)
	c, out := m.Center, single{rules: s.LocationRules}
	for i, g := range hist {
		value := g.Mean
		if m.Instants {
			if i == 0 {
				out.out = append(out.out, watch.Judged{})
				continue
			}
			value -= hist[i-1].Mean
		}
		if m.Chart == limits.G {
			sd := math.Sqrt(c * (c + 1))
			b := band(c, math.Inf(-1), c+3*sd, sd, 3)
			if m.Probability {
				p := 1 / (c + 1)
				upper, lower := 0.0, 0.0
				for math.Pow(1-p, upper+1) > m.Tail {
					upper++
				}
				for 1-math.Pow(1-p, lower+1) <= m.Tail {
					lower++
				}
				b = band(c, lower, upper, sd, 3)
			}
			out.add(value, b, b.Z(value), value/sd)
			continue
		}
		y, back := math.Pow(value, 1/3.6), func(v float64) float64 { return math.Pow(v, 3.6) }
		z := (y - c) / m.Sigma
		b := limits.Band{Center: back(c), Lower: back(c - 3*m.Sigma), Upper: back(c + 3*m.Sigma)}
		b.Below, b.Above = (b.Center-b.Lower)/3, (b.Upper-b.Center)/3
		out.add(value, b, z, z)
	}
	return out.out
}

// slowTSquared inverts the covariance with a general-purpose library and takes its F
// quantiles.
func slowTSquared(t *testing.T, s watch.Standard, hist []watch.Subgroup) []watch.Judged {
	m := s.Model.(watch.TSquared)
	var flat []float64
	for _, row := range m.Covariance {
		flat = append(flat, row...)
	}
	n := len(m.Mean)
	var inverse mat.Dense
	if err := inverse.Inverse(mat.NewDense(n, n, flat)); err != nil {
		t.Fatal(err)
	}
	p, obs := float64(n), float64(m.M)
	f := distuv.F{D1: p, D2: obs - p}
	scale := p * (obs + 1) * (obs - 1) / (obs * (obs - p))
	b := band(scale*f.Quantile(0.5), math.Inf(-1), scale*f.Quantile(1-m.Alpha), math.Sqrt(2*p), 3)
	out := single{rules: s.LocationRules}
	for _, g := range hist {
		d := mat.NewVecDense(n, nil)
		d.SubVec(mat.NewVecDense(n, g.Values), mat.NewVecDense(n, m.Mean))
		value := mat.Inner(d, &inverse, d)
		out.add(value, b, b.Z(value), value)
	}
	return out.out
}
