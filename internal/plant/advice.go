package plant

import (
	"math"
	"time"

	"holdfast/internal/spc/adjust"
	"holdfast/internal/spc/dist"
)

// AdviceKind is what the numbers say about adjusting a characteristic now.
type AdviceKind string

const (
	AdviseLearning  AdviceKind = "learning"  // no limits: nobody can tell a change from the usual
	AdviseLeave     AdviceKind = "leave"     // no matter is open: leave it alone
	AdviseFresh     AdviceKind = "fresh"     // nothing is open, and no round was taken since judging began afresh
	AdviseOffTarget AdviceKind = "set-off"   // steady, yet set off target: for engineering, not for one round
	AdviseElsewhere AdviceKind = "elsewhere" // what is open is not about the level
	AdviseGauge     AdviceKind = "gauge"     // the gauge failed its check: the numbers do not say where the level is
	AdviseRound     AdviceKind = "round"     // take another round first
	AdviseTurn      AdviceKind = "turn"      // adjust by so much
	AdviseNone      AdviceKind = "none"      // the evidence allows no adjustment
	AdviseSetUp     AdviceKind = "set-up"    // a machine that was just set up: the next try
	AdviseSettled   AdviceKind = "settled"   // just set up, and near enough
)

// Advice is what the numbers of one characteristic say about adjusting it now. Figures
// are in its unit.
type Advice struct {
	Kind AdviceKind

	Aim      float64 // the target, or the centre of the limits where there is none
	IsTarget bool

	// The offset from the aim that rests on so many rounds, with its 95 % interval; what
	// to do about it, a multiple of the step; and the same on the scale of the knob.
	Rounds            int
	Offset, Low, High float64
	Adjust            float64
	Turn              Decimal
	OffCentre         float64 // of steady rounds: how far from the centre of the limits, 0 within chance

	// With nothing open: the last round, and how often a steady machine is as far off.
	HasLast   bool
	Deviation float64
	Chance    float64
	// Correcting the last round by its whole deviation, rounded to the step, would leave
	// the next ones so far off on average, instead of so far.
	Correction, LeftAt, MovedTo float64
	// The newest rounds as they would have been left alone, the same corrected after each,
	// and three standard deviations of both.
	Left, Corrected             []float64
	LeftSpread, CorrectedSpread float64
	Further, Unprompted         int // of so many unprompted adjustments so many made it worse

	// Setting up: after what, and which try comes next.
	SetUpBy ChangeKind
	SetUpAt time.Time
	Try     int
}

const (
	// adviceWindow is how many of the newest subgroups advice looks at.
	adviceWindow = 300
	// shownRounds are drawn left alone and corrected, fewestShown are too few to draw.
	shownRounds, fewestShown = 40, 12
	// steadyRounds are enough to say that a steady process is set off target.
	steadyRounds = 20
	// beyondChance is from how many standard errors on the level of steady rounds is not
	// taken for that of the limits.
	beyondChance = 2
	// mostTries is how many rounds after setting up still count as tries.
	mostTries = 5
)

// AdviceStretch is the stretch of history that Advise works on.
func AdviceStretch() Stretch { return Stretch{Last: adviceWindow} }

// Advise says what the numbers of h say about adjusting its characteristic now, with a
// knob that moves it, or directly in steps of the last decimal without one.
func (h History) Advise(k *Knob) (Advice, error) {
	c := h.State
	a := Advice{}
	if c.Setup.Target != nil {
		a.Aim, a.IsTarget = c.Setup.Target.Float(), true
	} else if c.Revision != nil {
		a.Aim = c.Revision.Center
	}
	s := scaleOf(c, k)
	switch {
	case c.Gauge != nil && c.Gauge.Failed() || c.Matter != nil && c.Matter.OnlyGauge():
		a.Kind = AdviseGauge
		return a, nil
	case c.Matter != nil:
		return a, a.forMatter(h, s)
	case c.Revision == nil:
		a.Kind = AdviseLearning
	default:
		a.Kind = AdviseLeave
		if err := a.forNothingOpen(h, s); err != nil {
			return a, err
		}
	}
	return a, a.forSetUp(h, s)
}

// scale turns an adjustment of the characteristic into a turn of what moves it.
type scale struct {
	step float64 // in the unit of the characteristic, above zero
	gain float64 // of one unit of the knob, 1 without one
	unit Decimal // the step on the scale of the knob
}

func scaleOf(c CharacteristicState, k *Knob) scale {
	s := scale{gain: 1, unit: Decimal{Units: 1, Decimals: c.Setup.Decimals}}
	if k != nil {
		if g, ok := k.GainOn(c.ID); ok {
			s.gain, s.unit = g.Float(), k.Step
		}
	}
	s.step = math.Abs(s.gain) * s.unit.Float()
	return s
}

// turn is the exact turn for an adjustment that is a multiple of the step.
func (s scale) turn(adjust float64) Decimal {
	steps := int64(math.Round(adjust / (s.gain * s.unit.Float())))
	return Decimal{Units: steps * s.unit.Units, Decimals: s.unit.Decimals}
}

func (s scale) round(v float64) float64 {
	n := math.Floor(math.Abs(v)/s.step*(1+1e-9) + 0.5)
	return math.Copysign(n*s.step, v) + 0 // never minus zero
}

// forMatter advises with a matter open: from the rounds taken after the signal, and
// after the last adjustment since.
func (a *Advice) forMatter(h History, s scale) error {
	signal, ok := h.State.Matter.locationSince()
	if !ok || h.State.Revision == nil {
		a.Kind = AdviseElsewhere
		return nil
	}
	from := signal
	for _, c := range h.changesOn(h.State.ID) {
		if c.HappenedAt.After(from) {
			from = c.HappenedAt
		}
	}
	var after []Point
	for _, p := range h.Points {
		if p.TakenAt.After(from) {
			after = append(after, p)
		}
	}
	a.Kind = AdviseRound
	if len(after) == 0 {
		return nil
	}
	if err := a.offset(after, h.State.Revision.Sigma, s); err != nil {
		return err
	}
	a.Kind = AdviseNone
	if a.Adjust != 0 {
		a.Kind = AdviseTurn
	}
	return nil
}

// locationSince is when the first standing line about the level fired.
func (m Matter) locationSince() (at time.Time, ok bool) {
	for _, l := range m.Lines {
		if l.Withdrawn || l.Panel != Location {
			continue
		}
		if !ok || l.First.Before(at) {
			at, ok = l.First, true
		}
	}
	return at, ok
}

// offset estimates how far from the aim rounds are, and what to do about it.
func (a *Advice) offset(points []Point, sigma float64, s scale) error {
	means, sizes := make([]float64, len(points)), make([]int, len(points))
	for i, p := range points {
		means[i], sizes[i] = p.Stats.Mean(), p.Stats.N
	}
	v, err := adjust.Advise(means, sizes, a.Aim, sigma, s.step)
	if err != nil {
		return err
	}
	a.Rounds, a.Offset, a.Low, a.High, a.Adjust, a.Turn = len(points), v.Offset, v.Low, v.High, v.Adjust, s.turn(v.Adjust)
	return nil
}

// forNothingOpen says what correcting the last round would be expected to do. Nothing
// points to a change from the level of the limits, unless enough rounds since the last
// adjustment say where a steady process is set.
func (a *Advice) forNothingOpen(h History, s scale) error {
	rev := h.State.Revision
	audit, err := h.AuditAdjustments()
	if err != nil {
		return err
	}
	a.Further, a.Unprompted = audit.Further()
	var steady []Point
	from := h.steadySince()
	for i, p := range audit.Points {
		if !p.TakenAt.Before(from) {
			a.Left = append(a.Left, p.Stats.Mean()-audit.Carried[i])
			steady = append(steady, p)
		}
	}
	a.compare()
	for _, c := range h.changesOn(h.State.ID) {
		for len(steady) > 0 && steady[0].TakenAt.Before(c.HappenedAt) {
			steady = steady[1:]
		}
	}
	level := rev.Center - a.Aim
	if len(steady) >= steadyRounds {
		if err := a.offset(steady, rev.Sigma, s); err != nil {
			return err
		}
		if level = a.Offset; a.Adjust != 0 {
			a.Kind = AdviseOffTarget
		}
		// The interval is 1.96 standard errors to either side.
		if off := a.Offset - (rev.Center - a.Aim); math.Abs(off) > beyondChance*(a.High-a.Low)/(2*1.96) {
			a.OffCentre = off
		}
	}
	n := len(h.Points)
	if n == 0 || h.Points[n-1].TakenAt.Before(from) {
		a.Kind = AdviseFresh
		return nil
	}
	last := h.Points[n-1]
	a.HasLast, a.Deviation = true, last.Stats.Mean()-a.Aim
	a.Correction = s.round(-a.Deviation)
	a.LeftAt, a.MovedTo = level, level+a.Correction
	a.Chance, err = asFarOff(a.Deviation, level, rev.Sigma/math.Sqrt(float64(last.Stats.N)))
	return err
}

// steadySince is the last boundary at which the process itself may have changed; a
// revision changes only what it is judged by.
func (h History) steadySince() time.Time {
	var from time.Time
	for _, b := range h.Course.Boundaries {
		if b.Kind != ByRevision && b.At.After(from) {
			from = b.At
		}
	}
	return from
}

// compare sets the newest rounds, as they would have been left alone, beside the same
// corrected after each.
func (a *Advice) compare() {
	if n := len(a.Left); n > shownRounds {
		a.Left = a.Left[n-shownRounds:]
	}
	if len(a.Left) < fewestShown {
		a.Left = nil
		return
	}
	a.Corrected = adjust.Compensated(a.Left, a.Aim)
	a.LeftSpread, a.CorrectedSpread = 3*spread(a.Left), 3*spread(a.Corrected)
	if !(a.LeftSpread > 0) {
		a.Left, a.Corrected = nil, nil
	}
}

// asFarOff is the chance that a mean about level, with this standard error, lies as far
// from zero as d on either side.
func asFarOff(d, level, se float64) (float64, error) {
	d = math.Abs(d)
	below, err := dist.NormalCDF((-d - level) / se)
	if err != nil {
		return 0, err
	}
	above, err := dist.NormalCDF(-(d - level) / se)
	return below + above, err
}

func spread(x []float64) float64 {
	var mean, ss float64
	for i, v := range x {
		d := v - mean
		mean += d / float64(i+1)
		ss += d * (v - mean)
	}
	return math.Sqrt(ss / float64(len(x)-1))
}

// forSetUp applies the harmonic rule while a machine is being set up: a target, at most
// mostTries rounds since a changeover, a tool or a setting, and an adjustment after each
// but the last. With limits in force only a round that is off beyond chance asks for it.
func (a *Advice) forSetUp(h History, s scale) error {
	if !a.IsTarget {
		return nil
	}
	by, at := h.setUp()
	if at.IsZero() {
		return nil
	}
	var tries []Point
	for _, p := range h.Points {
		if p.TakenAt.After(at) {
			tries = append(tries, p)
		}
	}
	if len(tries) == 0 || len(tries) > mostTries {
		return nil
	}
	for i := range tries {
		var until time.Time
		if i+1 < len(tries) {
			until = tries[i+1].TakenAt
		}
		if adjusted := h.adjustedBetween(tries[i].TakenAt, until); adjusted != (i+1 < len(tries)) {
			return nil
		}
	}
	means := make([]float64, len(tries))
	for i, p := range tries {
		means[i] = p.Stats.Mean()
	}
	if rev := h.State.Revision; rev != nil {
		now, err := adjust.Advise(means[len(means)-1:], []int{tries[len(tries)-1].Stats.N}, a.Aim, rev.Sigma, s.step)
		if err != nil {
			return err
		}
		if now.Adjust == 0 {
			return nil
		}
	}
	steps, err := adjust.Harmonic(means, a.Aim, 0)
	if err != nil {
		return err
	}
	a.SetUpBy, a.SetUpAt, a.Try, a.Rounds = by, at, len(tries), len(tries)
	a.HasLast, a.Deviation = true, means[len(means)-1]-a.Aim
	a.Adjust = s.round(steps[len(steps)-1])
	a.Turn = s.turn(a.Adjust)
	a.Kind = AdviseSetUp
	if a.Adjust == 0 {
		a.Kind = AdviseSettled
	}
	return nil
}

// setUp is what the machine was set up by last, and when.
func (h History) setUp() (by ChangeKind, at time.Time) {
	for _, c := range h.Changes {
		if (c.Kind == ToolChanged || c.Kind == Setting) && !c.HappenedAt.Before(at) {
			by, at = c.Kind, c.HappenedAt
		}
	}
	for _, b := range h.Course.Boundaries {
		if b.Kind == ByChangeover && b.At.After(at) {
			by, at = ChangedOver, b.At
		}
	}
	return by, at
}

// adjustedBetween reports whether the characteristic was adjusted after from, up to to;
// the zero time is no end.
func (h History) adjustedBetween(from, to time.Time) bool {
	for _, c := range h.changesOn(h.State.ID) {
		if c.HappenedAt.After(from) && (to.IsZero() || !c.HappenedAt.After(to)) {
			return true
		}
	}
	return false
}
