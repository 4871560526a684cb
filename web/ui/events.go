package ui

import (
	"time"

	"holdfast/internal/plant"
	"holdfast/web/chart"
)

// EventsBefore lists what was done to the process of a characteristic between two
// instants, the second included, as the small charts draw it.
func EventsBefore(c plant.CharacteristicState, after, until time.Time) []chart.Event {
	var out []chart.Event
	for _, ch := range c.Changes {
		if !ch.HappenedAt.After(after) || ch.HappenedAt.After(until) {
			continue
		}
		e := chart.Event{Kind: chart.Post, Prompted: ch.Prompted}
		if size, moves := ch.EffectOn(c.ID); moves {
			e.Kind = chart.Up
			if size.Units < 0 {
				e.Kind = chart.Down
			}
		}
		out = append(out, e)
	}
	return out
}

// EventsSince is EventsBefore without an end.
func EventsSince(c plant.CharacteristicState, after time.Time) []chart.Event {
	return EventsBefore(c, after, time.Date(9999, 1, 1, 0, 0, 0, 0, time.UTC))
}
