package ui

import (
	"slices"

	"holdfast/internal/plant"
)

// SayOutside names the readings outside specification on which a matter of the
// characteristic stands, oldest first: when, which part from which stream, its value and
// the limit that it passed. Points whose set-up is not among setups are judged by that of
// now.
func SayOutside(f Format, c plant.CharacteristicState, m plant.Matter, points []plant.Point, setups map[int]plant.Setup) (out []string) {
	for _, p := range points {
		if !slices.ContainsFunc(p.Signals, func(s plant.Signal) bool { return s.Panel == plant.Reading && !s.Withdrawn && s.Matter == m.ID }) {
			continue
		}
		setup, ok := setups[p.Setup]
		if !ok {
			setup = c.Setup
		}
		for i, units := range p.Readings {
			side := setup.Outside(units, p.Stats.Decimals)
			limit := setup.Upper
			switch side {
			case plant.High:
			case plant.Low:
				limit = setup.Lower
			default:
				continue
			}
			part := f.Words.T("ui.outside-part", i+1)
			if len(p.Streams) == len(p.Readings) {
				if name := c.Machine.StreamName(p.Streams[i]); name != "" {
					part = f.Words.T("ui.outside-part.from", part, name)
				}
			}
			said := f.Words.T("ui.outside-part."+string(side), part, f.Reading(units, p.Stats.Decimals, setup), f.WithUnit(f.Decimal(*limit), setup.Unit))
			out = append(out, f.Words.T("ui.outside-part.at", f.Clock(p.TakenAt), said))
		}
	}
	return out
}
