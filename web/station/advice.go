package station

import (
	"context"
	"math"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/chart"
	"holdfast/web/ui"
)

// Size of the drawing of what correcting after every round does.
const twinW, twinH = 774, 200

// turnable is an adjusting point that the tablet offers, as a link to choose it.
type turnable struct {
	Name, Href string
	Here       bool
}

// adviser is what the page of an adjustment is made of.
type adviser struct {
	f     ui.Format
	st    plant.StationState
	c     plant.CharacteristicState
	h     plant.History
	knobs []plant.Knob // that move the characteristic and are in use
	knob  *plant.Knob  // the chosen one; nil: something else
}

// adviser reads what the page of an adjustment needs. chosen is the number of an
// adjusting point, "none" for something else, or "" for the first there is.
func (s *Surface) adviser(ctx context.Context, f ui.Format, st plant.StationState, c plant.CharacteristicState, chosen string) (*adviser, error) {
	a := &adviser{f: f, st: st, c: c}
	all, err := s.store.Knobs(ctx, c.MachineID)
	if err != nil {
		return nil, err
	}
	for _, k := range all {
		if _, moves := k.GainOn(c.ID); moves && !k.Retired {
			a.knobs = append(a.knobs, k)
		}
	}
	for i, k := range a.knobs {
		if k.ID.String() == chosen || chosen == "" && i == 0 {
			a.knob = &a.knobs[i]
		}
	}
	a.h, err = s.store.History(ctx, c.ID, plant.AdviceStretch())
	a.h.State.Gauge = c.Gauge
	return a, err
}

// view is the page before anything is typed.
func (a *adviser) view() (adjustView, error) {
	f, w, s := a.f, a.f.Words, a.c.Setup
	v := adjustView{Action: path(a.st.ID, "change"), Token: uuid.Must(uuid.NewV7()).String(), Machine: a.c.MachineID.String(), ID: a.c.ID.String(),
		Name: a.c.Name, Unit: s.Unit, Decimals: s.Decimals, By: 1, Size: f.Units(1, s.Decimals),
		Up: w.T("station.larger"), Down: w.T("station.smaller"), Open: a.c.Matter != nil, Back: path(a.st.ID)}
	v.Steps = w.T("station.steps-of", f.Units(1, s.Decimals), s.Unit)
	if k := a.knob; k != nil {
		v.Knob, v.Unit, v.Decimals, v.By, v.Size = k.ID.String(), k.Unit, k.Step.Decimals, k.Step.Units, f.Decimal(k.Step)
		v.Steps = a.oneStep()
		v.Up, v.Down = w.T("adjusting.up"), w.T("adjusting.down")
		v.UpDoes, v.DownDoes = w.T("adjusting.makes-larger"), w.T("adjusting.makes-smaller")
		if g, _ := k.GainOn(a.c.ID); g.Units < 0 {
			v.UpDoes, v.DownDoes = v.DownDoes, v.UpDoes
		}
	}
	if len(a.knobs) > 0 {
		for _, k := range a.knobs {
			v.Turnables = append(v.Turnables, turnable{k.Name, a.address(k.ID.String()), a.knob != nil && a.knob.ID == k.ID})
		}
		v.Turnables = append(v.Turnables, turnable{w.T("adjusting.something-else"), a.address(noKnob), a.knob == nil})
	}
	if n := len(a.c.Points); n > 0 {
		last := a.c.Points[n-1]
		v.Last = w.T("station.last-was", f.Clock(last.TakenAt), f.Mean(last.Stats.Mean(), s))
		if s.Target != nil {
			v.Last = w.T("station.last-was-target", f.Clock(last.TakenAt), f.Mean(last.Stats.Mean(), s), f.Decimal(*s.Target))
		}
	}
	lo, hi := specAxis(s)
	v.Chart = (&chart.Verdict{ID: "adjust", Label: w.T("station.verdict-label", a.c.Name), W: adjustW, H: adjustH,
		Points: stationPoints(f, a.c.Points, s, a.c), After: eventsSince(a.c, a.c.Points), Limits: chartLimits(f, a.c.Revision, s), Lo: lo, Hi: hi, Words: chartWords(w)}).SVG()
	err := a.advise(&v)
	a.overdueCheck(&v)
	return v, err
}

// noKnob is the choice of something that is not described.
const noKnob = "none"

func (a *adviser) address(knob string) string {
	return path(a.st.ID, "change", a.c.ID.String()) + "?knob=" + knob
}

// oneStep says what one step of the chosen point is, and all that it moves.
func (a *adviser) oneStep() string {
	f, w := a.f, a.f.Words
	moves := ""
	for _, c := range a.st.Characteristics {
		g, ok := a.knob.GainOn(c.ID)
		if !ok {
			continue
		}
		by, ok := g.Times(a.knob.Step)
		if !ok {
			continue // checked when the point was described
		}
		one := w.T("adjusting.moves", c.Name, f.WithUnit(f.SignedDecimal(by.Trimmed(c.Setup.Decimals)), c.Setup.Unit))
		if moves != "" {
			one = w.T("adjusting.and", moves, one)
		}
		moves = one
	}
	return w.T("adjusting.one-step", f.WithUnit(f.Decimal(a.knob.Step), a.knob.Unit), moves)
}

// advise puts what the numbers say into the view.
func (a *adviser) advise(v *adjustView) error {
	advice, err := a.h.Advise(a.knob)
	if err != nil {
		return err
	}
	f, w := a.f, a.f.Words
	v.Kind = string(advice.Kind)
	v.Condition, v.Symbol, v.State = "calm", "leave", w.T("station.signal-none")
	if m := a.c.Matter; m != nil {
		condition := ui.ConditionOf(m.Kind())
		v.Condition, v.Symbol, v.State = ui.Tone(condition), ui.SymbolOf(condition), w.T("station.signal-open")
		v.Foot = w.T("station.adjust-open-text", f.Clock(m.OpenedTaken))
		if m.OnlyGauge() {
			v.State, v.Foot = w.T("matter.kind."+string(plant.MatterGauge)), w.T("station.adjust-unprompted")
		}
	} else {
		v.Foot = w.T("station.adjust-unprompted")
	}
	switch advice.Kind {
	case plant.AdviseLearning:
		v.Symbol = "learning"
		v.Title, v.Says = w.T("station.adjust-learning"), []string{w.T("station.adjust-learning-text")}
	case plant.AdviseLeave:
		v.Title = w.T("station.adjust-leave")
		a.leave(v, advice)
	case plant.AdviseFresh:
		v.Title, v.Says = w.T("adjusting.round"), []string{w.T("adjusting.fresh-text")}
		v.Measure = path(a.st.ID) + "?measure=" + a.c.ID.String()
		a.compare(v, advice)
	case plant.AdviseOffTarget:
		v.Title = w.T("adjusting.set-off")
		v.Says = []string{w.T("adjusting.set-off-text", advice.Rounds, a.off(advice, advice.Offset), a.between(advice)), a.sinceLimits(advice), w.T("adjusting.set-off-why")}
		a.compare(v, advice)
	case plant.AdviseElsewhere:
		v.Title, v.Says = w.T("adjusting.elsewhere"), []string{w.T("adjusting.elsewhere-text")}
	case plant.AdviseGauge:
		v.Title, v.Says = w.T("adjusting.gauge"), []string{w.T("adjusting.gauge-text")}
	case plant.AdviseRound:
		v.Title, v.Says = w.T("adjusting.round"), []string{w.T("adjusting.round-text")}
		v.Measure = path(a.st.ID) + "?measure=" + a.c.ID.String()
	case plant.AdviseTurn:
		if m := a.c.Matter; m != nil && (untouched(*m) || unwalked(*m)) {
			v.Cause = path(a.st.ID, "matter", m.ID.String())
			v.Title = w.T("adjusting.cause-title")
			why := w.T("adjusting.cause-text")
			if !untouched(*m) {
				why = w.T("adjusting.cause-plan", ui.StageWords(w, m.Progress()))
			}
			v.Says = []string{why, w.T("adjusting.since-signal", advice.Rounds, a.off(advice, advice.Offset), a.between(advice)),
				w.T("adjusting.numbers-allow", a.by(advice))}
			break // nothing is put into the fields
		}
		v.Title = w.T("adjusting.turn", a.by(advice))
		v.Says = []string{w.T("adjusting.since-signal", advice.Rounds, a.off(advice, advice.Offset), a.between(advice)), w.T("adjusting.cause-first")}
		v.suggest(a.f, advice.Turn)
	case plant.AdviseNone:
		v.Title = w.T("adjusting.none")
		v.Says = []string{w.T("adjusting.since-signal", advice.Rounds, a.off(advice, advice.Offset), a.between(advice)), w.T("adjusting.none-text")}
	case plant.AdviseSetUp:
		v.Title = w.T("adjusting.set-up", a.by(advice))
		v.Says = []string{w.T("adjusting.set-up-text", w.T("adjusting.after."+string(advice.SetUpBy)), f.Clock(advice.SetUpAt), advice.Try, a.off(advice, advice.Deviation)),
			w.T("adjusting.set-up-why", advice.Try)}
		v.suggest(a.f, advice.Turn)
	case plant.AdviseSettled:
		v.Title = w.T("adjusting.settled")
		v.Says = []string{w.T("adjusting.set-up-text", w.T("adjusting.after."+string(advice.SetUpBy)), f.Clock(advice.SetUpAt), advice.Try, a.off(advice, advice.Deviation)),
			w.T("adjusting.settled-text")}
	}
	return nil
}

// untouched reports whether nobody has looked for the cause of a matter yet.
func untouched(m plant.Matter) bool {
	return m.TakenBy == uuid.Nil && len(m.Answers) == 0 && len(m.Fixes) == 0
}

// unwalked reports whether steps of the plans of a matter wait for an answer.
func unwalked(m plant.Matter) bool {
	p := m.Progress()
	return p.Next < len(p.Steps)
}

// sinceLimits says whether a steady offset is as old as the limits.
func (a *adviser) sinceLimits(advice plant.Advice) string {
	f, s := a.f, a.c.Setup
	if advice.OffCentre == 0 {
		return f.Words.T("adjusting.set-off-since")
	}
	return f.Words.T("adjusting.set-off-moved", f.WithUnit(f.Number(math.Abs(advice.OffCentre), s.LimitDecimals()), s.Unit))
}

// overdueCheck says first of all that the gauge is to be checked, where that is overdue.
func (a *adviser) overdueCheck(v *adjustView) {
	g := a.c.Gauge
	if g == nil || g.Failed() || !g.Overdue(a.f.Now, a.f.Zone) {
		return
	}
	v.Check = path(a.st.ID, "gauge", g.ID.String())
	v.Says = append([]string{a.f.Words.T("adjusting.check-overdue", g.Name, ui.SayDay(a.f, g.NextCheck))}, v.Says...)
}

// suggest puts the advised turn into the fields, where the person changes it to what was
// really done.
func (v *adjustView) suggest(f ui.Format, turn plant.Decimal) {
	v.Direction = "up"
	if turn.Units < 0 {
		v.Direction, turn.Units = "down", -turn.Units
	}
	v.Size = f.Decimal(turn)
}

// leave says what correcting the last round would be expected to do.
func (a *adviser) leave(v *adjustView, advice plant.Advice) {
	f, w, s := a.f, a.f.Words, a.c.Setup
	off := a.off(advice, advice.Deviation)
	if advice.Chance >= 0.5 {
		v.Says = append(v.Says, w.T("adjusting.last-often", off))
	} else {
		v.Says = append(v.Says, w.T("adjusting.last", off, int(math.Round(1/max(advice.Chance, 1e-6)))))
	}
	switch {
	case advice.Correction == 0:
		v.Says = append(v.Says, w.T("adjusting.less-than-a-step"))
	case math.Abs(advice.MovedTo) > math.Abs(advice.LeftAt):
		v.Says = append(v.Says, w.T("adjusting.further", f.WithUnit(f.Number(math.Abs(advice.MovedTo), s.LimitDecimals()), s.Unit),
			f.WithUnit(f.Number(math.Abs(advice.LeftAt), s.LimitDecimals()), s.Unit)))
	default:
		v.Says = append(v.Says, w.T("adjusting.no-change"))
	}
	a.compare(v, advice)
}

// compare shows what correcting after every round does, and what adjusting did here.
func (a *adviser) compare(v *adjustView, advice plant.Advice) {
	f, w, s := a.f, a.f.Words, a.c.Setup
	if len(advice.Left) > 0 {
		left, corrected := f.Number(advice.LeftSpread, s.LimitDecimals()), f.WithUnit(f.Number(advice.CorrectedSpread, s.LimitDecimals()), s.Unit)
		times := f.Number(advice.CorrectedSpread/advice.LeftSpread, 1)
		v.Spread = w.T("adjusting.spread", left, corrected)
		v.Twin = (&chart.Twin{ID: "twin", Label: w.T("adjusting.twin-label", len(advice.Left), times), W: twinW, H: twinH, Centre: advice.Aim,
			Rows: [2]chart.TwinRow{{Values: advice.Left, Half: advice.LeftSpread, Name: w.T("adjusting.left-alone")},
				{Values: advice.Corrected, Half: advice.CorrectedSpread, Name: w.T("adjusting.corrected", times)}}}).SVG()
	}
	if advice.Unprompted > 0 {
		v.Record = w.T("adjusting.of-the-last", advice.Unprompted, advice.Further)
	}
}

// off says a distance from the aim in words: "0.0014 mm above target".
func (a *adviser) off(advice plant.Advice, d float64) string {
	f, s := a.f, a.c.Setup
	said := f.WithUnit(f.Number(math.Abs(d), s.LimitDecimals()), s.Unit)
	switch {
	case d > 0 && advice.IsTarget:
		return f.Words.T("adjusting.above-target", said)
	case advice.IsTarget:
		return f.Words.T("adjusting.below-target", said)
	case d > 0:
		return f.Words.T("adjusting.above-centre", said)
	}
	return f.Words.T("adjusting.below-centre", said)
}

// between says the interval of the offset with its signs.
func (a *adviser) between(advice plant.Advice) string {
	f, s := a.f, a.c.Setup
	return f.Words.T("adjusting.between", f.Signed(advice.Low, s.LimitDecimals()), f.WithUnit(f.Signed(advice.High, s.LimitDecimals()), s.Unit))
}

// by says what to adjust, and by how much: "X offset of turret 1 by −0.002 mm".
func (a *adviser) by(advice plant.Advice) string {
	name, unit := a.c.Name, a.c.Setup.Unit
	if a.knob != nil {
		name, unit = a.knob.Name, a.knob.Unit
	}
	return a.f.Words.T("adjusting.by", name, a.f.WithUnit(a.f.SignedDecimal(advice.Turn), unit))
}
