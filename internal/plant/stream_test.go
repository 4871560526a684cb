package plant_test

import (
	"slices"
	"testing"

	"github.com/google/uuid"

	"holdfast/internal/plant"
)

// Subgroup after subgroup, every stream comes up as often as every other, whatever the
// numbers of parts and streams are.
func TestNextStreamsTreatsAllAlike(t *testing.T) {
	for n := 1; n <= 9; n++ {
		streams := make([]plant.Stream, n)
		for i := range streams {
			streams[i].ID = uuid.New()
		}
		for size := 1; size <= 12; size++ {
			count := map[uuid.UUID]int{}
			var last []uuid.UUID
			for range n { // n subgroups are a whole number of turns
				last = plant.NextStreams(streams, size, last)
				if len(last) != size {
					t.Fatalf("%d streams, %d parts: %d named", n, size, len(last))
				}
				for _, id := range last {
					count[id]++
				}
			}
			for i, s := range streams {
				if count[s.ID] != size {
					t.Errorf("%d streams, %d parts: stream %d was taken %d times in %d rounds, want %d", n, size, i, count[s.ID], n, size)
				}
			}
		}
	}
}

func TestNextStreamsAfterAnUnknownOne(t *testing.T) {
	streams := []plant.Stream{{ID: uuid.New()}, {ID: uuid.New()}, {ID: uuid.New()}}
	want := []uuid.UUID{streams[0].ID, streams[1].ID}
	if got := plant.NextStreams(streams, 2, []uuid.UUID{uuid.New()}); !slices.Equal(got, want) {
		t.Errorf("after a stream that is no longer there: %v, want the first two", got)
	}
	if got := plant.NextStreams(nil, 5, nil); got != nil {
		t.Errorf("a machine without streams: %v", got)
	}
}
