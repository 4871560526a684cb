package station_test

import (
	"context"
	"net/http"
	"slices"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/store/storetest"
)

const theSources = `[...document.querySelectorAll("[data-from]")].map((f) => f.textContent).join()`

// spindles gives the lathe two spindles.
func (s *site) spindles(t *testing.T) []plant.Stream {
	t.Helper()
	m := s.Machine
	m.Streams = []plant.Stream{{ID: storetest.ID(), Name: "Spindle 1"}, {ID: storetest.ID(), Name: "Spindle 2"}}
	if err := s.ChangeMachine(context.Background(), m, uuid.Nil); err != nil {
		t.Fatal(err)
	}
	return m.Streams
}

// Each part is asked for from a spindle; another one can be named, that survives leaving
// the page. Before there are limits, a reading outside specification makes only its own
// spindle suspect.
func TestPartsComeFromSpindles(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	two := s.spindles(t)
	s.Clock.Advance(time.Minute)
	good := s.Round(s.Diameter, 14991, 14990, 14992, 14991, 14990)
	good.Entries[0].Streams = plant.NextStreams(two, 5, nil)
	if _, err := s.Record(context.Background(), good); err != nil {
		t.Fatal(err)
	}
	s.Clock.Advance(10 * time.Minute) // nothing is due

	tb := s.tablet(t)
	measure := s.at() + "?measure=" + s.Diameter.ID.String()
	tb.Open(measure)
	tb.WaitFor(`document.querySelector("[data-scripted]")`)
	tb.Want("the turn goes on", theSources, "Spindle 2,Spindle 1,Spindle 2,Spindle 1,Spindle 2")
	tb.Want("the first question", theHeading, "Part 1 of 5 · Spindle 2")
	tb.Keys("14.991\r14.992\r")
	tb.Click("[data-streams] summary")
	tb.Value(`(() => { const s = document.querySelectorAll("[data-stream]")[2]; s.selectedIndex = 0; s.dispatchEvent(new Event("change", { bubbles: true })); })()`)
	const changed = "Spindle 2,Spindle 1,Spindle 1,Spindle 1,Spindle 2"
	tb.Want("what was chosen", theSources, changed)
	tb.Accessible("a round with streams")
	tb.Open(s.at("change"))
	tb.Open(measure)
	tb.WaitFor(`document.querySelector("[data-kept]:not([hidden])")`)
	tb.Want("what was chosen, after leaving", theSources, changed)
	tb.Keys("14.990\r14.991\r15.002\r15.002\r\r") // the last is outside, and from spindle 2
	tb.Value(`await new Promise((done) => setTimeout(done, 500))`)
	tb.Keys("\r")
	tb.WaitFor(`document.querySelector("[data-testid=verdict]")`)
	tb.Want("the verdict", `document.querySelector("h1").textContent`, "Hold the product")
	tb.Open(s.at())
	tb.WaitFor(`document.body.textContent.includes("Only parts from Spindle 2.")`)

	var kept []uuid.UUID
	if err := s.Pool().QueryRow(t.Context(), `select streams from subgroup where characteristic_id = $1 order by taken_at desc limit 1`, s.Diameter.ID).Scan(&kept); err != nil {
		t.Fatal(err)
	}
	if want := []uuid.UUID{two[1].ID, two[0].ID, two[0].ID, two[0].ID, two[1].ID}; !slices.Equal(kept, want) {
		t.Errorf("on record are %v, want %v", kept, want)
	}
	st, err := s.StationState(context.Background(), s.Station.ID, 5)
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range st.Characteristics {
		if c.ID == s.Diameter.ID && (c.Reach == nil || !slices.Equal(c.Reach.Streams, []uuid.UUID{two[1].ID})) {
			t.Errorf("the reach is %+v; want the second spindle alone", c.Reach)
		}
		if c.ID == s.Diameter.ID && c.Matter != nil {
			tb.Open(s.at("matter", c.Matter.ID.String()))
			tb.WaitFor(`document.querySelector("[data-testid=parts]").textContent.endsWith(", Part 5, Spindle 2: 15.002\u00a0mm, upper limit 15.000\u00a0mm")`)
		}
	}

	// The set-up changes under what is half typed: it says so and shows what was typed.
	tb.Open(measure)
	tb.WaitFor(`document.querySelector("[data-scripted]")`)
	tb.Keys("14.991\r14.993\r")
	h, err := s.History(t.Context(), s.Diameter.ID, plant.Stretch{Last: 1})
	if err != nil {
		t.Fatal(err)
	}
	setup := h.State.Setup
	setup.Size = 3
	if err := s.ChangeSetup(t.Context(), s.Diameter.ID, setup, setup.Version, s.Engineer.ID); err != nil {
		t.Fatal(err)
	}
	tb.Open(measure)
	tb.WaitFor(`document.querySelector("[data-unfit]:not([hidden])")`)
	tb.Want("what was typed under the old set-up", `document.querySelector("[data-unfit] b").textContent`, "14.991  14.993")
	tb.Accessible("a round whose set-up was changed")
	tb.Click("[data-unfit] [data-afresh]")
	tb.WaitFor(`document.querySelector("[data-scripted] [data-unfit][hidden]")`)
}

func TestAStreamMustBeOneOfTheMachine(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	two := s.spindles(t)
	s.Clock.Advance(31 * time.Minute)
	b := s.signIn(t, s.Operator)
	page := b.get(s.at()).is(http.StatusOK).says("Spindle 1", "Spindle 2")
	form := page.round(s.Diameter, "14.991", "14.990", "14.992", "14.989", "14.993")
	name := "stream-" + s.Diameter.ID.String()
	a, c := two[0].ID.String(), two[1].ID.String()
	form[name] = []string{a, c, "", c, a}
	b.post(s.at("round"), form).is(http.StatusUnprocessableEntity).says("Say which spindle or cavity part 3 came from.")
	form[name] = []string{a, c, uuid.NewString(), c, a}
	b.post(s.at("round"), form).is(http.StatusUnprocessableEntity).says("14.992")
	form[name] = []string{a, c, a, c, a}
	b.post(s.at("round"), form).is(http.StatusSeeOther)
	b.get(s.at("correct")).is(http.StatusOK).says("Spindle 2")
}
