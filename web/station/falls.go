package station

import (
	"math"

	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
	"holdfast/web/chart"
	"holdfast/web/ui"
	"holdfast/web/words"
)

// Sizes of the drawings: beside the keypad, and above it on an upright tablet.
const (
	wideW, wideH   = 352, 388
	tallW, tallH   = 592, 216
	stripW         = 140
	verdictW       = 540
	verdictH       = 318
	besideW        = 380 // the averages beside the single readings
	besideH        = 260
	adjustW        = 380
	adjustH        = 176
	specAxisMargin = 0.07
)

// chartWords are the words that drawings say on their own.
func chartWords(w *words.Printer) chart.Words {
	return chart.Words{
		Upper: w.T("station.chart.upper"), Centre: w.T("station.chart.centre"), Lower: w.T("station.chart.lower"),
		UpperSpec: w.T("station.chart.upper-spec"), Target: w.T("station.chart.target"), LowerSpec: w.T("station.chart.lower-spec"),
		Now: w.T("station.chart.now"), To: w.T("station.chart.to"), Time: w.T("station.chart.time"),
		Band: w.T("station.chart.band"), Points: w.T("station.chart.value"), Notes: w.T("station.chart.notes"),
	}
}

// chartLimits are the limits of the location for a whole subgroup, none while
// learning.
func chartLimits(f ui.Format, rev *plant.Revision, s plant.Setup) chart.Limits {
	if rev == nil {
		return chart.NoLimits()
	}
	band, _, err := rev.Standard().Bands(s.Size)
	if err != nil {
		return chart.NoLimits() // limits are checked when they are frozen
	}
	l := chart.Limits{Lower: math.NaN(), Centre: band.Center, Upper: math.NaN(), CentreText: f.Number(band.Center, s.LimitDecimals())}
	if band.HasLower() {
		l.Lower, l.LowerText = band.Lower, f.Number(band.Lower, s.LimitDecimals())
	}
	if band.HasUpper() {
		l.Upper, l.UpperText = band.Upper, f.Number(band.Upper, s.LimitDecimals())
	}
	return l
}

func chartSpec(f ui.Format, s plant.Setup) chart.Spec {
	spec := chart.NoSpec()
	for _, side := range [...]struct {
		from  *plant.Decimal
		value *float64
		text  *string
	}{{s.Lower, &spec.Lower, &spec.LowerText}, {s.Target, &spec.Target, &spec.TargetText}, {s.Upper, &spec.Upper, &spec.UpperText}} {
		if side.from != nil {
			*side.value, *side.text = side.from.Float(), f.Decimal(*side.from)
		}
	}
	return spec
}

// stationPoints are subgroups of c as the station's drawings take them. The line breaks
// where what they are judged by began afresh.
func stationPoints(f ui.Format, points []plant.Point, s plant.Setup, c plant.CharacteristicState) []chart.StationPoint {
	from := c.Segment
	var out []chart.StationPoint
	for i, p := range points {
		sp := chart.StationPoint{Value: p.Stats.Mean(), Text: f.Mean(p.Stats.Mean(), s), Time: f.Clock(p.TakenAt)}
		if i > 0 && !from.From.IsZero() && points[i-1].TakenAt.Before(from.From) && !p.TakenAt.Before(from.From) {
			sp.Restart = true
		}
		if i > 0 {
			sp.Before = ui.EventsBefore(c, points[i-1].TakenAt, p.TakenAt)
		}
		for _, signal := range p.Standing() {
			switch signal.Panel {
			case plant.Reading:
				sp.Mark = chart.HoldMark
			case plant.Location:
				if sp.Mark == chart.NoMark {
					sp.Mark = chart.SignalMark
				}
			}
		}
		out = append(out, sp)
	}
	return out
}

// eventsSince is what was done after the last of the points.
func eventsSince(c plant.CharacteristicState, points []plant.Point) []chart.Event {
	if len(points) == 0 {
		return nil
	}
	return ui.EventsSince(c, points[len(points)-1].TakenAt)
}

// specAxis is the axis of averages while there are no limits: the specification,
// without drawing it, since its limits belong to single readings.
func specAxis(s plant.Setup) (lo, hi float64) {
	if s.Lower == nil || s.Upper == nil {
		return 0, 0
	}
	lo, hi = s.Lower.Float(), s.Upper.Float()
	margin := (hi - lo) * specAxisMargin
	return lo - margin, hi + margin
}

func newFalls(f ui.Format, c plant.CharacteristicState, typed []int64) fallsView {
	w, s := f.Words, c.Setup
	v := fallsView{Decimals: s.MeanDecimals(), Single: s.Size == 1, Sign: w.T("ui.decimal-sign"), Count: f.Count(len(typed)),
		None: w.T("station.judged-when", s.Size), Inside: w.T("station.inside-so-far", s.Size),
		Above: w.T("station.above-so-far", s.Size), Below: w.T("station.below-so-far", s.Size),
		DoneInside: w.T("station.inside-now"), DoneAbove: w.T("station.above-now"), DoneBelow: w.T("station.below-now")}
	lim := chartLimits(f, c.Revision, s)
	if c.Revision == nil {
		v.Learning = w.T("station.learning-so-far", c.Collected, limits.EnoughSubgroups)
		none := w.T("station.only-specification")
		v.None, v.Inside, v.Above, v.Below, v.DoneInside, v.DoneAbove, v.DoneBelow = none, none, none, none, none, none, none
	}
	average := math.NaN()
	readings := make([]float64, s.Size)
	for i := range readings {
		readings[i] = math.NaN()
		if i < len(typed) {
			readings[i] = plant.Decimal{Units: typed[i], Decimals: s.Decimals}.Float()
		}
	}
	if len(typed) > 0 {
		average = plant.Summarise(typed, s.Decimals).Mean()
		v.Average = f.Number(average, v.Decimals)
	}
	id := c.ID.String()
	label := w.T("station.falls-label", c.Name)
	points, since := stationPoints(f, c.Points, s, c), eventsSince(c, c.Points)
	lo, hi := specAxis(s)
	draw := func(name string, width, height float64) string {
		return (&chart.Falls{ID: "falls-" + name + "-" + id, Label: label, W: width, H: height, Points: points, Limits: lim, Now: average, After: since, Lo: lo, Hi: hi, Words: chartWords(w)}).SVG()
	}
	v.Wide, v.Tall = draw("wide", wideW, wideH), draw("tall", tallW, tallH)
	if s.Lower != nil || s.Upper != nil || s.Target != nil {
		var usualLo, usualHi float64
		if r := c.Revision; r != nil {
			usualLo, usualHi = r.Center-4*r.Sigma, r.Center+4*r.Sigma
		}
		strip := func(name string, height float64) string {
			return (&chart.Strip{ID: "parts-" + name + "-" + id, Label: w.T("station.parts-label", c.Name), W: stripW, H: height,
				Spec: chartSpec(f, s), Readings: readings, Size: s.Size, Lo: usualLo, Hi: usualHi, Words: chartWords(w)}).SVG()
		}
		v.PartsWide, v.PartsTall = strip("wide", wideH), strip("tall", tallH)
	}
	return v
}
