package watch

import (
	"errors"
	"fmt"
	"math"

	"holdfast/internal/spc/limits"
)

// Standard is what one revision of a characteristic is judged by: its limits, the
// run rules of its charts, and an EWMA or a CUSUM of the location where asked for.
type Standard struct {
	// Standard gives the limits of a plain chart of readings. With a Model it is
	// zero: the model brings its own.
	limits.Standard
	// Model is what the other kinds of chart need; nil for plain charts of readings.
	Model Model

	LocationRules   []Rule // on a group chart for the highest and for the lowest stream
	DispersionRules []Rule
	ThirdRules      []Rule // three-way chart: the spread within

	// They accumulate the location of charts of readings, short runs and trends, and
	// the batch means of a three-way chart; the other charts have none.
	EWMA  *EWMA  // nil for none
	CUSUM *CUSUM // nil for none
}

// Model is a kind of chart beyond the plain ones of readings: ShortRun, Trend,
// ThreeWay, Group, Counts, Rare or TSquared.
type Model interface {
	// prepare checks the model and lays it out in the Judge. What it returns, if it is
	// not zero, is the plain chart of readings that the model's subgroups become.
	prepare(j *Judge) (limits.Standard, error)
}

// furthest is the distance from the centre, in sigmas, beyond which a number is
// refused: it is no reading, and sums of such numbers would overflow.
const furthest = 1e15

// spread is the statistic of the dispersion chart.
type spread uint8

const (
	spreadRange spread = iota + 1
	spreadSD
	spreadMoving
)

var spreads = map[string]spread{"range": spreadRange, "sd": spreadSD, "moving-range": spreadMoving}

// family tells the models apart at every step; an interface call would make each
// subgroup escape to the heap.
type family uint8

const (
	ofReadings family = iota
	ofShortRuns
	ofTrend
	ofBatches
	ofStreams
	ofCounts
	ofRare
	ofTSquared
)

// Judge judges the subgroups of one revision. It is safe for concurrent use by
// many folds, each with its own Memory.
type Judge struct {
	family                      family
	hasEWMA, hasCUSUM           bool
	sizes                              // of readings or of the streams
	plain                       *Judge // of what short runs, trends and batches become
	location, dispersion, third *Rules
	ewma                        EWMA
	cusum                       CUSUM
	within                      sizes // of the spread within batches
	standardised                bool
	trend                       limits.TrendStandard
	group                       Group
	counts                      countScales
	rare                        Rare
	single                      scale   // of rare events and of T-squared
	perX                        float64 // one over the sigma in which neighbours are compared there, and on charts of counts
	tSquared                    limits.TSquaredStandard
}

// NewJudge checks a standard and prepares it. It refuses what packages limits
// refuses, rules that do not validate, more than MaxRules a chart, and rules for a
// chart that the standard does not have.
func NewJudge(s Standard) (*Judge, error) {
	j := &Judge{}
	var plain limits.Standard
	var err error
	switch {
	case s.Model == nil:
		err = j.sizes.set(s.Standard)
	case s.Standard != (limits.Standard{}):
		err = errors.New("model: it brings its own limits, so the standard beside it must be empty")
	default:
		plain, err = s.Model.prepare(j)
	}
	if err != nil {
		return nil, err
	}
	if plain != (limits.Standard{}) {
		if j.plain, err = NewJudge(Standard{
			Standard: plain, LocationRules: s.LocationRules, DispersionRules: s.DispersionRules, EWMA: s.EWMA, CUSUM: s.CUSUM,
		}); err != nil {
			return nil, err
		}
	}
	for _, chart := range []struct {
		name  string
		rules []Rule
		to    **Rules
		there bool
	}{
		{"location", s.LocationRules, &j.location, true},
		{"dispersion", s.DispersionRules, &j.dispersion, j.hasSpread()},
		{"third", s.ThirdRules, &j.third, j.family == ofBatches},
	} {
		if *chart.to, err = Compile(chart.rules); err != nil {
			return nil, fmt.Errorf("%s chart: %w", chart.name, err)
		}
		if len(chart.rules) > 0 && !chart.there {
			return nil, fmt.Errorf("%s chart: there is none, so it takes no rules", chart.name)
		}
	}
	if (s.EWMA != nil || s.CUSUM != nil) && j.family > ofBatches {
		return nil, errors.New("EWMA, CUSUM: they accumulate charts of readings only")
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
	return j, nil
}

// hasSpread reports whether the standard has a dispersion chart.
func (j *Judge) hasSpread() bool {
	return j.family < ofStreams || j.family == ofStreams && j.spread != spreadMoving
}

// LocationRules, DispersionRules and ThirdRules are the compiled rules of the three
// charts, in the order of Fired.
func (j *Judge) LocationRules() *Rules   { return j.location }
func (j *Judge) DispersionRules() *Rules { return j.dispersion }
func (j *Judge) ThirdRules() *Rules {
	if j.family == ofStreams {
		return j.location
	}
	return j.third
}

// Step judges the next subgroup and moves the memory on. It costs the same
// however many came before, and allocates nothing, the first call for each size
// of subgroup excepted.
//
// A subgroup of one on a chart of means or medians, and the first individual after
// a boundary, have no dispersion point: that chart's windows skip them.
func (j *Judge) Step(m *Memory, s Subgroup) (out Judged) {
	j.StepInto(m, &s, &out)
	return out
}

// StepInto is Step for long replays: it overwrites all of out, which saves copies of
// question and answer. Out is a zero Judged or one that a Step has filled.
func (j *Judge) StepInto(m *Memory, s *Subgroup, out *Judged) {
	if j.family != ofReadings || out.HasThird {
		j.stepOther(m, s, out)
		return
	}
	var b *sized
	if uint(s.N) <= usual {
		b = j.small[uint(s.N)].Load()
	}
	if b == nil {
		var err error
		if b, err = j.sizes.of(s.N); err != nil {
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

// stepOther judges by a model, or over an answer that a model has left.
func (j *Judge) stepOther(m *Memory, s *Subgroup, out *Judged) {
	*out = Judged{}
	switch j.family {
	case ofReadings:
		j.StepInto(m, s, out)
	case ofShortRuns:
		j.stepShortRun(m, s, out)
	case ofTrend:
		j.stepTrend(m, s, out)
	case ofBatches:
		j.stepBatch(m, s, out)
	case ofStreams:
		j.stepStreams(m, s, out)
	case ofCounts:
		j.stepCount(m, s, out)
	case ofRare:
		j.stepRare(m, s, out)
	case ofTSquared:
		j.stepTSquared(m, s, out)
	}
}

// refuse says what is wrong with the numbers of a subgroup.
func (j *Judge) refuse(s *Subgroup) error {
	mean, x := s.Mean, (s.Mean-j.standard.Center)*j.perSigma
	switch {
	case math.IsNaN(mean) || math.IsInf(mean, 0):
		return fmt.Errorf("%w: the mean must be a finite number, got %v", ErrSubgroup, mean)
	case math.Abs(x) > furthest:
		return fmt.Errorf("%w: the mean %v is too far from the centre to be a reading", ErrSubgroup, mean)
	case j.spread == spreadMoving:
		return fmt.Errorf("%w: the step to %v is too large to be a moving range", ErrSubgroup, mean)
	case j.spread == spreadSD:
		return refuseSpread("standard deviation", s.SD)
	}
	return refuseSpread("range", s.Range)
}

func refuseSpread(name string, got float64) error {
	return fmt.Errorf("%w: the %s must be a finite number from 0, got %v", ErrSubgroup, name, got)
}

// cannot marks an error of package limits as one about the subgroup.
func cannot(err error) error { return fmt.Errorf("%w: %w", ErrSubgroup, err) }
