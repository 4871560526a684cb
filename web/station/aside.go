package station

import (
	"errors"
	"net/http"
	"strconv"
	"strings"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// mostKeptShown is how many containments of closed matters the left column lists.
const mostKeptShown = 2

// asideView is the instruction to keep product aside, and what was done about it.
type asideView struct {
	Tone  string // "hold", or "" for a look
	Says  ui.ReachSaid
	State string // "340 parts are kept aside", "Nobody has stated yet …"
	Href  string // where it is stated; "" when it is settled
	More  bool   // something was stated already
	Rest  string // where the suspect parts are that were not put aside, as answered
	Asks  string // the same as a question, while it is to be asked
	Tell  string // whom to tell now: suspect parts went on

	missing int // of how many parts it is asked
}

// asidePageView is the page on which a person states what was put aside.
type asidePageView struct {
	asideView
	Name     string
	Entries  []ui.EntrySaid
	Action   string
	ID       string
	Quantity string
	Place    string
	Tag      string
	Problems map[string]string
	Back     string
}

func asidePath(station, matter uuid.UUID) string {
	return path(station, "matter", matter.String(), "aside")
}

// instruction is the instruction of an open matter alone, without what was stated.
func instruction(f ui.Format, c plant.CharacteristicState) *asideView {
	says, ok := ui.SayReachOf(f, c)
	if !ok {
		return nil
	}
	v := &asideView{Says: says}
	if c.Matter.Kind() == plant.Hold {
		v.Tone = "hold"
	}
	return v
}

// asideOf reads the instruction of a matter with what was stated; nil where no product
// is in doubt and none was put aside.
func (s *Surface) asideOf(r *http.Request, st plant.StationState, m plant.Matter) (*asideView, *plant.Containment, error) {
	f := ui.FrameOf(r).Format()
	c, ok := characteristicOf(st, m.Characteristic)
	if !ok {
		return nil, nil, notFound(r)
	}
	kept, err := s.store.Containment(r.Context(), m.ID)
	if plant.IsKind(err, plant.NotFound) {
		return nil, nil, nil // the matter is older than the keeping of product
	}
	if err != nil {
		return nil, nil, err
	}
	found, err := s.store.Reaches(r.Context(), m.ID)
	if err != nil {
		return nil, nil, err
	}
	v := &asideView{More: kept.Stated()}
	if m.Kind() == plant.Hold {
		v.Tone = "hold"
	}
	var suspect bool
	v.Says, suspect = ui.SayReach(f, found[m.ID].Reach, found[m.ID].Suspect, c.Machine)
	if !suspect && !kept.Stated() {
		return nil, nil, nil
	}
	v.State, v.Rest, v.Asks = ui.SayAside(f, kept), ui.SayRest(f, kept), ui.AskRest(f, kept, found[m.ID].Suspect)
	if e, ok := kept.Rest(); ok && e.Step == plant.RestGone {
		v.Tell = f.Words.T("reach.rest.tell", e.Quantity)
	}
	v.missing = kept.Missing(found[m.ID].Suspect)
	if kept.SettledAt.IsZero() {
		v.Href = asidePath(st.ID, m.ID)
	}
	return v, &kept, nil
}

// containedOf is the product of the open matter of a characteristic.
func containedOf(c plant.CharacteristicState) (none plant.Containment) {
	for _, k := range c.Contained {
		if c.Matter != nil && k.Matter == c.Matter.ID {
			return k
		}
	}
	return none
}

// showAside is GET /station/{station}/matter/{matter}/aside.
func (s *Surface) showAside(w http.ResponseWriter, r *http.Request) error {
	return s.renderAside(w, r, http.StatusOK, asidePageView{ID: uuid.Must(uuid.NewV7()).String()})
}

func (s *Surface) renderAside(w http.ResponseWriter, r *http.Request, status int, v asidePageView) error {
	st, m, err := s.matterIn(r)
	if err != nil {
		return err
	}
	aside, kept, err := s.asideOf(r, st, m)
	if err != nil {
		return err
	}
	if aside == nil {
		return notFound(r)
	}
	f := ui.FrameOf(r).Format()
	v.asideView = *aside
	v.Name = kept.Characteristic.Name
	v.Action, v.Back = asidePath(st.ID, m.ID), path(st.ID, "matter", m.ID.String())
	for _, e := range kept.Entries {
		v.Entries = append(v.Entries, ui.SayEntry(f, e))
	}
	return ui.Render(w, r, status, asidePage(s.shell(r, st, f.Words.T("reach.aside-title")), v))
}

// keepAside is POST /station/{station}/matter/{matter}/aside: the person states what was
// put aside.
func (s *Surface) keepAside(w http.ResponseWriter, r *http.Request) error {
	st, m, err := s.matterIn(r)
	if err != nil {
		return err
	}
	p, frame := r.PostForm, ui.FrameOf(r)
	v := asidePageView{ID: p.Get("id"), Quantity: strings.TrimSpace(p.Get("quantity")), Place: plant.CleanText(p.Get("place")), Tag: plant.CleanText(p.Get("tag")),
		Problems: map[string]string{}}
	e := plant.ContainmentEntry{Containment: m.ID, Step: plant.KeptAside, Place: v.Place, Tag: v.Tag, Person: frame.Person.ID}
	if e.ID, err = uuid.Parse(v.ID); err != nil || e.ID == uuid.Nil {
		return plant.Invalidf("id", "%s", frame.Words.T("station.no-number"))
	}
	if e.Quantity, err = strconv.Atoi(v.Quantity); err != nil {
		v.Problems["quantity"] = frame.Words.T("reach.no-quantity")
		return s.renderAside(w, r, http.StatusUnprocessableEntity, v)
	}
	err = s.store.StateProduct(r.Context(), e)
	if pe, ok := errors.AsType[*plant.Error](err); ok && pe.Kind != plant.NotFound {
		v.Problems[pe.Field] = frame.Words.Problem(pe)
		return s.renderAside(w, r, ui.StatusOf(pe.Kind), v)
	}
	if err != nil {
		return err
	}
	ui.Redirect(w, r, path(st.ID, "matter", m.ID.String()))
	return nil
}

// keptTasks are the cards of product that is kept aside although its matter is closed.
func keptTasks(f ui.Format, st plant.StationState) (out []taskView, more int) {
	w := f.Words
	for _, c := range st.Characteristics {
		for _, k := range c.Contained {
			if k.Matter == uuid.Nil || k.MatterClosed.IsZero() {
				continue
			}
			if len(out) == mostKeptShown {
				more++
				continue
			}
			place, tag := k.Where()
			t := taskView{Href: asidePath(st.ID, k.Matter), Name: c.Title(), Tone: "kept", State: "calm", Symbol: "hold",
				Says: w.T("reach.contained", k.Left()), When: f.Since(k.OpenedAt), Sub: ui.SayWhere(f, place, tag)}
			if !k.Stated() {
				t.Says, t.Sub = w.T("reach.contained-unstated"), w.T("reach.contained-unstated-sub")
			}
			t.Aside = ui.SayRest(f, k)
			out = append(out, t)
		}
	}
	return out, more
}

// gaugeDoubts says of each gauge that failed that what it says is in doubt.
func gaugeDoubts(f ui.Format, cs []plant.CharacteristicState) (out []string) {
	seen := map[uuid.UUID]bool{}
	for _, c := range cs {
		if g := c.Gauge; g != nil && g.Failed() && !seen[g.ID] {
			seen[g.ID] = true
			out = append(out, f.Words.T("reach.gauge-failed", g.Name, f.Clock(g.FailedSince)))
		}
	}
	return out
}
