package ui

import (
	"testing"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/chart"
)

// TestRingsDoNotOverlap: the newest signal of each kind is ringed, and of two that would
// touch the graver alone.
func TestRingsDoNotOverlap(t *testing.T) {
	t.Parallel()
	m := &plant.Matter{ID: uuid.New()}
	of := func(p plant.Panel) []plant.Signal {
		return []plant.Signal{{Matter: m.ID, Firing: plant.Firing{Panel: p}}}
	}
	for _, tc := range []struct {
		hold, look []int
		ringed     map[int]chart.Mark
	}{
		{nil, []int{2, 7}, map[int]chart.Mark{7: chart.SignalMark}},
		{[]int{9}, []int{3}, map[int]chart.Mark{9: chart.HoldMark, 3: chart.SignalMark}},
		{[]int{5}, []int{8}, map[int]chart.Mark{5: chart.HoldMark, 8: chart.SignalMark}},
		{[]int{7}, []int{8}, map[int]chart.Mark{7: chart.HoldMark}},
		{[]int{8}, []int{8, 2}, map[int]chart.Mark{8: chart.HoldMark}},
	} {
		points := make([]plant.Point, 10)
		for _, i := range tc.look {
			points[i].Signals = append(points[i].Signals, of(plant.Location)...)
		}
		for _, i := range tc.hold {
			points[i].Signals = append(points[i].Signals, of(plant.Reading)...)
		}
		out := make([]chart.SparkPoint, len(points))
		markNewest(out, points, m)
		for i, p := range out {
			if p.Mark != tc.ringed[i] {
				t.Errorf("Hold at %v, Look at %v: mark %v at %d, want %v", tc.hold, tc.look, p.Mark, i, tc.ringed[i])
			}
		}
	}
}
