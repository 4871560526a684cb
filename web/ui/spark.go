package ui

import (
	"math"

	"holdfast/internal/plant"
	"holdfast/web/chart"
)

// Spark draws the newest subgroups of a characteristic in the band that is in force, on
// so many pixels, and writes the newest of them with its unit. Without a subgroup both
// are empty.
func (f Format) Spark(c *plant.CharacteristicState, width, height float64) (newest, svg string) {
	if len(c.Points) == 0 {
		return "", ""
	}
	newest = f.Mean(c.Points[len(c.Points)-1].Stats.Mean(), c.Setup)
	points := c.Points[max(0, len(c.Points)-chart.SparkLength):]
	s := chart.Spark{ID: "spark-" + c.ID.String(), W: width, H: height, Limits: band(c),
		Stopped: !c.Machine.Running(), Points: make([]chart.SparkPoint, len(points))}
	if c.Revision == nil {
		s.Label = f.Words.T("ui.spark-learning", len(points), c.Title(), newest)
	} else {
		s.Label = f.Words.T("ui.spark", len(points), c.Title(), newest)
	}
	for i, p := range points {
		s.Points[i] = chart.SparkPoint{Value: p.Stats.Mean(),
			Restart: i > 0 && points[i-1].TakenAt.Before(c.Segment.From) && !p.TakenAt.Before(c.Segment.From)}
	}
	for i := 1; i < len(points); i++ {
		s.Points[i].Before = EventsBefore(*c, points[i-1].TakenAt, points[i].TakenAt)
	}
	s.After = EventsSince(*c, points[len(points)-1].TakenAt)
	markNewest(s.Points, points, c.Matter)
	return newest, s.SVG()
}

// markNewest rings the newest subgroup of each kind that belongs to the open matter.
// One ring says where to look; a ring around each would hide the course, and so would two
// that overlap: then the graver one stands alone.
func markNewest(out []chart.SparkPoint, points []plant.Point, m *plant.Matter) {
	if m == nil {
		return
	}
	hold, look := -1, -1
	for i := len(points) - 1; i >= 0 && (hold < 0 || look < 0); i-- {
		for _, s := range points[i].Signals {
			switch {
			case s.Withdrawn || s.Matter != m.ID:
			case s.Panel.HoldsProduct():
				hold = max(hold, i)
			default:
				look = max(look, i)
			}
		}
	}
	const apart = 3 // points between two rings that do not touch
	if hold >= 0 {
		out[hold].Mark = chart.HoldMark
	}
	if look >= 0 && (hold < 0 || max(look-hold, hold-look) >= apart) {
		out[look].Mark = chart.SignalMark
	}
}

// band is the limits of the averages of whole subgroups.
func band(c *plant.CharacteristicState) chart.Limits {
	if c.Revision == nil {
		return chart.NoLimits()
	}
	location, _, err := c.Revision.Standard().Bands(c.Setup.Size)
	if err != nil {
		return chart.NoLimits() // limits are checked when they are frozen
	}
	l := chart.Limits{Lower: math.NaN(), Centre: location.Center, Upper: math.NaN()}
	if location.HasLower() {
		l.Lower = location.Lower
	}
	if location.HasUpper() {
		l.Upper = location.Upper
	}
	return l
}
