package board

import (
	"slices"
	"strings"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// The small chart is drawn for a card 322 px wide; each row of other characteristics
// below takes from its height, so that the band still reaches from edge to edge.
const (
	sparkW     = 322
	sparkH     = 118
	sparkLeast = 56
	markRow    = 28
)

// marksShown is how many characteristics beside the front one stand on a card by
// name. Those in another state than Leave stand there in any case.
const marksShown = 3

// cardView is one station as its card shows it.
type cardView struct {
	ID      string // of the element
	Name    string
	Line    string // id of the line, for the choice of the viewer
	Owners  string // who must act on anything here
	Matters string // ids of what is open here

	Measured bool // something is measured here; else nothing of the following is set
	Front    markView
	Link     string // to the station
	Value    string // newest, with its unit; empty: no sample yet
	Spark    string // SVG; empty: no sample yet
	Next     string
	Owner    string
	Strong   bool // the owner is engineering
	Others   []markView
	Calm     string // how many more stand at Leave
}

// markView is one characteristic in a few words.
type markView struct {
	Name, Tone, Symbol, Word, Age, Link string
}

func cardID(station uuid.UUID) string { return "card-" + station.String() }

// tone is the class of a card: blue fills it only once a person must act.
func tone(c plant.Condition) string {
	if c == plant.IsDue {
		return "asked"
	}
	return ui.Tone(c)
}

// frontFirst orders a station's characteristics: what asks most of people first, then
// what has waited longest, then as they were set up.
func frontFirst(states []plant.CharacteristicState) []*plant.CharacteristicState {
	out := make([]*plant.CharacteristicState, len(states))
	for i := range states {
		out[i] = &states[i]
	}
	slices.SortStableFunc(out, func(a, b *plant.CharacteristicState) int {
		ca, cb := a.Condition(), b.Condition()
		if ca.Gravity() != cb.Gravity() {
			return cb.Gravity() - ca.Gravity()
		}
		if ca.NeedsPerson() {
			return a.Since().Compare(b.Since())
		}
		return 0
	})
	return out
}

// owners lists who must act on a characteristic: its owner and, for a sample that was
// promised and not taken, the station.
func owners(c *plant.CharacteristicState) []plant.Owner {
	out := []plant.Owner{c.Owner()}
	if asked(c) && out[0] != plant.AtStation {
		out = append(out, plant.AtStation)
	}
	return out
}

// asked reports whether a sample is asked for now.
func asked(c *plant.CharacteristicState) bool {
	switch c.Condition() {
	case plant.IsDue, plant.IsLate, plant.IsUnknown:
		return true
	}
	return c.Overdue()
}

func newCard(f ui.Format, st *plant.StationState) cardView {
	v := cardView{ID: cardID(st.ID), Name: st.Name, Line: st.LineID.String()}
	if len(st.Characteristics) == 0 {
		return v
	}
	sorted := frontFirst(st.Characteristics)
	front := sorted[0]
	v.Measured = true
	v.Front = newMark(f, front)
	v.Link = stationAddress(st.ID, front.ID)
	if v.Next = next(f, front); f.AskedOfStation(*front) != "" {
		v.Next = f.Words.T("board.of-station", v.Next) // whoever owns it
	}
	v.Owner, v.Strong = ownerShown(f, front)
	var matters, who []string
	calm := 0
	for i, c := range sorted {
		if c.Matter != nil {
			matters = append(matters, c.Matter.ID.String())
		}
		for _, o := range owners(c) {
			if !slices.Contains(who, string(o)) {
				who = append(who, string(o))
			}
		}
		switch {
		case i == 0:
		case c.Condition() != plant.CalmLeave || len(v.Others) < marksShown:
			v.Others = append(v.Others, newMark(f, c))
		default:
			calm++
		}
	}
	if calm > 0 {
		v.Calm = f.Words.T("board.more-calm", calm)
	}
	v.Value, v.Spark = f.Spark(front, sparkW, max(sparkLeast, sparkH-float64(len(v.Others)*markRow)))
	v.Matters, v.Owners = strings.Join(matters, " "), strings.Join(who, " ")
	return v
}

func newMark(f ui.Format, c *plant.CharacteristicState) markView {
	condition := c.Condition()
	return markView{Name: c.Title(), Tone: tone(condition), Symbol: ui.SymbolOf(condition),
		Word: ui.ConditionWord(f.Words, condition), Age: age(f, c), Link: chartAddress(c.StationID, c.ID)}
}

// age is how long the condition holds: how late the sample is where one is.
func age(f ui.Format, c *plant.CharacteristicState) string {
	switch c.Condition() {
	case plant.IsLate, plant.IsUnknown:
		return f.Late(c.Due)
	}
	return f.Since(c.Since())
}

// next says when the next sample is asked for.
func next(f ui.Format, c *plant.CharacteristicState) string {
	w, at := f.Words, f.Clock(c.Due.At)
	switch c.Due.State {
	case plant.NotPlanned:
		return w.T("board.unplanned")
	case plant.Paused:
		return w.T("board.paused")
	case plant.Later:
		return w.T("board.next", at)
	}
	// Late is said once: by the age where that is the condition, else here.
	if c.Matter != nil && c.Overdue() {
		return w.T("board.due-late", at, f.Late(c.Due))
	}
	return w.T("board.due", at)
}

func ownerShown(f ui.Format, c *plant.CharacteristicState) (text string, strong bool) {
	o, w := c.Ownership(), f.Words
	word := ui.OwnerWord(w, o.Owner)
	strong = o.Owner == plant.Engineering
	switch {
	case o.Since.IsZero(), f.AskedOfStation(*c) != "": // the card says already what is asked, and needs the room
		return w.T("board.owner", word), strong
	case o.Between > 0:
		return w.T("board.owner-found", word, f.Since(o.Since)), strong
	}
	return w.T("board.owner-for", word, f.Since(o.Since)), strong
}
