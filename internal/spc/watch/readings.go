package watch

import (
	"fmt"
	"math"

	"holdfast/internal/spc/limits"
)

// ShortRun is a chart of readings that the parts of a family share: what is plotted
// is the deviation from the target of the part being made, or, Standardised, that
// over the part's own sigma, the spread likewise. Target and, for the latter, Sigma
// come with each subgroup. The Standard is that of the deviations; of standardised
// ones limits.StandardisedUnit as a rule.
//
// Source: Montgomery, Introduction to Statistical Quality Control, section 10.1.
type ShortRun struct {
	limits.Standard
	Standardised bool
}

func (r ShortRun) prepare(j *Judge) (limits.Standard, error) {
	j.family, j.standardised = ofShortRuns, r.Standardised
	return r.Standard, r.Standard.Check()
}

func (j *Judge) stepShortRun(m *Memory, s *Subgroup, out *Judged) {
	from := limits.Subgroup{N: s.N, Location: s.Mean}
	switch j.plain.spread { // the other measure is not looked at
	case spreadRange:
		from.Range = s.Range
	case spreadSD:
		from.SD = s.SD
	}
	var err error
	if j.standardised {
		from, err = from.Standardised(s.Target, s.Sigma)
	} else {
		from, err = from.Deviation(s.Target)
	}
	if err != nil {
		out.Err = cannot(err)
		return
	}
	j.plain.StepInto(m, &Subgroup{N: from.N, Mean: from.Location, Range: from.Range, SD: from.SD}, out)
}

// Trend is a chart of readings with tool wear: limits about a line over the wear that
// comes with each subgroup. The rules, the EWMA and the CUSUM judge the deviation from
// the line, and moving ranges are those of the deviations. A wear below that of the
// subgroup before is a new tool, and with it the whole memory starts afresh.
type Trend struct{ limits.TrendStandard }

func (t Trend) prepare(j *Judge) (limits.Standard, error) {
	j.family, j.trend = ofTrend, t.TrendStandard
	_, _, err := t.Bands(0, 1)
	return limits.Standard{Chart: t.Chart, Sigma: t.Sigma, Multiple: t.Multiple}, err
}

func (j *Judge) stepTrend(m *Memory, s *Subgroup, out *Judged) {
	if err := limits.CheckWear(s.Wear); err != nil {
		out.Err = cannot(err)
		return
	}
	line := j.trend.Line(s.Wear)
	about := Subgroup{N: s.N, Mean: s.Mean - line, Range: s.Range, SD: s.SD}
	if s.Wear < m.wear {
		old := *m
		*m = Memory{}
		if j.plain.StepInto(m, &about, out); out.Err != nil {
			*m = old
		}
	} else {
		j.plain.StepInto(m, &about, out)
	}
	if out.Err != nil {
		return
	}
	m.wear = s.Wear + 0 // a negative zero becomes a zero
	p := &out.Location
	p.Value = s.Mean
	p.Band.Center, p.Band.Lower, p.Band.Upper = line, line+p.Band.Lower, line+p.Band.Upper
	if j.plain.hasEWMA {
		out.EWMA.Value, out.EWMA.Lower, out.EWMA.Upper = line+out.EWMA.Value, line+out.EWMA.Lower, line+out.EWMA.Upper
	}
}

// ThreeWay is a chart of batches: their means as individuals, the moving range of the
// means, and the spread within. A batch of one reading has no point on the third.
type ThreeWay struct{ limits.ThreeWayStandard }

func (t ThreeWay) prepare(j *Judge) (limits.Standard, error) {
	if t.Means.Chart != limits.Individuals {
		return limits.Standard{}, fmt.Errorf("chart: batch means are charted as individuals, not on %q", t.Means.Chart)
	}
	if t.Within.Chart != limits.XBarR && t.Within.Chart != limits.XBarS {
		return limits.Standard{}, fmt.Errorf("chart: the spread within is charted by range or standard deviation, not on %q", t.Within.Chart)
	}
	j.family = ofBatches
	return t.Means, j.within.set(t.Within)
}

func (j *Judge) stepBatch(m *Memory, s *Subgroup, out *Judged) {
	b, err := j.within.of(s.N)
	if err != nil {
		out.Err = err
		return
	}
	name, value := "range", s.Range
	if j.within.spread == spreadSD {
		name, value = "standard deviation", s.SD
	}
	y := float64(value * j.within.perSigma)
	if b.hasDispersion && !(y >= 0 && y <= furthest) {
		out.Err = refuseSpread(name, value)
		return
	}
	if j.plain.StepInto(m, &Subgroup{N: 1, Mean: s.Mean}, out); out.Err != nil || !b.hasDispersion {
		return
	}
	out.HasThird = true
	z := b.dispersion.plot(&out.Third, value)
	out.Third.Fired = j.third.Step(&m.Third, Point{Z: z, X: y})
}

// MaxStreams is the largest number of streams on one group chart.
const MaxStreams = 64

// Group is a chart of several streams, such as the spindles of a machine, that share
// one Standard: in each round the highest and the lowest location are plotted, and the
// widest spread (on individuals there is none, since it would take a moving range a
// stream). All streams of a round have the same number of readings.
//
// LocationRules judge the highest and the lowest each by itself. As extremes of
// several they are beyond zones more often than one stream is, and runs of theirs mean
// nothing: beyond alone is the rule for them. Run is how often in a row the same stream
// must be alone at the extreme to signal, 2 to MaxWindow, 0 for never; limits.RunFor
// gives the length for a chance.
//
// Source: Burr, Statistical Quality Control Methods (1976), chapter 9; Nelson,
// Journal of Quality Technology 18 (1986), 255-256.
type Group struct {
	limits.Standard
	Streams int
	Run     int
}

func (g Group) prepare(j *Judge) (limits.Standard, error) {
	if g.Streams < 2 || g.Streams > MaxStreams {
		return limits.Standard{}, fmt.Errorf("streams: a group chart takes 2 to %d of them, got %d", MaxStreams, g.Streams)
	}
	if g.Run != 0 && (g.Run < 2 || g.Run > MaxWindow) {
		return limits.Standard{}, fmt.Errorf("run: the same stream must be extreme 2 to %d times in a row, got %d", MaxWindow, g.Run)
	}
	j.family, j.group = ofStreams, g
	return limits.Standard{}, j.sizes.set(g.Standard)
}

func (j *Judge) stepStreams(m *Memory, s *Subgroup, out *Judged) {
	if out.Err = j.checkStreams(s.Streams); out.Err != nil {
		return
	}
	e, err := limits.FindExtremes(j.standard.Chart, s.Streams, Tie*j.standard.Sigma)
	if err != nil {
		out.Err = cannot(err)
		return
	}
	b, err := j.sizes.of(s.Streams[0].N)
	if err != nil {
		out.Err = err
		return
	}
	highest, lowest := s.Streams[e.Highest].Location, s.Streams[e.Lowest].Location
	xHigh, xLow := float64((highest-j.standard.Center)*j.perSigma), float64((lowest-j.standard.Center)*j.perSigma)
	widest, has := j.standard.Chart.DispersionPoint(nil, s.Streams[e.Widest])
	y := float64(widest * j.perSigma)
	if math.Abs(xHigh) > furthest || math.Abs(xLow) > furthest || y > furthest {
		out.Err = fmt.Errorf("%w: a stream is too far from the centre to be a reading: %v to %v, spread %v", ErrSubgroup, lowest, highest, widest)
		return
	}

	m.Points++
	z := b.location.plot(&out.Location, highest)
	out.Location.Fired = j.location.Step(&m.Location, Point{Z: z, X: xHigh})
	out.HasThird = true
	z = b.location.plot(&out.Third, lowest)
	out.Third.Fired = j.location.Step(&m.Third, Point{Z: z, X: xLow})
	if has {
		out.HasDispersion = true
		z = b.dispersion.plot(&out.Dispersion, widest)
		out.Dispersion.Fired = j.dispersion.Step(&m.Dispersion, Point{Z: z, X: y})
	}
	out.Streams = Extremes{Highest: uint8(e.Highest), Lowest: uint8(e.Lowest), Widest: uint8(e.Widest)}
	if j.group.Run > 0 {
		high := j.inARow(&m.highest, e.Highest, e.HighestTied)
		low := j.inARow(&m.lowest, e.Lowest, e.LowestTied)
		out.Streams.Run = sides(high, low)
	}
}

// inARow counts one more round. What is remembered stops one short of the run, where
// the next round of the same stream signals and more would make no difference.
func (j *Judge) inARow(r *limits.StreamRun, stream int, tied bool) bool {
	full := r.Step(stream, tied) >= j.group.Run
	r.Length = min(r.Length, j.group.Run-1)
	return full
}

func (j *Judge) checkStreams(streams []limits.Subgroup) error {
	if len(streams) != j.group.Streams {
		return fmt.Errorf("%w: the chart has %d streams, the round %d", ErrSubgroup, j.group.Streams, len(streams))
	}
	for i := range streams {
		if streams[i].N != streams[0].N {
			return fmt.Errorf("%w: all streams of a round need the same number of readings, stream %d has %d and the first %d",
				ErrSubgroup, i+1, streams[i].N, streams[0].N)
		}
	}
	return nil
}
