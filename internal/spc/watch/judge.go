package watch

import (
	"errors"
	"fmt"
	"math"
	"sync"
	"sync/atomic"

	"holdfast/internal/spc/limits"
)

// Standard is what one revision of a characteristic is judged by: its limits, the
// run rules of both charts, and an EWMA or a CUSUM of the location where asked for.
type Standard struct {
	limits.Standard
	LocationRules   []Rule
	DispersionRules []Rule
	EWMA            *EWMA  // nil for none
	CUSUM           *CUSUM // nil for none
}

// Subgroup is what the fold needs of a sample, in the characteristic's unit: the
// number of readings, their mean (their median on a chart of medians; the reading
// itself on one of individuals), and the measure of spread the chart plots. The
// other measure is not looked at.
type Subgroup struct {
	N               int
	Mean, Range, SD float64
}

// Plotted is a point with the limits it is judged by. Value and Band are in the
// characteristic's unit, Z in one-sigma distances of the point's side. Fired is in
// the order of that chart's rules.
type Plotted struct {
	Value float64
	Band  limits.Band
	Z     float64
	Fired Fired
}

// Average is the EWMA after a point, with its limits, in the characteristic's
// unit. Out is the side on which it is outside them.
type Average struct {
	Value, Lower, Upper float64
	Out                 Side
}

// Sums are both sides of the CUSUM after a point, kept positive, in standard
// errors. Out tells which of them are above the decision interval.
type Sums struct {
	High, Low float64
	Out       Side
}

// Judged is what the fold says about one subgroup. Dispersion is the zero Plotted
// when HasDispersion is false; EWMA and CUSUM are zero where the standard has
// none. With Err set nothing was judged, the Memory is as it was, and everything
// else is zero.
type Judged struct {
	Location, Dispersion Plotted
	HasDispersion        bool
	EWMA                 Average
	CUSUM                Sums
	Err                  error
}

// Any reports whether anything fired.
func (d *Judged) Any() bool {
	return d.Location.Fired.Rules|d.Dispersion.Fired.Rules|uint16(d.EWMA.Out|d.CUSUM.Out) != 0
}

// ErrSubgroup marks a subgroup that the standard cannot judge; the message says
// why in the user's words.
var ErrSubgroup = errors.New("this subgroup cannot be judged")

// furthest is the distance from the centre, in sigmas, beyond which a number is
// refused: it is no reading, and sums of such numbers would overflow.
const furthest = 1e15

// usual is the largest subgroup size that is looked up without a map.
const usual = 25

// spread is the statistic of the dispersion chart.
type spread uint8

const (
	spreadRange spread = iota + 1
	spreadSD
	spreadMoving
)

var spreads = map[string]spread{"range": spreadRange, "sd": spreadSD, "moving-range": spreadMoving}

// scale is a band and the reciprocals of its one-sigma distances: below the centre
// at index 1, where the sign bit of the distance points.
type scale struct {
	band limits.Band
	per  [2]float64
}

// sized is everything that depends on the size of the subgroup.
type sized struct {
	location, dispersion scale
	hasDispersion        bool
	variance             float64 // of the location statistic, in sigmas of a reading squared
}

// Judge judges the subgroups of one revision. It is safe for concurrent use by
// many folds, each with its own Memory.
type Judge struct {
	standard             Standard
	location, dispersion *Rules
	spread               spread
	perSigma             float64
	ewma                 EWMA
	cusum                CUSUM
	hasEWMA, hasCUSUM    bool
	// What depends on the size is made when a size is first met: most
	// characteristics know one or two, and probability limits take milliseconds.
	sizes  [usual + 1]atomic.Pointer[sized]
	larger sync.Map // int to *sized
}

// NewJudge checks a standard and prepares it. It refuses what limits.Standard
// refuses, rules that do not validate and more than MaxRules a chart.
func NewJudge(s Standard) (*Judge, error) {
	if err := s.Check(); err != nil {
		return nil, err
	}
	j := &Judge{standard: s, perSigma: 1 / s.Sigma}
	j.spread = spreads[s.Chart.DispersionStatistic()]
	if j.spread == 0 {
		return nil, fmt.Errorf("chart: %q cannot be judged subgroup by subgroup", s.Chart)
	}
	var err error
	if j.location, err = Compile(s.LocationRules); err != nil {
		return nil, fmt.Errorf("location chart: %w", err)
	}
	if j.dispersion, err = Compile(s.DispersionRules); err != nil {
		return nil, fmt.Errorf("dispersion chart: %w", err)
	}
	if s.EWMA != nil {
		if err := s.EWMA.Validate(); err != nil {
			return nil, err
		}
		j.ewma, j.hasEWMA = *s.EWMA, true
	}
	if s.CUSUM != nil {
		if err := s.CUSUM.Validate(); err != nil {
			return nil, err
		}
		j.cusum, j.hasCUSUM = *s.CUSUM, true
	}
	if s.Sigma < 1e-150 || s.Sigma > 1e150 { // squares and reciprocals would overflow
		return nil, fmt.Errorf("sigma: %v is too far from 1 to be judged by", s.Sigma)
	}
	if _, err := j.size(1); err != nil { // every chart takes a single reading
		return nil, err
	}
	return j, nil
}

// LocationRules and DispersionRules are the compiled rules, in the order of Fired.
func (j *Judge) LocationRules() *Rules   { return j.location }
func (j *Judge) DispersionRules() *Rules { return j.dispersion }

// size gives what depends on n, and makes it if need be.
func (j *Judge) size(n int) (*sized, error) {
	small := n >= 0 && n <= usual
	if !small {
		if known, ok := j.larger.Load(n); ok {
			return known.(*sized), nil
		}
	}
	location, dispersion, err := j.standard.Bands(n)
	if err != nil {
		return nil, fmt.Errorf("%w: %w", ErrSubgroup, err)
	}
	se := location.Above * j.perSigma
	made := &sized{
		location:      newScale(location),
		hasDispersion: dispersion.Exists(),
		variance:      float64(se * se),
	}
	if made.hasDispersion {
		made.dispersion = newScale(dispersion)
	}
	// Two folds that meet a size at once make the same, so the last may win.
	if small {
		j.sizes[n].Store(made)
	} else {
		j.larger.Store(n, made)
	}
	return made, nil
}

func newScale(b limits.Band) scale {
	return scale{band: b, per: [2]float64{1 / b.Above, 1 / b.Below}}
}

// Step judges the next subgroup and moves the memory on. It costs the same
// however many came before, and allocates nothing, the first call for each size
// of subgroup excepted.
//
// A subgroup of one on a chart of means or medians, and the first individual after
// a boundary, have no dispersion point: that chart's windows skip them.
func (j *Judge) Step(m *Memory, s Subgroup) (out Judged) {
	j.StepInto(m, s, &out)
	return out
}

// StepInto is Step for long replays: it overwrites all of out, which saves a copy
// of the answer.
func (j *Judge) StepInto(m *Memory, s Subgroup, out *Judged) {
	var b *sized
	if s.N >= 0 && s.N <= usual {
		b = j.sizes[s.N].Load()
	}
	if b == nil {
		var err error
		if b, err = j.size(s.N); err != nil {
			*out = Judged{Err: err}
			return
		}
	}
	// The conversions, here and below, forbid fused multiply-add, so that every
	// processor gets the same bits.
	x := float64((s.Mean - j.standard.Center) * j.perSigma)
	var value float64
	has := b.hasDispersion
	switch j.spread {
	case spreadRange:
		value = s.Range
	case spreadSD:
		value = s.SD
	case spreadMoving:
		value, has = math.Abs(s.Mean-m.previous), m.individual
	}
	var y float64
	if has {
		y = float64(value * j.perSigma)
	}
	if !(math.Abs(x) <= furthest && y >= 0 && y <= furthest) {
		*out = Judged{Err: j.refuse(s)}
		return
	}
	out.Err = nil
	m.Points++
	if j.spread == spreadMoving {
		m.previous, m.individual = s.Mean+0, true // a negative zero becomes a zero
	}

	z := b.location.plot(&out.Location, s.Mean)
	out.Location.Fired = j.location.Step(&m.Location, Point{Z: z, X: x})
	if out.HasDispersion = has; has {
		z := b.dispersion.plot(&out.Dispersion, value)
		out.Dispersion.Fired = j.dispersion.Step(&m.Dispersion, Point{Z: z, X: y})
	} else {
		out.Dispersion = Plotted{}
	}
	if j.hasEWMA {
		half, side := j.ewma.Step(&m.EWMA, x, b.variance)
		center, sigma := j.standard.Center, j.standard.Sigma
		half = float64(half * sigma)
		out.EWMA = Average{
			Value: center + float64(m.EWMA.Deviation*sigma),
			Lower: center - half, Upper: center + half, Out: side,
		}
	} else {
		out.EWMA = Average{}
	}
	if j.hasCUSUM {
		side := j.cusum.Step(&m.CUSUM, z)
		out.CUSUM = Sums{High: m.CUSUM.High, Low: m.CUSUM.Low, Out: side}
	} else {
		out.CUSUM = Sums{}
	}
}

// plot places a value on its chart and returns its z.
func (s *scale) plot(p *Plotted, value float64) float64 {
	d := value - s.band.Center
	z := float64(d * s.per[math.Float64bits(d)>>63])
	// The band goes over field by field: as a whole it goes in overlapping moves,
	// which stall (16 instead of 9 ns a subgroup without rules).
	p.Value, p.Z = value, z
	p.Band.Center, p.Band.Lower, p.Band.Upper = s.band.Center, s.band.Lower, s.band.Upper
	p.Band.Below, p.Band.Above = s.band.Below, s.band.Above
	return z
}

// refuse says what is wrong with the numbers of a subgroup.
func (j *Judge) refuse(s Subgroup) error {
	x := (s.Mean - j.standard.Center) * j.perSigma
	switch {
	case math.IsNaN(s.Mean) || math.IsInf(s.Mean, 0):
		return fmt.Errorf("%w: the mean must be a finite number, got %v", ErrSubgroup, s.Mean)
	case math.Abs(x) > furthest:
		return fmt.Errorf("%w: the mean %v is too far from the centre to be a reading", ErrSubgroup, s.Mean)
	case j.spread == spreadMoving:
		return fmt.Errorf("%w: the step to %v is too large to be a moving range", ErrSubgroup, s.Mean)
	case j.spread == spreadSD:
		return fmt.Errorf("%w: the standard deviation must be a finite number from 0, got %v", ErrSubgroup, s.SD)
	}
	return fmt.Errorf("%w: the range must be a finite number from 0, got %v", ErrSubgroup, s.Range)
}
