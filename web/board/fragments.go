package board

import (
	"bytes"
	"context"
	"fmt"

	"github.com/a-h/templ"

	"holdfast/internal/live"
	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// Fragments renders what the live hub pushes to boards: the parts of the page, the
// same for every viewer.
func Fragments(f ui.Format, p plant.Plant, states []plant.StationState) ([]live.Fragment, error) {
	out := make([]live.Fragment, 0, len(states)+5)
	var b bytes.Buffer
	var failed error
	add := func(id string, c templ.Component) {
		if failed != nil {
			return
		}
		b.Reset()
		if err := c.Render(context.Background(), &b); err != nil {
			failed = fmt.Errorf("render %s of the board: %w", id, err)
			return
		}
		out = append(out, live.Fragment{ID: id, HTML: bytes.Clone(b.Bytes())})
	}
	head := newHead(f, p)
	add("board-day", day(head))
	add("board-clock", clock(head))
	add("lanes-order", order(orderOf(sortLanes(states))))
	for i := range states {
		c := newCard(f, &states[i])
		add(c.ID, card(f.Words, c, choice{}))
	}
	add("needs", needs(f.Words, newNeeds(f, states), choice{}))
	add("shift", shift(f.Words, newShift(f, p, states)))
	return out, failed
}
