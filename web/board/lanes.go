package board

import (
	"crypto/sha256"
	"encoding/base64"
	"net/url"
	"slices"
	"strconv"
	"strings"
	"unicode/utf8"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// Cards stand in 4 to 8 columns; a line with more stations takes more rows.
const (
	leastColumns = 4
	mostColumns  = 8
	rowsOnAPage  = 4 // that can be read from across a hall
	mostRows     = 12
)

// choice is what the viewer wants to see. The zero value is everything.
type choice struct {
	Line  uuid.UUID
	Owner plant.Owner
	Page  int // of lanes, from 1; 0: all
}

// ownersOffered are those that a board can be narrowed to.
var ownersOffered = plant.Owners

// readChoice reads a choice from the query of an address. What it names and is not
// there is left out: a board rather shows too much than too little.
func readChoice(q url.Values, states []plant.StationState) choice {
	var c choice
	if id, err := uuid.Parse(q.Get("line")); err == nil && slices.ContainsFunc(states, func(s plant.StationState) bool { return s.LineID == id }) {
		c.Line = id
	}
	if o := plant.Owner(q.Get("owner")); slices.Contains(ownersOffered, o) {
		c.Owner = o
	}
	if n, err := strconv.Atoi(q.Get("lanes")); err == nil && c.Line == uuid.Nil && n >= 1 && n <= len(pagesOf(sortLanes(states))) {
		c.Page = n
	}
	return c
}

// address is the board under this choice.
func (c choice) address() string {
	q := url.Values{}
	if c.Line != uuid.Nil {
		q.Set("line", c.Line.String())
	}
	if c.Owner != "" {
		q.Set("owner", string(c.Owner))
	}
	if c.Page > 0 {
		q.Set("lanes", strconv.Itoa(c.Page))
	}
	if len(q) == 0 {
		return "/board"
	}
	return "/board?" + q.Encode()
}

// shows reports whether something of a line that these owners must act on belongs to
// the choice.
func (c choice) shows(line, owners string) bool {
	if c.Line != uuid.Nil && line != c.Line.String() {
		return false
	}
	return c.Owner == "" || slices.Contains(strings.Fields(owners), string(c.Owner))
}

func (c choice) everything() bool { return c == choice{} }

// lane is the stations of a line, in the order of the floor.
type lane struct {
	line     plant.Line
	stations []*plant.StationState
}

// sortLanes groups the stations by line, lines and stations in the order of the floor.
func sortLanes(states []plant.StationState) []lane {
	var out []lane
	place := map[uuid.UUID]int{}
	for i := range states {
		st := &states[i]
		at, ok := place[st.LineID]
		if !ok {
			at = len(out)
			place[st.LineID] = at
			out = append(out, lane{line: st.Line})
		}
		out[at].stations = append(out[at].stations, st)
	}
	slices.SortStableFunc(out, func(a, b lane) int {
		if a.line.Position != b.line.Position {
			return a.line.Position - b.line.Position
		}
		return strings.Compare(a.line.Name, b.line.Name)
	})
	for _, l := range out {
		slices.SortStableFunc(l.stations, func(a, b *plant.StationState) int {
			if a.Station.Position != b.Station.Position {
				return a.Station.Position - b.Station.Position
			}
			return strings.Compare(a.Name, b.Name)
		})
	}
	return out
}

func (l lane) rows(columns int) int {
	return min((len(l.stations)+columns-1)/columns, mostRows)
}

func columnsFor(lanes []lane) int {
	n := leastColumns
	for _, l := range lanes {
		n = max(n, len(l.stations))
	}
	return min(n, mostColumns)
}

// pagesOf splits the lanes into stretches that can be read from afar. One page is no
// choice, so there are none then.
func pagesOf(lanes []lane) [][2]int {
	var out [][2]int
	from, rows := 0, 0
	columns := columnsFor(lanes)
	for i, l := range lanes {
		n := l.rows(columns)
		if rows > 0 && rows+n > rowsOnAPage {
			out = append(out, [2]int{from, i})
			from, rows = i, 0
		}
		rows += n
	}
	if len(out) == 0 {
		return nil
	}
	return append(out, [2]int{from, len(lanes)})
}

// pageView is the whole page.
type pageView struct {
	Order   string // of all lanes, whatever is chosen
	Columns int
	Rows    int
	Lanes   []laneView
	Needs   needsView
	Shift   shiftView

	Handover bool // its page can be gone to
	Choice   choice
	Chosen   string // in words
	Menus    []menuView
	Desk     bool // the viewer may open the desk
	Empty    bool // no stations at all
	Nothing  bool // nothing belongs to the choice
}

type laneView struct {
	ID, Name string
	Rows     int
	Cards    []cardView
}

// long reports whether the name, which stands upright beside a lane of one row, needs two
// lines.
func (l laneView) long() bool { return utf8.RuneCountInString(l.Name) > 18 }

// menuView is one thing that can be chosen, as links.
type menuView struct {
	Name  string
	Links []linkView
}

type linkView struct {
	Text, Address string
	Current       bool
}

func newPage(f ui.Format, p plant.Plant, states []plant.StationState, c choice) pageView {
	all := sortLanes(states)
	v := pageView{Order: orderOf(all), Choice: c, Needs: newNeeds(f, states), Shift: newShift(f, p, states),
		Empty: len(states) == 0, Nothing: len(states) > 0}
	shown := all
	if c.Page > 0 {
		at := pagesOf(all)[c.Page-1]
		shown = all[at[0]:at[1]]
	}
	shown = slices.DeleteFunc(slices.Clone(shown), func(l lane) bool { return c.Line != uuid.Nil && l.line.ID != c.Line })
	v.Columns = columnsFor(shown)
	for _, l := range shown {
		lv := laneView{ID: "lane-" + l.line.ID.String(), Name: l.line.Name, Rows: l.rows(v.Columns)}
		v.Rows += lv.Rows
		for _, st := range l.stations {
			card := newCard(f, st)
			v.Nothing = v.Nothing && !c.shows(card.Line, card.Owners)
			lv.Cards = append(lv.Cards, card)
		}
		v.Lanes = append(v.Lanes, lv)
	}
	v.menus(f, all)
	return v
}

// menus lists what can be chosen, and says what is.
func (v *pageView) menus(f ui.Format, all []lane) {
	w, c := f.Words, v.Choice
	var said []string
	add := func(m *menuView, text string, to choice) {
		m.Links = append(m.Links, linkView{text, to.address(), to == c})
		if to == c && len(m.Links) > 1 { // the first of a menu is no narrowing
			said = append(said, text)
		}
	}
	lines := menuView{Name: w.T("board.choice.lines")}
	if len(all) > 1 {
		add(&lines, w.T("board.choice.all-lines"), choice{Owner: c.Owner, Page: c.Page})
		for _, l := range all {
			add(&lines, l.line.Name, choice{Line: l.line.ID, Owner: c.Owner})
		}
	}
	pages := menuView{Name: w.T("board.choice.pages")}
	if list := pagesOf(all); len(list) > 0 {
		add(&pages, w.T("board.choice.all-lanes"), choice{Line: c.Line, Owner: c.Owner})
		for i, p := range list {
			text := w.T("board.choice.lanes", p[0]+1, p[1])
			if p[1] == p[0]+1 {
				text = w.T("board.choice.lane", p[1])
			}
			add(&pages, text, choice{Owner: c.Owner, Page: i + 1})
		}
	}
	who := menuView{Name: w.T("board.choice.owners")}
	if len(all) > 0 {
		add(&who, w.T("board.choice.all-owners"), choice{Line: c.Line, Page: c.Page})
		for _, o := range ownersOffered {
			add(&who, ui.OwnerWord(w, o), choice{Line: c.Line, Page: c.Page, Owner: o})
		}
	}
	for _, m := range []menuView{lines, pages, who} {
		if len(m.Links) > 0 {
			v.Menus = append(v.Menus, m)
		}
	}
	text := w.T("board.choice.everything")
	for i, s := range said {
		if i == 0 {
			text = s
		} else {
			text = w.T("board.choice.both", text, s)
		}
	}
	v.Chosen = w.T("board.choice", text)
}

// orderOf is a mark of which stations stand where, under which names of lines: equal
// for equal lanes.
func orderOf(lanes []lane) string {
	h := sha256.New()
	for _, l := range lanes {
		h.Write(l.line.ID[:])
		h.Write([]byte(l.line.Name))
		h.Write([]byte{0})
		for _, st := range l.stations {
			h.Write(st.ID[:])
		}
	}
	return base64.RawURLEncoding.EncodeToString(h.Sum(nil)[:12])
}
