package desk_test

import (
	"net/http"
	"net/url"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/store/storetest"
)

// TestProductIsDecidedAboutOnTheDesk: the list shows what is still contained, a
// disposition is a signature, and the quantities add up.
func TestProductIsDecidedAboutOnTheDesk(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	b := s.signIn(t, s.Supervisor)
	b.get("/desk/product").is(http.StatusOK).has("No product is in doubt")
	if err := s.SetMachine(t.Context(), plant.MachineState{ID: storetest.ID(), Machine: s.Machine.ID, Running: true}); err != nil {
		t.Fatal(err)
	}
	s.fill(t, s.Diameter, 22, 5, 14991, 1.5, 3, nil)
	s.MustFreeze(t, s.Diameter)
	s.Clock.Advance(30 * time.Minute)
	m := s.MustRecord(t, s.Diameter, 15003, 15003, 15004, 15002, 15003).Parts[0].Matter
	s.Clock.Advance(10 * time.Minute)
	at := "/desk/product/" + m.String()
	b.get("/desk/product").is(http.StatusOK).has(at, "Axle seat diameter", "Outside specification, above the upper limit", "about 80", "0 parts are kept aside, 1 case is open.", "In 1 case nobody has stated yet")
	b.get(path(s.Diameter)).is(http.StatusOK).has("Suspect since", "biased away from zero, because only large changes signal", "reach-edge")

	state := func(form url.Values) page {
		t.Helper()
		form.Set("id", uuid.Must(uuid.NewV7()).String())
		return b.post(at, form)
	}
	b.get(at).is(http.StatusOK).has("Suspect since", "about 80 parts", "Nobody has stated yet", "A steady chart is not a release").hasNot(`data-testid="decide"`)
	asks := "About 80 parts are suspect, none put aside: where are they?"
	b.get(at).has(asks)
	state(url.Values{"form": {"rest"}, "quantity": {"80"}}).is(http.StatusUnprocessableEntity).has("Say where the rest is.")
	state(url.Values{"form": {"rest"}, "quantity": {"80"}, "step": {"used"}, "note": {"built in at once"}}).is(http.StatusSeeOther)
	b.get(at).has("Nothing was put aside.", "Not put aside, used up: 80", "built in at once").hasNot(asks)
	b.get("/desk/product").has("In 1 case nobody has stated yet", "Not put aside, used up: 80 (built in at once)")
	state(url.Values{"form": {"keep"}, "quantity": {"81"}}).is(http.StatusUnprocessableEntity).has("Say where they were put.")
	state(url.Values{"form": {"keep"}, "quantity": {"81"}, "place": {"Red rack 3"}, "tag": {"R-17"}}).is(http.StatusSeeOther)
	decide := func(step, quantity, note, secret string) url.Values {
		return url.Values{"form": {"decide"}, "step": {step}, "quantity": {quantity}, "note": {note}, "secret": {secret}}
	}
	b.get(at).has(`data-testid="decide"`, "81 parts are kept aside.", "The matter is still open: nobody has taken it. More may become suspect.").hasNot("You recorded the fix")
	state(decide("", "80", "", "right")).is(http.StatusUnprocessableEntity).has("Say what became of the product.")
	state(decide("scrapped", "80", "", "")).is(http.StatusUnprocessableEntity).has("this is a signature")
	state(decide("scrapped", "80", "", "wrong")).is(http.StatusUnprocessableEntity).has("This is not your password.", `value="80"`)
	state(decide("scrapped", "82", "", "right")).is(http.StatusUnprocessableEntity).has("Only 81 parts are still kept aside.")
	state(decide("released", "70", "", "right")).is(http.StatusUnprocessableEntity).has("Say how it was checked.")
	state(decide("released", "70", "each measured", "right")).is(http.StatusSeeOther)
	state(url.Values{"form": {"other"}, "step": {"recount"}, "quantity": {"10"}, "note": {"one was a setting piece"}, "secret": {"right"}}).is(http.StatusSeeOther)
	b.get(at).has("10 parts are kept aside.", "Released after a check: 70", "Counted again: 10", "Supervisor 1")
	open, err := s.Matter(t.Context(), m)
	if err != nil {
		t.Fatal(err)
	}
	if err := s.CloseMatter(t.Context(), plant.ClosingRequest{Matter: m, Version: open.Version, Cause: "Insert chipped", Action: "Insert changed", Person: s.Supervisor.ID}); err != nil {
		t.Fatal(err)
	}
	b.get(at).has("You recorded the fix of this matter.").hasNot("The matter is still open")
	b.get("/desk/product").has("10 parts are kept aside, 1 case is open.", "closed ")
	state(decide("scrapped", "10", "", "right")).is(http.StatusSeeOther)
	b.get("/desk/product").has("No product is in doubt", "Settled lately, newest first", `<th scope="col">Settled</th>`)

	// Put aside by a person, without a matter.
	form := url.Values{"containment": {uuid.Must(uuid.NewV7()).String()}, "id": {uuid.Must(uuid.NewV7()).String()}, "quantity": {"12"}, "place": {"Returns"}}
	b.post("/desk/product", form).is(http.StatusUnprocessableEntity).has("Choose what it is about.", `value="Returns"`)
	form.Set("of", s.Mass.ID.String())
	own := b.post("/desk/product", form).is(http.StatusSeeOther)
	b.get(own.to).is(http.StatusOK).has("Grease mass", "12 parts are kept aside.", "put aside by a person")
	if ds, err := s.CheckRecord(t.Context()); err != nil || len(ds) > 0 {
		t.Errorf("%v, %v", ds, err)
	}
}

func TestGaugesOnTheDesk(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	b := s.signIn(t, s.Engineer)
	b.get("/desk/gauges").is(http.StatusOK).has("No gauge is in use yet.")
	g := plant.Gauge{ID: storetest.ID(), Name: "Balance W-02", CheckDays: 7}
	if err := s.AddGauge(t.Context(), g, s.Engineer.ID); err != nil {
		t.Fatal(err)
	}
	h, err := s.History(t.Context(), s.Mass.ID, plant.Stretch{Last: 1})
	if err != nil {
		t.Fatal(err)
	}
	setup := h.State.Setup
	setup.GaugeID = g.ID
	if err := s.ChangeSetup(t.Context(), s.Mass.ID, setup, setup.Version, s.Engineer.ID); err != nil {
		t.Fatal(err)
	}
	for i, good := range []bool{true, false} {
		s.Clock.Advance(time.Duration(i+1) * time.Hour)
		c := plant.GaugeCheckRecord{ID: storetest.ID(), Gauge: g.ID, Good: good, Note: "pan dirty", Reading: storetest.Decimal(t, "1.207"), Person: s.Operator.ID}
		if err := s.CheckGauge(t.Context(), c); err != nil {
			t.Fatal(err)
		}
	}
	b.get("/desk/gauges").is(http.StatusOK).has("Balance W-02", "Turning 1, Grease mass", "not good since")
	b.get("/desk/gauges/"+g.ID.String()).is(http.StatusOK).has("Failed", "1.207", "pan dirty", "Operator 1")
	b.get("/desk/gauges/" + s.Mass.ID.String()).is(http.StatusNotFound)
}
