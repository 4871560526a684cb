package plant

import (
	"errors"
	"math"
	"sort"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/spc/adjust"
)

// AdjustmentAudit is what the adjustments of a stretch did to one characteristic: each
// of them, the sums, and the series as it would have been without the unprompted ones.
// Gains are in the square of the characteristic's unit.
type AdjustmentAudit struct {
	Points  []Point   // those that are counted: in the unit that is in use now
	Aims    []float64 // the target of each, or what stands in for it
	OnAim   bool      // every aim is a target of the set-up
	Carried []float64 // unprompted adjustments in force at each point
	Items   []AuditedAdjustment

	Prompted, Unprompted AdjustmentSum

	Computed       bool    // false: there are too few points, or they do not vary
	Ratio          float64 // mean square deviation over what it would have been without
	Low, High      float64 // with 95 % confidence; High may be +Inf
	Lag1           float64 // of the deviations as they were
	Swings         bool    // neighbours swing against one another beyond chance
	HasPpk         bool
	Ppk, PpkStayed float64 // as it was, and as it would have been
	Conclusion     AuditConclusion
	ZeroPoints     []int // points before which the setting was made afresh
}

// AuditedAdjustment is one adjustment with what it gained.
type AuditedAdjustment struct {
	Change   Change
	Effect   Decimal // on this characteristic
	Before   int     // the first point made with it
	Governed int     // points up to the next one
	Gain     float64 // by how much the mean square deviation of those is smaller than without
}

// Total is the gain over all points that it governs.
func (a AuditedAdjustment) Total() float64 { return a.Gain * float64(a.Governed) }

// AdjustmentSum is what a sort of adjustments gained together.
type AdjustmentSum struct {
	Count  int
	Total  float64
	Within adjust.Interval
}

// Claims says in which direction the sum lies beyond doubt: 1 a gain, -1 a loss, 0 neither.
func (s AdjustmentSum) Claims() int {
	switch {
	case !s.Within.Known:
		return 0
	case s.Within.Low > 0:
		return 1
	case s.Within.High < 0:
		return -1
	}
	return 0
}

// AuditConclusion is what the unprompted adjustments of a stretch come to.
type AuditConclusion string

const (
	NothingAdjusted AuditConclusion = "none"
	AllPrompted     AuditConclusion = "prompted"
	TooLittle       AuditConclusion = "too-little"
	DidHarm         AuditConclusion = "harm"
	DidHelp         AuditConclusion = "help"
	Undecided       AuditConclusion = "undecided"
)

// auditSeed makes the same stretch have the same intervals every time.
const auditSeed = 1

// AuditAdjustments audits the adjustments of the stretch that h holds. Deviations are
// from the target of each subgroup's own set-up; where there is none, from the centre of
// the limits in force, else from the mean of the stretch.
func (h History) AuditAdjustments() (AdjustmentAudit, error) {
	a := AdjustmentAudit{OnAim: true}
	unit := h.State.Setup.Unit
	for _, p := range h.Points {
		if s, ok := h.Setups[p.Setup]; ok && s.Unit != unit {
			continue
		}
		a.Points = append(a.Points, p)
	}
	a.aim(h)
	var made []adjust.Adjustment
	for _, c := range h.Changes {
		size, ok := c.EffectOn(h.State.ID)
		if !ok || size.Units == 0 {
			continue
		}
		before := a.first(c.HappenedAt)
		a.Items = append(a.Items, AuditedAdjustment{Change: c, Effect: size, Before: before})
		made = append(made, adjust.Adjustment{Before: before, Size: size.Float(), Prompted: c.Prompted})
		if c.Prompted {
			a.Prompted.Count++
		} else {
			a.Unprompted.Count++
		}
	}
	a.ZeroPoints = a.zeroPoints(h)
	a.Carried = make([]float64, len(a.Points))
	deviations := make([]float64, len(a.Points))
	for i, p := range a.Points {
		deviations[i] = p.Stats.Mean() - a.Aims[i]
	}
	review, err := adjust.Review(deviations, 0, made, a.ZeroPoints, auditSeed)
	if err != nil {
		if !errors.Is(err, adjust.ErrInput) {
			return a, err
		}
		a.conclude()
		return a, nil
	}
	a.Computed, a.Carried = true, review.Carried
	noise := tiniest(deviations)
	for j := range a.Items {
		a.Items[j].Gain, a.Items[j].Governed = review.Gains[j], review.Governed[j]
		if math.Abs(a.Items[j].Gain) < noise {
			a.Items[j].Gain = 0
		}
	}
	a.Prompted.Total, a.Prompted.Within = review.Prompted, review.PromptedWithin
	a.Unprompted.Total, a.Unprompted.Within = review.Unprompted, review.UnpromptedWithin
	a.Ratio, a.Low, a.High, a.Lag1 = review.Ratio, review.Low, review.High, review.Lag1
	a.Swings = a.Lag1 < -1.96/math.Sqrt(float64(len(a.Points)))
	a.capability(h)
	a.conclude()
	return a, nil
}

// tiniest is the square below which a difference is rounding and nothing else.
func tiniest(deviations []float64) float64 {
	var top float64
	for _, d := range deviations {
		top = math.Max(top, d*d)
	}
	return 1e-10 * top
}

// first is the index of the first point taken at or after t.
func (a *AdjustmentAudit) first(t time.Time) int {
	return sort.Search(len(a.Points), func(i int) bool { return !a.Points[i].TakenAt.Before(t) })
}

func (a *AdjustmentAudit) aim(h History) {
	var mean float64
	for i, p := range a.Points {
		mean += (p.Stats.Mean() - mean) / float64(i+1)
	}
	a.Aims = make([]float64, len(a.Points))
	for i, p := range a.Points {
		s, ok := h.Setups[p.Setup]
		if ok && s.Target != nil {
			a.Aims[i] = s.Target.Float()
			continue
		}
		a.OnAim = false
		if r, ok := h.Revisions[h.Course.At(p.TakenAt).Revision]; ok {
			a.Aims[i] = r.Center
		} else {
			a.Aims[i] = mean
		}
	}
}

// zeroPoints are where the setting was made afresh: a changeover, another set-up, a new
// tool, a setting. The restart mark of a matter is none: cleaning a nozzle does not turn
// the screw back, and what people have turned stays in force behind it. To start afresh
// there would take the process for well set at whatever moment the matter was closed.
func (a *AdjustmentAudit) zeroPoints(h History) []int {
	var out []int
	for _, b := range h.Course.Boundaries {
		if b.Kind == ByChangeover || b.Kind == BySetup {
			out = append(out, a.first(b.At))
		}
	}
	for _, c := range h.Changes {
		if c.Kind == ToolChanged || c.Kind == Setting {
			out = append(out, a.first(c.HappenedAt))
		}
	}
	return out
}

// capability is computed where all points were taken under one specification.
func (a *AdjustmentAudit) capability(h History) {
	lower, upper := math.Inf(-1), math.Inf(1)
	s := h.State.Setup
	if s.Lower != nil {
		lower = s.Lower.Float()
	}
	if s.Upper != nil {
		upper = s.Upper.Float()
	}
	stretch := adjust.Stretch{}
	for _, p := range a.Points {
		if old, ok := h.Setups[p.Setup]; ok && !sameSpecification(old, s) {
			return
		}
		stretch.Means = append(stretch.Means, p.Stats.Mean())
		stretch.Variances = append(stretch.Variances, p.Stats.SD*p.Stats.SD)
		stretch.Sizes = append(stretch.Sizes, p.Stats.N)
	}
	var err error
	a.Ppk, a.PpkStayed, err = adjust.Ppk(stretch, a.Carried, lower, upper)
	a.HasPpk = err == nil
}

func sameSpecification(a, b Setup) bool {
	same := func(x, y *Decimal) bool { return x == nil && y == nil || x != nil && y != nil && x.Compare(*y) == 0 }
	return same(a.Lower, b.Lower) && same(a.Upper, b.Upper)
}

func (a *AdjustmentAudit) conclude() {
	switch {
	case len(a.Items) == 0:
		a.Conclusion = NothingAdjusted
	case a.Unprompted.Count == 0:
		a.Conclusion = AllPrompted
	case !a.Computed || math.IsInf(a.High, 1):
		a.Conclusion = TooLittle
	case a.Low > 1:
		a.Conclusion = DidHarm
	case a.High < 1:
		a.Conclusion = DidHelp
	default:
		a.Conclusion = Undecided
	}
}

// Further counts the unprompted adjustments that govern anything, and those after which
// the rounds lay further from target than they would have.
func (a AdjustmentAudit) Further() (further, of int) {
	for _, i := range a.Items {
		if i.Change.Prompted || i.Governed == 0 {
			continue
		}
		of++
		if i.Gain < 0 {
			further++
		}
	}
	return further, of
}

// Spell is a run of adjustments of one characteristic without a long pause between them.
type Spell struct {
	From, To             time.Time
	Prompted, Unprompted int
}

// SpellPause is how long a pause ends a spell.
const SpellPause = 3 * 24 * time.Hour

// AdjustmentDay is how often one characteristic was adjusted on one day.
type AdjustmentDay struct {
	First, Last          time.Time
	Prompted, Unprompted int
}

// Spells joins days into spells, newest first. Days come oldest first.
func Spells(days []AdjustmentDay) []Spell {
	var out []Spell
	for _, d := range days {
		if n := len(out); n > 0 && d.First.Sub(out[n-1].To) <= SpellPause {
			s := &out[n-1]
			s.To, s.Prompted, s.Unprompted = d.Last, s.Prompted+d.Prompted, s.Unprompted+d.Unprompted
			continue
		}
		out = append(out, Spell{From: d.First, To: d.Last, Prompted: d.Prompted, Unprompted: d.Unprompted})
	}
	for i, j := 0, len(out)-1; i < j; i, j = i+1, j-1 {
		out[i], out[j] = out[j], out[i]
	}
	return out
}

// changesOn lists the adjustments that move a characteristic, in their order.
func (h History) changesOn(characteristic uuid.UUID) []Change {
	var out []Change
	for _, c := range h.Changes {
		if _, ok := c.EffectOn(characteristic); ok {
			out = append(out, c)
		}
	}
	return out
}
